"""Checks of saturation: the gas against the curve, the oximeter against the gas, lone readings."""

from datetime import timedelta

from engine.checks.moment import Moment, at_37
from engine.checks.row import PRACTICE, Check, at, percent, unless
from engine.physics.oxygen import so2_in_blood
from engine.record import Measured

_PAO2_SCATTER = 0.10  # twice the CV of PaO2 within a stable patient, Thorson 1983
_CURVE_SPREAD = 0.03  # curves of patients differ: DPG, fetal or variant haemoglobin; common practice
_SPO2_GAP = 0.06  # one and a half times the 4 % asked of oximeters
_BESIDE_MINUTES = 15.0
_SLIP, _NEIGHBOURS_AGREE, _JUMP = 0.10, 0.05, 0.15
_SLIP_HOURS, _JUMP_MINUTES = 2.0, 30.0


def saturation_on_the_curve(moment: Moment) -> Check | None:
    """Measured SaO2 against what PaO2, pH and PaCO2 give."""
    gas, (ph, paco2_mmhg, pao2_mmhg) = moment.gas, at_37(moment.gas)
    if gas.sao2 is None:
        return None
    low, middle, high = (
        float(so2_in_blood(pao2_mmhg * factor, ph, paco2_mmhg))
        for factor in (1 - _PAO2_SCATTER, 1.0, 1 + _PAO2_SCATTER)
    )
    low, high = low - _CURVE_SPREAD, min(1.0, high + _CURVE_SPREAD)
    ok = low <= gas.sao2 <= high
    return Check(
        name="SaO2 against the curve",
        value=gas.sao2,
        limit=f"{percent(low)} to {percent(high)}",
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: SaO2 {percent(gas.sao2)} measured; PaO2 "
        f"{gas.pao2_mmhg:g} mmHg at this pH gives {percent(middle)}"
        + unless(
            ok,
            ". Possible: carboxy- or methaemoglobin (an oxyhaemoglobin share entered as SaO2), a temperature "
            "far from 37 C, a venous or aerated sample.",
            fine=", which agrees.",
        ),
        source="Severinghaus 1979 J Appl Physiol 46:599; scatter of PaO2: Thorson 1983 Chest 84:14; "
        f"spread of curves: {PRACTICE}",
    )


def oximeter_against_gas(moment: Moment) -> Check | None:
    """SpO2 beside the measured SaO2 of the same quarter of an hour."""
    gas, spo2 = moment.gas, moment.nearest("spo2", _BESIDE_MINUTES)
    if gas.sao2 is None or spo2 is None or gas.specimen != "arterial":
        return None
    gap = spo2[0] - gas.sao2
    ok = abs(gap) <= _SPO2_GAP
    return Check(
        name="SpO2 against SaO2",
        value=round(gap, 3),
        limit=_SPO2_GAP,
        ok=ok,
        says=f"SpO2 {percent(spo2[0])} at {at(spo2[1])}, SaO2 {percent(gas.sao2)} in the gas of "
        f"{moment.entry.gas_time:%H:%M}"
        + unless(
            ok,
            ": too far apart for one patient at one time. Look at the probe, perfusion, dyshaemoglobins "
            "and the sample; dark skin can hide hypoxaemia from an oximeter.",
        ),
        source="SpO2 within 4 %: ISO 80601-2-61 (from memory); Sjoding 2020 N Engl J Med 383:2477",
    )


def oximeter_slip(moment: Moment) -> Check | None:
    """An SpO2 that stands alone between two that agree, or a last one far from the one just before.

    Speaks only when it doubts: a chart holds too many readings for a row each.
    """
    here = moment.measured("spo2")
    if here is None:
        return None
    others = [(e.time, s) for e in moment.case.entries if (s := (e.measured or Measured()).spo2) is not None]
    place = next(n for n, (time, _) in enumerate(others) if time == moment.time)
    before = others[place - 1] if place else None
    after = others[place + 1] if place + 1 < len(others) else None
    if before is None:
        return None
    if after is not None:
        near = after[0] - before[0] <= timedelta(hours=_SLIP_HOURS)
        agree = abs(after[1] - before[1]) <= _NEIGHBOURS_AGREE
        if not (near and agree and min(abs(here - before[1]), abs(here - after[1])) >= _SLIP):
            return None
        ok: bool | None = False
        says = (
            f"stands alone between {percent(before[1])} at {before[0]:%H:%M} and {percent(after[1])} at "
            f"{after[0]:%H:%M}: a slip of the chart or the probe, or a short swing. Was the patient seen?"
        )
    else:
        if moment.time - before[0] > timedelta(minutes=_JUMP_MINUTES) or abs(here - before[1]) < _JUMP:
            return None
        ok = None
        says = (
            f"after {percent(before[1])} at {before[0]:%H:%M}: real until shown otherwise. Look at the "
            "patient, then at the probe."
        )
    return Check(
        name="SpO2 that stands alone",
        value=here,
        limit=f"within {percent(_SLIP)} of its neighbours",
        ok=ok,
        says=f"SpO2 {percent(here)} at {at(moment.time)} {says}",
        source=PRACTICE,
    )
