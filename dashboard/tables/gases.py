"""The gases so far, one line each, with the settings they were drawn on."""

from collections.abc import Mapping, Sequence
from datetime import datetime
from html import escape

from dashboard.wording import Units, clock_text, percent_text, settings_text
from engine.estimates import Estimate
from engine.record import Case, Entry, Settings

Estimates = Mapping[int, Sequence[Estimate]]


def gases_table(case: Case, estimates: Estimates, units: Units, now: datetime) -> str:
    """Every gas of the case in order, unusable ones marked with the reason.

    ``estimates`` holds the textbook numbers of the gases by the number of their entry; P/F and base excess
    are taken from there.
    """
    heads: tuple[str, ...] = ("", "Drawn", "pH", f"PaCO₂ {units.gas}", f"PaO₂ {units.gas}", "SaO₂ %")
    heads += (
        f"P/F {units.gas}",
        "Base excess mmol/L",
        f"Hb {units.haemoglobin}",
        "FiO₂ %",
        "Minute volume L/min",
        "Settings then",
    )
    usable = case.usable_gases()
    lines: list[str] = []
    for number, (entry, settings) in enumerate(case.entries_with_settings()):
        if entry.gas is not None:
            cells = _cells(entry, settings, {e.name: e for e in estimates.get(number, ())}, units)
            lines.append(_line(len(lines) + 1, entry, cells, settings, number in usable, now))
    head = "".join(f'<th scope="col">{text}</th>' for text in heads)
    return f'<table class="fb-gases"><thead><tr>{head}</tr></thead><tbody>{"".join(lines)}</tbody></table>'


def _cells(entry: Entry, settings: Settings, found: dict[str, Estimate], units: Units) -> list[str]:
    gas = entry.gas
    assert gas is not None
    return [
        f"{gas.ph:.2f}",
        units.tension_text(gas.paco2_mmhg),
        units.tension_text(gas.pao2_mmhg),
        percent_text(gas.sao2),
        units.tension_text(_value(found, "pf_ratio_mmhg")),
        _signed(_value(found, "standard_base_excess_mmol_per_l")),
        units.haemoglobin_text(gas.hb_g_per_dl),
        percent_text(settings.fio2),
        _one_decimal(_value(found, "minute_ventilation_l_per_min")),
    ]


def _line(order: int, entry: Entry, cells: list[str], settings: Settings, usable: bool, now: datetime) -> str:
    then = settings_text(settings)
    if not usable:
        assert entry.gas is not None
        then = f"not used: {entry.gas.excluded or entry.gas.specimen}; {then}"
    body = "".join(f"<td>{cell}</td>" for cell in cells)
    kind = "" if usable else ' class="fb-unused"'
    return (
        f'<tr{kind}><th scope="row">{order}</th><td>{clock_text(entry.gas_time, now)}</td>{body}'
        f'<td class="fb-then">{escape(then)}</td></tr>'
    )


def _value(found: dict[str, Estimate], name: str) -> float | None:
    return found[name].value if name in found else None


def _signed(value: float | None) -> str:
    return "–" if value is None else f"{value:+.1f}".replace("-", "−")


def _one_decimal(value: float | None) -> str:
    return "–" if value is None else f"{value:.1f}"
