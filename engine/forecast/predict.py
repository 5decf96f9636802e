"""The mechanism of a forecast: drift the belief to the moment, breathe as asked, scatter the sample.

The random numbers depend on the seed alone, not on the change tried: two trials of one patient differ by what
was changed and by nothing else.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from engine.fit import Fit
from engine.fit.observation import PACO2_CV, PAO2_CV, PH_SD, SAO2_SD, TAIL
from engine.fit.sequence import STANDARD_WEIGHT_KG, settings_at
from engine.fit.underway import Underway, underway_at
from engine.lung import (
    Belief,
    Breathing,
    Gas,
    arterial_gas,
    breathing_at,
    drift_between,
    gas_on_the_way,
    settled_gas,
    ventilation,
)
from engine.lung.breathing import last_settings
from engine.lung.drift import heavy_tail
from engine.lung.prior import PARAMETERS
from engine.physics.exchange import UNITS, Exchange
from engine.record import Entry

Array = NDArray[np.float64]


FORECASTS_PER_DRAW = 2  # each draw of the fit drifts and scatters twice


@dataclass(frozen=True, slots=True, eq=False)
class Prediction:
    """What the mechanism gives, each array (draws,): the state of the body, the sample, and what went in.

    ``before`` is the state when the change is made, which is on its way where ``underway`` is given.
    """

    belief: Belief
    breathing: Breathing
    underway: Underway | None
    before: Gas
    settled: Gas
    state: Gas
    sample: Gas
    rate_per_min: Array
    alveolar_l_per_min: Array


def predict(
    fit: Fit,
    tried: Entry,
    *,
    hours: float,
    minutes: float | None,
    effort_stops: bool,
    seed: int,
) -> Prediction:
    """The state and the sample after ``tried`` is added to the chart of ``fit``.

    Parameters
    ----------
    fit : Fit
        Its case may hold entries after the last gas; they are read as ``fit.read_as``.
    tried : Entry
        Time and settings of the change; its ``change_reason`` says whether it is evidence (``patient``) when
        read as ``seen``. A change that is only tried carries ``prompted``.
    hours : float
        From the last gas to the moment forecast; the lung drifts over it.
    minutes : float or None
        From the change to the moment; ``None`` for the settled state.
    effort_stops : bool
        The ventilator alone breathes from the change on.
    seed : int
    """
    rng = np.random.default_rng([seed, 0x0F0E])
    start = fit.belief.take(np.tile(np.arange(len(fit.belief)), FORECASTS_PER_DRAW))
    n, shape = len(start), (len(start), len(PARAMETERS))
    tail, steps, scatter = (
        heavy_tail(rng, n),
        rng.standard_normal(shape),
        rng.standard_t(TAIL, (len(GAS_SCATTER), n)),
    )
    since = (*fit.case.entries[fit.gas_number + 1 :], tried)
    in_force = last_settings(fit.case)
    drift = drift_between(
        start, since, settings_at(fit.case, fit.gas_number), hours, tail, read_as=fit.read_as
    )
    belief = Belief(start.values + drift.shift + drift.sd * steps, start.active, start.own)
    was = breathing_at(fit.case, in_force)
    now = breathing_at(fit.case, in_force.then(tried.settings))

    def give(breathing: Breathing, stopping: Breathing | None = None) -> Exchange:
        return arterial_gas(
            belief,
            breathing,
            ventilation(belief, breathing, fit.reference, stopping),
            hb_g_per_dl=fit.hb_g_per_dl,
            barometric_mmhg=fit.barometric_mmhg,
            units=UNITS,
        )

    def on_the_way(leaving: Exchange, towards: Exchange, passed: float, flow_l_per_min: Array) -> Gas:
        return gas_on_the_way(
            belief,
            leaving,
            towards,
            passed,
            alveolar_l_per_min=flow_l_per_min,
            weight_kg=fit.case.patient.weight_kg or STANDARD_WEIGHT_KG,
            obstructive="obstructive" in fit.case.patient.conditions,
        )

    rest, after = give(was), give(now, was if effort_stops else None)
    given = ventilation(belief, now, fit.reference, was if effort_stops else None)
    before, settled = settled_gas(rest), settled_gas(after)
    state, underway = settled, underway_at(fit.case, tried.time)
    if underway is not None:
        earlier, flow = give(breathing_at(fit.case, underway.before)), ventilation(belief, was, fit.reference)
        before = on_the_way(earlier, rest, underway.minutes, flow.alveolar_l_per_min)
        state = on_the_way(earlier, rest, underway.minutes + (minutes or 0.0), flow.alveolar_l_per_min)
    if minutes is None:
        state = settled
    elif underway is None or now != was or effort_stops:
        # From where the body stands. Its stores are taken as level: exact where it had settled.
        leaving = replace(rest, paco2_mmhg=before.paco2_mmhg, pao2_mmhg=before.pao2_mmhg)
        state = on_the_way(leaving, after, minutes, given.alveolar_l_per_min)
    return Prediction(
        belief,
        now,
        underway,
        before,
        settled,
        state,
        _sample(state, scatter),
        given.rate_per_min,
        given.alveolar_l_per_min,
    )


GAS_SCATTER = (PH_SD, PACO2_CV, PAO2_CV, SAO2_SD)


def _sample(state: Gas, scatter: Array) -> Gas:
    """What an analyser would print of this state: each quantity with its own heavy-tailed scatter."""
    ph_sd, paco2_cv, pao2_cv, sao2_sd = GAS_SCATTER
    return Gas(
        state.ph + ph_sd * scatter[0],
        state.paco2_mmhg * np.exp(paco2_cv * scatter[1]),
        state.pao2_mmhg * np.exp(pao2_cv * scatter[2]),
        np.clip(state.sao2 + sao2_sd * scatter[3], 0.0, 1.0),
    )
