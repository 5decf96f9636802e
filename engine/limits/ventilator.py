"""Limits on what the ventilator is told: volume, rate, FiO2, PEEP."""

from engine.limits.row import Limit, inside, middle, share_inside
from engine.limits.tried import Tried

_NETWORK = "ARDS Network 2000 N Engl J Med 342:1301"
VOLUME_ML_PER_KG = (4.0, 8.0)
RATE_PER_MIN = (6.0, 35.0)
FIO2_SOFT = 0.6
PEEP_CMH2O = (5.0, 24.0)


def tidal_volume(tried: Tried) -> Limit:
    """4 to 8 mL per kg of predicted body weight: the set volume in volume control, else the effective one."""
    (low, high), volume, weight_kg = VOLUME_ML_PER_KG, tried.volume_ml, tried.weight_kg
    ml = middle(volume)
    value = None if ml is None or weight_kg is None else ml / weight_kg
    effective = tried.effective_tidal_volume_ml
    return Limit(
        name="tidal_volume",
        level="hard",
        value=value,
        limit=f"{low:g} to {high:g} mL/kg",
        unit="mL/kg",
        ok=inside(value, low, high),
        probability=None
        if effective is None or weight_kg is None
        else share_inside(effective / weight_kg, low, high),
        says=_volume_says(ml, value, weight_kg),
        source=f"{_NETWORK}; ATS/ESICM/SCCM 2017 Am J Respir Crit Care Med 195:1253",
    )


def _volume_says(ml: float | None, value: float | None, weight_kg: float | None) -> str:
    if ml is None:
        return "The tidal volume is not known."
    if value is None:
        return f"{ml:.0f} mL cannot be judged: predicted body weight needs sex and height."
    return f"{ml:.0f} mL on a predicted body weight of {weight_kg:.1f} kg."


def set_rate(tried: Tried) -> Limit:
    """6 to 35 a minute; in support only the upper end binds, since the set rate is a backup there."""
    (low, high), rate = RATE_PER_MIN, tried.settings.rate_per_min
    backup = tried.settings.mode == "support"
    return Limit(
        name="set_rate",
        level="hard",
        value=rate,
        limit=high if backup else f"{low:g} to {high:g} /min",
        unit="/min",
        ok=inside(rate, 0.0 if backup else low, high),
        probability=None,
        says="The set rate is not known."
        if rate is None
        else "Backup rate; the patient breathes at their own."
        if backup
        else "Above 30 /min some 4 cmH2O of intrinsic PEEP were measured in ARDS (Richard 2003 Intensive "
        "Care Med 29:1078).",
        source=f"{_NETWORK}, protocol card",
    )


def fio2(tried: Tried) -> Limit:
    """Above 0.6 oxygen itself may harm with time, and takes gas-filled units away."""
    value = tried.settings.fio2
    return Limit(
        name="fio2",
        level="soft",
        value=value,
        limit=FIO2_SOFT,
        unit="",
        ok=inside(value, high=FIO2_SOFT),
        probability=None,
        says="Prolonged exposure above it and absorption collapse at low PEEP are the worry; the human "
        "evidence is weak, and hypoxaemia is worse.",
        source="practice threshold: Hochberg 2021 Am J Respir Crit Care Med 204:632 (from memory); "
        "collapse: Aboab 2006 Intensive Care Med 32:1979",
    )


def peep(tried: Tried) -> Limit:
    """5 to 24 cmH2O, the span of the published PEEP and FiO2 tables."""
    (low, high), value = PEEP_CMH2O, tried.settings.peep_cmh2o
    return Limit(
        name="peep",
        level="soft",
        value=value,
        limit=f"{low:g} to {high:g} cmH2O",
        unit="cmH2O",
        ok=inside(value, low, high),
        probability=None,
        says="The set PEEP is not known."
        if value is None
        else "Span of the published PEEP and FiO2 tables. Higher PEEP can cost venous return and burden "
        "the right heart.",
        source=f"{_NETWORK}, protocol card; burden: textbook (from memory)",
    )
