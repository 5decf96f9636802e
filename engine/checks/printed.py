"""Checks of pH, PaCO2 and PaO2 as they were typed: do they go together, and are they in these units?"""

from datetime import datetime, timedelta

from engine.checks.moment import (
    Moment,
    base_excess_mmol_per_l,
    bicarbonate_mmol_per_l,
    station_pressure_mmhg,
)
from engine.checks.row import PRACTICE, Check, at, unless
from engine.physics.acid_base import hco3_mmol_per_l
from engine.physics.air import palvo2_mmhg
from engine.record import BloodGas
from engine.units import mmhg_from_kpa

C46 = "bicarbonate by CLSI C46 (0.0307, pK 6.105)"

_HCO3_SHARE, _HCO3_LEAST = 0.10, 2.0  # constants in print differ by 4.5 %; printed digits add 2 to 3 %
_HCO3_RANGE = (4.0, 55.0)  # mmol/L
_BASE_EXCESS_STEP, _STEP_HOURS = 10.0, 6.0  # mmol/L
_LIKE_A_PH = (6.8, 7.8)
_PACO2_NEVER_BELOW, _PAO2_NEVER_BELOW = 10.0, 20.0  # mmHg; lower on a ventilator is a slip
_KPA_PACO2_UP_TO = 16.0  # kPa; 120 mmHg
_PAO2_SCATTER = 1.10  # twice the CV of PaO2 within a stable patient


def bicarbonate_printed(moment: Moment) -> Check | None:
    """The printed bicarbonate must follow from the printed pH and PaCO2."""
    gas = moment.gas
    if gas.hco3_mmol_per_l is None:
        return None
    computed = bicarbonate_mmol_per_l(gas)
    margin = max(_HCO3_LEAST, _HCO3_SHARE * computed)
    ok = abs(gas.hco3_mmol_per_l - computed) <= margin
    return Check(
        name="Bicarbonate against pH and PaCO2",
        value=gas.hco3_mmol_per_l,
        limit=f"{computed - margin:.1f} to {computed + margin:.1f} mmol/L",
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: bicarbonate {gas.hco3_mmol_per_l:g} mmol/L is charted; "
        f"pH {gas.ph:.2f} and PaCO2 {gas.paco2_mmhg:g} mmHg give {computed:.1f}"
        + unless(
            ok, ". One of the three does not belong here: compare with the printout.", ", which agrees."
        ),
        source=f"{C46}; constants in print differ by 4.5 %",
    )


def bicarbonate_computed(moment: Moment) -> Check | None:
    """pH and PaCO2 that together ask for a bicarbonate hardly ever seen."""
    gas = moment.gas
    computed, (low, high) = bicarbonate_mmol_per_l(gas), _HCO3_RANGE
    ok = low <= computed <= high
    return Check(
        name="pH and PaCO2 go together",
        value=round(computed, 1),
        limit=f"{low:g} to {high:g} mmol/L",
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: pH {gas.ph:.2f} and PaCO2 {gas.paco2_mmhg:g} mmHg mean "
        "a bicarbonate "
        f"of {computed:.1f} mmol/L" + unless(ok, ", hardly ever seen: compare both with the printout."),
        source=f"{C46}; range: {PRACTICE}",
    )


def base_excess_step(moment: Moment) -> Check | None:
    """Base excess moves slowly unless something was given; a leap is a typing slip until shown otherwise."""
    if not moment.usable:
        return None
    earlier = _gas_before(moment)
    if earlier is None or moment.entry.gas_time - earlier[1] > timedelta(hours=_STEP_HOURS):
        return None
    now, then = base_excess_mmol_per_l(moment.gas), base_excess_mmol_per_l(earlier[0])
    ok = abs(now - then) <= _BASE_EXCESS_STEP
    return Check(
        name="Base excess against the gas before",
        value=round(now - then, 1),
        limit=_BASE_EXCESS_STEP,
        ok=ok,
        says=f"Standard base excess {now:+.0f} mmol/L at {at(moment.entry.gas_time)} after {then:+.0f} at "
        f"{at(earlier[1])}"
        + unless(
            ok,
            ": a leap that buffer, dialysis or shock can make, and so can a slip in pH or PaCO2. Compare "
            "with the printout.",
        ),
        source=PRACTICE,
    )


def in_their_places(moment: Moment) -> Check | None:
    """pH and PaCO2 swapped: a pH and a PaCO2 in kPa are both near 7."""
    gas = moment.gas
    ok = not _LIKE_A_PH[0] <= gas.paco2_mmhg <= _LIKE_A_PH[1]
    other_ph, other_paco2_kpa = gas.paco2_mmhg, gas.ph
    computed = float(hco3_mmol_per_l(other_ph, mmhg_from_kpa(other_paco2_kpa)))
    return Check(
        name="pH and PaCO2 in their places",
        value=gas.paco2_mmhg,
        limit="PaCO2 not within 6.8 to 7.8 mmHg",
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: pH {gas.ph:g}, PaCO2 {gas.paco2_mmhg:g} mmHg"
        + unless(
            ok,
            f". Is this a PaCO2 in kPa, or are the two swapped (pH {other_ph:g} with PaCO2 "
            f"{other_paco2_kpa:g} kPa would mean a bicarbonate of {computed:.0f} mmol/L)? Compare with the "
            "printout.",
        ),
        source=PRACTICE,
    )


def in_mmhg(moment: Moment) -> Check | None:
    """Tensions that make sense as kPa: both together, or one so low that nothing else explains it.

    Read as kPa, the two must still obey the alveolar gas equation at the FiO2 of the sample.
    """
    gas, fio2 = moment.gas, moment.settings.fio2
    paco2_mmhg, pao2_mmhg = float(mmhg_from_kpa(gas.paco2_mmhg)), float(mmhg_from_kpa(gas.pao2_mmhg))
    barometric_mmhg, _ = station_pressure_mmhg(moment.case.site)
    highest = _PAO2_SCATTER * float(palvo2_mmhg(fio2 or 1.0, barometric_mmhg, paco2_mmhg))
    both = gas.paco2_mmhg <= _KPA_PACO2_UP_TO and pao2_mmhg <= highest
    ok = not (both or gas.paco2_mmhg < _PACO2_NEVER_BELOW or gas.pao2_mmhg < _PAO2_NEVER_BELOW)
    return Check(
        name="Tensions in mmHg, not kPa",
        value=f"PaCO2 {gas.paco2_mmhg:g}, PaO2 {gas.pao2_mmhg:g}",
        limit=f"PaCO2 above {_KPA_PACO2_UP_TO:g} mmHg, or a PaO2 that could not be kPa",
        ok=ok,
        says=f"Gas of {at(moment.entry.gas_time)}: PaCO2 {gas.paco2_mmhg:g} mmHg and PaO2 "
        f"{gas.pao2_mmhg:g} mmHg"
        + unless(
            ok,
            f". Were they printed in kPa? They would be {paco2_mmhg:.0f} and {pao2_mmhg:.0f} mmHg. "
            "Compare with the printout.",
        ),
        source=f"{PRACTICE}; highest PaO2 at an FiO2: Fenn 1946 Am J Physiol 146:637",
    )


def _gas_before(moment: Moment) -> tuple[BloodGas, datetime] | None:
    """The usable gas before this one, and when it was drawn."""
    numbers = [n for n in moment.case.usable_gases() if n < moment.number]
    if not numbers:
        return None
    entry = moment.case.entries[numbers[-1]]
    return (entry.gas, entry.gas_time) if entry.gas is not None else None
