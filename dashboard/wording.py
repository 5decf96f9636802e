"""How things are called, counted and coloured on the screen.

The engine speaks in full field names, fractions and mmHg; a person at the bed reads labels, per cent and the unit of
the house. Every label, unit, number of digits and colour is decided here and nowhere else.
"""

from dataclasses import dataclass
from datetime import datetime, timedelta, tzinfo
from typing import Literal

from engine.record import POSSIBLE, Settings
from engine.units import g_per_l_from_g_per_dl, kpa_from_mmhg

SAFETY = (
    "Estimates, not measurements. Local protocol and licensed practice come first. Not for emergencies. "
    "Not a certified medical device."
)
OLD_HOURS = 8  # a last gas older than this is marked as old; design decision, no source

# ---------------------------------------------------------------------------------------------------------- colours

# Text colours keep 4.5:1 and marks 3:1 on both papers (WCAG 2.2, 1.4.3 and 1.4.11); tests compute it.
# Blue, vermillion and bluish green are those of Okabe and Ito 2008, darkened or lightened where text needs it.
PALETTES: dict[str, dict[str, str]] = {
    "light": {
        "paper": "#fbf9f4",
        "wash": "#f3f0e7",
        "ink": "#1e2226",
        "quiet": "#57534a",
        "rule": "#cdc6b6",
        "forecast": "#0067a3",
        "target": "#00704f",
        "breach": "#a84300",
        "breach_mark": "#d55e00",
    },
    "dark": {
        "paper": "#15191c",
        "wash": "#1f2528",
        "ink": "#ece7db",
        "quiet": "#b3ac9e",
        "rule": "#454e53",
        "forecast": "#56b4e9",
        "target": "#3cc79a",
        "breach": "#ff9152",
        "breach_mark": "#e86a10",
    },
}


def colour_variables() -> str:
    """The palette as a style sheet; the browser picks light or dark from the page's own colour scheme."""
    light, dark = PALETTES["light"], PALETTES["dark"]
    lines = (f"--fb-{name.replace('_', '-')}: light-dark({light[name]}, {dark[name]});" for name in light)
    return ".stApp {" + " ".join(lines) + "}"


# ------------------------------------------------------------------------------------------------- units and digits


@dataclass(frozen=True, slots=True)
class Units:
    """What the house reads in: gas tensions in mmHg or kPa, haemoglobin in g/dL or g/L."""

    gas: Literal["mmHg", "kPa"] = "mmHg"
    haemoglobin: Literal["g/dL", "g/L"] = "g/dL"

    def tension(self, value_mmhg: float) -> float:
        """A gas tension on the scale of the house."""
        return value_mmhg if self.gas == "mmHg" else float(kpa_from_mmhg(value_mmhg))

    def tension_text(self, value_mmhg: float | None) -> str:
        """Whole mmHg, or kPa to one decimal; without the unit."""
        if value_mmhg is None:
            return "–"
        return f"{value_mmhg:.0f}" if self.gas == "mmHg" else f"{self.tension(value_mmhg):.1f}"

    def haemoglobin_text(self, value_g_per_dl: float | None) -> str:
        """g/dL to one decimal, or whole g/L; without the unit."""
        if value_g_per_dl is None:
            return "–"
        if self.haemoglobin == "g/dL":
            return f"{value_g_per_dl:.1f}"
        return f"{float(g_per_l_from_g_per_dl(value_g_per_dl)):.0f}"

    def quantity_text(self, quantity: str, value: float | None) -> str:
        """``ph``, ``paco2_mmhg``, ``pao2_mmhg`` or ``sao2`` as a clinician reads it; without the unit."""
        if value is None:
            return "–"
        if quantity == "ph":
            return f"{value:.2f}"
        return percent_text(value) if quantity == "sao2" else self.tension_text(value)

    def quantity_unit(self, quantity: str) -> str:
        """The unit behind `quantity_text`; pH has none."""
        return {"ph": "", "sao2": "%"}.get(quantity, self.gas)


QUANTITY_LABELS = {"ph": "pH", "paco2_mmhg": "PaCO₂", "pao2_mmhg": "PaO₂", "sao2": "SaO₂"}


def percent_text(fraction: float | None) -> str:
    """A fraction as whole per cent; one decimal where the charted value has one."""
    if fraction is None:
        return "–"
    return f"{round(fraction * 100, 1):g}" if abs(fraction * 100 - round(fraction * 100)) > 0.05 else f"{fraction:.0%}"[:-1]


def chance_text(probability: float | None) -> str:
    """A probability as whole per cent; the ends stay open, since a forecast is never certain."""
    if probability is None:
        return "–"
    if probability < 0.01:
        return "under 1 %"
    return "over 99 %" if probability > 0.99 else f"{probability:.0%}".replace("%", " %")


# ------------------------------------------------------------------------------------------------- fields to be tried


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
        Field(name="inspiratory_pressure_cmh2o", label="Inspiratory pressure above PEEP", unit="cmH₂O", step=1),
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


# ------------------------------------------------------------------------------------------------------------ times


def clock_text(time: datetime, now: datetime) -> str:
    """Hours and minutes in the zone of ``now``; with the day where it is another."""
    local = time.astimezone(now.tzinfo)
    return f"{local:%H:%M}" if local.date() == now.date() else f"{local:%d %b %H:%M}"


def age_text(time: datetime, now: datetime) -> str:
    """How long ago, for example "20 min ago" or "3 h 05 min ago"; "in 5 min" where it lies ahead."""
    minutes = round((now - time) / timedelta(minutes=1))
    return f"in {span_text(-minutes)}" if minutes < 0 else f"{span_text(minutes)} ago"


def span_text(minutes: float) -> str:
    """A length of time: minutes up to 90, then hours, then days."""
    whole = round(minutes)
    if whole < 90:
        return f"{whole} min"
    hours, rest = divmod(whole, 60)
    return f"{hours} h {rest:02d} min" if hours < 48 else f"{hours // 24} days"


def clock_after(now: datetime, minutes: float) -> str:
    """The clock time ``minutes`` from ``now``."""
    return clock_text(now + timedelta(minutes=minutes), now)


def zone_text(zone: tzinfo | None, now: datetime) -> str:
    """The name of the zone that the screen's clock times stand in."""
    return getattr(zone, "key", None) or f"UTC{now:%z}".replace("UTC+0000", "UTC")
