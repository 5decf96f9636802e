"""Carbon dioxide: content of blood, alveolar ventilation, dead space.

References
----------
douglas1988 : A. R. Douglas, N. L. Jones, J. W. Reed, "Calculation of whole blood CO2 content", J. Appl.
    Physiol. 65(1), 473-477, 1988.
kelman1967 : G. R. Kelman, "Digital computer procedure for the conversion of PCO2 into blood CO2 content",
    Respir. Physiol. 3(1), 111-115, 1967.
bohr1891 : C. Bohr, "Ueber die Lungenathmung", Skand. Arch. Physiol. 2, 236-268, 1891.
enghoff1938 : H. Enghoff, "Volumen inefficax. Bemerkungen zur Frage des schaedlichen Raumes", Upsala
    Laekarefoeren. Foerh. 44, 191-218, 1938.
bradley1956 : A. F. Bradley, M. Stupfel, J. W. Severinghaus, "Effect of temperature on PCO2 and PO2 of blood
    in vitro", J. Appl. Physiol. 9(2), 201-204, 1956.
"""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from engine.physics.air import STANDARD_BAROMETRIC_MMHG, ZERO_CELSIUS_K

Array = NDArray[np.float64]

_BODY_C = 37.0
_ML_PER_L = 1000.0

CO2_CONSTANT = STANDARD_BAROMETRIC_MMHG * (ZERO_CELSIUS_K + _BODY_C) / ZERO_CELSIUS_K / _ML_PER_L
"""mmHg x L BTPS per mL STPD, 0.863: the gas law between a dry cold millilitre of CO2 and a warm wet litre of
alveolar gas. It does not depend on the barometric pressure as long as ventilation is BTPS."""

_ML_STPD_PER_DL_FROM_MMOL_PER_L = 2.226  # douglas1988
_LOG_PCO2_PER_C = 0.019  # bradley1956 measured 4.4 % per degree; analysers use 0.019


def co2_solubility_mmol_per_l_mmhg(temperature_c: ArrayLike = _BODY_C) -> Array:
    """Solubility of CO2 in plasma.

    Parameters
    ----------
    temperature_c : array_like, any shape
        20 to 42 C. NaN in gives NaN out.

    Returns
    -------
    solubility : ndarray, same shape
        mmol per litre of plasma and mmHg.

    Notes
    -----
    kelman1967.

    Examples
    --------
    >>> round(float(co2_solubility_mmol_per_l_mmhg(37.0)), 4)
    0.0307
    """
    cooler_c = _BODY_C - np.asarray(temperature_c, dtype=np.float64)
    return 0.0307 + 0.00057 * cooler_c + 0.00002 * cooler_c * cooler_c


def co2_pk(ph: ArrayLike, temperature_c: ArrayLike = _BODY_C) -> Array:
    """Apparent pK of carbonic acid in plasma, for contents (`acid_base` has the analysers' constant one).

    Parameters
    ----------
    ph, temperature_c : array_like
        Plasma pH and temperature; they broadcast. NaN in gives NaN out.

    Returns
    -------
    pk : ndarray, broadcast shape

    Notes
    -----
    kelman1967.

    Examples
    --------
    >>> round(float(co2_pk(7.40)), 4)
    6.0907
    """
    acid = 7.4 - np.asarray(ph, dtype=np.float64)
    below_38_c = 38.0 - np.asarray(temperature_c, dtype=np.float64)
    return 6.086 + 0.042 * acid + below_38_c * (0.00472 + 0.00139 * acid)


def plasma_co2_content_ml_per_dl(
    pco2_mmhg: ArrayLike, ph: ArrayLike, temperature_c: ArrayLike = _BODY_C
) -> Array:
    """CO2 in plasma, dissolved and as bicarbonate.

    Parameters
    ----------
    pco2_mmhg, ph, temperature_c : array_like
        CO2 tension, plasma pH, temperature; they broadcast. NaN in gives NaN out.

    Returns
    -------
    co2_content : ndarray, broadcast shape
        mL STPD per dL of plasma.

    Notes
    -----
    douglas1988, plasma part, with solubility and pK of kelman1967.

    Examples
    --------
    >>> round(float(plasma_co2_content_ml_per_dl(40.0, 7.40)), 1)
    58.5
    """
    acidity = np.asarray(ph, dtype=np.float64) - co2_pk(ph, temperature_c)
    dissolved = co2_solubility_mmol_per_l_mmhg(temperature_c) * np.asarray(pco2_mmhg, dtype=np.float64)
    return _ML_STPD_PER_DL_FROM_MMOL_PER_L * dissolved * (1.0 + np.power(10.0, acidity))


def co2_content_ml_per_dl(
    pco2_mmhg: ArrayLike,
    ph: ArrayLike,
    hb_g_per_dl: ArrayLike,
    so2: ArrayLike,
    temperature_c: ArrayLike = _BODY_C,
) -> Array:
    """CO2 in whole blood.

    Parameters
    ----------
    pco2_mmhg, ph : array_like
        CO2 tension and plasma pH.
    hb_g_per_dl : array_like
        Haemoglobin.
    so2 : array_like
        Saturation as a fraction: less saturated blood holds more CO2 (Haldane).
    temperature_c : array_like
        All arguments broadcast. NaN in gives NaN out.

    Returns
    -------
    co2_content : ndarray, broadcast shape
        mL STPD per dL of blood.

    Notes
    -----
    douglas1988. Measured within PCO2 25-85 mmHg, pH 7.12-7.51, Hb 13.7-19 g/dL, saturation 0.33-1.00: bias
    0.02, SD 1.19 mL/dL against 84 Van Slyke values. In anaemia it is an extrapolation, which tends to the
    plasma content as haemoglobin vanishes. Differences are safer than levels (textbook 48 mL/dL in arterial
    blood, here 46.7).

    Examples
    --------
    >>> co2_content_ml_per_dl([40.0, 46.0], [7.40, 7.37], 15.0, [0.975, 0.75]).round(1)
    array([46.7, 51.1])
    """
    cells = (3.352 - 0.456 * np.asarray(so2, dtype=np.float64)) * (8.142 - np.asarray(ph, dtype=np.float64))
    share = 1.0 - 0.0289 * np.asarray(hb_g_per_dl, dtype=np.float64) / cells
    return plasma_co2_content_ml_per_dl(pco2_mmhg, ph, temperature_c) * share


def alveolar_ventilation_l_per_min(vco2_ml_per_min: ArrayLike, paco2_mmhg: ArrayLike) -> Array:
    """Ventilation that clears this much CO2 at this tension.

    Parameters
    ----------
    vco2_ml_per_min : array_like
        CO2 output, mL STPD per minute.
    paco2_mmhg : array_like
        Arterial CO2 tension, > 0. They broadcast; NaN in gives NaN out.

    Returns
    -------
    alveolar_ventilation : ndarray, broadcast shape
        Effective (Enghoff) alveolar ventilation, L BTPS per minute.

    Notes
    -----
    Conservation of CO2 in the steady state; the constant is the gas law's (`CO2_CONSTANT`).

    Examples
    --------
    >>> round(float(alveolar_ventilation_l_per_min(200.0, 40.0)), 2)
    4.31
    """
    vco2 = np.asarray(vco2_ml_per_min, dtype=np.float64)
    return CO2_CONSTANT * vco2 / np.asarray(paco2_mmhg, dtype=np.float64)


def paco2_from_ventilation_mmhg(
    vco2_ml_per_min: ArrayLike, alveolar_ventilation_l_per_min: ArrayLike
) -> Array:
    """Tension at which this ventilation (L BTPS per minute, > 0) clears this much CO2 (mL STPD per minute).

    The inverse of `alveolar_ventilation_l_per_min`, in the steady state. They broadcast; NaN in, NaN out.

    Examples
    --------
    >>> paco2_from_ventilation_mmhg(200.0, [4.31, 2.155]).round(0)
    array([40., 80.])
    """
    ventilation = np.asarray(alveolar_ventilation_l_per_min, dtype=np.float64)
    return CO2_CONSTANT * np.asarray(vco2_ml_per_min, dtype=np.float64) / ventilation


def alveolar_ventilation_of_breaths_l_per_min(
    rate_per_min: ArrayLike, tidal_volume_ml: ArrayLike, dead_space_ml: ArrayLike
) -> Array:
    """Ventilation that reaches perfused alveoli: rate x (tidal volume - dead space), by definition.

    Parameters
    ----------
    rate_per_min, tidal_volume_ml, dead_space_ml : array_like
        Total rate, and volumes per breath, BTPS. They broadcast; NaN in gives NaN out.

    Returns
    -------
    alveolar_ventilation : ndarray, broadcast shape
        L BTPS per minute. Negative where the dead space exceeds the breath; nothing is clamped. Not to be
        trusted below 1.5 times the airway's dead space, where gas streams past it (Y. Henderson et al., Am.
        J. Physiol. 38, 1, 1915; from memory).

    Examples
    --------
    >>> float(alveolar_ventilation_of_breaths_l_per_min(12.0, 500.0, 150.0))
    4.2
    """
    breath_ml = np.asarray(tidal_volume_ml, dtype=np.float64) - np.asarray(dead_space_ml, dtype=np.float64)
    return np.asarray(rate_per_min, dtype=np.float64) * breath_ml / _ML_PER_L


def bohr_dead_space(palvco2_mmhg: ArrayLike, pexpco2_mmhg: ArrayLike) -> Array:
    """Share of the tidal volume that never meets perfused alveoli.

    Parameters
    ----------
    palvco2_mmhg : array_like
        Mean alveolar CO2 tension, > 0.
    pexpco2_mmhg : array_like
        CO2 tension of mixed expired gas. They broadcast; NaN in gives NaN out.

    Returns
    -------
    dead_space : ndarray, broadcast shape
        A fraction of the tidal volume.

    Notes
    -----
    bohr1891: (PACO2 - PECO2) / PACO2.

    Examples
    --------
    >>> round(float(bohr_dead_space(40.0, 28.0)), 2)
    0.3
    """
    alveolar = np.asarray(palvco2_mmhg, dtype=np.float64)
    return (alveolar - np.asarray(pexpco2_mmhg, dtype=np.float64)) / alveolar


def enghoff_dead_space(paco2_mmhg: ArrayLike, pexpco2_mmhg: ArrayLike) -> Array:
    """Dead space with the arterial tension in place of the alveolar one, so that shunt counts too.

    Parameters
    ----------
    paco2_mmhg : array_like
        Arterial CO2 tension, > 0.
    pexpco2_mmhg : array_like
        CO2 tension of mixed expired gas. They broadcast; NaN in gives NaN out.

    Returns
    -------
    dead_space : ndarray, broadcast shape
        A fraction of the tidal volume.

    Notes
    -----
    enghoff1938: (PaCO2 - PECO2) / PaCO2. 30 % of shunt alone makes it 5 % (of healthy alveoli).

    Examples
    --------
    >>> round(float(enghoff_dead_space(60.0, 24.0)), 2)
    0.6
    """
    return bohr_dead_space(paco2_mmhg, pexpco2_mmhg)


def pco2_at_temperature_mmhg(pco2_mmhg_at_37: ArrayLike, temperature_c: ArrayLike) -> Array:
    """Tension in the patient, at the patient's temperature, of a sample measured at 37 C.

    Parameters
    ----------
    pco2_mmhg_at_37, temperature_c : array_like
        Tension at 37 C and temperature of the patient, 10 to 45 C; they broadcast. NaN in gives NaN out.

    Returns
    -------
    pco2_mmhg : ndarray, broadcast shape

    Notes
    -----
    P x 10^(0.019 (T - 37)), a sealed sample (bradley1956, as analysers round it).

    Examples
    --------
    >>> round(float(pco2_at_temperature_mmhg(40.0, 33.0)), 1)
    33.6
    """
    warmer_c = np.asarray(temperature_c, dtype=np.float64) - _BODY_C
    return np.asarray(pco2_mmhg_at_37, dtype=np.float64) * np.power(10.0, _LOG_PCO2_PER_C * warmer_c)
