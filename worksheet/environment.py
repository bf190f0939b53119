"""Typed reading of ``WORKSHEET_…`` environment variables: nonsense is refused at start with a sentence."""

import os

from django.core.exceptions import ImproperlyConfigured

_TRUE = {"1", "true", "yes", "on"}
_FALSE = {"0", "false", "no", "off", ""}


def text(name: str, default: str = "") -> str:
    """The variable as text."""
    return os.environ.get(name, default).strip()


def flag(name: str, default: bool = False) -> bool:
    """The variable as yes or no."""
    given = os.environ.get(name)
    if given is None:
        return default
    if given.strip().lower() in _TRUE:
        return True
    if given.strip().lower() in _FALSE:
        return False
    raise ImproperlyConfigured(f"{name} is '{given}': write 1 or 0.")


def number(name: str, default: int, low: int, high: int) -> int:
    """The variable as a whole number within limits."""
    given = os.environ.get(name)
    if given is None:
        return default
    try:
        value = int(given)
    except ValueError:
        raise ImproperlyConfigured(f"{name} is '{given}': a whole number is needed.") from None
    if not low <= value <= high:
        raise ImproperlyConfigured(f"{name} is {value}: it must lie between {low} and {high}.")
    return value


def words(name: str, default: str = "") -> list[str]:
    """The variable as a list of words separated by commas."""
    return [word.strip() for word in os.environ.get(name, default).split(",") if word.strip()]
