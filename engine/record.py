"""What is known about one patient. Units are in the names; fractions are 0-1; unmeasured is ``None``.

A record refuses what cannot be (`Impossible`, a ``ValueError`` that names the field, the value and what was
expected); what is merely doubtful is accepted and raises a check later (`engine.checks`). One quantity has
one name everywhere, so one table, `POSSIBLE`, guards every record.
"""

from collections.abc import Iterator
from dataclasses import dataclass, fields, replace
from datetime import datetime
from typing import Any, Self

# Beyond these a value is a slip of the keyboard, not a sick patient. Common practice, no source.
POSSIBLE: dict[str, tuple[float, float]] = {
    "height_cm": (50, 250),
    "weight_kg": (15, 450),
    "barometric_mmhg": (300, 820),
    "altitude_m": (-430, 6000),
    "rate_per_min": (0, 120),
    "total_rate_per_min": (0, 120),
    "tidal_volume_ml": (20, 2500),
    "exhaled_tidal_volume_ml": (0, 3000),
    "minute_volume_l_per_min": (0, 60),
    "inspiratory_pressure_cmh2o": (0, 80),
    "support_pressure_cmh2o": (0, 60),
    "plateau_cmh2o": (0, 100),
    "peak_cmh2o": (0, 120),
    "mean_airway_cmh2o": (0, 80),
    "peep_cmh2o": (0, 40),
    "total_peep_cmh2o": (0, 60),
    "fio2": (0.21, 1),
    "inspiratory_time_s": (0.1, 10),
    "ie_ratio": (0.05, 10),
    "flow_l_per_min": (1, 200),
    "pause_s": (0, 5),
    "apparatus_dead_space_ml": (0, 500),
    "spo2": (0.2, 1),
    "sao2": (0.05, 1),
    "svo2": (0.05, 1),
    "scvo2": (0.05, 1),
    "etco2_mmhg": (1, 250),
    "vco2_ml_per_min": (20, 1500),
    "vo2_ml_per_min": (20, 1500),
    "cardiac_output_l_per_min": (0.3, 30),
    "temperature_c": (10, 45),
    "ph": (6.3, 8.0),
    "paco2_mmhg": (5, 250),
    "pao2_mmhg": (10, 760),
    "hb_g_per_dl": (1, 30),
    "hco3_mmol_per_l": (1, 100),
    "cohb": (0, 0.9),
    "methb": (0, 0.9),
    "lactate_mmol_per_l": (0, 50),
}
POSSIBLE |= {
    f"{name}_{end}{unit}": POSSIBLE[name + unit]
    for name, unit in (("ph", ""), ("paco2", "_mmhg"), ("pao2", "_mmhg"), ("sao2", ""))
    for end in ("low", "high")
}

CHOICES: dict[str, tuple[str, ...]] = {
    "sex": ("female", "male"),
    "mode": ("volume", "pressure", "support", "other"),
    "humidifier": ("exchanger", "heated"),
    "airway": ("tube", "tracheostomy", "mask"),
    "specimen": ("arterial", "venous", "capillary"),
    "change_reason": ("patient", "procedure", "prompted"),
}
CONDITIONS = (
    "chronic_hypercapnia",
    "obstructive",
    "raised_icp",
    "right_heart_failure",
    "pregnancy",
    "altitude_acclimatised",
    "pneumothorax",
    "raised_abdominal_pressure",
    "extracorporeal",
)
EVENTS = (
    "peep_change",
    "recruitment",
    "prone",
    "supine",
    "suction",
    "disconnection",
    "bronchoscopy",
    "bronchodilator",
    "inhaled_vasodilator",
    "drain",
    "reintubation",
    "transfusion",
    "sedation_change",
    "paralysis",
    "paralysis_end",
    "bicarbonate",
    "dialysis",
    "extracorporeal_start",
    "extracorporeal_stop",
    "transport",
)


class Impossible(ValueError):
    """A value that cannot be: names the field, quotes the value, says what was expected."""

    def __init__(self, field: str, value: object, expected: str) -> None:
        self.field, self.value, self.expected = field, value, expected
        super().__init__(field, value, expected)  # as given, so that it crosses from one process to another

    def __str__(self) -> str:
        return f"{self.field} = {self.value!r} is impossible: expected {self.expected}"


@dataclass(frozen=True, slots=True, kw_only=True)
class _Guarded:
    """Refuses impossible numbers and unknown words in any field that `POSSIBLE` or `CHOICES` names."""

    def __post_init__(self) -> None:
        for field in fields(self):
            value = getattr(self, field.name)
            if value is None:
                continue
            if field.name in POSSIBLE:
                _refuse_impossible_number(field.name, value)
            elif field.name in CHOICES and value not in CHOICES[field.name]:
                raise Impossible(field.name, value, f"one of {', '.join(CHOICES[field.name])}")

    def given(self) -> dict[str, Any]:
        """The fields that carry a value, in order."""
        return {f.name: v for f in fields(self) if (v := getattr(self, f.name)) is not None}


def _refuse_impossible_number(name: str, value: object) -> None:
    low, high = POSSIBLE[name]
    expected = f"a number from {low:g} to {high:g}"
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise Impossible(name, value, expected)
    if not low <= value <= high:  # NaN fails this too
        raise Impossible(name, value, expected)


def _refuse_unknown_words(name: str, words: tuple[str, ...], known: tuple[str, ...]) -> None:
    for word in words:
        if word not in known:
            raise Impossible(name, word, f"any of {', '.join(known)}")


@dataclass(frozen=True, slots=True, kw_only=True)
class Baseline(_Guarded):
    """The patient's usual values at home."""

    paco2_mmhg: float | None = None
    hco3_mmol_per_l: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Patient(_Guarded):
    """Who: what the forecast needs of a person, and nothing that names one."""

    sex: str | None = None
    height_cm: float | None = None
    weight_kg: float | None = None
    conditions: tuple[str, ...] = ()
    baseline: Baseline | None = None

    def __post_init__(self) -> None:
        _Guarded.__post_init__(self)
        _refuse_unknown_words("conditions", self.conditions, CONDITIONS)


@dataclass(frozen=True, slots=True, kw_only=True)
class Site(_Guarded):
    """Where: station pressure if it is measured, else the altitude, else 760 mmHg is assumed and said so."""

    barometric_mmhg: float | None = None
    altitude_m: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Target(_Guarded):
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
        _Guarded.__post_init__(self)
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
class Settings(_Guarded):
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
class Measured(_Guarded):
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
class BloodGas(_Guarded):
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
        _Guarded.__post_init__(self)
        if self.temperature_corrected and self.temperature_c is None:
            raise Impossible("temperature_c", None, "the temperature the gas was corrected to")
        if self.drawn_at is not None:
            _refuse_unclear_time("drawn_at", self.drawn_at)
        if self.excluded is not None and not self.excluded.strip():
            raise Impossible("excluded", self.excluded, "the reason as text")
        if (self.cohb or 0) + (self.methb or 0) >= 1:
            raise Impossible("methb", self.methb, "less than 1 together with cohb")


def _refuse_unclear_time(name: str, time: datetime) -> None:
    """A time needs a zone, and a year in which every zone and every table can hold it."""
    if time.utcoffset() is None:
        raise Impossible(name, time.isoformat(), "a time with a zone, such as 2031-03-04T07:40:00Z")
    if not 1900 <= time.year <= 2250:
        raise Impossible(name, time.isoformat(), "a year from 1900 to 2250")


@dataclass(frozen=True, slots=True, kw_only=True)
class Entry(_Guarded):
    """One line of the chart."""

    time: datetime
    settings: Settings | None = None
    measured: Measured | None = None
    gas: BloodGas | None = None
    change_reason: str | None = None
    events: tuple[str, ...] = ()
    note: str | None = None

    def __post_init__(self) -> None:
        _Guarded.__post_init__(self)
        _refuse_unclear_time("time", self.time)
        _refuse_unknown_words("events", self.events, EVENTS)

    @property
    def gas_time(self) -> datetime:
        """When the gas was drawn: its own time where given, else the entry's."""
        return (self.gas and self.gas.drawn_at) or self.time


@dataclass(frozen=True, slots=True, kw_only=True)
class Case:
    """One patient's stay: who, where, the target, and entries in strictly rising time."""

    label: str
    patient: Patient = Patient()
    site: Site = Site()
    target: Target | None = None
    entries: tuple[Entry, ...] = ()

    def __post_init__(self) -> None:
        if not self.label.strip():
            raise Impossible("label", self.label, "a bed label")
        for number, (earlier, later) in enumerate(zip(self.entries, self.entries[1:], strict=False), start=2):
            if later.time <= earlier.time:
                raise Impossible(
                    f"entries[{number}].time",
                    later.time.isoformat(),
                    f"a time after {earlier.time.isoformat()}",
                )
        _refuse_gases_out_of_order(self.entries)
        for number, (entry, settings) in enumerate(self.entries_with_settings(), start=1):
            if entry.gas is not None:
                _refuse_gas_without_settings(f"entries[{number}].settings", settings, self, number)

    def entries_with_settings(self) -> Iterator[tuple[Entry, Settings]]:
        """Each entry with the settings in force from it on."""
        in_force = Settings()
        for entry in self.entries:
            in_force = in_force.then(entry.settings)
            yield entry, in_force

    def before(self, number: int) -> Self:
        """The case as it stood before entry ``number`` (from 0)."""
        return replace(self, entries=self.entries[:number])

    def usable_gases(self) -> tuple[int, ...]:
        """Numbers (from 0) of the entries whose gas can be used.

        Usable is arterial, not excluded and not under extracorporeal support.
        """
        numbers, supported = [], "extracorporeal" in self.patient.conditions
        for number, entry in enumerate(self.entries):
            if "extracorporeal_start" in entry.events:
                supported = True
            gas = entry.gas
            if gas is not None and gas.specimen == "arterial" and not gas.excluded and not supported:
                numbers.append(number)
            if "extracorporeal_stop" in entry.events:
                supported = False
        return tuple(numbers)

    def extracorporeal_now(self) -> bool:
        """Whether extracorporeal support runs after the last entry."""
        supported = "extracorporeal" in self.patient.conditions
        for entry in self.entries:
            if "extracorporeal_start" in entry.events:
                supported = True
            if "extracorporeal_stop" in entry.events:
                supported = False
        return supported


def _refuse_gases_out_of_order(entries: tuple[Entry, ...]) -> None:
    """Arterial gases follow each other in the order they were drawn, and none stands twice."""
    last: datetime | None = None
    for number, entry in enumerate(entries, start=1):
        if entry.gas is None or entry.gas.specimen != "arterial" or entry.gas.excluded:
            continue
        if last is not None and entry.gas_time <= last:
            expected = f"a time after the arterial gas before it, {last.isoformat()}"
            raise Impossible(f"entries[{number}].gas.drawn_at", entry.gas_time.isoformat(), expected)
        last = entry.gas_time


def _refuse_gas_without_settings(where: str, settings: Settings, case: Case, number: int) -> None:
    """A gas needs mode, FiO2, rate and a tidal volume in force: set, or exhaled where no volume is set."""
    for name in ("mode", "fio2", "rate_per_min"):
        if getattr(settings, name) is None:
            raise Impossible(f"{where}.{name}", None, "a value in force at this gas")
    exhaled = any(e.measured and e.measured.exhaled_tidal_volume_ml for e in case.entries[:number])
    if settings.tidal_volume_ml is None and (settings.mode == "volume" or not exhaled):
        expected = (
            "a set tidal volume in force" if settings.mode == "volume" else "one in force, set or exhaled"
        )
        raise Impossible(f"{where}.tidal_volume_ml", None, expected)
    if settings.rate_per_min == 0 and settings.mode != "support":
        raise Impossible(f"{where}.rate_per_min", 0, "more than 0 outside support mode")
