"""Oxygen in blood: saturation, tension, content, shunt.

References
----------
severinghaus1979 : J. W. Severinghaus, "Simple, accurate equations for human blood O2 dissociation
    computations", J. Appl. Physiol. 46(3), 599-602, 1979.
ellis1989 : R. K. Ellis, "Determination of PO2 from saturation", J. Appl. Physiol. 67(2), 902, 1989.
kelman1966 : G. R. Kelman, "Digital computer subroutine for the conversion of oxygen tension into saturation",
    J. Appl. Physiol. 21(4), 1375-1376, 1966.
berggren1942 : S. M. Berggren, "The oxygen deficit of arterial blood caused by non-ventilating parts of the
    lung", Acta Physiol. Scand. 4 (suppl. 11), 1942.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

O2_CAPACITY_ML_PER_G = 1.34
"""Oxygen bound by one gram of haemoglobin, mL STPD; goes with calculated (functional) saturation."""
O2_SOLUBILITY_ML_PER_DL_MMHG = 0.0031
"""Oxygen dissolved in blood at 37 C, mL STPD per dL and mmHg."""

# severinghaus1979, eq. 1
_CUBE_MMHG3 = 23_400.0
_LINEAR_MMHG2 = 150.0
# kelman1966: shift of the curve, in powers of ten
_SHIFT_PER_PH = 0.40
_SHIFT_PER_LOG_PCO2 = 0.06
_SHIFT_PER_C = 0.024
_NORMAL_PH = 7.40
_NORMAL_PCO2_MMHG = 40.0
_BODY_C = 37.0

_SETTLED = 1e-12  # of ln PO2
_MOST_STEPS = 100


def so2_from_po2(po2_mmhg: ArrayLike) -> Array:
    """Haemoglobin saturation of standard blood (37 C, pH 7.40, PCO2 40 mmHg).

    Parameters
    ----------
    po2_mmhg : array_like, any shape
        Oxygen tension, >= 0. NaN in gives NaN out.

    Returns
    -------
    so2 : ndarray, same shape
        Functional saturation as a fraction, 0-1.

    Notes
    -----
    severinghaus1979, eq. 1: within 0.0055 of the standard curve, 1 to 500 mmHg. No shift; see `so2_in_blood`.
    Above 120 mmHg it lies above the paper's own table (0.9971 against 0.9920 at 200 mmHg); the two must not
    be mixed.

    Examples
    --------
    >>> so2_from_po2([26.9, 100.0]).round(3)
    array([0.501, 0.977])
    """
    p = np.asarray(po2_mmhg, dtype=np.float64)
    cubic = p * (p * p + _LINEAR_MMHG2)
    return cubic / (cubic + _CUBE_MMHG3)


def so2_slope_per_mmhg(po2_mmhg: ArrayLike) -> Array:
    """Slope of the standard curve, dS/dP in fractions per mmHg.

    Parameters
    ----------
    po2_mmhg : array_like, any shape
        Oxygen tension, >= 0. NaN in gives NaN out.

    Returns
    -------
    so2_per_mmhg : ndarray, same shape

    Notes
    -----
    severinghaus1979, eq. 1, differentiated.

    Examples
    --------
    >>> so2_slope_per_mmhg([26.9, 100.0]).round(4)
    array([0.0247, 0.0007])
    """
    p = np.asarray(po2_mmhg, dtype=np.float64)
    squares = p * p
    cubic = p * (squares + _LINEAR_MMHG2)
    return _CUBE_MMHG3 * (3.0 * squares + _LINEAR_MMHG2) / (cubic + _CUBE_MMHG3) ** 2


def po2_from_so2_mmhg(so2: ArrayLike) -> Array:
    """Oxygen tension of standard blood at a saturation: the exact inverse of `so2_from_po2`.

    Parameters
    ----------
    so2 : array_like, any shape
        Saturation as a fraction, 0 to below 1. NaN in gives NaN out.

    Returns
    -------
    po2_mmhg : ndarray, same shape
        inf at 1, which no finite tension reaches; NaN outside 0-1.

    Notes
    -----
    ellis1989. Above 0.97 one hundredth of saturation spans 30 mmHg and more.

    Examples
    --------
    >>> po2_from_so2_mmhg([0.5, 0.9, 0.97]).round(1)
    array([26.9, 58.7, 90.6])
    """
    s = np.asarray(so2, dtype=np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        b = np.where((s >= 0.0) & (s <= 1.0), 0.5 * _CUBE_MMHG3 * s / (1.0 - s), np.nan)
    a = _LINEAR_MMHG2 / 3.0
    larger: Array = np.cbrt(np.hypot(a**1.5, b) + b)
    return larger - a / larger


def _shift(ph: ArrayLike, pco2_mmhg: ArrayLike, temperature_c: ArrayLike) -> Array:
    """Factor that turns a tension in this blood into the tension on the standard curve (kelman1966)."""
    by_ph = _SHIFT_PER_PH * (np.asarray(ph, dtype=np.float64) - _NORMAL_PH)
    by_co2 = _SHIFT_PER_LOG_PCO2 * np.log10(_NORMAL_PCO2_MMHG / np.asarray(pco2_mmhg, dtype=np.float64))
    by_warmth = _SHIFT_PER_C * (_BODY_C - np.asarray(temperature_c, dtype=np.float64))
    return np.power(10.0, by_ph + by_co2 + by_warmth)


def po2_standard_mmhg(
    po2_mmhg: ArrayLike, ph: ArrayLike, pco2_mmhg: ArrayLike, temperature_c: ArrayLike = _BODY_C
) -> Array:
    """Tension at which standard blood would be as saturated as this blood is.

    Parameters
    ----------
    po2_mmhg, ph, pco2_mmhg : array_like
        Oxygen tension (>= 0), plasma pH and CO2 tension (> 0) of this blood.
    temperature_c : array_like
        Temperature at which the three are true. All arguments broadcast; NaN in gives NaN out.

    Returns
    -------
    po2_mmhg : ndarray, broadcast shape

    Notes
    -----
    kelman1966: P x 10^(0.40 (pH - 7.40) + 0.06 log(40 / PCO2) + 0.024 (37 - T)). Along a CO2 titration this
    is a Bohr factor near -0.50 (accepted -0.48). No term for 2,3-DPG.

    Examples
    --------
    >>> po2_standard_mmhg([60.0, 60.0], [7.40, 7.20], [40.0, 60.0]).round(1)
    array([60. , 48.7])
    """
    return np.asarray(po2_mmhg, dtype=np.float64) * _shift(ph, pco2_mmhg, temperature_c)


def so2_in_blood(
    po2_mmhg: ArrayLike, ph: ArrayLike, pco2_mmhg: ArrayLike, temperature_c: ArrayLike = _BODY_C
) -> Array:
    """Saturation of blood that is not standard. Arguments, shapes and source as `po2_standard_mmhg`.

    Examples
    --------
    >>> so2_in_blood([60.0, 60.0], [7.40, 7.20], [40.0, 60.0]).round(3)
    array([0.906, 0.84 ])
    """
    return so2_from_po2(po2_standard_mmhg(po2_mmhg, ph, pco2_mmhg, temperature_c))


def po2_in_blood_mmhg(
    so2: ArrayLike, ph: ArrayLike, pco2_mmhg: ArrayLike, temperature_c: ArrayLike = _BODY_C
) -> Array:
    """Tension of blood that is not standard, from its saturation: the exact inverse of `so2_in_blood`.

    Examples
    --------
    >>> round(float(po2_in_blood_mmhg(0.9, 7.20, 60.0)), 1)
    72.3
    """
    return po2_from_so2_mmhg(so2) / _shift(ph, pco2_mmhg, temperature_c)


def o2_content_ml_per_dl(po2_mmhg: ArrayLike, so2: ArrayLike, hb_g_per_dl: ArrayLike) -> Array:
    """Oxygen in blood, bound and dissolved.

    Parameters
    ----------
    po2_mmhg : array_like
        Oxygen tension.
    so2 : array_like
        Functional saturation as a fraction.
    hb_g_per_dl : array_like
        Haemoglobin able to carry oxygen. All arguments broadcast; NaN in gives NaN out.

    Returns
    -------
    o2_content : ndarray, broadcast shape
        mL STPD per dL of blood.

    Notes
    -----
    1.34 Hb S + 0.0031 P (common practice). Others use 1.36 or 1.39 mL/g: the difference moves a computed PaO2
    behind a shunt by under 1 mmHg.

    Examples
    --------
    >>> round(float(o2_content_ml_per_dl(100.0, 0.975, 15.0)), 1)
    19.9
    """
    capacity = O2_CAPACITY_ML_PER_G * np.asarray(hb_g_per_dl, dtype=np.float64)
    dissolved = O2_SOLUBILITY_ML_PER_DL_MMHG * np.asarray(po2_mmhg, dtype=np.float64)
    return capacity * np.asarray(so2, dtype=np.float64) + dissolved


def shunt_fraction(
    capillary_o2_ml_per_dl: ArrayLike, arterial_o2_ml_per_dl: ArrayLike, venous_o2_ml_per_dl: ArrayLike
) -> Array:
    """Share of the cardiac output that passes the lung without meeting gas.

    Parameters
    ----------
    capillary_o2_ml_per_dl, arterial_o2_ml_per_dl, venous_o2_ml_per_dl : array_like
        Oxygen contents of end-capillary, arterial and mixed venous blood; they broadcast. NaN in, NaN out.

    Returns
    -------
    shunt : ndarray, broadcast shape
        A fraction. Negative where the arterial content exceeds the capillary one; nothing is clamped.

    Notes
    -----
    berggren1942: (Cc' - Ca) / (Cc' - Cv). Use calculated saturation for both capillary and arterial blood:
    a measured 0.993 against a calculated 1.000 alone looks like 2 to 5 % of shunt.

    Examples
    --------
    >>> round(float(shunt_fraction(20.0, 19.0, 15.0)), 2)
    0.2
    """
    capillary = np.asarray(capillary_o2_ml_per_dl, dtype=np.float64)
    missing = capillary - np.asarray(arterial_o2_ml_per_dl, dtype=np.float64)
    return missing / (capillary - np.asarray(venous_o2_ml_per_dl, dtype=np.float64))


po2_from_so2 = po2_from_so2_mmhg  # shorter names, until all callers say the unit
po2_in_blood = po2_in_blood_mmhg


def _ln_po2_per_c(po2_mmhg: Array) -> Array:
    """Rise of ln PO2 per degree in a sealed sample (severinghaus1979, eq. 3, bracket corrected)."""
    return 0.058 / (0.243 * (po2_mmhg / 100.0) ** 3.88 + 1.0) + 0.013


def po2_at_temperature_mmhg(po2_mmhg_at_37: ArrayLike, temperature_c: ArrayLike) -> Array:
    """Tension in the patient, at the patient's temperature, of a sample measured at 37 C.

    Parameters
    ----------
    po2_mmhg_at_37 : array_like
        Tension measured at 37 C, >= 0.
    temperature_c : array_like
        Temperature of the patient, 10 to 45 C. They broadcast; NaN in gives NaN out.

    Returns
    -------
    po2_mmhg : ndarray, broadcast shape

    Notes
    -----
    severinghaus1979, eq. 3, for a sealed sample: d ln P / dT = 0.058 / (0.243 (P / 100)^3.88 + 1) + 0.013
    with P at 37 C. The printed abstract puts 0.243 inside the power; a mass balance of the closed sample
    (within 0.002 per C from 20 to 500 mmHg) demands it outside. Not the same as the shift of the curve in
    `po2_standard_mmhg`, and not to be used in its place.

    Examples
    --------
    >>> po2_at_temperature_mmhg([40.0, 100.0, 500.0], 33.0).round(1)
    array([ 30.2,  78.8, 473.8])
    """
    at_37 = np.asarray(po2_mmhg_at_37, dtype=np.float64)
    return at_37 * np.exp(_ln_po2_per_c(at_37) * (np.asarray(temperature_c, dtype=np.float64) - _BODY_C))


def po2_at_37_mmhg(po2_mmhg: ArrayLike, temperature_c: ArrayLike) -> Array:
    """Tension an analyser at 37 C would print: the inverse of `po2_at_temperature_mmhg`.

    Parameters
    ----------
    po2_mmhg : array_like
        Tension at the temperature of the patient, > 0.
    temperature_c : array_like
        That temperature, 10 to 45 C. They broadcast; NaN in gives NaN out.

    Returns
    -------
    po2_mmhg_at_37 : ndarray, broadcast shape

    Notes
    -----
    Newton's method on ln P, whose slope stays positive over the whole range of temperature. NaN where it does
    not settle.

    Examples
    --------
    >>> round(float(po2_at_37_mmhg(78.8, 33.0)), 1)
    100.0
    """
    target = np.log(np.asarray(po2_mmhg, dtype=np.float64))
    warmer_c = np.asarray(temperature_c, dtype=np.float64) - _BODY_C
    target, warmer_c = np.broadcast_arrays(target, warmer_c)
    guess = target.copy()
    step = np.full_like(guess, np.nan)
    for _ in range(_MOST_STEPS):
        at_37 = np.exp(guess)
        u = 0.243 * (at_37 / 100.0) ** 3.88
        slope = 1.0 - warmer_c * 0.058 * 3.88 * u / (u + 1.0) ** 2
        step = (guess + warmer_c * _ln_po2_per_c(at_37) - target) / slope
        guess = guess - step
        if not np.any(np.abs(step) > _SETTLED):
            break
    return np.where(np.abs(step) <= _SETTLED, np.exp(guess), np.nan)
