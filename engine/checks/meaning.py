"""Checks of what the last gas means: the pH at which other PaCO2s would come out."""

from datetime import datetime
from typing import NamedTuple

from engine.checks.moment import at_37, base_excess_mmol_per_l
from engine.checks.row import PRACTICE, Check, at, unless
from engine.physics.acid_base import ph_at_standard_base_excess
from engine.record import BloodGas, Case

METABOLIC_MMOL_PER_L = -10.0
"""Standard base excess below which the ventilation carries the pH."""

_CONSTANT = (
    "CLSI C46 at constant standard base excess; held in acute CO2 changes: Anesthesiology 2024 140:116"
)
_ALKALAEMIA = 7.45
_LEFT_BY_DAYS = 6.0  # mmol/L of standard base excess that hypercapnia leaves only after days
_HYPERCAPNIA_MMHG = 45.0
_WORTH_A_WORD_MMHG = 2.0


class _Last(NamedTuple):
    """The last usable gas, with what is computed from it at 37 C."""

    time: datetime
    gas: BloodGas
    paco2_mmhg: float
    excess: float

    def ph_at(self, paco2_mmhg: float) -> float:
        return float(ph_at_standard_base_excess(paco2_mmhg, self.excess))

    def means(self, *paco2s_mmhg: float) -> str:
        return ", ".join(f"{p:g} mmHg would mean pH about {self.ph_at(p):.2f}" for p in paco2s_mmhg)


def _last(case: Case) -> _Last | None:
    numbers = case.usable_gases()
    entry = case.entries[numbers[-1]] if numbers else None
    if entry is None or entry.gas is None:
        return None
    return _Last(entry.gas_time, entry.gas, at_37(entry.gas).paco2_mmhg, base_excess_mmol_per_l(entry.gas))


def target_agrees(case: Case) -> Check | None:
    """A PaCO2 target and a pH target that the base excess of the last gas cannot bring together."""
    last, target = _last(case), case.target
    if last is None or target is None:
        return None
    (ph_low, ph_high), (low_mmhg, high_mmhg) = target.range_of("ph"), target.range_of("paco2_mmhg")
    if (ph_low is None and ph_high is None) or (low_mmhg is None and high_mmhg is None):
        return None
    too_acid = ph_low is not None and low_mmhg is not None and last.ph_at(low_mmhg) < ph_low
    too_alkaline = ph_high is not None and high_mmhg is not None and last.ph_at(high_mmhg) > ph_high
    ok = not (too_acid or too_alkaline)
    return Check(
        name="pH and PaCO2 targets agree",
        value=round(last.excess, 1),
        limit="a pH within both",
        ok=ok,
        says=f"At the base excess of the gas of {at(last.time)} ({last.excess:+.0f} mmol/L) a PaCO2 of "
        + last.means(*(p for p in (low_mmhg, high_mmhg) if p is not None))
        + unless(ok, ": the two targets cannot both be met. Which one leads?"),
        source=_CONSTANT,
    )


def metabolic_acidosis(case: Case) -> Check | None:
    """Base excess below -10: the low PaCO2 carries the pH, and a normal one would take it away."""
    last = _last(case)
    if last is None:
        return None
    ok = last.excess >= METABOLIC_MMOL_PER_L
    higher = [p for p in (30.0, 40.0) if p > last.paco2_mmhg + _WORTH_A_WORD_MMHG]
    carried = f"The ventilation carries this pH: PaCO2 {last.means(*higher)}. " if higher else ""
    return Check(
        name="Metabolic acidosis",
        value=round(last.excess, 1),
        limit=METABOLIC_MMOL_PER_L,
        ok=ok,
        says=f"Gas of {at(last.time)}: standard base excess {last.excess:+.0f} mmol/L"
        + unless(
            ok,
            f", pH {last.gas.ph:.2f} at PaCO2 {last.gas.paco2_mmhg:g} mmHg. {carried}"
            "Less ventilation would cost pH.",
        ),
        source=f"{_CONSTANT}; limit: {PRACTICE}",
    )


def chronic_hypercapnia(case: Case) -> Check | None:
    """Chronic hypercapnia: what a lower PaCO2 would do to a pH that has long been compensated."""
    last, usual = _last(case), case.patient.baseline.paco2_mmhg if case.patient.baseline else None
    known = "chronic_hypercapnia" in case.patient.conditions or (usual or 0.0) > _HYPERCAPNIA_MMHG
    if last is None or last.paco2_mmhg <= _HYPERCAPNIA_MMHG or not (known or last.excess >= _LEFT_BY_DAYS):
        return None
    ok = last.ph_at(40.0) <= _ALKALAEMIA
    lower = [p for p in (50.0, 40.0) if p < last.paco2_mmhg - _WORTH_A_WORD_MMHG]
    return Check(
        name="Chronic hypercapnia",
        value=round(last.ph_at(40.0), 2),
        limit=_ALKALAEMIA,
        ok=ok,
        says=f"Gas of {at(last.time)}: pH {last.gas.ph:.2f} at PaCO2 {last.gas.paco2_mmhg:g} mmHg, base "
        "excess "
        f"{last.excess:+.0f} mmol/L"
        + ("" if known else " (not charted as chronic; a metabolic alkalosis looks the same)")
        + f". PaCO2 {last.means(*lower)}"
        + (f"; at home it is about {usual:g} mmHg" if usual else "")
        + unless(ok, ": a normal PaCO2 would mean alkalaemia, so pH leads."),
        source=f"{_CONSTANT}; usual PaCO2 rather than a normal one: textbook (from memory)",
    )
