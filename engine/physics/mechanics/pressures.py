"""Pressures of a passive breath: driving pressure, compliance, plateau, resistance.

One compartment. Arguments broadcast; NaN in gives NaN out. Definitions of the trade: common practice, no
source.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

_S_PER_MIN = 60.0


def _floats(value: ArrayLike) -> Array:
    return np.asarray(value, dtype=np.float64)


def driving_pressure_cmh2o(plateau_cmh2o: ArrayLike, total_peep_cmh2o: ArrayLike) -> Array:
    """Plateau less total PEEP (set and intrinsic): the pressure that the tidal volume costs (standard).

    Examples
    --------
    >>> float(driving_pressure_cmh2o(25.0, 10.0))
    15.0
    """
    return _floats(plateau_cmh2o) - _floats(total_peep_cmh2o)


def compliance_ml_per_cmh2o(
    tidal_volume_ml: ArrayLike, plateau_cmh2o: ArrayLike, total_peep_cmh2o: ArrayLike
) -> Array:
    """Static compliance of lung and chest wall: tidal volume over driving pressure (standard).

    Parameters
    ----------
    tidal_volume_ml, plateau_cmh2o, total_peep_cmh2o : array_like
        Of a passive breath with an end-inspiratory pause; plateau above total PEEP.

    Returns
    -------
    compliance : ndarray, broadcast shape
        mL/cmH2O. Negative where the plateau lies below PEEP; nothing is clamped.

    Examples
    --------
    >>> float(compliance_ml_per_cmh2o(420.0, 25.0, 10.0))
    28.0
    """
    return _floats(tidal_volume_ml) / driving_pressure_cmh2o(plateau_cmh2o, total_peep_cmh2o)


def plateau_after_tidal_volume_cmh2o(
    tidal_volume_ml: ArrayLike, compliance_ml_per_cmh2o: ArrayLike, total_peep_cmh2o: ArrayLike
) -> Array:
    """Plateau that another tidal volume would reach at the same PEEP and compliance (standard).

    Good for small steps only: a stiff lung stiffens further as it fills, and PEEP changes compliance.

    Examples
    --------
    >>> float(plateau_after_tidal_volume_cmh2o(350.0, 28.0, 10.0))
    22.5
    """
    return _floats(total_peep_cmh2o) + _floats(tidal_volume_ml) / _floats(compliance_ml_per_cmh2o)


def resistance_cmh2o_s_per_l(
    peak_cmh2o: ArrayLike, plateau_cmh2o: ArrayLike, flow_l_per_min: ArrayLike
) -> Array:
    """Resistance of tube and airways at constant flow: (peak - plateau) / flow (standard).

    Examples
    --------
    >>> float(resistance_cmh2o_s_per_l(30.0, 25.0, 30.0))
    10.0
    """
    return (_floats(peak_cmh2o) - _floats(plateau_cmh2o)) / (_floats(flow_l_per_min) / _S_PER_MIN)
