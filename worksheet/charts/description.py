"""What a chart is: plain frozen data that two renderers draw, the page's and the PDF's, and a table can be made of."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

Kind = Literal["line", "points", "band", "steps", "bar"]
Dash = Literal["solid", "dash", "dot", "dashdot", "longdash"]
Marker = Literal["", "circle", "square", "diamond", "triangle", "cross"]
Hatch = Literal["", "/", "\\", "x", "-", "."]
Tick = tuple[float, str]


@dataclass(frozen=True)
class Style:
    """How something is drawn. ``role`` names a colour of the palette; the rest makes it readable without colour."""

    role: str = "ink"
    dash: Dash = "solid"
    marker: Marker = ""
    hatch: Hatch = ""
    width: float = 1.6


@dataclass(frozen=True)
class Axis:
    """One axis. ``domain`` is its share of the figure's height, from the bottom (y axes only)."""

    key: str
    title: str
    low: float
    high: float
    ticks: tuple[Tick, ...] = ()
    decimals: int = 0
    domain: tuple[float, float] = (0.0, 1.0)
    empty: str = ""  # said in the panel when there is nothing to draw


@dataclass(frozen=True)
class Series:
    """Values over x, in shown units; NaN makes a gap.

    A ``line`` with a marker draws both. A ``band`` lies between ``low`` and ``y``; a ``bar`` stands between ``low``
    and ``low + y``. ``carried`` points are drawn hollow. ``marks`` are short texts beside points (numbers of a path);
    ``notes`` are words about a point, for the readout and the table.
    """

    kind: Kind
    name: str
    axis: str
    x: tuple[float, ...]
    y: tuple[float, ...]
    style: Style = Style()
    low: tuple[float, ...] = ()
    carried: tuple[bool, ...] = ()
    notes: tuple[str, ...] = ()
    marks: tuple[str, ...] = ()
    legend: bool = True
    tabled: bool = True  # whether the data table lists it (fitted lines and outlines need not)

    def is_carried(self, i: int) -> bool:
        """Whether point i stands on a carried value."""
        return bool(self.carried) and self.carried[i]

    def note(self, i: int) -> str:
        """Words about point i."""
        return self.notes[i] if self.notes else ""


@dataclass(frozen=True)
class Band:
    """A reference range across the panel of one y axis."""

    axis: str
    low: float
    high: float
    label: str


@dataclass(frozen=True)
class Contour:
    """A labelled line of equal value behind a map; the label stands at its last point."""

    axis: str
    label: str
    x: tuple[float, ...]
    y: tuple[float, ...]


@dataclass(frozen=True)
class EventMark:
    """Something that happened at a time, drawn as a line through all panels with its number above it."""

    x: float
    label: str  # drawn
    words: str  # read


@dataclass(frozen=True)
class Clock:
    """How the x axis tells time: wall clock of a zone, or (zone empty) hours from ``origin``."""

    zone: str
    origin: float = 0.0


@dataclass(frozen=True)
class Chart:
    """A chart. ``alt`` says what it shows, ``summary`` what it says; ``height`` is in CSS pixels."""

    key: str
    title: str
    alt: str
    summary: str
    x: Axis
    y: tuple[Axis, ...]
    series: tuple[Series, ...] = ()
    bands: tuple[Band, ...] = ()
    contours: tuple[Contour, ...] = ()
    events: tuple[EventMark, ...] = ()
    height: int = 360
    decimal_comma: bool = False
    clock: Clock | None = None  # None: x is a number or a position
    x_words: tuple[tuple[float, str], ...] = ()  # text of each x that occurs, where the ticks do not say it

    @property
    def is_empty(self) -> bool:
        """Whether there is nothing to draw."""
        return not any(math.isfinite(v) for s in self.series for v in s.y)

    def axis(self, key: str) -> Axis:
        """The y axis of that key."""
        return next(axis for axis in self.y if axis.key == key)

    def series_of(self, key: str) -> Iterator[Series]:
        """The series drawn on one y axis, in order."""
        return (s for s in self.series if s.axis == key)
