"""When a gas is worth drawing after a change, and why then.

An early look is worth it once the expected change exceeds what two samples of an unchanged patient differ by; the
settled gas once 90 % of the change is done. CO2 settles by its stores (slower the smaller the alveolar ventilation),
oxygen within 10 min of an FiO2 step, 20 in obstructive disease; oxygenation after a raised PEEP is not settled at an hour.
"""

import numpy as np

from engine.fit.observation import PACO2_CV, PAO2_CV
from engine.fit.sequence import STANDARD_WEIGHT_KG, Fit
from engine.forecast.predict import Prediction
from engine.forecast.result import Recheck
from engine.lung.prior import logistic
from engine.physics.stores import minutes_to_fraction

O2_SETTLED_MIN, O2_SETTLED_OBSTRUCTIVE_MIN = 10.0, 20.0  # cakar2001; equilibration2015 (95th centile)
O2_EARLY_MIN = 5.0  # cakar2001: 90 % in 4-6 min on average
PEEP_SETTLED_MIN = 60.0  # chiumello2013: a rise is not settled by then
TWO_SAMPLES = np.sqrt(2.0)
LEAST_STEP_MIN = 5.0  # times are said in steps of five minutes


def recheck_of(fit: Fit, prediction: Prediction, changed: tuple[str, ...]) -> Recheck:
    """Early and settled time in minutes after the change, with the reason in words."""
    if not changed:
        return Recheck(early_minutes=None, settled_minutes=None, reason="Nothing is changed: draw a gas by need.")
    co2, o2 = _co2_times(fit, prediction), _o2_times(fit, prediction)
    earlies = [t[0] for t in (co2, o2) if t is not None]
    settles = [t[1] for t in (co2, o2) if t is not None]
    reasons = []
    if co2 is not None:
        reasons.append(
            f"PaCO2: its stores need about {co2[1]:.0f} min for nine tenths of the change "
            f"at this alveolar ventilation; it stands out from sampling scatter after about {co2[0]:.0f} min."
        )
    if o2 is not None:
        reasons.append(f"PaO2: settled about {o2[1]:.0f} min after a step of FiO2.")
    if "peep_cmh2o" in changed:
        settles.append(PEEP_SETTLED_MIN)
        reasons.append("PEEP: oxygenation may still be moving an hour after it is raised.")
    if not settles:
        return Recheck(
            early_minutes=None,
            settled_minutes=None,
            reason="The expected change is smaller than the scatter between two samples: a gas would not show it.",
        )
    return Recheck(
        early_minutes=min(earlies) if earlies else None, settled_minutes=max(settles), reason=" ".join(reasons)
    )


def _co2_times(fit: Fit, p: Prediction) -> tuple[float, float] | None:
    step = np.nanmedian(np.log(p.settled.paco2_mmhg / p.before.paco2_mmhg))
    scatter = TWO_SAMPLES * PACO2_CV
    if not abs(step) > scatter:
        return None
    effective = float(np.median(p.alveolar_l_per_min * (1.0 - logistic(p.belief.of("logit_dead_space")))))
    weight_kg = fit.case.patient.weight_kg or STANDARD_WEIGHT_KG
    early, settled = minutes_to_fraction([scatter / abs(step), 0.9], effective, weight_kg)
    return _said(early), _said(settled)


def _o2_times(fit: Fit, p: Prediction) -> tuple[float, float] | None:
    step = np.nanmedian(np.log(p.settled.pao2_mmhg / p.before.pao2_mmhg))
    if p.breathing.fio2 == fit_fio2(fit) or not abs(step) > TWO_SAMPLES * PAO2_CV:
        return None
    slow = "obstructive" in fit.case.patient.conditions
    return O2_EARLY_MIN, O2_SETTLED_OBSTRUCTIVE_MIN if slow else O2_SETTLED_MIN


def fit_fio2(fit: Fit) -> float | None:
    """FiO2 in force before the change."""
    return next(
        (e.settings.fio2 for e in reversed(fit.case.entries) if e.settings and e.settings.fio2 is not None), None
    )


def _said(minutes: float) -> float:
    """Rounded up to the step in which times are said."""
    return float(np.ceil(minutes / LEAST_STEP_MIN) * LEAST_STEP_MIN)
