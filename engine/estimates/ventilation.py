"""Textbook numbers of ventilation: minute ventilation, volume per kg, ventilatory ratio, dead space."""

from engine.checks.breathing import weight_for_volume_kg
from engine.checks.moment import Moment, at_37, breaths_per_min, tidal_volume_ml
from engine.estimates.row import Estimate, clock, missing
from engine.physics.carbon_dioxide import CO2_CONSTANT, enghoff_dead_space, paco2_from_ventilation_mmhg

ASSUMED_VCO2_ML_PER_MIN = 220.0
"""CO2 output of a ventilated adult, SD 50 (from measured energy use: Stapel 2015 Crit Care 19:370)."""

ARDS_NETWORK = "ARDS Network 2000 N Engl J Med 342:1301"
_METABOLISM_HOURS = 4.0
_LEAST_L_PER_MIN = 0.1  # less is a disconnected patient


def _minute_l(moment: Moment) -> tuple[float, str] | None:
    """Minute ventilation and where it comes from: measured in this entry, else rate times volume."""
    measured, volume, rate = (
        moment.measured("minute_volume_l_per_min"),
        tidal_volume_ml(moment),
        breaths_per_min(moment),
    )
    if measured is not None and measured >= _LEAST_L_PER_MIN:
        return measured, f"{measured:g} L/min measured"
    if volume is None or rate is None:
        return None
    product = volume[0] * rate[0] / 1000
    working = f"{rate[0]:g}/min ({rate[1]}) x {volume[0]:g} mL ({volume[1]}) / 1000 = {product:.1f} L/min"
    return product, working


def minute_ventilation(moment: Moment) -> Estimate:
    """Rate times tidal volume, or the measured minute volume."""
    minute = _minute_l(moment)
    return Estimate(
        name="minute_ventilation_l_per_min",
        value=minute[0] if minute else None,
        unit="L/min",
        equation="VE = rate x VT",
        working=minute[1] if minute else "not charted: rate or tidal volume",
        source="arithmetic",
        assumes="set values reach the patient where nothing was measured",
    )


def predicted_body_weight(moment: Moment) -> Estimate:
    """Predicted body weight."""
    patient, weight_kg = moment.case.patient, weight_for_volume_kg(moment.case.patient)
    base = "50" if patient.sex == "male" else "45.5"
    return Estimate(
        name="predicted_body_weight_kg",
        value=weight_kg,
        unit="kg",
        equation="PBW = 50 (men) or 45.5 (women) + 2.3 (height in inches - 60)",
        working=missing({"sex": patient.sex, "height": patient.height_cm})
        if weight_kg is None
        else f"{base} + 2.3 x ({patient.height_cm:g} / 2.54 - 60) = {weight_kg:.1f} kg",
        source=ARDS_NETWORK,
        assumes="height and sex as charted; below 140 cm it was not tried",
    )


def volume_per_weight(moment: Moment) -> Estimate:
    """Tidal volume per kg of predicted body weight."""
    volume, weight_kg = tidal_volume_ml(moment), weight_for_volume_kg(moment.case.patient)
    known = volume is not None and weight_kg is not None
    value = volume[0] / weight_kg if volume is not None and weight_kg is not None else None
    return Estimate(
        name="tidal_volume_ml_per_kg",
        value=value,
        unit="mL/kg",
        equation="VT / PBW",
        working=f"{volume[0]:g} ({volume[1]}) / {weight_kg:.1f} = {value:.1f} mL/kg"
        if known and volume is not None
        else missing({"tidal volume": volume, "sex and height": weight_kg}),
        source=ARDS_NETWORK,
        assumes="predicted, not actual, body weight",
    )


def ventilatory_ratio(moment: Moment) -> Estimate:
    """Minute ventilation and PaCO2 over what a healthy adult of this size would need."""
    minute, weight_kg, paco2 = (
        _minute_l(moment),
        weight_for_volume_kg(moment.case.patient),
        at_37(moment.gas).paco2_mmhg,
    )
    value, working = None, missing({"rate or tidal volume": minute, "sex and height": weight_kg})
    if minute is not None and weight_kg is not None:
        value = minute[0] * 1000 * paco2 / (weight_kg * 100 * 37.5)
        working = (
            f"{minute[0] * 1000:.0f} mL/min x {paco2:.4g} / ({weight_kg:.1f} x 100 x 37.5) = {value:.2f}"
        )
    return Estimate(
        name="ventilatory_ratio",
        value=value,
        unit="",
        equation="VR = VE x PaCO2 / (PBW x 100 mL/min x 37.5 mmHg)",
        working=working,
        source="Sinha 2009 Br J Anaesth 102:692",
        assumes="mixes dead space and CO2 output; 1 is ideal, survivors 1.32, non-survivors 1.55 (Sinha "
        "2013 Respir Care 58:1025)",
    )


def dead_space(moment: Moment) -> Estimate:
    """Enghoff dead space over tidal volume, from a measured or assumed CO2 output; it says which."""
    minute, paco2 = _minute_l(moment), at_37(moment.gas).paco2_mmhg
    measured = moment.latest("vco2_ml_per_min", _METABOLISM_HOURS)
    vco2 = measured[0] if measured else ASSUMED_VCO2_ML_PER_MIN
    said = (
        f"CO2 output measured at {clock(measured[1])}"
        if measured
        else f"CO2 output {vco2:g} mL/min assumed (SD 50): a wide guess"
    )
    value, working = None, missing({"rate or tidal volume": minute})
    if minute is not None:
        expired = float(paco2_from_ventilation_mmhg(vco2, minute[0]))
        value = float(enghoff_dead_space(paco2, expired))
        working = (
            f"PECO2 = {CO2_CONSTANT:.3f} x {vco2:g} / {minute[0]:.1f} = {expired:.1f} mmHg; ({paco2:.4g} "
            f"- {expired:.1f}) / {paco2:.4g} = {value:.2f}"
        )
        if value < 0:
            value, working = None, f"not valid here: {working}; this CO2 output does not go with this "
            "ventilation"
    return Estimate(
        name="dead_space",
        value=value,
        unit="",
        equation="VD/VT = (PaCO2 - PECO2) / PaCO2, PECO2 = 0.863 VCO2 / VE",
        working=working,
        source="Enghoff 1938; from a CO2 output: Siddiki 2010 Crit Care 14:R141",
        assumes=f"{said}; steady state; counts shunt and the apparatus as dead space",
    )
