"""What drives gas exchange at one moment, read off the chart: volumes, rates, inspired oxygen, devices.

A ventilator breathes at the larger of the set rate and the patient's own. A patient whose total rate stands
above the set one triggers: their own rate is known and a change of the set rate below it does next to
nothing. Where the two agree the own rate is somewhere below, and zero under paralysis (common practice, no
source).
"""

from dataclasses import dataclass
from datetime import datetime, timedelta

from engine.record import Case, Measured, Settings

TRIGGERS_ABOVE_SET_PER_MIN = 1.0  # total above set by more than counting error: the patient triggers


@dataclass(frozen=True, slots=True, kw_only=True)
class OwnRate:
    """What the chart says of the patient's own breathing rate.

    ``per_min`` is the rate seen while triggering; else ``at_most_per_min`` is the highest it can be (the
    rate at which set and total agreed, or the set rate where no total is charted); under paralysis both are
    0.
    """

    per_min: float | None
    at_most_per_min: float
    charted: bool

    @property
    def triggering(self) -> bool:
        """Whether the patient was seen to breathe above the set rate."""
        return bool(self.per_min)


@dataclass(frozen=True, slots=True, kw_only=True)
class Breathing:
    """One moment's breathing as charted. ``tidal_volume_ml`` is the one that rules in this mode."""

    mode: str
    set_rate_per_min: float
    own_rate: OwnRate
    tidal_volume_ml: float
    tidal_volume_charted: bool
    fio2: float
    peep_cmh2o: float | None
    apparatus_dead_space_ml: float
    obstructive: bool = False
    before_paralysis: "Breathing | None" = None


def breathing_at(case: Case, settings: Settings) -> Breathing:
    """Breathing under ``settings`` at the end of ``case``, from all its entries.

    ``settings`` may differ from those in force: that is how a change is tried. A tidal volume that the mode
    does not set follows the inspiratory or support pressure in proportion (constant compliance).
    """
    in_force = last_settings(case)
    volume, charted = _tidal_volume(case, settings, in_force)
    return Breathing(
        mode=settings.mode or "volume",
        set_rate_per_min=settings.rate_per_min or 0.0,
        own_rate=own_rate_of(case),
        tidal_volume_ml=volume,
        tidal_volume_charted=charted,
        fio2=settings.fio2 or 0.21,
        peep_cmh2o=settings.peep_cmh2o,
        apparatus_dead_space_ml=apparatus_dead_space_ml(settings),
        obstructive="obstructive" in case.patient.conditions,
        before_paralysis=_before_paralysis(case),
    )


def _before_paralysis(case: Case) -> Breathing | None:
    """The breathing that charted paralysis put an end to; ``None`` where there is none."""
    if not paralysed(case):
        return None
    begun = max(n for n, entry in enumerate(case.entries) if "paralysis" in entry.events)
    earlier = case.before(begun)
    settings = last_settings(earlier)
    known = settings.rate_per_min is not None and (settings.tidal_volume_ml or _last_exhaled(earlier))
    return breathing_at(earlier, settings) if known else None


def last_settings(case: Case) -> Settings:
    """Settings in force after the last entry."""
    in_force = Settings()
    for entry in case.entries:
        in_force = in_force.then(entry.settings)
    return in_force


EXCHANGER_ML = 55.0  # nominal, where not charted: middle of the devices of campbell2000 and prat2003


def apparatus_dead_space_ml(settings: Settings) -> float:
    """Nominal device volume: as charted, else by the humidifier, else none is assumed."""
    if settings.apparatus_dead_space_ml is not None:
        return settings.apparatus_dead_space_ml
    return EXCHANGER_ML if settings.humidifier == "exchanger" else 0.0


def measured_value(case: Case, field: str, time: datetime, within: timedelta) -> float | None:
    """The last value of a measured field that is not older than ``within``; ``None`` where there is none."""
    for entry in reversed(case.entries):
        value = None if entry.measured is None else getattr(entry.measured, field)
        if value is not None:
            return value if time - entry.time <= within else None
    return None


def own_rate_of(case: Case) -> OwnRate:
    """The patient's own rate as the chart tells it: the last total rate beside the set rate of its time."""
    if paralysed(case):
        return OwnRate(per_min=0.0, at_most_per_min=0.0, charted=True)
    found: tuple[float, Settings] | None = None
    for entry, settings in case.entries_with_settings():
        total = _total_rate_per_min(entry.measured)
        if total is not None:
            found = (total, settings)
    if found is None:
        return OwnRate(per_min=None, at_most_per_min=last_settings(case).rate_per_min or 0.0, charted=False)
    total, set_rate = found[0], found[1].rate_per_min or 0.0
    if total > set_rate + TRIGGERS_ABOVE_SET_PER_MIN:
        return OwnRate(per_min=total, at_most_per_min=total, charted=True)
    return OwnRate(per_min=None, at_most_per_min=min(total, set_rate), charted=True)


def _total_rate_per_min(measured: Measured | None) -> float | None:
    """Total rate as measured, else minute volume over exhaled volume where both are."""
    if measured is None or measured.total_rate_per_min is not None:
        return None if measured is None else measured.total_rate_per_min
    if measured.minute_volume_l_per_min and measured.exhaled_tidal_volume_ml:
        return 1000.0 * measured.minute_volume_l_per_min / measured.exhaled_tidal_volume_ml
    return None


def paralysed(case: Case) -> bool:
    """Whether paralysis was begun and not ended."""
    state = False
    for entry in case.entries:
        state = "paralysis" in entry.events or (state and "paralysis_end" not in entry.events)
    return state


def _tidal_volume(case: Case, settings: Settings, in_force: Settings) -> tuple[float, bool]:
    """The volume that rules, and whether it was charted rather than scaled with a pressure."""
    set_ml = settings.tidal_volume_ml
    if set_ml is not None and (settings.mode == "volume" or set_ml != in_force.tidal_volume_ml):
        return set_ml, True
    exhaled, then = _last_exhaled(case), in_force
    base = exhaled[0] if exhaled else set_ml
    assert base is not None  # `Case` guarantees a volume wherever there is a gas
    if exhaled:
        then = exhaled[1]
    for field in ("inspiratory_pressure_cmh2o", "support_pressure_cmh2o"):
        before, after = getattr(then, field), getattr(settings, field)
        if before and after is not None and after != before:
            return base * after / before, False
    return base, True


def _last_exhaled(case: Case) -> tuple[float, Settings] | None:
    """The last exhaled volume charted, at any age, and the settings it was read under."""
    found = None
    for entry, settings in case.entries_with_settings():
        if entry.measured is not None and entry.measured.exhaled_tidal_volume_ml:
            found = (entry.measured.exhaled_tidal_volume_ml, settings)
    return found
