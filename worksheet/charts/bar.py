"""The small bar of the four ledger steps: geometry only, for an inline SVG that needs no style attribute."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from .steps import STEPS, Step

WIDTH, HEIGHT = 240.0, 18.0
_LABEL_WIDTH = 7.0  # units a letter takes, for deciding whether a word fits


@dataclass(frozen=True)
class Piece:
    """One step's rectangle. ``word`` is empty where it does not fit; ``step.style.hatch`` tells steps apart."""

    step: Step
    value: float
    x: float
    width: float
    word: str

    @property
    def middle(self) -> float:
        """Where a centred word stands."""
        return self.x + self.width / 2


@dataclass(frozen=True)
class LedgerBar:
    """Losses to the left of ``zero``, gains to the right, in a view box of ``width`` × ``height``."""

    width: float
    height: float
    zero: float
    pieces: tuple[Piece, ...]


def ledger_bar(contributions: Mapping[str, float], largest: float) -> LedgerBar:
    """Lay out the four steps' contributions.

    ``contributions`` by step name, any unit; ``largest`` is the sum of losses or of gains that fills half the width
    (the same for all beds of a page, so that bars compare).
    """
    scale = WIDTH / 2 / largest if largest > 0 else 0.0
    pieces, left, right = [], WIDTH / 2, WIDTH / 2
    for step in STEPS:
        value = contributions.get(step.name, math.nan)
        width = abs(value) * scale
        if not math.isfinite(width) or width < 0.25:
            continue
        if value < 0:
            width = min(width, left)
            left -= width
            x = left
        else:
            width = min(width, WIDTH - right)
            x = right
            right += width
        word = step.word if len(step.word) * _LABEL_WIDTH <= width else ""
        pieces.append(Piece(step, value, round(x, 2), round(width, 2), word))
    return LedgerBar(WIDTH, HEIGHT, WIDTH / 2, tuple(pieces))
