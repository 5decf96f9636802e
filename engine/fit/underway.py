"""A dated change whose effect is still on its way when a gas is drawn or the next change is made."""

from dataclasses import dataclass
from datetime import datetime, timedelta
from itertools import pairwise

from engine.record import Case, Settings

SETTLED_AFTER = timedelta(hours=2)  # nine tenths of a PaCO2 change take 89 min at 2.5 L/min of ventilation


@dataclass(frozen=True, slots=True, kw_only=True)
class Underway:
    """The settings before the last dated change, the names of what it changed, and the minutes since."""

    before: Settings
    changed: tuple[str, ...]
    minutes: float


def underway_at(case: Case, time: datetime) -> Underway | None:
    """The last change before ``time`` if it is dated and not yet settled, else ``None``.

    A change that first appears with a gas has no date of its own and is taken as settled.
    """
    charted = tuple(case.entries_with_settings())
    exhaled = any(e.measured and e.measured.exhaled_tidal_volume_ml for e in case.entries)
    for (_, before), (entry, after) in reversed(list(pairwise(charted))):
        if entry.time > time:
            continue
        if time - entry.time > SETTLED_AFTER:
            return None
        changed = before.differing(after)
        if not changed:
            continue
        known = None not in (before.mode, before.rate_per_min, before.fio2)
        if entry.gas is not None or not known or not (before.tidal_volume_ml or exhaled):
            return None
        return Underway(before=before, changed=changed, minutes=(time - entry.time) / timedelta(minutes=1))
    return None
