"""Textbook numbers of oxygenation: alveolar PO2, A-a difference, ratios, oxygenation index, shunt."""

from engine.checks.moment import Moment, at_37, station_pressure_mmhg
from engine.estimates.row import Estimate, clock, missing
from engine.physics.air import BODY_WATER_VAPOUR_MMHG, STANDARD_BAROMETRIC_MMHG, palvo2_mmhg
from engine.physics.oxygen import o2_content_ml_per_dl, po2_in_blood, shunt_fraction, so2_in_blood
from engine.record import BloodGas

FENN = "Fenn, Rahn & Otis 1946 Am J Physiol 146:637"
ASSUMED_QUOTIENT = 0.8
ASSUMED_AV_DIFFERENCE_ML_PER_DL = 5.0

_METABOLISM_HOURS = 4.0
_VENOUS_MINUTES = 60.0
_OXIMETER_MINUTES = 15.0
_QUOTIENTS = (0.6, 1.3)  # beyond these a measured VCO2 over VO2 is an error of measurement
_SATURATED = 0.97
_AT_1000_M_MMHG = 674.0  # standard air; the Berlin definition corrects above this height


def respiratory_quotient(moment: Moment) -> tuple[float, str]:
    """VCO2 over VO2 where both were measured in the last four hours, else 0.8; and which."""
    vco2, vo2 = (moment.latest(n, _METABOLISM_HOURS) for n in ("vco2_ml_per_min", "vo2_ml_per_min"))
    if vco2 is not None and vo2 is not None and _QUOTIENTS[0] <= vco2[0] / vo2[0] <= _QUOTIENTS[1]:
        return vco2[0] / vo2[0], f"respiratory quotient {vco2[0] / vo2[0]:.2f} measured at {clock(vo2[1])}"
    return ASSUMED_QUOTIENT, f"respiratory quotient {ASSUMED_QUOTIENT} assumed"


def _alveolar(moment: Moment) -> tuple[float, str, str]:
    """Alveolar PO2 (mmHg), its working and what it assumes. FiO2 is in force at every gas."""
    fio2, paco2_mmhg = moment.settings.fio2 or 0.0, at_37(moment.gas).paco2_mmhg
    (pressure_mmhg, whence), (quotient, said) = (
        station_pressure_mmhg(moment.case.site),
        respiratory_quotient(moment),
    )
    value = float(palvo2_mmhg(fio2, pressure_mmhg, paco2_mmhg, quotient))
    working = (
        f"{fio2:g} x ({pressure_mmhg:.0f} - {BODY_WATER_VAPOUR_MMHG:.0f}) - {paco2_mmhg:.4g} x ({fio2:g} "
        f"+ (1 - {fio2:g}) / {quotient:.2f}) = {value:.0f} mmHg"
    )
    assumes = f"barometric pressure {pressure_mmhg:.0f} mmHg, {whence}; {said}; no inspired CO2"
    return value, working, assumes


def alveolar_po2(moment: Moment) -> Estimate:
    """Ideal alveolar PO2, in full."""
    value, working, assumes = _alveolar(moment)
    return Estimate(
        name="palvo2_mmhg",
        value=value,
        unit="mmHg",
        equation="PAO2 = FiO2 (PB - PH2O) - PaCO2 (FiO2 + (1 - FiO2) / R)",
        working=working,
        source=FENN,
        assumes=assumes,
    )


def aa_difference(moment: Moment) -> Estimate:
    """Alveolar less arterial PO2."""
    (alveolar, working, assumes), arterial = _alveolar(moment), at_37(moment.gas).pao2_mmhg
    return Estimate(
        name="aa_difference_mmhg",
        value=alveolar - arterial,
        unit="mmHg",
        equation="A-a difference = PAO2 - PaO2",
        working=f"PAO2 = {working}; {alveolar:.0f} - {arterial:.4g} = {alveolar - arterial:.0f} mmHg",
        source=FENN,
        assumes=f"{assumes}; grows with FiO2 in the same lung",
    )


def aa_ratio(moment: Moment) -> Estimate:
    """Arterial over alveolar PO2."""
    (alveolar, working, assumes), arterial = _alveolar(moment), at_37(moment.gas).pao2_mmhg
    value = arterial / alveolar if alveolar > 0 else None
    return Estimate(
        name="aa_ratio",
        value=value,
        unit="",
        equation="a/A = PaO2 / PAO2",
        working=f"PAO2 = {working}; "
        + (f"{arterial:.4g} / {alveolar:.0f} = {value:.2f}" if value is not None else "not above 0"),
        source="Gilbert & Keighley 1974 Am Rev Respir Dis 109:142 (from memory)",
        assumes=f"{assumes}; steadier across FiO2 than the difference, not constant",
    )


def pf_ratio(moment: Moment) -> Estimate:
    """PaO2 over FiO2."""
    arterial, fio2 = at_37(moment.gas).pao2_mmhg, moment.settings.fio2 or 1.0
    pressure_mmhg, whence = station_pressure_mmhg(moment.case.site)
    high = pressure_mmhg < _AT_1000_M_MMHG
    at_sea_level = arterial / fio2 * pressure_mmhg / STANDARD_BAROMETRIC_MMHG
    corrected = f"; above 1,000 m, times PB / 760: {at_sea_level:.0f} mmHg" if high else ""
    return Estimate(
        name="pf_ratio_mmhg",
        value=arterial / fio2,
        unit="mmHg",
        equation="P/F = PaO2 / FiO2",
        working=f"{arterial:.4g} / {fio2:g} = {arterial / fio2:.0f} mmHg{corrected}",
        source="ARDS Definition Task Force 2012 JAMA 307:2526 (300, 200, 100; PEEP 5 and more)",
        assumes=f"barometric pressure {pressure_mmhg:.0f} mmHg, {whence}; the same lung reads differently "
        "at another FiO2 (class changed in 30 %: Karbing 2007 Crit Care 11:R118)",
    )


def sf_ratio(moment: Moment) -> Estimate:
    """SpO2 (per cent) over FiO2, where the oximeter is not on the flat part of the curve."""
    spo2, fio2 = moment.nearest("spo2", _OXIMETER_MINUTES), moment.settings.fio2 or 1.0
    low = spo2 is not None and spo2[0] <= _SATURATED
    if spo2 is None:
        working = f"no SpO2 within {_OXIMETER_MINUTES:.0f} min of the gas"
    elif not low:
        working = f"not valid here: SpO2 {100 * spo2[0]:.0f} % at {clock(spo2[1])} is above 97 %"
    else:
        working = f"{100 * spo2[0]:.0f} / {fio2:g} = {100 * spo2[0] / fio2:.0f} (SpO2 at {clock(spo2[1])})"
    return Estimate(
        name="sf_ratio",
        value=100 * spo2[0] / fio2 if spo2 is not None and low else None,
        unit="",
        equation="S/F = SpO2 in per cent / FiO2",
        working=working,
        source="Rice 2007 Chest 132:410; Matthay 2024 Am J Respir Crit Care Med 209:37 (315, 235, 148)",
        assumes="SpO2 97 % or less and trusted: no dyshaemoglobin, good signal",
    )


def oxygenation_index(moment: Moment) -> Estimate:
    """FiO2 times mean airway pressure over PaO2, where the mean pressure was read in the last four hours."""
    mean, fio2, arterial = (
        moment.latest("mean_airway_cmh2o"),
        moment.settings.fio2 or 1.0,
        at_37(moment.gas).pao2_mmhg,
    )
    value = None if mean is None else fio2 * 100 * mean[0] / arterial
    return Estimate(
        name="oxygenation_index",
        value=value,
        unit="",
        equation="OI = FiO2 x 100 x mean airway pressure / PaO2",
        working=missing({"mean airway pressure": mean})
        if mean is None
        else f"{fio2:g} x 100 x {mean[0]:g} / {arterial:.4g} = {value:.1f} (mean pressure at "
        f"{clock(mean[1])})",
        source="standard (from memory)",
        assumes="mean airway pressure in cmH2O, of the last four hours",
    )


def shunt(moment: Moment) -> Estimate:
    """Shunt equation, with a measured or an assumed arteriovenous difference; it says which."""
    gas, (ph, paco2_mmhg, pao2_mmhg) = moment.gas, at_37(moment.gas)
    alveolar, _, assumes = _alveolar(moment)
    hb = gas.hb_g_per_dl * (1.0 - (gas.cohb or 0.0) - (gas.methb or 0.0))
    difference, said = _av_difference(moment, hb)
    value: float | None = None
    if pao2_mmhg >= alveolar:
        working = f"not valid here: PaO2 {pao2_mmhg:.4g} mmHg is not below the alveolar {alveolar:.0f}"
    elif difference <= 0:
        working = "not valid here: the venous content is not below the arterial one"
    else:
        capillary, arterial = (
            float(o2_content_ml_per_dl(p, so2_in_blood(p, ph, paco2_mmhg), hb)) for p in (alveolar, pao2_mmhg)
        )
        value = float(shunt_fraction(capillary, arterial, arterial - difference))
        working = (
            f"Cc' {capillary:.2f}, Ca {arterial:.2f}, Cv {arterial - difference:.2f} mL/dL: "
            f"({capillary:.2f} - {arterial:.2f}) / ({capillary:.2f} - {arterial - difference:.2f}) = "
            f"{100 * value:.0f} %"
        )
    return Estimate(
        name="shunt",
        value=value,
        unit="",
        equation="Qs/Qt = (Cc' - Ca) / (Cc' - Cv), C = 1.34 Hb S + 0.0031 P",
        working=working,
        source="Berggren 1942 Acta Physiol Scand 4 (suppl 11); saturation: Severinghaus 1979 J Appl "
        "Physiol 46:599",
        assumes=f"{said}; saturations calculated on both sides; {assumes}; below FiO2 1.0 it counts low "
        "V/Q as shunt",
    )


def _av_difference(moment: Moment, hb_g_per_dl: float) -> tuple[float, str]:
    """Arteriovenous difference (mL/dL): from SvO2, from VO2 and cardiac output, or assumed; and which."""
    svo2 = moment.nearest("svo2", _VENOUS_MINUTES)
    if svo2 is not None and svo2[0] < 1.0:
        found = _content_at(moment.gas, hb_g_per_dl) - _venous_content(moment.gas, svo2[0], hb_g_per_dl)
        return found, f"a-v difference {found:.1f} mL/dL from SvO2 {100 * svo2[0]:.0f} % measured at "
        f"{clock(svo2[1])}"
    vo2, output = moment.latest("vo2_ml_per_min"), moment.latest("cardiac_output_l_per_min")
    if vo2 is not None and output is not None:
        found = vo2[0] / (10 * output[0])
        return found, f"a-v difference {found:.1f} mL/dL from VO2 and cardiac output measured at "
        f"{clock(output[1])}"
    found = ASSUMED_AV_DIFFERENCE_ML_PER_DL
    return found, f"a-v difference {found:g} mL/dL assumed (3.5 would nearly double PaO2 near the knee)"


def _content_at(gas: BloodGas, hb_g_per_dl: float) -> float:
    ph, paco2_mmhg, pao2_mmhg = at_37(gas)
    return float(o2_content_ml_per_dl(pao2_mmhg, so2_in_blood(pao2_mmhg, ph, paco2_mmhg), hb_g_per_dl))


def _venous_content(gas: BloodGas, svo2: float, hb_g_per_dl: float) -> float:
    """Content of mixed venous blood; its tension from the arterial pH and PaCO2, which is near enough."""
    ph, paco2_mmhg, _ = at_37(gas)
    return float(o2_content_ml_per_dl(po2_in_blood(svo2, ph, paco2_mmhg), svo2, hb_g_per_dl))
