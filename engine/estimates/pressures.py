"""Textbook numbers of the chest: driving pressure, compliance, mechanical power.

All of a passive patient at the PEEP at which the plateau was read; else "not valid here" with the reason.
"""

from engine.checks.moment import Moment, breaths_per_min
from engine.checks.row import at
from engine.estimates.chest import Mechanics, breathes, mechanics_of
from engine.estimates.row import Estimate, missing
from engine.physics.mechanics import power_pressure_control_j_per_min, power_volume_control_j_per_min

_STANDARD = "standard (from memory); limit 15: Amato 2015 N Engl J Med 372:747"
_POWER = "Gattinoni 2016 Intensive Care Med 42:1567; pressure control: Becher 2019 Intensive Care Med "
"45:1321"


def _chest(moment: Moment) -> Mechanics:
    """The chest as charted up to this entry."""
    return mechanics_of(moment.case.before(moment.number + 1))


def _refused(moment: Moment, chest: Mechanics) -> str:
    """Why pressures of this moment would mean nothing; empty where they mean what they say."""
    if chest.plateau_cmh2o is None:
        return chest.why
    why = breathes(moment) or chest.why
    if why:
        return f"not valid here: {why}"
    if chest.peep_cmh2o is None or chest.tidal_volume_ml is None:
        return missing({"PEEP": chest.peep_cmh2o, "tidal volume": chest.tidal_volume_ml})
    if chest.set_peep_cmh2o != moment.settings.peep_cmh2o:
        return (
            f"not valid here: the plateau was read at PEEP {chest.set_peep_cmh2o:g} cmH2O, PEEP is "
            f"{moment.settings.peep_cmh2o:g} now"
        )
    if chest.driving_pressure_cmh2o is None:
        return f"not valid here: plateau {chest.plateau_cmh2o:g} cmH2O is not above PEEP "
        f"{chest.peep_cmh2o:g}"
    return ""


def _read_at(chest: Mechanics) -> str:
    if chest.measured_at is None:
        return "passive patient"
    return (
        f"passive patient; plateau, PEEP and volume of {at(chest.measured_at)} "
        f"({chest.tidal_volume_ml or 0:g} mL); chest wall included"
    )


def driving_pressure(moment: Moment) -> Estimate:
    """Plateau less total PEEP."""
    chest = _chest(moment)
    why, value = _refused(moment, chest), chest.driving_pressure_cmh2o
    return Estimate(
        name="driving_pressure_cmh2o",
        value=None if why else value,
        unit="cmH2O",
        equation="driving pressure = plateau - total PEEP",
        working=why or f"{chest.plateau_cmh2o:g} - {chest.peep_cmh2o:g} = {value:g} cmH2O",
        source=_STANDARD,
        assumes=_read_at(chest),
    )


def compliance(moment: Moment) -> Estimate:
    """Tidal volume over driving pressure."""
    chest = _chest(moment)
    why, value = _refused(moment, chest), chest.compliance_ml_per_cmh2o
    return Estimate(
        name="compliance_ml_per_cmh2o",
        value=None if why else value,
        unit="mL/cmH2O",
        equation="compliance = VT / (plateau - total PEEP)",
        working=why
        or f"{chest.tidal_volume_ml:g} / ({chest.plateau_cmh2o:g} - {chest.peep_cmh2o:g}) = {value:.0f} "
        "mL/cmH2O",
        source="standard (from memory)",
        assumes=_read_at(chest),
    )


def mechanical_power(moment: Moment) -> Estimate:
    """Mechanical power of the breath the plateau was read on, at the rate now."""
    chest, rate = _chest(moment), breaths_per_min(moment)
    why = _refused(moment, chest)
    needs_peak = chest.mode == "volume"
    if not why and (rate is None or (needs_peak and chest.peak_cmh2o is None)):
        why = missing({"rate": rate, "peak pressure": chest.peak_cmh2o if needs_peak else 0})
    value, working = (None, why) if why or rate is None else _power(chest, rate[0])
    return Estimate(
        name="mechanical_power_j_per_min",
        value=value,
        unit="J/min",
        equation="0.098 x rate x VT x (peak - driving pressure / 2); in pressure control 0.098 x rate x "
        "VT x (PEEP + pressure above PEEP)",
        working=working,
        source=_POWER,
        assumes=f"{_read_at(chest)}; constant flow in volume control, a square wave in pressure control",
    )


def _power(chest: Mechanics, rate_per_min: float) -> tuple[float, str]:
    volume_ml, driving, peep = (
        chest.tidal_volume_ml or 0.0,
        chest.driving_pressure_cmh2o or 0.0,
        chest.peep_cmh2o or 0.0,
    )
    litres = f"0.098 x {rate_per_min:g} x {volume_ml / 1000:.3f}"
    if chest.mode == "volume" and chest.peak_cmh2o is not None:
        value = float(power_volume_control_j_per_min(rate_per_min, volume_ml, chest.peak_cmh2o, driving))
        return value, f"{litres} x ({chest.peak_cmh2o:g} - {driving:g} / 2) = {value:.1f} J/min"
    value = float(power_pressure_control_j_per_min(rate_per_min, volume_ml, peep, driving))
    return value, f"{litres} x ({peep:g} + {driving:g}) = {value:.1f} J/min"
