"""A gas drawn before the body has settled: on its way from one steady state to another.

PaCO2 follows three CO2 stores (`engine.physics.stores`), faster the larger the final alveolar ventilation;
ln PaO2 follows washing in and out of the lung, a personal time (cakar2001). pH belongs to PaCO2 at constant
standard base excess.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from engine.lung.prior import Belief, logistic
from engine.physics.acid_base import ph_at_standard_base_excess
from engine.physics.exchange import Exchange
from engine.physics.oxygen import so2_in_blood
from engine.physics.stores import fraction_complete, pao2_fraction_complete, pao2_minutes_to_90

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Gas:
    """An arterial gas of every draw, each array (draws,)."""

    ph: Array
    paco2_mmhg: Array
    pao2_mmhg: Array
    sao2: Array


def settled_gas(exchange: Exchange) -> Gas:
    """The gas of a steady state."""
    return Gas(exchange.ph, exchange.paco2_mmhg, exchange.pao2_mmhg, exchange.sao2)


def gas_on_the_way(
    belief: Belief,
    before: Exchange,
    after: Exchange,
    minutes: float,
    *,
    alveolar_l_per_min: Array,
    weight_kg: float,
    obstructive: bool,
) -> Gas:
    """The gas some minutes after a change from one steady state towards another.

    Parameters
    ----------
    belief : Belief
    before, after : Exchange
        Steady states under the old and the new settings, (draws,).
    minutes : float
        Since the change, >= 0.
    alveolar_l_per_min : ndarray (draws,)
        Alveolar ventilation under the new settings, before alveolar dead space.
    weight_kg : float
        CO2 stores grow with it.
    obstructive : bool
        Oxygen settles more slowly (20 min instead of 10).
    """
    effective = alveolar_l_per_min * (1.0 - logistic(belief.of("logit_dead_space")))
    co2_done = fraction_complete(minutes, effective, weight_kg)
    o2_done = pao2_fraction_complete(minutes, pao2_minutes_to_90(ndtri(belief.own), obstructive))
    paco2 = after.paco2_mmhg + (before.paco2_mmhg - after.paco2_mmhg) * (1.0 - co2_done)
    pao2 = after.pao2_mmhg * (before.pao2_mmhg / after.pao2_mmhg) ** (1.0 - o2_done)
    ph = ph_at_standard_base_excess(paco2, belief.of("standard_base_excess"))
    return Gas(ph, paco2, pao2, so2_in_blood(pao2, ph, paco2))
