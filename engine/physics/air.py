"""Gas from the room to the alveolus: water vapour, altitude, inspired and alveolar oxygen.

References
----------
wagner1993 : W. Wagner, A. Pruss, "International equations for the saturation properties of ordinary water
    substance", J. Phys. Chem. Ref. Data 22(3), 783-787, 1993 (the IAPWS saturation line).
ussa1976 : "U.S. Standard Atmosphere, 1976", NOAA-S/T 76-1562, 1976 (the same as ISO 2533:1975 below 32 km).
fenn1946 : W. O. Fenn, H. Rahn, A. B. Otis, "A theoretical study of the composition of the alveolar air at
    altitude", Am. J. Physiol. 146, 637-653, 1946 (the alveolar gas equation, in full).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

BODY_WATER_VAPOUR_MMHG = 47.0  # at 37 C, by convention; the saturation line gives 47.1
STANDARD_BAROMETRIC_MMHG = 760.0
ZERO_CELSIUS_K = 273.15

_MMHG_PER_MPA = 1e6 * 760.0 / 101_325.0
# wagner1993, eq. 1: exponents and coefficients of the saturation line, critical point.
_SATURATION_LINE = (
    (1.0, -7.85951783),
    (1.5, 1.84408259),
    (3.0, -11.7866497),
    (3.5, 22.6807411),
    (4.0, -15.9618719),
    (7.5, 1.80122502),
)
_CRITICAL_K = 647.096
_CRITICAL_MPA = 22.064
# ussa1976, lowest layer: temperature at sea level, lapse rate, and g M / (R L).
_SEA_LEVEL_K = 288.15
_LAPSE_K_PER_M = 0.0065
_PRESSURE_EXPONENT = 9.80665 * 0.0289644 / (8.31432 * _LAPSE_K_PER_M)
_EARTH_RADIUS_M = 6_356_766.0


def water_vapour_mmhg(temperature_c: ArrayLike) -> Array:
    """Saturated water vapour pressure over liquid water.

    Parameters
    ----------
    temperature_c : array_like, any shape
        Temperature, 0 to 100 C (the line itself holds to 373 C). NaN in gives NaN out.

    Returns
    -------
    water_vapour_mmhg : ndarray, same shape

    Notes
    -----
    wagner1993, eq. 1: within 0.03 % of the measured line. Vapour pressure depends on temperature alone: it
    stays 47 mmHg in the airway on any mountain.

    Examples
    --------
    >>> water_vapour_mmhg([20.0, 37.0]).round(2)
    array([17.55, 47.12])
    """
    kelvin = np.asarray(temperature_c, dtype=np.float64) + ZERO_CELSIUS_K
    tau = 1.0 - kelvin / _CRITICAL_K
    exponent = _CRITICAL_K / kelvin * sum(a * tau**power for power, a in _SATURATION_LINE)
    return _CRITICAL_MPA * _MMHG_PER_MPA * np.exp(exponent)


def barometric_mmhg_from_altitude(altitude_m: ArrayLike) -> Array:
    """Air pressure of the standard atmosphere at a height above sea level.

    Parameters
    ----------
    altitude_m : array_like, any shape
        Geometric altitude, -500 to 11,000 m. NaN in gives NaN out.

    Returns
    -------
    barometric_mmhg : ndarray, same shape
        Station pressure, not reduced to sea level.

    Notes
    -----
    ussa1976, lowest layer, with its own turning of geometric into geopotential height. Weather moves the true
    pressure by some 20 mmHg, and warm mountains stand up to 17 mmHg above this line (J. B. West, J. Appl.
    Physiol. 81, 1850-1854, 1996): a measured station pressure is always better.

    Examples
    --------
    >>> barometric_mmhg_from_altitude([0.0, 1609.0]).round(1)
    array([760. , 625.8])
    """
    height = np.asarray(altitude_m, dtype=np.float64)
    geopotential = _EARTH_RADIUS_M * height / (_EARTH_RADIUS_M + height)
    cooling = 1.0 - _LAPSE_K_PER_M * geopotential / _SEA_LEVEL_K
    return STANDARD_BAROMETRIC_MMHG * cooling**_PRESSURE_EXPONENT


def pio2_mmhg(
    fio2: ArrayLike, barometric_mmhg: ArrayLike, water_vapour_mmhg: ArrayLike = BODY_WATER_VAPOUR_MMHG
) -> Array:
    """Oxygen tension of inspired gas, warmed and moistened in the airway.

    Parameters
    ----------
    fio2 : array_like
        Oxygen fraction of the dry gas, 0-1.
    barometric_mmhg, water_vapour_mmhg : array_like
        Station pressure and water vapour pressure at body temperature. All arguments broadcast.

    Returns
    -------
    pio2_mmhg : ndarray, broadcast shape

    Notes
    -----
    Dalton's law.

    Examples
    --------
    >>> round(float(pio2_mmhg(0.21, 760.0)), 1)
    149.7
    """
    dry_mmhg = np.asarray(barometric_mmhg, dtype=np.float64) - np.asarray(water_vapour_mmhg, dtype=np.float64)
    return np.asarray(fio2, dtype=np.float64) * dry_mmhg


def palvo2_mmhg(
    fio2: ArrayLike,
    barometric_mmhg: ArrayLike,
    paco2_mmhg: ArrayLike,
    respiratory_quotient: ArrayLike = 0.8,
    water_vapour_mmhg: ArrayLike = BODY_WATER_VAPOUR_MMHG,
) -> Array:
    """Ideal alveolar oxygen tension, in full (with the term for unequal inspired and expired volumes).

    Parameters
    ----------
    fio2 : array_like
        Inspired oxygen fraction, 0-1.
    barometric_mmhg, water_vapour_mmhg : array_like
        Station pressure and water vapour pressure at body temperature.
    paco2_mmhg : array_like
        Arterial CO2 tension, standing for the alveolar one.
    respiratory_quotient : array_like
        CO2 output over O2 uptake, > 0. All arguments broadcast.

    Returns
    -------
    palvo2_mmhg : ndarray, broadcast shape
        May be negative where the inputs cannot go together; nothing is clamped.

    Notes
    -----
    fenn1946: PAO2 = PIO2 - PaCO2 (FiO2 + (1 - FiO2) / R). No inspired CO2. At FiO2 1.0 it is
    PB - PH2O - PaCO2 whatever R is.

    Examples
    --------
    >>> palvo2_mmhg([0.21, 1.0], 760.0, 40.0).round(1)
    array([101.8, 673. ])
    """
    inspired = np.asarray(fio2, dtype=np.float64)
    taken_up = inspired + (1.0 - inspired) / np.asarray(respiratory_quotient, dtype=np.float64)
    paco2 = np.asarray(paco2_mmhg, dtype=np.float64)
    return pio2_mmhg(inspired, barometric_mmhg, water_vapour_mmhg) - paco2 * taken_up


def palvo2_simple_mmhg(
    fio2: ArrayLike,
    barometric_mmhg: ArrayLike,
    paco2_mmhg: ArrayLike,
    respiratory_quotient: ArrayLike = 0.8,
    water_vapour_mmhg: ArrayLike = BODY_WATER_VAPOUR_MMHG,
) -> Array:
    """Alveolar oxygen tension without the correction term, for comparison with hand calculations only.

    Parameters, shapes and units as `palvo2_mmhg`.

    Notes
    -----
    PAO2 = PIO2 - PaCO2 / R. Too low by PaCO2 FiO2 (1 - R) / R: 2 mmHg in air, 10 mmHg at FiO2 1.0, both at
    PaCO2 40.

    Examples
    --------
    >>> palvo2_simple_mmhg([0.21, 1.0], 760.0, 40.0).round(1)
    array([ 99.7, 663. ])
    """
    quotient = np.asarray(respiratory_quotient, dtype=np.float64)
    return pio2_mmhg(fio2, barometric_mmhg, water_vapour_mmhg) - np.asarray(paco2_mmhg, np.float64) / quotient
