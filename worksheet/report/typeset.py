"""Sets one document. Runs as a process of its own: its memory goes back when it ends, and a hang cannot hold a worker.

Reads a JSON object from standard input (``template`` path, ``payload``, ``timestamp``) and writes the PDF to standard
output, or a message to standard error with exit status 1. Imports nothing of the project, so it starts quickly.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any

import typst

FONTS = Path(__file__).resolve().parent / "fonts"
STANDARDS: list[Any] = ["a-2a", "ua-1"]  # archival, tagged; universal accessibility


def compile_document(template: str, payload: str, timestamp: int) -> tuple[bytes, list[str]]:
    """Set a template with its data. User text is data only: nothing in ``payload`` is read as markup.

    Returns the PDF and the compiler's warnings (an unknown font, for one).
    """
    fonts = typst.Fonts(include_system_fonts=False, include_embedded_fonts=False, font_paths=[str(FONTS)])
    pdf, warnings = typst.compile_with_warnings(
        template,
        root=str(Path(template).parent),
        font_paths=fonts,
        sys_inputs={"payload": payload},
        pdf_standards=STANDARDS,
        timestamp=timestamp,
    )
    return pdf, [str(warning.message) for warning in warnings]


def main() -> int:
    """Read the order, write the document."""
    order = json.load(sys.stdin)
    try:
        pdf, warnings = compile_document(order["template"], order["payload"], order["timestamp"])
    except typst.TypstError as error:
        sys.stderr.write(f"{error.message}\n{getattr(error, 'diagnostic', '')}")
        return 1
    for warning in warnings:
        sys.stderr.write(f"{warning}\n")
    sys.stdout.buffer.write(pdf)
    return 0


if __name__ == "__main__":
    sys.exit(main())
