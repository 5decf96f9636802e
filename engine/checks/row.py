"""One check as a row, and the few words and digits that all rows share."""

from dataclasses import dataclass
from datetime import datetime

PRACTICE = "common practice, no source"


@dataclass(frozen=True, slots=True, kw_only=True)
class Check:
    """One question asked of the chart, and its answer.

    ``ok`` is True or False where the question can be answered, None where something is missing; ``says`` is
    one or two plain sentences with the time, the value and its unit, and what is worth a look; ``source``
    says where the limit comes from.
    """

    name: str
    value: float | str | None
    limit: float | str | None
    ok: bool | None
    says: str
    source: str


def at(time: datetime) -> str:
    """A time as the bedside reads it, in its own zone: ``07:40 on 2031-03-04``."""
    return f"{time:%H:%M} on {time:%Y-%m-%d}"


def percent(fraction: float) -> str:
    """A fraction for the eye: ``0.936`` reads ``94 %``."""
    return f"{100 * fraction:.0f} %"


def unless(ok: bool | None, doubt: str, fine: str = ".") -> str:
    """How a sentence ends: with a full stop (or ``fine``) where all is well, else with the doubt."""
    return fine if ok else doubt
