"""The parts of a record: patient, site, target, settings, measured values, a gas, an entry."""

from dataclasses import dataclass, replace
from datetime import datetime

from engine.record.guard import (
    CONDITIONS,
    EVENTS,
    Guarded,
    Impossible,
    refuse_unclear_time,
    refuse_unknown_words,
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Baseline(Guarded):
    """The patient's usual values at home."""

    paco2_mmhg: float | None = None
    hco3_mmol_per_l: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Patient(Guarded):
    """Who: what the forecast needs of a person, and nothing that names one."""

    sex: str | None = None
    height_cm: float | None = None
    weight_kg: float | None = None
    conditions: tuple[str, ...] = ()
    baseline: Baseline | None = None

    def __post_init__(self) -> None:
        Guarded.__post_init__(self)
        refuse_unknown_words("conditions", self.conditions, CONDITIONS)


@dataclass(frozen=True, slots=True, kw_only=True)
class Site(Guarded):
    """Where: station pressure if it is measured, else the altitude, else 760 mmHg is assumed and said so."""

    barometric_mmhg: float | None = None
    altitude_m: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Target(Guarded):
    """The range the team wants; any end may be left open."""

    ph_low: float | None = None
    ph_high: float | None = None
    paco2_low_mmhg: float | None = None
    paco2_high_mmhg: float | None = None
    pao2_low_mmhg: float | None = None
    pao2_high_mmhg: float | None = None
    sao2_low: float | None = None
    sao2_high: float | None = None

    def __post_init__(self) -> None:
        Guarded.__post_init__(self)
        for quantity in ("ph", "paco2_mmhg", "pao2_mmhg", "sao2"):
            low, high = self.range_of(quantity)
            if low is not None and high is not None and low >= high:
                name = next(n for n in _target_names(quantity) if "_high" in n)
                raise Impossible(name, high, f"more than the low end, {low:g}")

    def range_of(self, quantity: str) -> tuple[float | None, float | None]:
        """Low and high end for ``ph``, ``paco2_mmhg``, ``pao2_mmhg`` or ``sao2``; ``None`` where open."""
        low, high = _target_names(quantity)
        return getattr(self, low), getattr(self, high)


def _target_names(quantity: str) -> tuple[str, str]:
    name, _, unit = quantity.partition("_")
    tail = f"_{unit}" if unit else ""
    return f"{name}_low{tail}", f"{name}_high{tail}"


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings(Guarded):
    """What the ventilator is told. In an entry: the fields given there; in force: all that still hold."""

    mode: str | None = None
    rate_per_min: float | None = None
    tidal_volume_ml: float | None = None
    inspiratory_pressure_cmh2o: float | None = None
    support_pressure_cmh2o: float | None = None
    fio2: float | None = None
    peep_cmh2o: float | None = None
    inspiratory_time_s: float | None = None
    ie_ratio: float | None = None
    flow_l_per_min: float | None = None
    pause_s: float | None = None
    humidifier: str | None = None
    apparatus_dead_space_ml: float | None = None
    airway: str | None = None

    def then(self, later: "Settings | None") -> "Settings":
        """These settings, overlaid with the fields that a later entry gives.

        The mode holds either the inspiratory time or the I:E ratio: giving one lets go of the other.
        """
        if later is None:
            return self
        given = later.given()
        if "inspiratory_time_s" in given and "ie_ratio" not in given:
            given["ie_ratio"] = None
        if "ie_ratio" in given and "inspiratory_time_s" not in given:
            given["inspiratory_time_s"] = None
        return replace(self, **given)

    def differing(self, later: "Settings") -> tuple[str, ...]:
        """Names of the fields that have a value here and another value there: the changes."""
        mine, theirs = self.given(), later.given()
        return tuple(n for n in mine if n in theirs and mine[n] != theirs[n])


@dataclass(frozen=True, slots=True, kw_only=True)
class Measured(Guarded):
    """What the ventilator and the monitors read."""

    total_rate_per_min: float | None = None
    exhaled_tidal_volume_ml: float | None = None
    minute_volume_l_per_min: float | None = None
    plateau_cmh2o: float | None = None
    peak_cmh2o: float | None = None
    mean_airway_cmh2o: float | None = None
    total_peep_cmh2o: float | None = None
    spo2: float | None = None
    etco2_mmhg: float | None = None
    vco2_ml_per_min: float | None = None
    vo2_ml_per_min: float | None = None
    cardiac_output_l_per_min: float | None = None
    svo2: float | None = None
    scvo2: float | None = None
    temperature_c: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class BloodGas(Guarded):
    """One blood sample; tensions at 37 C unless ``temperature_corrected``."""

    ph: float
    paco2_mmhg: float
    pao2_mmhg: float
    hb_g_per_dl: float
    sao2: float | None = None
    hco3_mmol_per_l: float | None = None
    cohb: float | None = None
    methb: float | None = None
    lactate_mmol_per_l: float | None = None
    specimen: str = "arterial"
    drawn_at: datetime | None = None
    temperature_corrected: bool = False
    temperature_c: float | None = None
    excluded: str | None = None

    def __post_init__(self) -> None:
        Guarded.__post_init__(self)
        if self.temperature_corrected and self.temperature_c is None:
            raise Impossible("temperature_c", None, "the temperature the gas was corrected to")
        if self.drawn_at is not None:
            refuse_unclear_time("drawn_at", self.drawn_at)
        if self.excluded is not None and not self.excluded.strip():
            raise Impossible("excluded", self.excluded, "the reason as text")
        if (self.cohb or 0) + (self.methb or 0) >= 1:
            raise Impossible("methb", self.methb, "less than 1 together with cohb")


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry(Guarded):
    """One line of the chart."""

    time: datetime
    settings: Settings | None = None
    measured: Measured | None = None
    gas: BloodGas | None = None
    change_reason: str | None = None
    events: tuple[str, ...] = ()
    note: str | None = None

    def __post_init__(self) -> None:
        Guarded.__post_init__(self)
        refuse_unclear_time("time", self.time)
        refuse_unknown_words("events", self.events, EVENTS)

    @property
    def gas_time(self) -> datetime:
        """When the gas was drawn: its own time where given, else the entry's."""
        return (self.gas and self.gas.drawn_at) or self.time
