"""The limits: the nearest one in large words, and every one with its number, its margin and its source."""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from dashboard.wording import chance_text, percent_text
from engine.limits import Limit

_NUMBERS = re.compile(r"\d+(?:\.\d+)?")


@dataclass(frozen=True, slots=True)
class Margin:
    """How far a value is from its nearest limit: ``left`` in its own unit (negative once past it) and as a share."""

    left: float
    share: float


def margin_of(limit: Limit) -> Margin | None:
    """The margin of one row; ``None`` where the value, the limit or the verdict is not known.

    A limit such as "4-8" has two ends and the nearer one counts. Which side of a single limit is the good one, the
    row's own verdict says: ``ok`` true means that the distance is room, false that it is excess.
    """
    if limit.value is None or limit.limit is None or limit.ok is None:
        return None
    ends = [limit.limit] if isinstance(limit.limit, int | float) else [float(n) for n in _NUMBERS.findall(limit.limit)]
    if not ends:
        return None
    end = min(ends, key=lambda candidate: abs(candidate - limit.value) if limit.value is not None else 0.0)
    distance = abs(end - limit.value)
    left = distance if limit.ok else -distance
    return Margin(left=left, share=left / abs(end) if end else left)


def in_order(limits: Sequence[Limit]) -> list[Limit]:
    """Breaches first (hard before soft), then by how little room is left, the unknown ones last."""

    def place(limit: Limit) -> tuple[int, int, float]:
        margin = margin_of(limit)
        rank = 0 if limit.ok is False else 1 if limit.ok else 2
        return rank, 0 if limit.level == "hard" or rank else 1, margin.share if margin else 9.0

    return sorted(limits, key=place)


def nearest_limit(limits: Sequence[Limit]) -> str:
    """The one that binds first, readable from a metre."""
    known = [limit for limit in in_order(limits) if limit.ok is not None]
    if not known:
        return '<div class="fb-nearest"><small>Nearest limit</small><b>none known yet</b></div>'
    limit = known[0]
    breach = limit.ok is False
    title = f"Past the {limit.level} limit" if breach else "Nearest limit"
    return (
        f'<div class="fb-nearest{" fb-breach" if breach else ""}"><small>{title}</small>'
        f"<b>{escape(_name(limit))} {_number(limit)}</b><span>{escape(_margin_text(limit))}</span></div>"
    )


def limits_table(limits: Sequence[Limit]) -> str:
    """One line a limit: verdict in words, value, limit, margin, what it says and where it is from."""
    lines = "".join(_line(limit) for limit in in_order(limits))
    heads = ("", "Limit on", "Value", "Limit", "Margin", "Chance inside", "What it says", "Source")
    head = "".join(f'<th scope="col">{text}</th>' for text in heads)
    return f'<table class="fb-limits"><thead><tr>{head}</tr></thead><tbody>{lines}</tbody></table>'


def _line(limit: Limit) -> str:
    verdict = {True: "inside", False: "past", None: "unknown"}[limit.ok]
    cells = (
        _name(limit),
        _number(limit),
        f"{_limit_number(limit)} ({limit.level})",
        _margin_text(limit),
        chance_text(limit.probability),
        limit.says,
        limit.source,
    )
    body = "".join(f"<td>{escape(cell)}</td>" for cell in cells)
    return f'<tr class="fb-{verdict}"><th scope="row">{verdict}</th>{body}</tr>'


_NAMES: dict[str, str] = {}


def _name(limit: Limit) -> str:
    return _NAMES.get(limit.name, limit.name.replace("_", " "))


def _number(limit: Limit) -> str:
    return "–" if limit.value is None else _with_unit(limit.value, limit)


def _limit_number(limit: Limit) -> str:
    if limit.limit is None:
        return "–"
    return limit.limit if isinstance(limit.limit, str) else _with_unit(limit.limit, limit)


def _with_unit(value: float, limit: Limit) -> str:
    if limit.name == "fio2":
        return f"{percent_text(value)} %"
    return f"{_digits(value)} {limit.unit}".rstrip()


def _digits(value: float) -> str:
    return f"{value:.2f}" if abs(value) < 10 and value != round(value, 1) else f"{value:.1f}".removesuffix(".0")


def _margin_text(limit: Limit) -> str:
    margin = margin_of(limit)
    if margin is None:
        return "not known"
    word = "left to" if margin.left >= 0 else "past"
    amount = _with_unit(abs(margin.left), limit)
    return f"{amount} {word} {_limit_number(limit)}"
