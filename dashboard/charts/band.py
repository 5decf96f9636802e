"""Target and forecast in the PaO₂-PaCO₂ plane: a labelled outline, two bands and a hollow mark."""

import numpy as np

from dashboard.charts.window import BEYOND, Array, Trace, Window, scaled, words
from dashboard.wording import Units
from engine.forecast import Forecast
from engine.record import Target

SHARES = (0.9, 0.5)  # outer band first, so that the inner one lies on top
OPACITY = {0.9: 0.11, 0.5: 0.27}
TARGET_OPACITY = 0.04


def target_traces(target: Target | None, window: Window, units: Units) -> list[Trace]:
    """The box; an end left open runs out of the picture."""
    if target is None:
        return []
    (x0, x1), (y0, y1) = target.range_of("pao2_mmhg"), target.range_of("paco2_mmhg")
    if x0 is x1 is y0 is y1 is None:
        return []
    x = (x0 or BEYOND[0], x1 or BEYOND[1])
    y = (y0 if y0 is not None else -BEYOND[1], y1 or BEYOND[1])
    corners_x, corners_y = [x[0], x[1], x[1], x[0], x[0]], [y[0], y[0], y[1], y[1], y[0]]
    return [
        {
            "type": "scatter",
            "name": "target",
            "mode": "lines",
            "x": scaled(corners_x, units),
            "y": scaled(corners_y, units),
            "line": {"color": "@target", "width": 2, "dash": "6px,3px"},
            "fill": "toself",
            "fillcolor": f"@target/{TARGET_OPACITY}",
            "hoverinfo": "skip",
        },
        words(
            "target",
            max(x[0], window.pao2[0]) * 1.012,
            min(y[1], window.paco2[1]) - 0.012 * (window.paco2[1] - window.paco2[0]),
            "bottom right",
            "@target",
            units,
        ),
    ]


def forecast_traces(forecast: Forecast | None, window: Window, units: Units) -> list[Trace]:
    """Bands of the next gas; where one of the two is not forecast, the band runs across the picture."""
    if forecast is None:
        return []
    traces: list[Trace] = []
    for share in SHARES:
        outline = _outline(forecast, share)
        if outline is not None:
            traces += _band(outline, share, units)
    pao2, paco2 = forecast.next_gas["pao2_mmhg"], forecast.next_gas["paco2_mmhg"]
    if pao2 is not None and paco2 is not None:
        traces += _expected(forecast, pao2.median, paco2.median, units)
    elif paco2 is not None:
        left = window.pao2[0] * 1.02
        traces.append(words("PaO₂ not forecast", left, paco2.median, "middle right", "@ink", units))
    elif pao2 is not None:
        low = window.paco2[0]
        traces.append(words("PaCO₂ not forecast", pao2.median, low, "top center", "@ink", units))
    return traces


def _outline(forecast: Forecast, share: float) -> tuple[Array, Array] | None:
    region = forecast.region(share)
    if region is not None:
        return region
    pao2, paco2 = forecast.next_gas["pao2_mmhg"], forecast.next_gas["paco2_mmhg"]
    if pao2 is None and paco2 is None:
        return None
    (x0, x1) = BEYOND if pao2 is None else pao2.interval(share)
    (y0, y1) = (-BEYOND[1], BEYOND[1]) if paco2 is None else paco2.interval(share)
    return np.array([x0, x1, x1, x0, x0]), np.array([y0, y0, y1, y1, y0])


def _band(outline: tuple[Array, Array], share: float, units: Units) -> list[Trace]:
    pao2_mmhg, paco2_mmhg = outline
    band = {
        "type": "scatter",
        "name": f"forecast {share:.0%}",
        "mode": "lines",
        "x": scaled(pao2_mmhg, units),
        "y": scaled(paco2_mmhg, units),
        "line": {"color": "@forecast/0.75", "width": 1.2, "simplify": False},
        "fill": "toself",
        "fillcolor": f"@forecast/{OPACITY[share]}",
        "hoverinfo": "skip",
    }
    top = int(np.argmax(paco2_mmhg))
    label = words(
        f"{share:.0%}".replace("%", " %"), pao2_mmhg[top], paco2_mmhg[top], "top center", "@forecast", units
    )
    label["textfont"]["size"] = 12
    return [band, label]


def _expected(forecast: Forecast, pao2_mmhg: float, paco2_mmhg: float, units: Units) -> list[Trace]:
    """The hollow mark in the middle, tied to the last gas by a dotted line."""
    was = (forecast.now["pao2_mmhg"], forecast.now["paco2_mmhg"])
    x = [value for value in (was[0], pao2_mmhg) if value is not None]
    y = [value for value in (was[1], paco2_mmhg) if value is not None]
    return [
        {
            "type": "scatter",
            "name": "way",
            "mode": "lines",
            "x": scaled(x, units),
            "y": scaled(y, units),
            "line": {"color": "@forecast", "width": 1.5, "dash": "dot"},
            "hoverinfo": "skip",
        },
        {
            "type": "scatter",
            "name": "expected",
            "mode": "markers",
            "x": scaled([pao2_mmhg], units),
            "y": scaled([paco2_mmhg], units),
            "marker": {"symbol": "circle-open", "size": 21, "color": "@forecast", "line": {"width": 3}},
            "hovertext": [
                f"expected: PaO₂ {units.tension_text(pao2_mmhg)} {units.gas}, "
                f"PaCO₂ {units.tension_text(paco2_mmhg)} {units.gas}"
            ],
            "hoverinfo": "text",
        },
    ]
