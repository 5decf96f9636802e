"""Numbers as a clinician reads them, in the units of the house."""

import re
from dataclasses import dataclass
from typing import Literal

from engine.units import g_per_l_from_g_per_dl, kpa_from_mmhg


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
        return f"{value * 100:.0f}" if quantity == "sao2" else self.tension_text(value)

    def quantity_unit(self, quantity: str) -> str:
        """The unit behind `quantity_text`; pH has none."""
        return {"ph": "", "sao2": "%"}.get(quantity, self.gas)

    def limit_text(self, value: float, unit: str, name: str) -> str:
        """A value of a limit row with its unit, rounded as its kind is read."""
        if name == "fio2":
            return f"{percent_text(value)} %"
        if unit == "mmHg":
            return f"{self.tension_text(value)} {self.gas}"
        digits = _LIMIT_DIGITS.get(unit, 1)
        text = f"{value:.{digits}f}"
        if unit:
            text = re.sub(r"\.0+$", "", text)
        return f"{text} {unit.replace('cmH2O', 'cmH₂O')}".rstrip()


_LIMIT_DIGITS = {"": 2, "J/min": 0}
LIMIT_LABELS = {
    "tidal_volume": "Tidal volume",
    "plateau": "Plateau",
    "driving_pressure": "Driving pressure",
    "set_rate": "Set rate",
    "expiratory_time": "Expiratory time",
    "fio2": "FiO₂",
    "peep": "PEEP",
    "mechanical_power": "Power",
    "ph_floor": "Low pH",
    "ph_warning": "Low pH, early",
    "ph_ceiling": "High pH",
    "pao2_floor": "Low PaO₂",
    "pao2_ceiling": "High PaO₂",
    "paco2_brain": "PaCO₂ for the brain",
    "pao2_brain": "PaO₂ for the brain",
    "paco2_right_heart": "PaCO₂ for the right heart",
    "paco2_pregnancy": "PaCO₂ in pregnancy",
}
QUANTITY_LABELS = {"ph": "pH", "paco2_mmhg": "PaCO₂", "pao2_mmhg": "PaO₂", "sao2": "SaO₂"}


def percent_text(fraction: float | None) -> str:
    """A fraction as whole per cent; one decimal where the charted value has one."""
    if fraction is None:
        return "–"
    return (
        f"{round(fraction * 100, 1):g}"
        if abs(fraction * 100 - round(fraction * 100)) > 0.05
        else f"{fraction:.0%}"[:-1]
    )


def chance_text(probability: float | None) -> str:
    """A probability as whole per cent; the ends stay open, since a forecast is never certain."""
    if probability is None:
        return "–"
    if probability < 0.01:
        return "under 1 %"
    return "over 99 %" if probability > 0.99 else f"{probability:.0%}".replace("%", " %")
