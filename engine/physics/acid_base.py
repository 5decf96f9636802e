"""Acid and base: bicarbonate, base excess, and the pH after a change of CO2.

References
----------
c46 : Clinical and Laboratory Standards Institute, "Blood gas and pH analysis and related measurements",
    approved guideline C46 (bicarbonate, and base excess of the extracellular fluid).
lang2002 : W. Lang, R. Zander, "The accuracy of calculated base excess in blood", Clin. Chem. Lab. Med. 40(4),
    404-410, 2002 (whole blood).
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

# c46
_SOLUBILITY_MMOL_PER_L_MMHG = 0.0307
_PK = 6.105
_NORMAL_HCO3_MMOL_PER_L = 24.8
_ECF_BUFFER_MMOL_PER_L = 16.2  # per unit of pH
_NORMAL_PH = 7.40
# lang2002, with its own pair of constants
_LANG_SOLUBILITY_MMOL_PER_L_MMHG = 0.0304
_LANG_PK = 6.1
_LANG_NORMAL_HCO3_MMOL_PER_L = 24.26

_SETTLED = 1e-12  # of pH
_MOST_STEPS = 100


def hco3_mmol_per_l(ph: ArrayLike, pco2_mmhg: ArrayLike) -> Array:
    """Bicarbonate of plasma, as analysers print it.

    Parameters
    ----------
    ph, pco2_mmhg : array_like
        Plasma pH and CO2 tension at 37 C; they broadcast. NaN in gives NaN out.

    Returns
    -------
    hco3_mmol_per_l : ndarray, broadcast shape

    Notes
    -----
    Henderson-Hasselbalch with the constants of c46, 0.0307 and 6.105. Other pairs in print differ by up to
    4.5 % (23.9 to 25.0 at 7.40 and 40).

    Examples
    --------
    >>> round(float(hco3_mmol_per_l(7.40, 40.0)), 2)
    24.22
    """
    dissolved = _SOLUBILITY_MMOL_PER_L_MMHG * np.asarray(pco2_mmhg, dtype=np.float64)
    return dissolved * np.power(10.0, np.asarray(ph, dtype=np.float64) - _PK)


def ph_from_hco3(hco3_mmol_per_l: ArrayLike, pco2_mmhg: ArrayLike) -> Array:
    """Plasma pH from bicarbonate (> 0) and CO2 tension (> 0), which broadcast; NaN in gives NaN out.

    The inverse of `hco3_mmol_per_l`.

    Examples
    --------
    >>> round(float(ph_from_hco3(24.0, 40.0)), 3)
    7.396
    """
    dissolved = _SOLUBILITY_MMOL_PER_L_MMHG * np.asarray(pco2_mmhg, dtype=np.float64)
    return _PK + np.log10(np.asarray(hco3_mmol_per_l, dtype=np.float64) / dissolved)


def standard_base_excess_mmol_per_l(ph: ArrayLike, pco2_mmhg: ArrayLike) -> Array:
    """Base excess of the extracellular fluid: what ventilation alone leaves unchanged.

    Parameters
    ----------
    ph, pco2_mmhg : array_like
        Plasma pH and CO2 tension at 37 C; they broadcast. NaN in gives NaN out.

    Returns
    -------
    standard_base_excess : ndarray, broadcast shape
        mmol/L.

    Notes
    -----
    c46: HCO3 - 24.8 + 16.2 (pH - 7.40). By its own constants a normal gas (7.40, 40 mmHg) reads -0.6, not 0.

    Examples
    --------
    >>> standard_base_excess_mmol_per_l([7.40, 7.10], [40.0, 80.0]).round(1)
    array([-0.6, -5.4])
    """
    above_normal = hco3_mmol_per_l(ph, pco2_mmhg) - _NORMAL_HCO3_MMOL_PER_L
    return above_normal + _ECF_BUFFER_MMOL_PER_L * (np.asarray(ph, dtype=np.float64) - _NORMAL_PH)


def _lang_terms(hb_g_per_dl: ArrayLike, so2: ArrayLike) -> tuple[Array, Array, Array]:
    """Plasma share, buffer value (mmol/L per pH) and oxygenation term (mmol/L) of lang2002."""
    hb = np.asarray(hb_g_per_dl, dtype=np.float64)
    return 1.0 - 0.0143 * hb, 9.5 + 1.63 * hb, 0.2 * hb * (1.0 - np.asarray(so2, dtype=np.float64))


def whole_blood_base_excess_mmol_per_l(
    ph: ArrayLike, pco2_mmhg: ArrayLike, hb_g_per_dl: ArrayLike, so2: ArrayLike
) -> Array:
    """Base excess of blood: what a passage through the lung leaves unchanged, as tissue has no time to act.

    Parameters
    ----------
    ph, pco2_mmhg : array_like
        Plasma pH and CO2 tension at 37 C.
    hb_g_per_dl : array_like
        Haemoglobin.
    so2 : array_like
        Saturation as a fraction. All arguments broadcast; NaN in gives NaN out.

    Returns
    -------
    base_excess : ndarray, broadcast shape
        mmol/L.

    Notes
    -----
    lang2002: (1 - 0.0143 Hb) [(0.0304 PCO2 10^(pH - 6.1) - 24.26) + (9.5 + 1.63 Hb)(pH - 7.4)]
    - 0.2 Hb (1 - S). Mean error 0.9 mmol/L against 148 reference samples, BE -30 to 30, PCO2 12 to 96 mmHg.

    Examples
    --------
    >>> abs(round(float(whole_blood_base_excess_mmol_per_l(7.40, 40.0, 15.0, 1.0)), 1))
    0.0
    """
    plasma_share, buffer_value, from_oxygen = _lang_terms(hb_g_per_dl, so2)
    acidity = np.asarray(ph, dtype=np.float64)
    dissolved = _LANG_SOLUBILITY_MMOL_PER_L_MMHG * np.asarray(pco2_mmhg, dtype=np.float64)
    hco3 = dissolved * np.power(10.0, acidity - _LANG_PK)
    from_buffers = buffer_value * (acidity - _NORMAL_PH)
    return plasma_share * (hco3 - _LANG_NORMAL_HCO3_MMOL_PER_L + from_buffers) - from_oxygen


def _ph_where(hco3_at_normal_ph: Array, buffer_value: ArrayLike, total: ArrayLike) -> Array:
    """Solve hco3 10^x + buffer x = total for pH = 7.40 + x, any shape, by Newton's method.

    The left side rises and is convex, so the steps close in from above wherever they start. NaN where they do
    not settle. All in mmol/L.
    """
    hco3, buffer, total = np.broadcast_arrays(hco3_at_normal_ph, buffer_value, total)
    x = np.zeros(np.shape(hco3))
    step = np.full_like(x, np.nan)
    for _ in range(_MOST_STEPS):
        plasma = hco3 * np.power(10.0, x)
        step = (plasma + buffer * x - total) / (np.log(10.0) * plasma + buffer)
        x = x - step
        if not np.any(np.abs(step) > _SETTLED):
            break
    return np.where(np.abs(step) <= _SETTLED, _NORMAL_PH + x, np.nan)


def ph_at_standard_base_excess(pco2_mmhg: ArrayLike, standard_base_excess_mmol_per_l: ArrayLike) -> Array:
    """Plasma pH after PCO2 has moved while the standard base excess stayed.

    Parameters
    ----------
    pco2_mmhg : array_like
        CO2 tension, > 0.
    standard_base_excess_mmol_per_l : array_like
        As `standard_base_excess_mmol_per_l` gives it. They broadcast; NaN in gives NaN out.

    Returns
    -------
    ph : ndarray, broadcast shape

    Notes
    -----
    The inverse of c46, by Newton's method to 1e-12. For minutes to hours after a change of ventilation,
    before the kidney answers: it reproduces the bedside rules of +1 mmol/L of bicarbonate per 10 mmHg up and
    -2 per 10 down.

    Examples
    --------
    >>> ph_at_standard_base_excess([40.0, 80.0, 20.0], -0.58).round(2)
    array([7.4 , 7.16, 7.63])
    """
    excess = np.asarray(standard_base_excess_mmol_per_l, dtype=np.float64)
    hco3 = hco3_mmol_per_l(_NORMAL_PH, pco2_mmhg)
    return _ph_where(hco3, _ECF_BUFFER_MMOL_PER_L, excess + _NORMAL_HCO3_MMOL_PER_L)


def ph_at_whole_blood_base_excess(
    pco2_mmhg: ArrayLike, base_excess_mmol_per_l: ArrayLike, hb_g_per_dl: ArrayLike, so2: ArrayLike
) -> Array:
    """Plasma pH of blood whose PCO2 and saturation have moved while its own base excess stayed.

    Parameters
    ----------
    pco2_mmhg : array_like
        CO2 tension, > 0.
    base_excess_mmol_per_l : array_like
        As `whole_blood_base_excess_mmol_per_l` gives it.
    hb_g_per_dl : array_like
        Haemoglobin, below 69 g/dL (where the plasma share of the equation vanishes).
    so2 : array_like
        Saturation as a fraction. All arguments broadcast; NaN in gives NaN out.

    Returns
    -------
    ph : ndarray, broadcast shape

    Notes
    -----
    The inverse of lang2002, by Newton's method to 1e-12. For blood within the lung, not for a patient after
    minutes: the extracellular fluid buffers less than blood does.

    Examples
    --------
    >>> ph_at_whole_blood_base_excess([40.0, 46.0], 0.0, 15.0, [1.0, 0.75]).round(3)
    array([7.4  , 7.372])
    """
    plasma_share, buffer_value, from_oxygen = _lang_terms(hb_g_per_dl, so2)
    dissolved = _LANG_SOLUBILITY_MMOL_PER_L_MMHG * np.asarray(pco2_mmhg, dtype=np.float64)
    hco3_at_normal_ph = dissolved * np.power(10.0, _NORMAL_PH - _LANG_PK)
    excess = (np.asarray(base_excess_mmol_per_l, dtype=np.float64) + from_oxygen) / plasma_share
    return _ph_where(hco3_at_normal_ph, buffer_value, excess + _LANG_NORMAL_HCO3_MMOL_PER_L)
