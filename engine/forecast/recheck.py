"""When a gas is worth drawing after a change, and why then.

An early look is worth it once the expected change exceeds what two samples of an unchanged patient differ by;
the settled gas once 90 % of the change is done. CO2 settles by its stores (slower the smaller the alveolar
ventilation), oxygen within 10 min of an FiO2 step, 20 in obstructive disease; oxygenation after a raised PEEP
is not settled at an hour.
"""

import numpy as np

from engine.fit.observation import PACO2_CV, PAO2_CV
from engine.fit.sequence import STANDARD_WEIGHT_KG, Fit
from engine.forecast.predict import Prediction
from engine.forecast.result import Recheck
from engine.lung.breathing import last_settings
from engine.lung.prior import logistic
from engine.physics.stores import fraction_complete, minutes_to_fraction

O2_SETTLED_MIN, O2_SETTLED_OBSTRUCTIVE_MIN = 10.0, 20.0  # cakar2001; equilibration2015 (95th centile)
O2_EARLY_MIN = 5.0  # cakar2001: 90 % in 4-6 min on average
PEEP_SETTLED_MIN = 60.0  # chiumello2013: a rise is not settled by then
TWO_SAMPLES = np.sqrt(2.0)
LEAST_STEP_MIN = 5.0  # times are said in steps of five minutes

NOTHING_CHANGED = "Nothing is changed: draw a gas by need."
TOO_SMALL = "The expected change is smaller than the scatter between two samples: a gas would not show it."


def recheck_of(fit: Fit, p: Prediction, changed: tuple[str, ...], *, effort_stops: bool = False) -> Recheck:
    """Early and settled time in minutes after the change, with the reason in words.

    With nothing changed there is something to wait for only while an earlier change is on its way.
    """
    touched = bool(changed) or effort_stops
    if not touched and p.underway is None:
        return Recheck(early_minutes=None, settled_minutes=None, reason=NOTHING_CHANGED)
    passed = 0.0 if touched or p.underway is None else p.underway.minutes
    co2, o2 = _co2_times(fit, p, passed), _o2_times(fit, p, passed)
    earlies = [t[0] for t in (co2, o2) if t is not None]
    settles = [t[1] for t in (co2, o2) if t is not None]
    reasons = [f"The change made {passed:.0f} min ago is still on its way."] if passed and settles else []
    if co2 is not None:
        reasons.append(
            f"PaCO2: its stores need about {co2[1]:.0f} min {'more ' if passed else ''}for nine tenths of "
            "the change at this alveolar ventilation; it stands out from sampling scatter after about "
            f"{co2[0]:.0f} min."
        )
    if o2 is not None:
        reasons.append(f"PaO2: settled about {o2[1]:.0f} min after a step of FiO2.")
    if "peep_cmh2o" in changed:
        settles.append(PEEP_SETTLED_MIN)
        reasons.append("PEEP: oxygenation may still be moving an hour after it is raised.")
    if not settles:
        return Recheck(
            early_minutes=None, settled_minutes=None, reason=TOO_SMALL if touched else NOTHING_CHANGED
        )
    return Recheck(
        early_minutes=min(earlies) if earlies else None,
        settled_minutes=max(settles),
        reason=" ".join(reasons),
    )


def _co2_times(fit: Fit, p: Prediction, passed: float) -> tuple[float, float] | None:
    """Minutes from now until the change of PaCO2 stands out, and until nine tenths of it are done.

    ``passed`` are the minutes since a change that is on its way; its course, not a new one, is then followed.
    """
    step = np.nanmedian(np.log(p.settled.paco2_mmhg / p.before.paco2_mmhg))
    scatter = TWO_SAMPLES * PACO2_CV
    if not abs(step) > scatter:
        return None
    effective = float(np.median(p.alveolar_l_per_min * (1.0 - logistic(p.belief.of("logit_dead_space")))))
    weight_kg = fit.case.patient.weight_kg or STANDARD_WEIGHT_KG
    done = float(fraction_complete(passed, effective, weight_kg))
    early = done + (1.0 - done) * scatter / abs(step)
    times = minutes_to_fraction([early, max(0.9, early)], effective, weight_kg) - passed
    return _said(times[0]), _said(times[1])


def _o2_times(fit: Fit, p: Prediction, passed: float) -> tuple[float, float] | None:
    step = np.nanmedian(np.log(p.settled.pao2_mmhg / p.before.pao2_mmhg))
    moved = p.breathing.fio2 != fit_fio2(fit) or (passed and p.underway and "fio2" in p.underway.changed)
    if not moved or not abs(step) > TWO_SAMPLES * PAO2_CV:
        return None
    slow = "obstructive" in fit.case.patient.conditions
    settled = O2_SETTLED_OBSTRUCTIVE_MIN if slow else O2_SETTLED_MIN
    return max(O2_EARLY_MIN - passed, LEAST_STEP_MIN), max(settled - passed, LEAST_STEP_MIN)


def fit_fio2(fit: Fit) -> float | None:
    """FiO2 in force before the change."""
    return last_settings(fit.case).fio2


def _said(minutes: float) -> float:
    """Rounded up to the step in which times are said."""
    return float(np.ceil(minutes / LEAST_STEP_MIN) * LEAST_STEP_MIN)
