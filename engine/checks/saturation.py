"""Checks of saturation: the gas against the curve, the oximeter against the gas, lone readings."""

from datetime import datetime, timedelta
from typing import NamedTuple

from engine.checks.moment import Moment, at_37
from engine.checks.row import PRACTICE, Check, at, percent, unless
from engine.physics.oxygen import so2_in_blood
from engine.record import Measured

_PAO2_SCATTER = 0.10  # twice the CV of PaO2 within a stable patient, Thorson 1983
_CURVE_SPREAD = 0.03  # curves of patients differ: DPG, fetal or variant haemoglobin; common practice
_SPO2_GAP = 0.06  # one and a half times the 4 % asked of oximeters
_BESIDE_MINUTES = 15.0
_SLIP, _NEIGHBOURS_AGREE, _FALL = 0.10, 0.05, 0.15
_SLIP_HOURS = 1.0
_ROUNDING = 1e-9  # 0.97 - 0.87 is a tenth


class _Reading(NamedTuple):
    spo2: float
    time: datetime


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
    """An SpO2 far from the readings before and after it, which agree; or a last one far below those before.

    Two readings on either side count, since a slip seldom comes alone. Speaks only when it doubts: a chart
    holds too many readings for a row each.
    """
    here, before, after = moment.measured("spo2"), _readings(moment, -1), _readings(moment, +1)
    if here is None or not before:
        return None
    if after:
        doubt = _stands_alone(here, before, after, highest=True) or _stands_alone(
            here, before, after, highest=False
        )
    else:
        doubt = _falls(here, before)
    if not doubt:
        return None
    return Check(
        name="SpO2 that stands alone",
        value=here,
        limit=f"within {percent(_SLIP)} of its neighbours",
        ok=False if after else None,
        says=f"SpO2 {percent(here)} at {at(moment.time)} {doubt}",
        source=PRACTICE,
    )


def _stands_alone(here: float, before: list[_Reading], after: list[_Reading], *, highest: bool) -> str:
    """Held against the highest (or lowest) of either side; empty where it fits or the sides disagree."""
    first, last = (max(side) if highest else min(side) for side in (before, after))
    away = min(first.spo2 - here, last.spo2 - here) if highest else min(here - first.spo2, here - last.spo2)
    if away < _SLIP - _ROUNDING or abs(last.spo2 - first.spo2) > _NEIGHBOURS_AGREE + _ROUNDING:
        return ""
    return (
        f"stands alone between {percent(first.spo2)} at {first.time:%H:%M} and {percent(last.spo2)} at "
        f"{last.time:%H:%M}: a slip of the chart or the probe, or a short swing. Was the patient seen?"
    )


def _falls(here: float, before: list[_Reading]) -> str:
    """A last reading far below those just before it; empty where it is not."""
    best = max(before)
    if best.spo2 - here < _FALL - _ROUNDING:
        return ""
    return (
        f"after {percent(best.spo2)} at {best.time:%H:%M}: real until shown otherwise. Look at the patient, "
        "then at the probe."
    )


def _readings(moment: Moment, direction: int) -> list[_Reading]:
    """The next two SpO2 readings before (-1) or after (+1) this entry, within an hour of it."""
    entries = moment.case.entries
    side = reversed(entries[: moment.number]) if direction < 0 else entries[moment.number + 1 :]
    near = [e for e in side if abs(e.time - moment.time) <= timedelta(hours=_SLIP_HOURS)]
    return [_Reading(s, e.time) for e in near if (s := (e.measured or Measured()).spo2) is not None][:2]
