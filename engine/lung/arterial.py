"""Which arterial gas a belief gives under a breathing, once settled.

Dead space has a series part, in mL a breath, and an alveolar part, a fraction of what passes it
(fletcher1984, haudebourg2022). Below a tidal volume of about 1.5 times the series dead space the series part
gives way (nunn1960: it shrinks with volumes under 350 mL), smoothly here, and no forecast is shown on a
screen.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from engine.lung.breathing import Breathing
from engine.lung.prior import Belief, logistic
from engine.physics.exchange import Exchange, steady_state

Array = NDArray[np.float64]

LARGEST_SERIES_SHARE = 0.75  # of a breath: above it some alveolar ventilation persists (briscoe1954)
WIDEST_VQ_LOG_SD = 2.5  # drift in a heavy tail stops here: no lung is wider (severe is 1.5 and more)
OWN_RATE_SPREAD = 0.05  # ln SD of a patient's own rate about the one charted
FASTEST_PER_MIN = (
    45.0  # no patient takes back a loss of volume by breathing faster than this; common practice
)
TRAPPING_MOST = (
    0.6  # share of a change of rate that trapped gas may undo in obstructive disease; reasoned, no source
)
LEAST_RATE_PER_MIN = 0.5  # keeps apnoea solvable; no such forecast is shown
UNCHARTED_RATE = (12.0, 32.0)  # of a patient with neither set breaths nor a charted total; common practice
OWN_RATE_LEAST = 0.6  # an active patient who does not trigger breathes at this share of the set rate, or more


@dataclass(frozen=True, slots=True, eq=False)
class Ventilation:
    """Total rate, series dead space and alveolar ventilation (before alveolar dead space), each (draws,)."""

    rate_per_min: Array
    series_ml: Array
    alveolar_l_per_min: Array


def ventilation(
    belief: Belief, breathing: Breathing, reference: Breathing, stopping: Breathing | None = None
) -> Ventilation:
    """How each draw is ventilated under ``breathing``.

    A patient who defends a PaCO2 takes back a share of what ventilation has moved since ``reference``, by
    breathing faster, though never past `FASTEST_PER_MIN`. In obstructive disease a faster rate traps gas,
    whose dead space undoes part of it, and a slower one frees some: a share up to `TRAPPING_MOST`, unknown,
    so drawn.

    Parameters
    ----------
    belief : Belief
    breathing : Breathing
        Now, or as tried.
    reference : Breathing
        At the first gas.
    stopping : Breathing, optional
        The breathing from which effort stops: ``breathing`` is then delivered by the ventilator alone.
        Charted paralysis brings its own.
    """
    stopping = stopping or breathing.before_paralysis
    now, usual = _delivered(belief, breathing, effort=stopping is None), _delivered(belief, reference)
    from_here = now if stopping is None else _delivered(belief, stopping)
    taken_back = belief.defence() * np.log(usual.alveolar_l_per_min / from_here.alveolar_l_per_min)
    a_breath_l = (breathing.tidal_volume_ml - now.series_ml) / 1000.0
    most = np.maximum(FASTEST_PER_MIN * a_breath_l, now.alveolar_l_per_min)
    alveolar = np.minimum(now.alveolar_l_per_min * np.exp(taken_back), most)
    rate = now.rate_per_min if stopping is not None else np.maximum(now.rate_per_min, alveolar / a_breath_l)
    if breathing.obstructive:
        undone = TRAPPING_MOST * belief.own
        alveolar = alveolar * (usual.rate_per_min / now.rate_per_min) ** undone
    return Ventilation(rate, now.series_ml, alveolar)


def _delivered(belief: Belief, breathing: Breathing, *, effort: bool = True) -> Ventilation:
    """The larger of set and own rate, series dead space taken off, and nothing taken back yet."""
    rate = np.full(len(belief), breathing.set_rate_per_min)
    if effort:
        rate = np.maximum(rate, _own_rate(belief, breathing))
    rate = np.maximum(rate, LEAST_RATE_PER_MIN)
    whole = (
        np.exp(belief.of("ln_series_ml")) + belief.of("apparatus_share") * breathing.apparatus_dead_space_ml
    )
    most = LARGEST_SERIES_SHARE * breathing.tidal_volume_ml
    series = whole / (1.0 + (whole / most) ** 6) ** (1.0 / 6.0)
    return Ventilation(rate, series, rate * (breathing.tidal_volume_ml - series) / 1000.0)


def _own_rate(belief: Belief, breathing: Breathing) -> Array:
    own, spread = breathing.own_rate, np.exp(OWN_RATE_SPREAD * 2.0 * (belief.own - 0.5))
    if own.per_min is not None:
        return own.per_min * spread
    if own.at_most_per_min == 0.0 and not own.charted:
        return UNCHARTED_RATE[0] + (UNCHARTED_RATE[1] - UNCHARTED_RATE[0]) * belief.own
    return np.where(
        belief.active, own.at_most_per_min * (OWN_RATE_LEAST + (1.0 - OWN_RATE_LEAST) * belief.own), 0.0
    )


def arterial_gas(
    belief: Belief,
    breathing: Breathing,
    given: Ventilation,
    *,
    hb_g_per_dl: float,
    barometric_mmhg: float,
    units: int,
) -> Exchange:
    """The settled arterial gas of every draw.

    Parameters
    ----------
    belief : Belief
    breathing : Breathing
        Now, or as tried.
    given : Ventilation
        What `ventilation` makes of it.
    hb_g_per_dl : float
        Haemoglobin that can carry oxygen.
    barometric_mmhg : float
    units : int
        Of `steady_state`.
    """
    vco2 = np.exp(belief.of("ln_vco2"))
    return steady_state(
        shunt=logistic(belief.of("logit_shunt")),
        vq_log_sd=np.exp(np.minimum(belief.of("ln_vq_log_sd"), np.log(WIDEST_VQ_LOG_SD))),
        alveolar_dead_space=logistic(belief.of("logit_dead_space")),
        alveolar_ventilation_l_per_min=given.alveolar_l_per_min,
        vco2_ml_per_min=vco2,
        vo2_ml_per_min=vco2 / belief.of("rq"),
        cardiac_output_l_per_min=np.exp(belief.of("ln_cardiac_output")),
        hb_g_per_dl=hb_g_per_dl,
        standard_base_excess_mmol_per_l=belief.of("standard_base_excess"),
        fio2=breathing.fio2,
        barometric_mmhg=barometric_mmhg,
        units=units,
    )
