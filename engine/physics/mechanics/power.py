"""Mechanical power of the ventilator on the whole respiratory system, per minute.

Arguments broadcast; NaN in gives NaN out.

References
----------
gattinoni2016 : L. Gattinoni et al., "Ventilator-related causes of lung injury: the mechanical power",
    Intensive Care Med. 42, 1567-1575, 2016 (volume control).
becher2019 : T. Becher et al., "Calculation of mechanical power for pressure-controlled ventilation",
    Intensive Care Med. 45, 1321-1323, 2019.
trinkle2022 : C. A. Trinkle et al., Intensive Care Med. Exp. 10, 22, 2022 (errors of both forms in 50
patients).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from engine.physics.mechanics.emptying import time_constant_s

Array = NDArray[np.float64]

J_PER_CMH2O_L = 0.0980665
"""Work of one litre against one centimetre of water, exact; the papers round it to 0.098."""

_ML_PER_L = 1000.0


def _floats(value: ArrayLike) -> Array:
    return np.asarray(value, dtype=np.float64)


def power_volume_control_j_per_min(
    rate_per_min: ArrayLike,
    tidal_volume_ml: ArrayLike,
    peak_cmh2o: ArrayLike,
    driving_pressure_cmh2o: ArrayLike,
) -> Array:
    """Mechanical power of volume control at constant flow, from the pressures a ventilator shows.

    Parameters
    ----------
    rate_per_min, tidal_volume_ml : array_like
        Total rate and tidal volume.
    peak_cmh2o, driving_pressure_cmh2o : array_like
        Peak pressure, and plateau less PEEP.

    Returns
    -------
    power : ndarray, broadcast shape
        J/min, of the whole respiratory system.

    Notes
    -----
    gattinoni2016, simplified: 0.098 RR VT (Ppeak - dP / 2). Equal to the full form where flow is constant.

    Examples
    --------
    >>> round(float(power_volume_control_j_per_min(20.0, 500.0, 30.0, 15.0)), 1)
    22.1
    """
    pressure = _floats(peak_cmh2o) - 0.5 * _floats(driving_pressure_cmh2o)
    return J_PER_CMH2O_L * _floats(rate_per_min) * _floats(tidal_volume_ml) / _ML_PER_L * pressure


def power_volume_control_full_j_per_min(
    rate_per_min: ArrayLike,
    tidal_volume_ml: ArrayLike,
    compliance_ml_per_cmh2o: ArrayLike,
    resistance_cmh2o_s_per_l: ArrayLike,
    inspiratory_time_s: ArrayLike,
    peep_cmh2o: ArrayLike,
) -> Array:
    """Mechanical power of volume control at constant flow, from the mechanics.

    Parameters
    ----------
    rate_per_min, tidal_volume_ml : array_like
        Total rate and tidal volume.
    compliance_ml_per_cmh2o, resistance_cmh2o_s_per_l : array_like
    inspiratory_time_s : array_like
        Time during which gas flows, without a pause.
    peep_cmh2o : array_like

    Returns
    -------
    power : ndarray, broadcast shape
        J/min, of the whole respiratory system.

    Notes
    -----
    gattinoni2016: 0.098 RR {VT^2 [Ers / 2 + RR (1 + I:E) / (60 I:E) Raw] + VT PEEP}, where
    RR (1 + I:E) / (60 I:E) is one over the inspiratory time.

    Examples
    --------
    >>> round(float(power_volume_control_full_j_per_min(20.0, 500.0, 1000 / 30, 10.0, 1.0, 10.0)), 1)
    22.1
    """
    volume_l = _floats(tidal_volume_ml) / _ML_PER_L
    elastic = 0.5 * _ML_PER_L / _floats(compliance_ml_per_cmh2o)
    resistive = _floats(resistance_cmh2o_s_per_l) / _floats(inspiratory_time_s)
    work = volume_l * (volume_l * (elastic + resistive) + _floats(peep_cmh2o))
    return J_PER_CMH2O_L * _floats(rate_per_min) * work


def power_pressure_control_j_per_min(
    rate_per_min: ArrayLike,
    tidal_volume_ml: ArrayLike,
    peep_cmh2o: ArrayLike,
    inspiratory_pressure_cmh2o: ArrayLike,
) -> Array:
    """Mechanical power of pressure control with a square wave.

    Parameters
    ----------
    rate_per_min, tidal_volume_ml, peep_cmh2o : array_like
    inspiratory_pressure_cmh2o : array_like
        Above PEEP.

    Returns
    -------
    power : ndarray, broadcast shape
        J/min, of the whole respiratory system.

    Notes
    -----
    becher2019, simplified: 0.098 RR VT (PEEP + dP). Reads high where the pressure rises slowly, on average by
    19 % (trinkle2022).

    Examples
    --------
    >>> round(float(power_pressure_control_j_per_min(20.0, 540.0, 10.0, 15.0)), 1)
    26.5
    """
    pressure = _floats(peep_cmh2o) + _floats(inspiratory_pressure_cmh2o)
    return J_PER_CMH2O_L * _floats(rate_per_min) * _floats(tidal_volume_ml) / _ML_PER_L * pressure


def power_pressure_control_with_rise_j_per_min(
    rate_per_min: ArrayLike,
    tidal_volume_ml: ArrayLike,
    peep_cmh2o: ArrayLike,
    inspiratory_pressure_cmh2o: ArrayLike,
    compliance_ml_per_cmh2o: ArrayLike,
    resistance_cmh2o_s_per_l: ArrayLike,
    rise_time_s: ArrayLike,
) -> Array:
    """Mechanical power of pressure control whose pressure rises along a ramp.

    Parameters, shapes and units as `power_pressure_control_j_per_min`, with the mechanics and the time from
    PEEP to full pressure (>= 0; at 0 the two forms agree).

    Notes
    -----
    becher2019, comprehensive: with x = rise time / (R C) the work loses
    dP^2 C [1/2 - 1/x + (1 - exp(-x)) / x^2]. Mean error 10 % in patients (trinkle2022).

    Examples
    --------
    >>> power_pressure_control_with_rise_j_per_min(20.0, 540.0, 10.0, 15.0, 40.0, 10.0, [0.0, 0.15]).round(1)
    array([26.5, 25.5])
    """
    x = _floats(rise_time_s) / time_constant_s(compliance_ml_per_cmh2o, resistance_cmh2o_s_per_l)
    safe = np.where(x > 1e-3, x, 1.0)
    lost_share = np.where(x > 1e-3, 0.5 - 1.0 / safe - np.expm1(-safe) / safe**2, x / 6.0 - x**2 / 24.0)
    lost = (
        _floats(inspiratory_pressure_cmh2o) ** 2 * _floats(compliance_ml_per_cmh2o) / _ML_PER_L * lost_share
    )
    square = power_pressure_control_j_per_min(
        rate_per_min, tidal_volume_ml, peep_cmh2o, inspiratory_pressure_cmh2o
    )
    return square - J_PER_CMH2O_L * _floats(rate_per_min) * lost
