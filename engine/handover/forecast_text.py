"""A forecast, and the few words all texts share, for a terminal: measured is never mixed with forecast.

Rounded as a clinician reads: pH to 2 decimals, tensions to whole mmHg, saturation and FiO2 in per cent.
"""

import textwrap
from collections.abc import Mapping, Sequence
from datetime import datetime, timedelta

from engine.forecast import QUANTITIES, Draws, Forecast
from engine.limits import Limit
from engine.record import Case

CAUTION = (
    "Estimates, not measurements. Local protocol and licensed practice come first. "
    "Not for emergencies. Not a certified medical device."
)
GRAVEST_FIRST = ("past", "in doubt", "short")  # verdicts of the limits that are shown in full
_WIDTH = 100
_LOOKS = {"ph": "pH", "paco2_mmhg": "PaCO2 mmHg", "pao2_mmhg": "PaO2 mmHg", "sao2": "SaO2 %"}
_TARGETS = {"ph": "pH", "paco2": "PaCO2", "pao2": "PaO2", "sao2": "SaO2", "all": "all together"}
_HARMS = {
    "pao2_below_55": "PaO2 below 55 mmHg",
    "ph_below_7_15": "pH below 7.15",
    "ph_above_7_55": "pH above 7.55",
}
_SPELT = {"ph": "pH", "paco2": "PaCO2", "pao2": "PaO2", "fio2": "FiO2", "peep": "PEEP", "ie": "I:E"}
_UNITS = {"_l_per_min": " L/min", "_per_min": " /min", "_ml": " mL", "_cmh2o": " cmH2O", "_s": " s"}


def forecast_text(found: Forecast, case: Case, title: str) -> str:
    """A forecast for people: table, settings, chances, limits touched, recheck times, cautions."""
    when = "once settled" if found.minutes is None else f"{found.minutes:g} min after the change"
    what = "the change below" if found.changed else "nothing touched"
    lines = [f"{title}: forecast of the next gas, {when}, {what}", _ages(found, case), ""]
    lines += [*_table(found), "", item(f"Settings: {_settings_text(found)}.", ""), ""]
    lines += [_chances("In the target range once settled", found.in_target, _TARGETS)]
    lines += [_chances("At the next gas", found.harm, _HARMS), "", *_limits_text(found.limits), ""]
    lines += [_recheck_text(found), "", *(item(caution) for caution in found.cautions), "", CAUTION]
    return "\n".join(lines)


def _ages(found: Forecast, case: Case) -> str:
    """How old the last gas and the last charted settings are; clock times in the zone of now."""
    now, drawn = found.at, found.made_from.astimezone(found.at.tzinfo)
    age = f"At {_clock(now)} {now:%Z} the last gas ({_clock(drawn)}) is {_span(now - drawn)} old"
    charted = [entry.time for entry in case.entries if entry.settings is not None]
    return f"{age}, settings were last charted {_span(now - charted[-1])} ago." if charted else f"{age}."


def _clock(time: datetime) -> str:
    return f"{time:%Y-%m-%d %H:%M}"


def _span(time: timedelta) -> str:
    minutes = round(time.total_seconds() / 60)
    return f"{minutes} min" if minutes < 120 else f"{minutes // 60} h {minutes % 60:02d} min"


def _table(found: Forecast) -> list[str]:
    rows: list[tuple[str, ...]] = [("", "measured", "forecast", "50 % interval", "90 % interval")]
    for quantity in QUANTITIES:
        draws = found.next_gas[quantity]
        expected = _digits(quantity, draws.median) if draws else "not forecast"
        ranges = [_range(quantity, draws, share) for share in (0.5, 0.9)]
        rows.append((_LOOKS[quantity], _digits(quantity, found.now[quantity]), expected, *ranges))
    return ["".join((f"{row[0]:<12}", *(f"{cell:>15}" for cell in row[1:]))).rstrip() for row in rows]


def _digits(quantity: str, value: float | None) -> str:
    if value is None:
        return "-"
    return f"{value:.2f}" if quantity == "ph" else f"{100 * value if quantity == 'sao2' else value:.0f}"


def _range(quantity: str, draws: Draws | None, share: float) -> str:
    return " to ".join(_digits(quantity, end) for end in draws.interval(share)) if draws else ""


def _settings_text(found: Forecast) -> str:
    words = []
    for name, value in found.settings.given().items():
        was = f" (was {_setting(name, found.changed[name][0])})" if name in found.changed else ""
        bare = next((name.removesuffix(end) for end in _UNITS if name.endswith(end)), name)
        words.append(f"{_spelt(bare)} {_setting(name, value)}{was}")
    return ", ".join(words)


def _spelt(name: str) -> str:
    return " ".join(_SPELT.get(word, word) for word in name.split("_"))


def _setting(name: str, value: object) -> str:
    if not isinstance(value, float | int):
        return "not known" if value is None else str(value)
    if name == "fio2":
        return f"{100 * value:.3g} %"
    return f"{value:g}" + next((unit for end, unit in _UNITS.items() if name.endswith(end)), "")


def _chances(what: str, chances: Mapping[str, float | None], names: Mapping[str, str]) -> str:
    known = [f"{names[key]} {_percent(chance)}" for key, chance in chances.items() if chance is not None]
    return item(f"{what}: {', '.join(known) or 'not known'}.", "")


def _percent(chance: float) -> str:
    return "<1 %" if chance < 0.005 else ">99 %" if chance > 0.995 else f"{100 * chance:.0f} %"


def _limits_text(limits: Sequence[Limit]) -> list[str]:
    touched = sorted(
        (limit for limit in limits if limit.verdict in GRAVEST_FIRST),
        key=lambda limit: (
            limit.verdict == "short",
            limit.level != "hard",
            GRAVEST_FIRST.index(limit.verdict),
        ),
    )
    unknown = [_spelt(limit.name) for limit in limits if limit.ok is None and limit not in touched]
    kept = len(limits) - len(touched) - len(unknown)
    lines = [f"Limits: {len(touched)} passed or in doubt, {kept} kept, {len(unknown)} not known."]
    lines += [item(_limit_text(limit)) for limit in touched]
    return lines + ([item(f"Not known: {', '.join(unknown)}.")] if unknown else [])


def _limit_text(limit: Limit) -> str:
    inside = "" if limit.probability is None else f", inside with {_percent(limit.probability)}"
    numbers = f"{_amount(limit, limit.value)}, limit {_amount(limit, limit.limit)} ({limit.level}{inside})"
    return f"{_spelt(limit.name)} {numbers}: {limit.says} ({limit.source})"


def _amount(limit: Limit, value: float | str | None) -> str:
    if limit.name == "fio2" or not isinstance(value, float | int):
        return _setting(limit.name, value)
    return f"{value:.3g} {limit.unit}".rstrip()


def _recheck_text(found: Forecast) -> str:
    looks = {"early look": found.recheck.early_minutes, "settled gas": found.recheck.settled_minutes}
    times = ", ".join(
        f"{name} at {_clock(found.at + timedelta(minutes=minutes))} (after {minutes:.0f} min)"
        for name, minutes in looks.items()
        if minutes is not None
    )
    when = f"if changed at {_clock(found.at)}: {times}. " if times else ""
    return item(f"Recheck {when}{found.recheck.reason}" if times else f"Recheck: {found.recheck.reason}", "")


def item(text: str, mark: str = "- ") -> str:
    """One paragraph of running text, filled to the width of the page and hung on its mark."""
    return textwrap.fill(
        " ".join(text.split()), _WIDTH, initial_indent=mark, subsequent_indent=" " * len(mark)
    )
