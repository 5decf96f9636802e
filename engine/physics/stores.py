"""Carbon dioxide and oxygen on their way to a new steady state.

Carbon dioxide sits in three stores: lung gas with the blood that passes it (1), well-perfused tissue with
venous blood (2), and muscle with other slow tissue (3). Blood flow couples 2 and 3 to 1, which ventilation
empties::

    S1 dP1/dt = b q2 (P2 - P1) + b q3 (P3 - P1) - VA P1 / K       P1 is PaCO2, K the gas law's 0.863
    S2 dP2/dt = M2 + b q2 (P1 - P2)
    S3 dP3/dt = M3 + b q3 (P1 - P3)

While ventilation is constant this is linear, and between two steady states all three tensions move by the
same amount. So the share of the change that is done depends on the FINAL ventilation alone: not on the step,
its direction or the CO2 output. PaCO2 falls faster than it rises since the final ventilation is then larger.

References
----------
threestores : sizes and flows fitted for this project to published time courses: S. D. Ivanov, J. F. Nunn,
    Br. J. Anaesth. 41, 28, 1969 (rebreathing); Y. Kobayashi, Masui 43, 1130, 1994 (apnoea); J. Appl. Physiol.
    17, 805, 1962 (hyperventilation); V. Taskar et al., Chest 108, 196, 1995 (resets of a ventilator); and
    half-times of 3 min down and 16 min up (S. D. Ivanov, J. F. Nunn, Anaesthesia 23, 351, 1968, from memory).
cakar2001 : N. Cakar et al., Intensive Care Med. 27, 655-659, 2001 (PaO2 after a step of FiO2, 25 ventilated
    patients without obstructive disease).
equilibration2015 : Intern. Med. J., 2015 (82 patients with chronic lung disease, oxygen stopped: saturation
    90 % settled after a median of 6.3 min, 95th centile 20; authors not seen).
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from engine.physics.carbon_dioxide import CO2_CONSTANT

Array = NDArray[np.float64]


class Co2Stores(NamedTuple):
    """Sizes (mL STPD per mmHg) and blood flows (L/min) of the stores at 70 kg; numbers, or draws."""

    lung_ml_per_mmhg: ArrayLike = 10.0
    quick_ml_per_mmhg: ArrayLike = 30.0
    slow_ml_per_mmhg: ArrayLike = 60.0
    quick_flow_l_per_min: ArrayLike = 4.0
    slow_flow_l_per_min: ArrayLike = 1.0


ADULT = Co2Stores()
"""threestores. The courses allow 8-13, 22-38 and 40-80 mL/mmHg, 4-7 L/min in all, 0.7-1.4 of it slow."""

BLOOD_CO2_ML_PER_L_MMHG = 4.7
"""Slope of the CO2 content of blood on its tension (threestores)."""
STANDARD_KG = 70.0

CO2_PACE_LN_SD = 0.2
"""Spread of ln(time) between patients: sets that fit the published courses are half done at VA 4.3 L/min
after 6.7 to 11.3 min (`ADULT` 9.2), 90 % done after 37 to 75 min (`ADULT` 55); taken for a 90 % range."""

PAO2_MINUTES_TO_90 = 4.0
"""Median time to 90 % of a change of PaO2 after a step of FiO2 (cakar2001: means of 4.2 up and 5.5 down)."""
PAO2_MINUTES_TO_90_OBSTRUCTIVE = 6.3
"""The same in chronic lung disease (equilibration2015)."""
PAO2_PACE_LN_SD = 0.7
"""Spread of ln(time): the 95th centile of equilibration2015 lies exp(1.645 x 0.7) above its median; the rate
constants of cakar2001 (1.01, SD 0.71 up; 0.69, SD 0.42 down) give 0.63 and 0.56, its times 0.82."""

_SETTLED = 1e-9  # of the time sought
_MOST_STEPS = 100


def _modes(ventilation: ArrayLike, weight_kg: ArrayLike, stores: Co2Stores) -> tuple[Array, Array]:
    """Shares (summing to 1) and rates (per min) of the three exponentials in PaCO2, on a last axis of 3.

    In the unknowns sqrt(S) P the matrix is symmetric, so its rates are real, and no share is negative.
    """
    given = [np.asarray(value, dtype=np.float64) for value in (*stores, ventilation, weight_kg)]
    lung, quick, slow, quick_flow, slow_flow, va, weight = np.broadcast_arrays(*given)
    cleared = va * STANDARD_KG / weight / CO2_CONSTANT
    to_quick, to_slow = BLOOD_CO2_ML_PER_L_MMHG * quick_flow, BLOOD_CO2_ML_PER_L_MMHG * slow_flow
    matrix = np.zeros((*va.shape, 3, 3))
    matrix[..., 0, 0] = (to_quick + to_slow + cleared) / lung
    matrix[..., 1, 1] = to_quick / quick
    matrix[..., 2, 2] = to_slow / slow
    matrix[..., 1, 0] = -to_quick / np.sqrt(lung * quick)
    matrix[..., 2, 0] = -to_slow / np.sqrt(lung * slow)
    missing = ~np.isfinite(matrix).all(axis=(-2, -1))
    matrix[missing] = np.eye(3)  # eigh refuses NaN
    rates, directions = np.linalg.eigh(matrix)
    root = np.sqrt(np.stack([lung, quick, slow], axis=-1))
    everywhere = np.einsum("...ji,...j->...i", directions, root)
    shares = directions[..., 0, :] * everywhere / root[..., :1]
    rates[missing] = np.nan
    return shares, rates


def fraction_complete(
    minutes: ArrayLike,
    final_alveolar_ventilation_l_per_min: ArrayLike,
    weight_kg: ArrayLike = STANDARD_KG,
    stores: Co2Stores = ADULT,
) -> Array:
    """Share of a change of PaCO2 that is done some time after ventilation has changed.

    Parameters
    ----------
    minutes : array_like
        Since the change, >= 0. For a patient slower than most divide by a factor (`CO2_PACE_LN_SD`).
    final_alveolar_ventilation_l_per_min : array_like
        Effective (Enghoff) alveolar ventilation after the change, L BTPS per minute, >= 0.
    weight_kg : array_like
        Stores and flows grow in proportion to it.
    stores : Co2Stores
        One set, or draws. All arguments broadcast; NaN in gives NaN out.

    Returns
    -------
    fraction : ndarray, broadcast shape
        0 at once, 1 when settled; always 0 for PaCO2 that nothing clears.

    Notes
    -----
    threestores, exact (a sum of three exponentials). True from one steady state to another: a second change
    before the first has settled is not described by one fraction.

    Examples
    --------
    >>> fraction_complete([10.0, 30.0, 60.0], 4.3).round(2)
    array([0.52, 0.77, 0.92])
    """
    shares, rates = _modes(final_alveolar_ventilation_l_per_min, weight_kg, stores)
    left = np.exp(-rates * np.asarray(minutes, dtype=np.float64)[..., None])
    remaining: Array = np.sum(shares * left, axis=-1)
    return 1.0 - remaining


def minutes_to_fraction(
    fraction: ArrayLike,
    final_alveolar_ventilation_l_per_min: ArrayLike,
    weight_kg: ArrayLike = STANDARD_KG,
    stores: Co2Stores = ADULT,
) -> Array:
    """Time until this share of a change of PaCO2 is done: the inverse of `fraction_complete`.

    Parameters
    ----------
    fraction : array_like
        0 to below 1. inf at 1; NaN outside 0-1.
    final_alveolar_ventilation_l_per_min, weight_kg, stores
        As in `fraction_complete`; ventilation > 0. All arguments broadcast; NaN in gives NaN out.

    Returns
    -------
    minutes : ndarray, broadcast shape

    Notes
    -----
    threestores. Newton's method on the logarithm of what is left, which is convex in time, so that each step
    stays short of the answer. NaN where it does not settle.

    Examples
    --------
    >>> minutes_to_fraction([0.5, 0.9], 4.3).round(1)
    array([ 9.2, 55. ])
    """
    shares, rates = _modes(final_alveolar_ventilation_l_per_min, weight_kg, stores)
    done = np.asarray(fraction, dtype=np.float64)
    done = np.where((done >= 0.0) & (done < 1.0), done, np.nan)
    target, shares_total = np.broadcast_arrays(np.log1p(-done), np.sum(shares, axis=-1))
    minutes = np.zeros(shares_total.shape)
    step = np.full(shares_total.shape, np.nan)
    for _ in range(_MOST_STEPS):
        left = shares * np.exp(-rates * minutes[..., None])
        total = np.sum(left, axis=-1)
        step = (np.log(total) - target) * total / np.sum(rates * left, axis=-1)
        minutes = minutes + step
        if not np.any(np.abs(step) > _SETTLED * (1.0 + minutes)):
            break
    settled = np.abs(step) <= _SETTLED * (1.0 + minutes)
    return np.where(np.asarray(fraction) == 1.0, np.inf, np.where(settled, minutes, np.nan))


def paco2_on_the_way_mmhg(
    minutes: ArrayLike,
    paco2_before_mmhg: ArrayLike,
    paco2_settled_mmhg: ArrayLike,
    final_alveolar_ventilation_l_per_min: ArrayLike,
    weight_kg: ArrayLike = STANDARD_KG,
    stores: Co2Stores = ADULT,
) -> Array:
    """PaCO2 between a settled tension and the next, some time after the change; see `fraction_complete`.

    Examples
    --------
    >>> paco2_on_the_way_mmhg([0.0, 30.0, 600.0], 60.0, 45.0, 4.3).round(0)
    array([60., 48., 45.])
    """
    before = np.asarray(paco2_before_mmhg, dtype=np.float64)
    done = fraction_complete(minutes, final_alveolar_ventilation_l_per_min, weight_kg, stores)
    return before + (np.asarray(paco2_settled_mmhg, dtype=np.float64) - before) * done


def pao2_minutes_to_90(normal_score: ArrayLike = 0.0, obstructive: ArrayLike = False) -> Array:
    """Time in which 90 % of a change of PaO2 after a step of FiO2 is done, log-normal between patients.

    Parameters
    ----------
    normal_score : array_like
        Where in the spread: 0 the median, standard normal draws for draws.
    obstructive : array_like of bool
        Obstructive lung disease washes out slowly. They broadcast; NaN in gives NaN out.

    Returns
    -------
    minutes : ndarray, broadcast shape

    Notes
    -----
    cakar2001 and equilibration2015, with medians and spread as the constants of this module say. Not for
    PEEP: 60 min after raising it oxygenation is not settled (D. Chiumello et al., Intensive Care Med. 39,
    1377, 2013).

    Examples
    --------
    >>> pao2_minutes_to_90([0.0, 1.2816]).round(1)
    array([4. , 9.8])
    """
    median = np.where(obstructive, PAO2_MINUTES_TO_90_OBSTRUCTIVE, PAO2_MINUTES_TO_90)
    slower: Array = np.exp(PAO2_PACE_LN_SD * np.asarray(normal_score, dtype=np.float64))
    return median * slower


def pao2_fraction_complete(minutes: ArrayLike, minutes_to_90: ArrayLike) -> Array:
    """Share of a change of PaO2 that is done: one exponential, 0.9 at `minutes_to_90` (cakar2001).

    Examples
    --------
    >>> pao2_fraction_complete([0.0, 4.0, 10.0], 4.0).round(3)
    array([0.   , 0.9  , 0.997])
    """
    passed = np.asarray(minutes, dtype=np.float64) / np.asarray(minutes_to_90, dtype=np.float64)
    done: Array = -np.expm1(-np.log(10.0) * passed)
    return done
