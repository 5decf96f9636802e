"""Limits on what the blood would read: pH, PaO2, PaCO2, and those that a condition brings."""

import numpy as np

from engine.limits.row import Level, Limit, Uncertain, inside, middle, share_inside
from engine.limits.tried import Tried

PH_WARNING, PH_FLOOR, PH_CEILING = 7.20, 7.15, 7.55
PAO2_FLOOR_MMHG, PAO2_CEILING_MMHG = 55.0, 300.0
BRAIN_PACO2_MMHG, BRAIN_PAO2_MMHG = (35.0, 45.0), (80.0, 120.0)
RIGHT_HEART_PACO2_MMHG = 48.0
PREGNANCY_PACO2_MMHG = (28.0, 32.0)

_NETWORK = "ARDS Network 2000 N Engl J Med 342:1301"


def _row(
    name: str,
    level: Level,
    value: Uncertain,
    says: str,
    source: str,
    *,
    low: float = -np.inf,
    high: float = np.inf,
    unit: str = "mmHg",
) -> Limit:
    """A row on a forecast quantity: judged at its median, with the share of draws inside."""
    number = middle(value)
    both = np.isfinite(low) and np.isfinite(high)
    return Limit(
        name=name,
        level=level,
        value=number,
        limit=f"{low:g} to {high:g} {unit}".rstrip() if both else (low if np.isfinite(low) else high),
        unit=unit,
        ok=inside(number, low, high),
        probability=share_inside(value, low, high),
        says=says if number is not None else f"Not forecast. {says}",
        source=source,
    )


def ph_warning(tried: Tried) -> Limit:
    """Below 7.20 most units stop permitting hypercapnia."""
    says = "Usual floor of permissive hypercapnia."
    return _row("ph_warning", "soft", tried.ph, says, f"practice; {_NETWORK}", low=PH_WARNING, unit="")


def ph_floor(tried: Tried) -> Limit:
    """Below 7.15 the trial protocol gave up volume limits."""
    says = "Below it the trial protocol let volume and plateau rise: lung protection and pH pull apart."
    return _row("ph_floor", "hard", tried.ph, says, _NETWORK, low=PH_FLOOR, unit="")


def ph_ceiling(tried: Tried) -> Limit:
    """Above 7.55."""
    says = "Alkalaemia of this size brings arrhythmia, low calcium and less blood to the brain."
    return _row("ph_ceiling", "hard", tried.ph, says, "common practice, no source", high=PH_CEILING, unit="")


def pao2_floor(tried: Tried) -> Limit:
    """Below 55 mmHg."""
    says = "Lower end of the trial's goal; saturation falls steeply below it."
    return _row("pao2_floor", "hard", tried.pao2_mmhg, says, _NETWORK, low=PAO2_FLOOR_MMHG)


def pao2_ceiling(tried: Tried) -> Limit:
    """Above 300 mmHg."""
    says = "More oxygen than any condition here asks for."
    return _row(
        "pao2_ceiling",
        "soft",
        tried.pao2_mmhg,
        says,
        "Crit Care 2021 25:440 (review)",
        high=PAO2_CEILING_MMHG,
    )


def brain_paco2(tried: Tried) -> Limit | None:
    """Raised intracranial pressure: PaCO2 35 to 45."""
    if "raised_icp" not in tried.patient.conditions:
        return None
    low, high = BRAIN_PACO2_MMHG
    says = (
        "Intracranial pressure is raised: a lower PaCO2 starves the brain of blood, a higher one swells it."
    )
    source = "Robba 2020 Intensive Care Med 46:2397 (from memory)"
    return _row("paco2_brain", "hard", tried.paco2_mmhg, says, source, low=low, high=high)


def brain_pao2(tried: Tried) -> Limit | None:
    """Raised intracranial pressure: PaO2 80 to 120."""
    if "raised_icp" not in tried.patient.conditions:
        return None
    low, high = BRAIN_PAO2_MMHG
    says = "Intracranial pressure is raised: usual range of oxygen."
    source = "Robba 2020 Intensive Care Med 46:2397 (from memory)"
    return _row("pao2_brain", "soft", tried.pao2_mmhg, says, source, low=low, high=high)


def right_heart_paco2(tried: Tried) -> Limit | None:
    """Right-heart failure: PaCO2 up to 48."""
    if "right_heart_failure" not in tried.patient.conditions:
        return None
    says = "The right heart is failing: hypercapnia raises the pressure it works against."
    source = "caution: reviews of permissive hypercapnia (from memory); number: common practice, no source"
    return _row("paco2_right_heart", "hard", tried.paco2_mmhg, says, source, high=RIGHT_HEART_PACO2_MMHG)


def pregnancy_paco2(tried: Tried) -> Limit | None:
    """Pregnancy: PaCO2 28 to 32, no permissive hypercapnia."""
    if "pregnancy" not in tried.patient.conditions:
        return None
    low, high = PREGNANCY_PACO2_MMHG
    says = "Usual in pregnancy; hypercapnia keeps the fetus from giving off its own CO2."
    return _row(
        "paco2_pregnancy", "soft", tried.paco2_mmhg, says, "common practice, no source", low=low, high=high
    )
