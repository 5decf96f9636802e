"""Exact conversions between the units of charts and screens. Target first, so that the ends meet::

    paco2_kpa = kpa_from_mmhg(paco2_mmhg)

Each takes a float or a float array and gives back the same kind; NaN stays NaN. Nothing is rounded.

References
----------
si2019 : BIPM, "The International System of Units", 9th edition, 2019 (standard gravity, exact).
iso80000 : ISO 80000-4:2019 (conventional millimetre of mercury, 13,595.1 kg/m3 at standard gravity).
haem : molar mass of haemoglobin per haem, 16,114.5 g/mol (1 mmol/L = 1.611 g/dL); common practice, no source.
"""

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

Number = TypeVar("Number", float, NDArray[np.float64])

KPA_PER_MMHG = 0.133322387415
HPA_PER_CMH2O = 0.980665
G_PER_MMOL_HB = 16.1145
CM_PER_INCH = 2.54
M_PER_FOOT = 0.3048


def kpa_from_mmhg(mmhg: Number) -> Number:
    """Kilopascal from millimetre of mercury.

    >>> round(kpa_from_mmhg(40.0), 2)
    5.33
    """
    return mmhg * KPA_PER_MMHG


def mmhg_from_kpa(kpa: Number) -> Number:
    """Millimetre of mercury from kilopascal.

    >>> round(mmhg_from_kpa(5.3), 1)
    39.8
    """
    return kpa / KPA_PER_MMHG


def hpa_from_mmhg(mmhg: Number) -> Number:
    """Hectopascal (the same as millibar) from millimetre of mercury.

    >>> round(hpa_from_mmhg(760.0), 2)
    1013.25
    """
    return mmhg * (10.0 * KPA_PER_MMHG)


def mmhg_from_hpa(hpa: Number) -> Number:
    """Millimetre of mercury from hectopascal (the same as millibar).

    >>> round(mmhg_from_hpa(1000.0), 1)
    750.1
    """
    return hpa / (10.0 * KPA_PER_MMHG)


def hpa_from_cmh2o(cmh2o: Number) -> Number:
    """Hectopascal (the same as millibar) from centimetre of water.

    >>> round(hpa_from_cmh2o(10.0), 2)
    9.81
    """
    return cmh2o * HPA_PER_CMH2O


def cmh2o_from_hpa(hpa: Number) -> Number:
    """Centimetre of water from hectopascal (the same as millibar).

    >>> round(cmh2o_from_hpa(10.0), 2)
    10.2
    """
    return hpa / HPA_PER_CMH2O


def g_per_l_from_g_per_dl(g_per_dl: Number) -> Number:
    """Gram per litre from gram per decilitre.

    >>> g_per_l_from_g_per_dl(9.5)
    95.0
    """
    return g_per_dl * 10.0


def g_per_dl_from_g_per_l(g_per_l: Number) -> Number:
    """Gram per decilitre from gram per litre.

    >>> g_per_dl_from_g_per_l(95.0)
    9.5
    """
    return g_per_l / 10.0


def mmol_per_l_hb_from_g_per_dl(g_per_dl: Number) -> Number:
    """Haemoglobin in millimole of haem per litre, from gram per decilitre.

    >>> round(mmol_per_l_hb_from_g_per_dl(15.0), 2)
    9.31
    """
    return g_per_dl * (10.0 / G_PER_MMOL_HB)


def g_per_dl_from_mmol_per_l_hb(mmol_per_l: Number) -> Number:
    """Haemoglobin in gram per decilitre, from millimole of haem per litre.

    >>> round(g_per_dl_from_mmol_per_l_hb(9.3), 1)
    15.0
    """
    return mmol_per_l * (G_PER_MMOL_HB / 10.0)


def l_from_ml(ml: Number) -> Number:
    """Litre from millilitre.

    >>> l_from_ml(420.0)
    0.42
    """
    return ml / 1000.0


def ml_from_l(litre: Number) -> Number:
    """Millilitre from litre.

    >>> ml_from_l(0.5)
    500.0
    """
    return litre * 1000.0


def percent_from_fraction(fraction: Number) -> Number:
    """Per cent from a fraction of one.

    >>> percent_from_fraction(0.25)
    25.0
    """
    return fraction * 100.0


def fraction_from_percent(percent: Number) -> Number:
    """Fraction of one from per cent.

    >>> fraction_from_percent(21.0)
    0.21
    """
    return percent / 100.0


def inch_from_cm(cm: Number) -> Number:
    """Inch from centimetre.

    >>> inch_from_cm(152.4)
    60.0
    """
    return cm / CM_PER_INCH


def cm_from_inch(inch: Number) -> Number:
    """Centimetre from inch.

    >>> cm_from_inch(70.0)
    177.8
    """
    return inch * CM_PER_INCH


def m_from_foot(foot: Number) -> Number:
    """Metre from foot.

    >>> m_from_foot(5280.0)
    1609.344
    """
    return foot * M_PER_FOOT


def c_from_fahrenheit(fahrenheit: Number) -> Number:
    """Degree Celsius from degree Fahrenheit.

    >>> c_from_fahrenheit(98.6)
    37.0
    """
    return (fahrenheit - 32.0) * (5.0 / 9.0)
