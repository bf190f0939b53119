#!/usr/bin/env python
"""Command line of the oxygen delivery worksheet."""

import os
import sys


def main() -> None:
    """Run one command."""
    if sys.argv[1:2] == ["derive"]:  # needs neither settings nor database, and starts faster without them
        from worksheet.transfer.batch import main as derive

        sys.exit(derive(sys.argv[2:]))
    os.environ.setdefault("DJANGO_SETTINGS_MODULE", "worksheet.settings")
    from django.core.management import execute_from_command_line

    execute_from_command_line(sys.argv)


if __name__ == "__main__":
    main()
