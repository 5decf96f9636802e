"""What the chart says of the chest: the newest plateau and the breath it was read on."""

from dataclasses import dataclass
from datetime import datetime, timedelta

from engine.checks.moment import Moment, moments, tidal_volume_ml
from engine.physics.mechanics import (
    compliance_ml_per_cmh2o,
    driving_pressure_cmh2o,
    inspiratory_time_s,
    resistance_cmh2o_s_per_l,
)
from engine.record import Case, Settings

READING_STANDS_HOURS = 24.0
"""How long a plateau is carried on. Protocols ask for one every 4 h and after each change (ARDS Network);
older ones are shown with their time."""

RATE_ALLOWANCE = 1.0
"""Breaths a minute by which a total rate may stand above the set one in a passive patient."""

_UNKNOWN = "no total rate is charted, so whether the patient was passive is not known"
_S_PER_MIN, _ML_PER_L = 60.0, 1000.0
_LEAST_STEP = 0.1  # cmH2O: keeps a compliance finite


@dataclass(frozen=True, slots=True, kw_only=True)
class Mechanics:
    """The chest at the newest plateau; all None, and not passive, where none was charted.

    ``peep_cmh2o`` is the total PEEP where it was measured at the same set PEEP, else the set one;
    ``set_peep_cmh2o`` the set one. ``flow_l_per_min`` is the set flow, else tidal volume over inspiratory
    time in volume control (constant flow assumed). ``passive`` is True only where the total rate says that
    nothing was triggered (or paralysis was charted) in volume or pressure control; ``why`` says what speaks
    against it.
    """

    measured_at: datetime | None = None
    mode: str | None = None
    tidal_volume_ml: float | None = None
    plateau_cmh2o: float | None = None
    peak_cmh2o: float | None = None
    peep_cmh2o: float | None = None
    set_peep_cmh2o: float | None = None
    flow_l_per_min: float | None = None
    inspiratory_time_s: float | None = None
    rate_per_min: float | None = None
    passive: bool = False
    why: str = "no plateau pressure is charted in the last 24 h"

    @property
    def driving_pressure_cmh2o(self) -> float | None:
        """Plateau less total PEEP, where the plateau lies above it."""
        if self.plateau_cmh2o is None or self.peep_cmh2o is None:
            return None
        found = float(driving_pressure_cmh2o(self.plateau_cmh2o, self.peep_cmh2o))
        return found if found >= _LEAST_STEP else None

    @property
    def compliance_ml_per_cmh2o(self) -> float | None:
        """Tidal volume over driving pressure."""
        if self.driving_pressure_cmh2o is None or self.tidal_volume_ml is None:
            return None
        return float(
            compliance_ml_per_cmh2o(self.tidal_volume_ml, self.plateau_cmh2o or 0.0, self.peep_cmh2o or 0.0)
        )

    @property
    def resistance_cmh2o_s_per_l(self) -> float | None:
        """Peak less plateau over flow: constant flow only, so volume control only."""
        if self.mode != "volume" or self.flow_l_per_min is None:
            return None
        if self.peak_cmh2o is None or self.plateau_cmh2o is None or self.peak_cmh2o <= self.plateau_cmh2o:
            return None
        return float(resistance_cmh2o_s_per_l(self.peak_cmh2o, self.plateau_cmh2o, self.flow_l_per_min))


def mechanics_of(case: Case) -> Mechanics:
    """The chest at the newest plateau within 24 h of the last entry, with the settings in force then."""
    if not case.entries:
        return Mechanics()
    end = case.entries[-1].time
    for moment in reversed(moments(case)):
        if end - moment.time > timedelta(hours=READING_STANDS_HOURS):
            break
        if moment.measured("plateau_cmh2o") is not None:
            return _read(moment)
    return Mechanics()


def _read(moment: Moment) -> Mechanics:
    settings, volume, why = moment.settings, tidal_volume_ml(moment), _not_passive(moment)
    return Mechanics(
        measured_at=moment.time,
        mode=settings.mode,
        tidal_volume_ml=volume[0] if volume else None,
        plateau_cmh2o=moment.measured("plateau_cmh2o"),
        peak_cmh2o=moment.measured("peak_cmh2o"),
        peep_cmh2o=_total_peep(moment),
        set_peep_cmh2o=settings.peep_cmh2o,
        flow_l_per_min=flow_of(settings),
        inspiratory_time_s=inspiratory_time_of(settings),
        rate_per_min=settings.rate_per_min,
        passive=not why,
        why=why,
    )


def _total_peep(moment: Moment) -> float | None:
    """Total PEEP of the last four hours if set PEEP has not moved since and it is no lower; else set PEEP."""
    total, peep = moment.latest("total_peep_cmh2o"), moment.settings.peep_cmh2o
    if total is not None and total[1] >= moment.since("peep_cmh2o") and total[0] >= (peep or 0.0):
        return total[0]
    return peep


def breathes(moment: Moment) -> str:
    """What shows that the patient breathes at this moment: mode, or total rate; empty where nothing does."""
    mode, rate, total = (
        moment.settings.mode,
        moment.settings.rate_per_min,
        moment.latest("total_rate_per_min"),
    )
    if mode not in ("volume", "pressure"):
        return f"mode {mode}, in which the patient breathes"
    if total is not None and rate is not None and total[0] > rate + RATE_ALLOWANCE:
        return f"total rate {total[0]:g}/min at {total[1]:%H:%M}, set {rate:g}: the patient triggers"
    return ""


def _not_passive(moment: Moment) -> str:
    """What speaks against a passive patient at this moment, not knowing included; else empty."""
    unknown = moment.latest("total_rate_per_min") is None and not _paralysed(moment)
    return breathes(moment) or (_UNKNOWN if unknown else "")


def _paralysed(moment: Moment) -> bool:
    """Whether paralysis was charted and not ended up to here."""
    events = [
        e for entry in moment.case.entries[: moment.number + 1] for e in entry.events if "paralysis" in e
    ]
    return bool(events) and events[-1] == "paralysis"


def inspiratory_time_of(settings: Settings, rate_per_min: float | None = None) -> float | None:
    """Inspiratory time, pause included: as set, or from I:E and the rate, or from volume, flow and pause."""
    rate = rate_per_min or settings.rate_per_min
    if settings.inspiratory_time_s is not None:
        return settings.inspiratory_time_s
    if settings.ie_ratio is not None and rate:
        return float(inspiratory_time_s(rate, settings.ie_ratio))
    if (
        settings.mode == "volume"
        and settings.flow_l_per_min is not None
        and settings.tidal_volume_ml is not None
    ):
        flowing_s = settings.tidal_volume_ml / _ML_PER_L / (settings.flow_l_per_min / _S_PER_MIN)
        return flowing_s + (settings.pause_s or 0.0)
    return None


def flow_of(settings: Settings) -> float | None:
    """Inspiratory flow: as set, or volume over inspiratory time less pause in volume control."""
    if settings.flow_l_per_min is not None:
        return settings.flow_l_per_min
    time_s = inspiratory_time_of(settings)
    if settings.mode != "volume" or settings.tidal_volume_ml is None or time_s is None:
        return None
    flowing_s = time_s - (settings.pause_s or 0.0)
    return settings.tidal_volume_ml / _ML_PER_L / flowing_s * _S_PER_MIN if flowing_s > 0 else None
