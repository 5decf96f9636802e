"""Predicted body weight and the two PEEP/FiO2 tables of the ARDS Network.

References
----------
ardsnet2000 : The ARDS Network, "Ventilation with lower tidal volumes as compared with traditional tidal
    volumes for acute lung injury and the acute respiratory distress syndrome", N. Engl. J. Med. 342,
    1301-1308, 2000, and its ventilator protocol card.
"""

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]
Words = str | Sequence[str] | NDArray[np.str_]

LOWER_PEEP_TABLE_CMH2O: dict[float, tuple[int, ...]] = {
    0.3: (5,),
    0.4: (5, 8),
    0.5: (8, 10),
    0.6: (10,),
    0.7: (10, 12, 14),
    0.8: (14,),
    0.9: (14, 16, 18),
    1.0: (18, 24),
}
"""ardsnet2000: the PEEP steps that go with each FiO2, lower-PEEP table; 18 to 24 at FiO2 1.0."""

HIGHER_PEEP_TABLE_CMH2O: dict[float, tuple[int, ...]] = {
    0.3: (5, 8, 10, 12, 14),
    0.4: (14, 16),
    0.5: (16, 18, 20),
    0.6: (20,),
    0.7: (20,),
    0.8: (20, 22),
    0.9: (22,),
    1.0: (22, 24),
}
"""ardsnet2000: the same, higher-PEEP table. One printed copy has 15 for 16 at FiO2 0.4; 16 is from memory."""

_CM_PER_INCH = 2.54


def predicted_body_weight_kg(sex: Words, height_cm: ArrayLike) -> Array:
    """Weight that a lung of this sex and height was built for; tidal volumes are judged by it.

    Parameters
    ----------
    sex : str or array_like of str
        ``"female"`` or ``"male"``; anything else raises `ValueError`.
    height_cm : array_like
        Body height. The formula carries no floor; below 140 cm it was not tried.

    Returns
    -------
    predicted_body_weight_kg : ndarray, broadcast shape

    Notes
    -----
    ardsnet2000, the form in inches of exactly 2.54 cm: 45.5 (women) or 50 (men) + 2.3 (inches - 60). The form
    in centimetres (0.91 per cm) reads up to 0.25 kg higher.

    Examples
    --------
    >>> predicted_body_weight_kg(["female", "male"], 177.8)
    array([68.5, 73. ])
    """
    is_male = np.asarray(sex) == "male"
    if not np.all(is_male | (np.asarray(sex) == "female")):
        raise ValueError(f"sex must be 'female' or 'male', not {sex!r}")
    return np.where(is_male, 50.0, 45.5) + 2.3 * (
        np.asarray(height_cm, dtype=np.float64) / _CM_PER_INCH - 60.0
    )
