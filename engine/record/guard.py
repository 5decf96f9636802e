"""What may enter a record: the table of possible values, the known words, and the refusal of all else."""

from dataclasses import dataclass, fields
from datetime import datetime
from typing import Any

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
class Guarded:
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


def refuse_unknown_words(name: str, words: tuple[str, ...], known: tuple[str, ...]) -> None:
    """Every word must be a known one."""
    for word in words:
        if word not in known:
            raise Impossible(name, word, f"any of {', '.join(known)}")


def refuse_unclear_time(name: str, time: datetime) -> None:
    """A time needs a zone, and a year in which every zone and every table can hold it."""
    if time.utcoffset() is None:
        raise Impossible(name, time.isoformat(), "a time with a zone, such as 2031-03-04T07:40:00Z")
    if not 1900 <= time.year <= 2250:
        raise Impossible(name, time.isoformat(), "a year from 1900 to 2250")
