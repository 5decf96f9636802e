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

from dashboard.charts.band import forecast_traces, target_traces
from dashboard.charts.labels import free_sides
from dashboard.charts.window import Trace, Window, scaled, window_of
from dashboard.wording import QUANTITY_LABELS, Units, clock_text
from engine.forecast import Forecast
from engine.physics.acid_base import ph_at_standard_base_excess, standard_base_excess_mmol_per_l
from engine.record import BloodGas, Case

_NARROW = 4.0  # a picture whose ends differ by less has room for more marks
_PAO2_TICKS = {
    ("mmHg", False): (20, 30, 40, 50, 60, 80, 100, 150, 200, 300, 400, 600),
    ("mmHg", True): (*range(20, 100, 10), *range(100, 200, 20), *range(200, 600, 50)),
    ("kPa", False): (3, 4, 5, 6, 8, 10, 13, 20, 30, 40, 60, 80),
    ("kPa", True): (*range(2, 16), *range(16, 30, 2), *range(30, 80, 5)),
}
_PH_STEPS, _MOST_PH_MARKS = (0.02, 0.05, 0.1, 0.2, 0.5, 1.0), 11


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
    window = window_of(points, forecast, case.target)
    data = [
        *target_traces(case.target, window, units),
        *forecast_traces(forecast, window, units),
        *_measured(points, window, units, now),
    ]
    return {"data": data, "layout": _layout(case, points, window, units)}


def _measured(
    points: Sequence[tuple[datetime, BloodGas]], window: Window, units: Units, now: datetime
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
            "x": scaled([gas.pao2_mmhg for _, gas in points], units),
            "y": scaled([gas.paco2_mmhg for _, gas in points], units),
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
            "hovertext": [_in_words(time, gas, units, now) for time, gas in points],
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
        "x": scaled([gas.pao2_mmhg], units),
        "y": scaled([gas.paco2_mmhg], units),
        "yaxis": "y2",
        "marker": {"opacity": 0},
        "hoverinfo": "skip",
    }


def _in_words(time: datetime, gas: BloodGas, units: Units, now: datetime) -> str:
    parts = [f"measured {clock_text(time, now)}"]
    for quantity in ("ph", "paco2_mmhg", "pao2_mmhg", "sao2"):
        value = getattr(gas, quantity)
        if value is not None:
            text, unit = units.quantity_text(quantity, value), units.quantity_unit(quantity)
            parts.append(f"{QUANTITY_LABELS[quantity]} {text} {unit}".strip())
    return "<br>".join(parts)


def _layout(
    case: Case, points: Sequence[tuple[datetime, BloodGas]], window: Window, units: Units
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
        "tickangle": 0,  # said, so that no time is spent on finding it
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


def _ph_axis(gas: BloodGas, window: Window, units: Units) -> dict[str, Any]:
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
        "tickvals": scaled(places, units),
        "ticktext": [f"{mark:.{1 if step in (0.1, 0.2, 0.5, 1.0) else 2}f}" for mark in marks],
    }
