"""Words for a refusal: a value quoted short and on one line, and the slip that probably made it.

A suggestion is made only where it is plain: another unit, a lost decimal point, a word almost right. It is
never acted on.
"""

import json
from collections.abc import Callable, Iterable
from difflib import get_close_matches
from re import fullmatch

from engine.record import CHOICES, CONDITIONS, EVENTS, POSSIBLE
from engine.units import (
    c_from_fahrenheit,
    fraction_from_percent,
    g_per_dl_from_g_per_l,
    l_from_ml,
    ml_from_l,
    mmhg_from_hpa,
    mmhg_from_kpa,
)

LONGEST_VALUE = 40  # characters of a value that a message quotes

# Units typed by habit: ending of the field's name -> that unit, and how to the unit of the field.
_Habits = tuple[tuple[str, Callable[[float], float]], ...]
_HABITS: dict[str, _Habits] = {
    "barometric_mmhg": (("hPa", mmhg_from_hpa), ("kPa", mmhg_from_kpa)),
    "_mmhg": (("kPa", mmhg_from_kpa),),
    "hb_g_per_dl": (("g/L", g_per_dl_from_g_per_l),),
    "_ml_per_min": (("L/min", ml_from_l),),
    "_l_per_min": (("mL/min", l_from_ml),),
    "_ml": (("L", ml_from_l),),
    "_cm": (("m", lambda m: 100.0 * m),),
    "temperature_c": (("°F", c_from_fahrenheit),),
}
_HABIT_OF_FRACTIONS: _Habits = (("per cent", fraction_from_percent),)


def one_line(text: str) -> str:
    """The text with all that does not print (line ends, control characters, half letters) escaped."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)


def shortened(text: str, length: int) -> str:
    """The text, its end replaced by an ellipsis where it is longer than ``length``."""
    return text if len(text) <= length else text[: length - 1] + "…"


def quoted(value: object) -> str:
    """A value as a case file writes it, on one line and short.

    >>> quoted(40.0), quoted("Volume"), quoted(True), quoted(None), quoted([1, 2])
    ('40', '"Volume"', 'true', 'null', 'a list of 2')
    """
    if isinstance(value, dict):
        return "an object"
    if isinstance(value, list | tuple):
        return f"a list of {len(value)}"
    if isinstance(value, str):
        return shortened(one_line(json.dumps(value[: LONGEST_VALUE + 1], ensure_ascii=False)), LONGEST_VALUE)
    if value is None or isinstance(value, float | bool):
        return json.dumps(value).removesuffix(".0")
    return shortened(one_line(repr(value)), LONGEST_VALUE)


def likely_slip(field: str, value: object) -> str:
    """What probably went wrong with an impossible value, as a clause; empty where it is not plain.

    >>> likely_slip("fio2", 40.0)
    'per cent is never used in case files, 40 per cent is 0.4'
    >>> likely_slip("mode", "Volume")
    'perhaps volume'
    """
    if field not in POSSIBLE:
        words = CHOICES.get(field) or {"conditions": CONDITIONS, "events": EVENTS}.get(field, ())
        return nearest(value, words) if isinstance(value, str) else ""
    if isinstance(value, str):
        return "a number stands without quotes" if fullmatch(r"-?[0-9]+([.,][0-9]+)?", value) else ""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return ""
    return _lost_point(field, value) if field.startswith("ph") else _other_unit(field, value)


def nearest(word: str, known: Iterable[str]) -> str:
    """The known word probably meant by another one, as a clause; empty where none is near."""
    near = get_close_matches(word[: 2 * LONGEST_VALUE].strip().lower().replace(" ", "_"), list(known), n=1)
    return f"perhaps {near[0]}" if near and near[0] != word else ""


def _lost_point(field: str, value: float) -> str:
    low, high = POSSIBLE[field]
    found = [value / ten for ten in (10, 100, 1000) if low <= value / ten <= high]
    return f"the decimal point is perhaps lost: {found[0]:g}" if found else ""


def _other_unit(field: str, value: float) -> str:
    low, high = POSSIBLE[field]
    by_name = next((habits for ending, habits in _HABITS.items() if field.endswith(ending)), ())
    for unit, converted in _HABIT_OF_FRACTIONS if high <= 1 else by_name:
        if low <= converted(value) <= high:
            return f"{unit} is never used in case files, {quoted(value)} {unit} is {converted(value):.3g}"
    return ""
