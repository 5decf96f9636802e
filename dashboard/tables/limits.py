"""The limits: the nearest one in large words, and every one with its number, its margin and its source."""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from dashboard.wording import LIMIT_LABELS, Units, chance_text, sentence_text
from engine.limits import Limit

_RANKS = ("past", "in doubt", "past, soft", "in doubt, soft", "short", "inside", "unknown")
_NUMBERS = re.compile(r"\d+(?:\.\d+)?")


@dataclass(frozen=True, slots=True)
class Margin:
    """How far a value is from the nearer ``end`` of its limit, also as a share; negative once past it."""

    left: float
    share: float
    end: float
    above: bool


def margin_of(limit: Limit) -> Margin | None:
    """The margin of one row; ``None`` where the value, the limit or the verdict is not known.

    A limit such as "4 to 8 mL/kg" has two ends and the nearer one counts. Which side of a limit is good, the
    row's own verdict says: ``ok`` true means that the distance is room, false that it is excess. The share is
    of the limit itself; for pH, of its hydrogen ions.
    """
    value, ends = limit.value, _ends(limit)
    if value is None or limit.ok is None or not ends:
        return None
    end = min(ends, key=lambda candidate: abs(candidate - value))
    distance = abs(end - value)
    share = 1 - 10**-distance if limit.name.startswith("ph_") else distance / abs(end) if end else distance
    sign = 1 if limit.ok else -1
    return Margin(left=sign * distance, share=sign * share, end=end, above=value > end)


def _ends(limit: Limit) -> list[float]:
    if limit.limit is None:
        return []
    if isinstance(limit.limit, str):
        return [float(number) for number in _NUMBERS.findall(limit.limit)[:2]]
    return [float(limit.limit)]


def in_order(limits: Sequence[Limit]) -> list[Limit]:
    """Hard limits past, then in doubt, soft ones alike, then those inside, and the unknown ones last.

    Within each the one with the least room comes first; of those in doubt, the least probable one.
    """

    def place(limit: Limit) -> tuple[int, float]:
        rank, margin = _RANKS.index(limit.verdict), margin_of(limit)
        if limit.verdict in ("past", "in doubt") and limit.level == "soft":
            rank += 2
        if limit.verdict == "in doubt":
            return rank, limit.probability or 0.0
        return rank, margin.share if margin else 9.0

    return sorted(limits, key=place)


def nearest_of(limits: Sequence[Limit]) -> Limit | None:
    """The hard limit that binds first, the soft ones only where no hard one is known."""
    known = [limit for limit in in_order(limits) if limit.verdict != "unknown"]
    return next((limit for limit in known if limit.level == "hard"), known[0] if known else None)


def nearest_limit(limits: Sequence[Limit], units: Units) -> str:
    """The nearest hard limit, readable from a metre."""
    limit = nearest_of(limits)
    if limit is None:
        return '<div class="fb-nearest"><small>Nearest limit</small><b>none known yet</b></div>'
    title, kind = {
        "past": (f"Past a {limit.level} limit", " fb-breach"),
        "in doubt": (f"A {limit.level} limit in doubt", " fb-doubt"),
    }.get(limit.verdict, (f"Nearest {limit.level} limit", ""))
    return (
        f'<div class="fb-nearest{kind}"><small>{title}</small>'
        f"<b>{_name(limit)} {_value(limit, units)}</b><span>{_margin(limit, units)}</span></div>"
    )


def limits_at_a_glance(limits: Sequence[Limit], units: Units, most: int = 4) -> str:
    """The next few after the nearest, one short line each; the full table stands further down."""
    nearest = nearest_of(limits)
    known = [row for row in in_order(limits) if row.verdict != "unknown" and row is not nearest][:most]
    lines = "".join(
        f'<tr class="{_class(limit)}"><th scope="row">{_name(limit)}</th>'
        f"<td>{_value(limit, units)}</td><td>{_margin(limit, units)}</td></tr>"
        for limit in known
    )
    return f'<table class="fb-glance"><tbody>{lines}</tbody></table>' if lines else ""


def limits_table(limits: Sequence[Limit], units: Units) -> str:
    """One line a limit: verdict in words, value, limit, margin, what it says and where it is from."""
    lines = "".join(_line(limit, units) for limit in in_order(limits))
    heads = ("", "Limit on", "Value", "Limit", "Margin", "Chance inside", "What it says", "Source")
    head = "".join(f'<th scope="col">{text}</th>' for text in heads)
    return f'<table class="fb-limits"><thead><tr>{head}</tr></thead><tbody>{lines}</tbody></table>'


def _line(limit: Limit, units: Units) -> str:
    cells = (
        _name(limit),
        _value(limit, units),
        f"{_limit(limit, units)} ({limit.level})",
        _margin(limit, units),
        chance_text(limit.probability),
        escape(sentence_text(limit.says, units)),
        escape(sentence_text(limit.source, units)),
    )
    body = "".join(f"<td>{cell}</td>" for cell in cells)
    return f'<tr class="{_class(limit)}"><th scope="row">{limit.verdict}</th>{body}</tr>'


def _class(limit: Limit) -> str:
    return f"fb-{limit.verdict.removeprefix('in ')}"


def _name(limit: Limit) -> str:
    return escape(LIMIT_LABELS.get(limit.name, limit.name.replace("_", " ")))


def _value(limit: Limit, units: Units) -> str:
    return "–" if limit.value is None else _number(limit.value, limit, units)


def _limit(limit: Limit, units: Units) -> str:
    ends = _ends(limit)
    if not ends:
        return "–"
    *first, last = (_number(end, limit, units) for end in ends)
    return " to ".join([*(number.split()[0] for number in first), last])


def _margin(limit: Limit, units: Units) -> str:
    if limit.verdict == "in doubt":
        return _doubt(limit, units)
    if limit.verdict == "short":
        return f"short of the cautious figure, {_limit(limit, units)}"
    margin = margin_of(limit)
    if margin is None:
        return "not known"
    if round(margin.share, 6) == 0:
        return f"at the limit, {_number(margin.end, limit, units)}"
    word = "left to" if limit.ok else "above" if margin.above else "below"
    return f"{_number(abs(margin.left), limit, units)} {word} {_number(margin.end, limit, units)}"


def _doubt(limit: Limit, units: Units) -> str:
    """For example "in doubt: 20 % chance below 55 mmHg"; of a range, the chance outside."""
    ends = _ends(limit)
    side = "outside" if len(ends) != 1 else "below" if (limit.value or 0.0) >= ends[0] else "above"
    return f"in doubt: {chance_text(1 - (limit.probability or 0.0))} chance {side} {_limit(limit, units)}"


def _number(value: float, limit: Limit, units: Units) -> str:
    return escape(units.limit_text(value, limit.unit, limit.name))
