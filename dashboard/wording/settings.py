"""What can be set: labels, units, steps and how a setting or a change reads in words."""

from collections.abc import Mapping
from dataclasses import dataclass

from engine.record import POSSIBLE, Settings


@dataclass(frozen=True, slots=True, kw_only=True)
class Field:
    """One setting as a number field: ``scale`` is screen over engine (100 for a fraction in per cent)."""

    name: str
    label: str
    unit: str
    step: float
    digits: int = 0
    scale: float = 1

    @property
    def low(self) -> float:
        """Lowest possible value, engine's unit."""
        return POSSIBLE[self.name][0]

    @property
    def high(self) -> float:
        """Highest possible value, engine's unit."""
        return POSSIBLE[self.name][1]

    def to_screen(self, value: float) -> float:
        """Engine's unit to the screen's."""
        return value * self.scale

    def from_screen(self, shown: float) -> float:
        """The screen's unit to the engine's."""
        return shown / self.scale

    def on_screen(self, value: float | None) -> str:
        """The number alone, as it would be typed; empty where unset."""
        return "" if value is None else f"{round(self.to_screen(value), max(self.digits, 2)):g}"

    def with_unit(self, value: float | None) -> str:
        """The number and its unit; "not charted" where unset."""
        return "not charted" if value is None else f"{self.on_screen(value)}{self.unit_after_number}"

    @property
    def unit_after_number(self) -> str:
        """The unit with the space that belongs before it."""
        return f" {self.unit}" if self.unit else ""

    @property
    def range_text(self) -> str:
        """For example "21 to 100 %"."""
        return f"{self.on_screen(self.low)} to {self.with_unit(self.high)}"


FIELDS: dict[str, Field] = {
    field.name: field
    for field in (
        Field(name="rate_per_min", label="Set rate", unit="/min", step=1),
        Field(name="tidal_volume_ml", label="Tidal volume", unit="mL", step=10),
        Field(
            name="inspiratory_pressure_cmh2o", label="Inspiratory pressure above PEEP", unit="cmH₂O", step=1
        ),
        Field(name="support_pressure_cmh2o", label="Support above PEEP", unit="cmH₂O", step=1),
        Field(name="fio2", label="FiO₂", unit="%", step=5, scale=100),
        Field(name="peep_cmh2o", label="PEEP", unit="cmH₂O", step=1),
        Field(name="inspiratory_time_s", label="Inspiratory time", unit="s", step=0.1, digits=2),
        Field(name="ie_ratio", label="I:E as one number", unit="", step=0.05, digits=2),
        Field(name="apparatus_dead_space_ml", label="Apparatus dead space", unit="mL", step=5),
    )
}
SETTING_LABELS = {name: field.label for name, field in FIELDS.items()} | {
    "mode": "Mode",
    "humidifier": "Humidifier",
    "flow_l_per_min": "Flow",
    "pause_s": "Pause",
    "airway": "Airway",
}
CHOICE_WORDS = {
    "exchanger": "exchanger",
    "heated": "heated",
    "volume": "volume control",
    "pressure": "pressure control",
    "support": "pressure support",
    "other": "other mode",
}
_DRIVEN_BY = {
    "volume": ("tidal_volume_ml",),
    "pressure": ("inspiratory_pressure_cmh2o",),
    "support": ("support_pressure_cmh2o",),
}


def fields_to_try(settings: Settings) -> tuple[Field, ...]:
    """The fields that make sense in the mode in force; the timing field is the one that the mode holds."""
    driven = _DRIVEN_BY.get(settings.mode or "", ("tidal_volume_ml",))
    timing = "ie_ratio" if settings.ie_ratio is not None else "inspiratory_time_s"
    timed = () if settings.mode == "support" else (timing,)
    names = ("rate_per_min", *driven, "fio2", "peep_cmh2o", "apparatus_dead_space_ml", *timed)
    return tuple(FIELDS[name] for name in names)


def field_label(field: Field, tried: Mapping[str, object], charted: Settings) -> str:
    """Label and unit; once another value is tried, the charted one beside it."""
    label = f"{field.label}, {field.unit}" if field.unit else field.label
    if field.name not in tried:
        return label
    return f"**{label}** (charted {field.on_screen(getattr(charted, field.name)) or 'nothing'})"


def setting_text(name: str, value: object) -> str:
    """One setting with its unit, for example "50 %" or "heated"."""
    if name in FIELDS and (value is None or isinstance(value, int | float)):
        return FIELDS[name].with_unit(value)
    if value is None:
        return "not charted"
    return CHOICE_WORDS.get(str(value), str(value))


def change_text(name: str, before: object, after: object) -> str:
    """For example "FiO₂ 60 % → 50 %"."""
    return f"{SETTING_LABELS.get(name, name)} {setting_text(name, before)} → {setting_text(name, after)}"


def settings_text(settings: Settings) -> str:
    """The settings of one moment in one line, in the order of the record."""
    words = [] if settings.mode is None else [CHOICE_WORDS[settings.mode]]
    short = {"rate_per_min": "rate", "tidal_volume_ml": "VT", "peep_cmh2o": "PEEP", "fio2": "FiO₂"}
    short |= {"inspiratory_pressure_cmh2o": "Pinsp", "support_pressure_cmh2o": "support"}
    short |= {"apparatus_dead_space_ml": "apparatus dead space", "humidifier": "humidifier"}
    for name, value in settings.given().items():
        if name in short:
            words.append(f"{short[name]} {setting_text(name, value)}")
    return ", ".join(words)
