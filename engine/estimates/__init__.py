"""Textbook numbers of one gas, each with its equation, this patient's numbers in it, and its source."""

from collections.abc import Callable
from dataclasses import replace

from engine.checks.moment import Moment, moments
from engine.estimates import acid_base, oxygenation, pressures, ventilation
from engine.estimates.row import Estimate
from engine.record import Case

__all__ = ["ESTIMATES", "Estimate", "estimates_for"]

ESTIMATES: tuple[Callable[[Moment], Estimate], ...] = (
    oxygenation.alveolar_po2,
    oxygenation.aa_difference,
    oxygenation.aa_ratio,
    oxygenation.pf_ratio,
    oxygenation.sf_ratio,
    oxygenation.oxygenation_index,
    oxygenation.shunt,
    ventilation.minute_ventilation,
    ventilation.predicted_body_weight,
    ventilation.volume_per_weight,
    ventilation.ventilatory_ratio,
    ventilation.dead_space,
    pressures.driving_pressure,
    pressures.compliance,
    pressures.mechanical_power,
    acid_base.bicarbonate,
    acid_base.standard_base_excess,
)

_OF_ARTERIAL_BLOOD = frozenset(
    [
        "palvo2_mmhg",
        "aa_difference_mmhg",
        "aa_ratio",
        "pf_ratio_mmhg",
        "oxygenation_index",
        "shunt",
        "ventilatory_ratio",
        "dead_space",
    ]
)


def estimates_for(case: Case, number: int) -> tuple[Estimate, ...]:
    """The textbook numbers of the gas in entry ``number`` (from 0), in a fixed order.

    A number that cannot be worked out, or would mean nothing, has ``value`` None and its ``working`` says
    why. What needs arterial blood is refused for a venous, capillary or excluded gas and under extracorporeal
    support.

    Raises
    ------
    LookupError
        If that entry has no gas, or there is no such entry.
    """
    moment = moments(case)[number]
    found = tuple(estimate(moment) for estimate in ESTIMATES if moment.gas)
    if moment.usable:
        return found
    why = f"not worked out: {_unusable(moment)}"
    return tuple(replace(e, value=None, working=why) if e.name in _OF_ARTERIAL_BLOOD else e for e in found)


def _unusable(moment: Moment) -> str:
    if moment.gas.specimen != "arterial":
        return f"the gas is {moment.gas.specimen}"
    if moment.gas.excluded:
        return f"the gas is excluded ({moment.gas.excluded})"
    return "extracorporeal support"
