"""Now and expected: the two-row table that everything else explains."""

from datetime import datetime
from html import escape

from dashboard.wording import QUANTITY_LABELS, Units, chance_text, clock_text
from engine.forecast import QUANTITIES, Draws, Forecast
from engine.record import Case, Target


def expected_table(case: Case, forecast: Forecast, units: Units, now: datetime) -> str:
    """Row one: the last usable gas, solid. Row two: the next gas with 50 and 90 % intervals, in blue."""
    heads = "".join(_head(quantity, case.target, units) for quantity in QUANTITIES)
    measured = "".join(
        f'<td class="fb-measured">{units.quantity_text(quantity, forecast.now[quantity])}</td>'
        for quantity in QUANTITIES
    )
    expected = "".join(_expected(quantity, forecast, units) for quantity in QUANTITIES)
    return (
        '<table class="fb-expected"><thead><tr><td></td>'
        f"{heads}</tr></thead><tbody>"
        f'<tr><th scope="row">Now<small>measured {clock_text(forecast.made_from, now)}</small></th>'
        f"{measured}</tr>"
        f'<tr class="fb-forecast"><th scope="row">Expected<small>{_when(forecast)}</small></th>'
        f"{expected}</tr>"
        "</tbody></table>"
    )


def _when(forecast: Forecast) -> str:
    when = "next gas, settled" if forecast.minutes is None else f"{forecast.minutes:.0f} min after the change"
    whole = forecast.in_target["all"]
    return when if whole is None else f"{when}<br>{chance_text(whole)} all in target"


def _head(quantity: str, target: Target | None, units: Units) -> str:
    unit = units.quantity_unit(quantity)
    label = QUANTITY_LABELS[quantity] + (f' <span class="fb-unit">{unit}</span>' if unit else "")
    wanted = range_text(quantity, target, units)
    return f'<th scope="col">{label}<small>{"target " + wanted if wanted else "no target"}</small></th>'


def range_text(quantity: str, target: Target | None, units: Units) -> str:
    """The target of one quantity, for example "60–80" or "at least 60"; empty without one."""
    low, high = target.range_of(quantity) if target is not None else (None, None)
    if low is None and high is None:
        return ""
    if low is None or high is None:
        word, end = ("at most", high) if low is None else ("at least", low)
        return f"{word} {units.quantity_text(quantity, end)}"
    return f"{units.quantity_text(quantity, low)}–{units.quantity_text(quantity, high)}"


def _expected(quantity: str, forecast: Forecast, units: Units) -> str:
    draws = forecast.next_gas[quantity]
    if draws is None:
        return '<td class="fb-none">not forecast<small>the reason stands under Cautions</small></td>'
    chance = forecast.in_target[quantity.removesuffix("_mmhg")]
    inside = "" if chance is None else f"<span>{chance_text(chance)} in target</span>"
    return (
        f'<td><div class="fb-spread"><b>{units.quantity_text(quantity, draws.median)}</b>'
        f'<div class="fb-intervals"><span><i>50 %</i> {_interval(quantity, draws, 0.5, units)}</span>'
        f"<span><i>90 %</i> {_interval(quantity, draws, 0.9, units)}</span>{inside}</div></div></td>"
    )


def _interval(quantity: str, draws: Draws, share: float, units: Units) -> str:
    low, high = draws.interval(share)
    return f"{units.quantity_text(quantity, low)}–{units.quantity_text(quantity, high)}"


def in_words(forecast: Forecast | None, units: Units) -> str:
    """The picture in one sentence, for those who do not see it."""
    if forecast is None:
        return "PaO2 across, PaCO2 up: the measured gases. There is no forecast."
    parts = []
    for quantity in ("ph", "paco2_mmhg", "pao2_mmhg"):
        draws, unit = forecast.next_gas[quantity], units.quantity_unit(quantity)
        label = QUANTITY_LABELS[quantity]
        if draws is None:
            parts.append(f"{label} not forecast")
        else:
            text = f"{label} {units.quantity_text(quantity, draws.median)} {unit}".rstrip()
            parts.append(f"{text}, 90 % {_interval(quantity, draws, 0.9, units)}")
    return escape("Measured gases and the forecast of the next gas: " + "; ".join(parts) + ".")
