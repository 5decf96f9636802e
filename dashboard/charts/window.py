"""What the picture shows, and how places of the engine become places on its axes."""

from collections.abc import Sequence
from datetime import datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dashboard.wording import Units
from engine.forecast import Forecast
from engine.record import POSSIBLE, BloodGas, Target

Array = NDArray[np.float64]
Trace = dict[str, Any]

BEYOND = (1.0, 2000.0)  # mmHg: where an open end is drawn, outside any picture
_LEAST_PACO2_SPAN_MMHG = 36.0  # so that scatter alone does not fill the picture
_LEAST_PAO2_RATIO = 2.6


class Window:
    """What the picture shows, mmHg: low and high PaO₂ and PaCO₂."""

    def __init__(self, pao2: tuple[float, float], paco2: tuple[float, float]) -> None:
        self.pao2, self.paco2 = pao2, paco2

    def place(self, pao2_mmhg: float, paco2_mmhg: float) -> tuple[float, float]:
        """Where a point lies in the picture, 0 to 1 both ways."""
        (x0, x1), (y0, y1) = self.pao2, self.paco2
        return float(np.log(pao2_mmhg / x0) / np.log(x1 / x0)), (paco2_mmhg - y0) / (y1 - y0)


def window_of(
    points: Sequence[tuple[datetime, BloodGas]], forecast: Forecast | None, target: Target | None
) -> Window:
    """Holds every gas, the outer band and the closed ends of the target; never below the least span."""
    pao2 = [gas.pao2_mmhg for _, gas in points]
    paco2 = [gas.paco2_mmhg for _, gas in points]
    for quantity, held in (("pao2_mmhg", pao2), ("paco2_mmhg", paco2)):
        if target is not None:
            held.extend(end for end in target.range_of(quantity) if end is not None)
        if forecast is not None and (draws := forecast.next_gas[quantity]) is not None:
            held.extend(draws.interval(0.97))
    return Window(_wide_ratio(pao2 or [60.0, 100.0]), _wide_span(paco2 or [35.0, 45.0]))


def _wide_ratio(values: Sequence[float]) -> tuple[float, float]:
    low, high = min(values), max(values)
    ratio = max(high / low * 1.22, _LEAST_PAO2_RATIO)
    centre = (low * high) ** 0.5
    return centre / ratio**0.5, centre * ratio**0.5


def _wide_span(values: Sequence[float]) -> tuple[float, float]:
    low, high = min(values), max(values)
    span = max((high - low) * 1.24, _LEAST_PACO2_SPAN_MMHG)
    centre = (low + high) / 2
    return max(centre - span / 2, 0.0), min(centre + span / 2, POSSIBLE["paco2_mmhg"][1])


def scaled(values_mmhg: Sequence[float] | Array, units: Units) -> list[float]:
    return [round(units.tension(float(value)), 4) for value in values_mmhg]


def words(text: str, pao2_mmhg: float, paco2_mmhg: float, side: str, colour: str, units: Units) -> Trace:
    return {
        "type": "scatter",
        "name": f"label {text}",
        "mode": "text",
        "x": scaled([pao2_mmhg], units),
        "y": scaled([paco2_mmhg], units),
        "text": [text],
        "textposition": side,
        "textfont": {"color": colour, "size": 14},
        "hoverinfo": "skip",
        "cliponaxis": True,
    }
