"""Expiration of a passive lung: time constant, gas that stays behind, intrinsic PEEP.

One compartment that empties exponentially, without flow limitation: a lower bound for what stays behind.
Arguments broadcast; NaN in gives NaN out. Definitions of the trade: common practice, no source.

References
----------
richard2003 : J. C. Richard et al., Intensive Care Med. 29, 1078, 2003 (intrinsic PEEP in ten patients with
    severe acute lung injury as the rate rises).
chelucci1993 : G. L. Chelucci et al., Eur. Respir. J. 6, 785, 1993 (two-compartment expiration).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

_ML_PER_L = 1000.0
_S_PER_MIN = 60.0


def _floats(value: ArrayLike) -> Array:
    return np.asarray(value, dtype=np.float64)


def inspiratory_time_s(rate_per_min: ArrayLike, ie_ratio: ArrayLike) -> Array:
    """Time for inspiration, any pause included, from rate (> 0) and inspiration over expiration (arithmetic).

    Examples
    --------
    >>> float(inspiratory_time_s(20.0, 0.5))
    1.0
    """
    ratio = _floats(ie_ratio)
    return _S_PER_MIN / _floats(rate_per_min) * ratio / (1.0 + ratio)


def expiratory_time_s(rate_per_min: ArrayLike, inspiratory_time_s: ArrayLike) -> Array:
    """Time left for expiration, from total rate (> 0) and inspiratory time, any pause included (arithmetic).

    Negative where the breath would be longer than its cycle; nothing is clamped.

    Examples
    --------
    >>> float(expiratory_time_s(20.0, 1.0))
    2.0
    """
    return _S_PER_MIN / _floats(rate_per_min) - _floats(inspiratory_time_s)


def time_constant_s(compliance_ml_per_cmh2o: ArrayLike, resistance_cmh2o_s_per_l: ArrayLike) -> Array:
    """Time in which a passive lung empties to 37 %: resistance x compliance (standard).

    A lower bound at the bedside: rate steps in acute lung injury implied 1.2-1.4 s where R C said 0.5
    (richard2003), and a fifth of the volume may leave with 4.7 s (chelucci1993). Take two to three times this
    for caution.

    Examples
    --------
    >>> float(time_constant_s(60.0, 25.0))
    1.5
    """
    return _floats(compliance_ml_per_cmh2o) / _ML_PER_L * _floats(resistance_cmh2o_s_per_l)


def fraction_exhaled(expiratory_time_s: ArrayLike, time_constant_s: ArrayLike) -> Array:
    """Share of the lung's extra volume that has left when the next breath comes (exponential emptying).

    Examples
    --------
    >>> fraction_exhaled([1.0, 3.0], 1.0).round(3)
    array([0.632, 0.95 ])
    """
    exhaled: Array = -np.expm1(-_floats(expiratory_time_s) / _floats(time_constant_s))
    return exhaled


def trapped_volume_ml(
    tidal_volume_ml: ArrayLike, expiratory_time_s: ArrayLike, time_constant_s: ArrayLike
) -> Array:
    """Volume above rest that stays behind at each end of expiration, once breaths repeat.

    Parameters
    ----------
    tidal_volume_ml : array_like
    expiratory_time_s : array_like
        > 0; inf mL at 0 and NaN below, where no breath fits.
    time_constant_s : array_like
        > 0.

    Returns
    -------
    trapped_volume_ml : ndarray, broadcast shape

    Notes
    -----
    One compartment, exponential, no flow limitation: VT e / (1 - e), e = exp(-Te / tau). A lower bound.

    Examples
    --------
    >>> trapped_volume_ml(500.0, [2.0, 3.21], 1.5).round(0)
    array([179.,  67.])
    """
    ratio = _floats(expiratory_time_s) / _floats(time_constant_s)
    with np.errstate(divide="ignore"):
        return _floats(tidal_volume_ml) / np.where(ratio >= 0.0, np.expm1(ratio), np.nan)


def intrinsic_peep_cmh2o(trapped_volume_ml: ArrayLike, compliance_ml_per_cmh2o: ArrayLike) -> Array:
    """Pressure of trapped gas above set PEEP: trapped volume over compliance; a lower bound.

    Examples
    --------
    >>> round(float(intrinsic_peep_cmh2o(179.0, 60.0)), 2)
    2.98
    """
    return _floats(trapped_volume_ml) / _floats(compliance_ml_per_cmh2o)
