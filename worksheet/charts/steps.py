"""The four steps and every other thing drawn: one colour, line, marker, hatch and word each, defined once.

Colours are the colour-blind-safe set of Okabe & Ito 2008 ("Color Universal Design"). Each keeps at least 3 : 1
against its background (WCAG 2.2, 1.4.11), which is why the lung is blue on white and sky blue on black.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from .description import Style


@dataclass(frozen=True)
class Step:
    """One place where supply can fail, as it is drawn everywhere."""

    name: str
    word: str
    style: Style


STEPS: tuple[Step, ...] = (
    Step("lung", "lung", Style("lung", "solid", "circle", "/")),
    Step("haemoglobin", "haemoglobin", Style("haemoglobin", "dash", "square", "")),
    Step("function", "function", Style("function", "dot", "diamond", "x")),
    Step("flow", "flow", Style("flow", "dashdot", "triangle", "-")),
)
STEP: Mapping[str, Step] = MappingProxyType({step.name: step for step in STEPS})
RESIDUAL = Step("residual", "measured minus curve", Style("residual", "longdash", "cross", "."))

# Roles: what a colour stands for. The page's style sheet uses the same values for its tokens.
LIGHT: Mapping[str, str] = MappingProxyType({
    "lung": "#0072B2", "haemoglobin": "#D55E00", "function": "#CC79A7", "flow": "#009E73", "use": "#000000",
    "residual": "#6E6E6E", "ink": "#1B1F23", "soft": "#57606A", "grid": "#E3E6EA", "contour": "#8C959F",
    "reference": "#EDF1F5", "event": "#57606A", "paper": "#FFFFFF", "band": "#C9D1D9",
})  # fmt: skip
DARK: Mapping[str, str] = MappingProxyType({
    "lung": "#56B4E9", "haemoglobin": "#D55E00", "function": "#CC79A7", "flow": "#009E73", "use": "#FFFFFF",
    "residual": "#9AA1A9", "ink": "#E8EBEE", "soft": "#A9B1BA", "grid": "#2C333A", "contour": "#6B747E",
    "reference": "#20262C", "event": "#A9B1BA", "paper": "#12161A", "band": "#3B444D",
})  # fmt: skip
THEMES: Mapping[str, Mapping[str, str]] = MappingProxyType({"light": LIGHT, "dark": DARK})


def colour(role: str, theme: str = "light") -> str:
    """The colour of a role."""
    return THEMES[theme][role]


def recolouring() -> dict[str, str]:
    """From each colour of the light theme to that of the dark one: a drawn figure is recoloured without a new one."""
    return {LIGHT[role]: DARK[role] for role in LIGHT}
