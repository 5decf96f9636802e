"""One textbook number of one gas as a row, and the digits its working is shown in."""

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimate:
    """A number with its working.

    ``name`` carries the unit as everywhere; ``value`` is None where something is missing or the number would
    mean nothing here, and ``working`` then says what or why. ``equation`` is the formula in words,
    ``working`` the same with this patient's numbers, ``assumes`` what was taken for granted.
    """

    name: str
    value: float | None
    unit: str
    equation: str
    working: str
    source: str
    assumes: str


def missing(needs: Mapping[str, object | None]) -> str:
    """What is not charted, as a sentence; empty where nothing is missing."""
    absent = [name for name, value in needs.items() if value is None]
    return f"not charted: {', '.join(absent)}" if absent else ""


def clock(time: datetime) -> str:
    """A time of day, in its own zone."""
    return f"{time:%H:%M}"
