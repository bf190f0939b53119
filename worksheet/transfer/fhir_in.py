"""To come."""

from .rows import Parsed
from .times import TimeRules


def parse(data: bytes, rules: TimeRules, codes: dict[str, str]) -> Parsed:
    """Rows."""
    raise NotImplementedError
