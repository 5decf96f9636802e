"""The PaO₂-PaCO₂ picture: where this patient has been, where the target lies, where the next gas will
probably fall.

PaO₂ runs across on a log axis, PaCO₂ up, and the pH that belongs to each PaCO₂ at the last gas's base excess
is marked along the right. Measured gases are solid and dated; the forecast is two bands and a hollow mark;
the target is a labelled outline. Colours are names, resolved where the picture is drawn (`dashboard.live`).
"""

from collections.abc import Sequence
from datetime import datetime
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dashboard.charts.labels import free_sides
from dashboard.wording import QUANTITY_LABELS, Units, clock_text
from engine.forecast import Forecast
from engine.physics.acid_base import ph_at_standard_base_excess, standard_base_excess_mmol_per_l
from engine.record import POSSIBLE, BloodGas, Case, Target

Array = NDArray[np.float64]
Trace = dict[str, Any]

SHARES = (0.9, 0.5)  # outer band first, so that the inner one lies on top
_BAND_OPACITY = {0.9: 0.16, 0.5: 0.30}
_NARROW = 4.0  # a picture whose ends differ by less has room for more marks
_PAO2_TICKS = {
    ("mmHg", False): (20, 30, 40, 50, 60, 80, 100, 150, 200, 300, 400, 600),
    ("mmHg", True): (*range(20, 100, 10), *range(100, 200, 20), *range(200, 600, 50)),
    ("kPa", False): (3, 4, 5, 6, 8, 10, 13, 20, 30, 40, 60, 80),
    ("kPa", True): (*range(2, 16), *range(16, 30, 2), *range(30, 80, 5)),
}
_PH_STEPS, _MOST_PH_MARKS = (0.02, 0.05, 0.1, 0.2, 0.5, 1.0), 11
_LEAST_PACO2_SPAN_MMHG = 36.0  # so that scatter alone does not fill the picture
_LEAST_PAO2_RATIO = 2.6
_BEYOND = (1.0, 2000.0)  # mmHg: where an open end of the target is drawn, outside any picture


def plane(case: Case, forecast: Forecast | None, units: Units, now: datetime) -> dict[str, Any]:
    """The figure.

    Parameters
    ----------
    case : Case
        Its usable gases are the solid points, in order.
    forecast : Forecast or None
        ``None`` draws the measured gases alone.
    units : Units
        mmHg or kPa on both axes.
    now : datetime
        Sets the zone of the clock times.

    Returns
    -------
    figure : dict
        ``data`` and ``layout``, JSON-ready. ``uirevision`` changes with the patient and the units only.
    """
    gases = [(case.entries[n].gas_time, case.entries[n].gas) for n in case.usable_gases()]
    points = [(time, gas) for time, gas in gases if gas is not None]
    window = _window(points, forecast, case.target)
    data = [
        *_target(case.target, window, units),
        *_forecast_traces(forecast, window, units),
        *_measured(points, window, units, now),
    ]
    return {"data": data, "layout": _layout(case, points, window, units)}


class _Window:
    """What the picture shows, mmHg: low and high PaO₂ and PaCO₂."""

    def __init__(self, pao2: tuple[float, float], paco2: tuple[float, float]) -> None:
        self.pao2, self.paco2 = pao2, paco2

    def place(self, pao2_mmhg: float, paco2_mmhg: float) -> tuple[float, float]:
        """Where a point lies in the picture, 0 to 1 both ways."""
        (x0, x1), (y0, y1) = self.pao2, self.paco2
        return float(np.log(pao2_mmhg / x0) / np.log(x1 / x0)), (paco2_mmhg - y0) / (y1 - y0)


def _window(
    points: Sequence[tuple[datetime, BloodGas]], forecast: Forecast | None, target: Target | None
) -> _Window:
    """Holds every gas, the outer band and the closed ends of the target; never below the least span."""
    pao2 = [gas.pao2_mmhg for _, gas in points]
    paco2 = [gas.paco2_mmhg for _, gas in points]
    for quantity, held in (("pao2_mmhg", pao2), ("paco2_mmhg", paco2)):
        if target is not None:
            held.extend(end for end in target.range_of(quantity) if end is not None)
        if forecast is not None and (draws := forecast.next_gas[quantity]) is not None:
            held.extend(draws.interval(0.97))
    return _Window(_wide_ratio(pao2 or [60.0, 100.0]), _wide_span(paco2 or [35.0, 45.0]))


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


def _scaled(values_mmhg: Sequence[float] | Array, units: Units) -> list[float]:
    return [round(units.tension(float(value)), 4) for value in values_mmhg]


# ----------------------------------------------------------------------------------------------------- target


def _target(target: Target | None, window: _Window, units: Units) -> list[Trace]:
    """The box; an end left open runs out of the picture."""
    if target is None:
        return []
    (x0, x1), (y0, y1) = target.range_of("pao2_mmhg"), target.range_of("paco2_mmhg")
    if x0 is x1 is y0 is y1 is None:
        return []
    x = (x0 or _BEYOND[0], x1 or _BEYOND[1])
    y = (y0 if y0 is not None else -_BEYOND[1], y1 or _BEYOND[1])
    corners_x, corners_y = [x[0], x[1], x[1], x[0], x[0]], [y[0], y[0], y[1], y[1], y[0]]
    return [
        {
            "type": "scatter",
            "name": "target",
            "mode": "lines",
            "x": _scaled(corners_x, units),
            "y": _scaled(corners_y, units),
            "line": {"color": "@target", "width": 2, "dash": "6px,3px"},
            "fill": "toself",
            "fillcolor": "@target/0.05",
            "hoverinfo": "skip",
        },
        _words(
            "target",
            max(x[0], window.pao2[0]) * 1.012,
            min(y[1], window.paco2[1]) - 0.012 * (window.paco2[1] - window.paco2[0]),
            "bottom right",
            "@target",
            units,
        ),
    ]


def _words(text: str, pao2_mmhg: float, paco2_mmhg: float, side: str, colour: str, units: Units) -> Trace:
    return {
        "type": "scatter",
        "name": f"label {text}",
        "mode": "text",
        "x": _scaled([pao2_mmhg], units),
        "y": _scaled([paco2_mmhg], units),
        "text": [text],
        "textposition": side,
        "textfont": {"color": colour, "size": 14},
        "hoverinfo": "skip",
        "cliponaxis": True,
    }


# --------------------------------------------------------------------------------------------------- forecast


def _forecast_traces(forecast: Forecast | None, window: _Window, units: Units) -> list[Trace]:
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
        traces.append(_words("PaO₂ not forecast", left, paco2.median, "middle right", "@forecast", units))
    elif pao2 is not None:
        low = window.paco2[0]
        traces.append(_words("PaCO₂ not forecast", pao2.median, low, "top center", "@forecast", units))
    return traces


def _outline(forecast: Forecast, share: float) -> tuple[Array, Array] | None:
    region = forecast.region(share)
    if region is not None:
        return region
    pao2, paco2 = forecast.next_gas["pao2_mmhg"], forecast.next_gas["paco2_mmhg"]
    if pao2 is None and paco2 is None:
        return None
    (x0, x1) = _BEYOND if pao2 is None else pao2.interval(share)
    (y0, y1) = (-_BEYOND[1], _BEYOND[1]) if paco2 is None else paco2.interval(share)
    return np.array([x0, x1, x1, x0, x0]), np.array([y0, y0, y1, y1, y0])


def _band(outline: tuple[Array, Array], share: float, units: Units) -> list[Trace]:
    pao2_mmhg, paco2_mmhg = outline
    band = {
        "type": "scatter",
        "name": f"forecast {share:.0%}",
        "mode": "lines",
        "x": _scaled(pao2_mmhg, units),
        "y": _scaled(paco2_mmhg, units),
        "line": {"color": "@forecast/0.75", "width": 1.2, "simplify": False},
        "fill": "toself",
        "fillcolor": f"@forecast/{_BAND_OPACITY[share]}",
        "hoverinfo": "skip",
    }
    top = int(np.argmax(paco2_mmhg))
    label = _words(
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
            "x": _scaled(x, units),
            "y": _scaled(y, units),
            "line": {"color": "@forecast", "width": 1.5, "dash": "dot"},
            "hoverinfo": "skip",
        },
        {
            "type": "scatter",
            "name": "expected",
            "mode": "markers",
            "x": _scaled([pao2_mmhg], units),
            "y": _scaled([paco2_mmhg], units),
            "marker": {"symbol": "circle-open", "size": 21, "color": "@forecast", "line": {"width": 3}},
            "hovertext": [
                f"expected: PaO₂ {units.tension_text(pao2_mmhg)} {units.gas}, "
                f"PaCO₂ {units.tension_text(paco2_mmhg)} {units.gas}"
            ],
            "hoverinfo": "text",
        },
    ]


# --------------------------------------------------------------------------------------------------- measured


def _measured(
    points: Sequence[tuple[datetime, BloodGas]], window: _Window, units: Units, now: datetime
) -> list[Trace]:
    if not points:
        return []
    last = len(points) - 1
    sides = free_sides([window.place(gas.pao2_mmhg, gas.paco2_mmhg) for _, gas in points])
    return [
        {
            "type": "scatter",
            "name": "measured",
            "mode": "lines+markers+text",
            "x": _scaled([gas.pao2_mmhg for _, gas in points], units),
            "y": _scaled([gas.paco2_mmhg for _, gas in points], units),
            "line": {"color": "@ink/0.35", "width": 1.2},
            "marker": {
                "symbol": "circle",
                "color": "@ink",
                "size": [8] * last + [13],
                "line": {"color": "@paper", "width": 1},
                "opacity": 1,
            },
            "text": [
                f"<b>{clock_text(time, now)}</b>" if n == last else clock_text(time, now)
                for n, (time, _) in enumerate(points)
            ],
            "textposition": sides,
            "textfont": {"color": "@ink", "size": [12] * last + [14]},
            "hovertext": [_measured_words(time, gas, units, now) for time, gas in points],
            "hoverinfo": "text",
        },
        _hold_right_axis(points[-1][1], units),
    ]


def _hold_right_axis(gas: BloodGas, units: Units) -> Trace:
    """An axis is drawn only where a trace lies on it; this one is never seen."""
    return {
        "type": "scatter",
        "name": "axis",
        "mode": "markers",
        "x": _scaled([gas.pao2_mmhg], units),
        "y": _scaled([gas.paco2_mmhg], units),
        "yaxis": "y2",
        "marker": {"opacity": 0},
        "hoverinfo": "skip",
    }


def _measured_words(time: datetime, gas: BloodGas, units: Units, now: datetime) -> str:
    parts = [f"measured {clock_text(time, now)}"]
    for quantity in ("ph", "paco2_mmhg", "pao2_mmhg", "sao2"):
        value = getattr(gas, quantity)
        if value is not None:
            text, unit = units.quantity_text(quantity, value), units.quantity_unit(quantity)
            parts.append(f"{QUANTITY_LABELS[quantity]} {text} {unit}".strip())
    return "<br>".join(parts)


# ----------------------------------------------------------------------------------------------------- layout


def _layout(
    case: Case, points: Sequence[tuple[datetime, BloodGas]], window: _Window, units: Units
) -> dict[str, Any]:
    ticks = _PAO2_TICKS[units.gas, window.pao2[1] / window.pao2[0] < _NARROW]
    axis: dict[str, Any] = {
        "showline": True,
        "linecolor": "@quiet",
        "ticks": "outside",
        "tickcolor": "@quiet",
        "gridcolor": "@rule/0.55",
        "zeroline": False,
        "tickfont": {"size": 13},
        "title": {"font": {"size": 14}, "standoff": 6},
    }
    low_x, high_x = (float(np.log10(units.tension(value))) for value in window.pao2)
    low_y, high_y = (units.tension(value) for value in window.paco2)
    layout: dict[str, Any] = {
        "uirevision": f"{case.label}|{case.entries[0].time.isoformat() if case.entries else ''}|{units.gas}",
        "showlegend": False,
        "margin": {"l": 58, "r": 58, "t": 8, "b": 44},
        "paper_bgcolor": "@paper",
        "plot_bgcolor": "@paper",
        "font": {"family": '"Source Sans", sans-serif', "color": "@ink", "size": 13},
        "hoverlabel": {"bgcolor": "@wash", "bordercolor": "@quiet", "font": {"color": "@ink", "size": 13}},
        "modebar": {"orientation": "h", "bgcolor": "@paper/0", "color": "@quiet", "activecolor": "@forecast"},
        "dragmode": "zoom",
        "xaxis": axis
        | {
            "type": "log",
            "range": [low_x, high_x],
            "tickvals": list(ticks),
            "ticktext": [f"{tick:g}" for tick in ticks],
            "title": axis["title"] | {"text": f"PaO₂, {units.gas} (log scale)"},
        },
        "yaxis": axis | {"range": [low_y, high_y], "title": axis["title"] | {"text": f"PaCO₂, {units.gas}"}},
    }
    if points:
        layout["yaxis2"] = axis | _ph_axis(points[-1][1], window, units)
        layout["yaxis2"]["title"] = axis["title"] | {"text": "pH at the last gas’s base excess"}
    return layout


def _ph_axis(gas: BloodGas, window: _Window, units: Units) -> dict[str, Any]:
    """pH along the right: where each tenth (or twentieth) of pH lies at unchanged standard base excess."""
    paco2 = np.geomspace(max(window.paco2[0] * 0.5, 2.0), window.paco2[1] * 1.6, 400)
    excess = standard_base_excess_mmol_per_l(gas.ph, gas.paco2_mmhg)
    ph = np.asarray(ph_at_standard_base_excess(paco2, excess))
    seen = ph[(paco2 >= window.paco2[0]) & (paco2 <= window.paco2[1])]
    step = next(step for step in _PH_STEPS if np.ptp(seen) / step < _MOST_PH_MARKS)
    marks = np.arange(np.ceil(ph.min() / step), ph.max() / step) * step
    places = np.interp(marks, ph[::-1], paco2[::-1])
    return {
        "overlaying": "y",
        "side": "right",
        "matches": "y",
        "showgrid": False,
        "tickvals": _scaled(places, units),
        "ticktext": [f"{mark:.{1 if step in (0.1, 0.2, 0.5, 1.0) else 2}f}" for mark in marks],
    }
