"""Case files: JSON text to `Case` and back, with nothing guessed and nothing dropped.

The fields of the records (`engine.record`) are the only list of fields: this room walks their types. What a
value may be is for the record to say; this room adds where it stood. A file that does not fit is refused
whole with a `BadCase`, one line that names the file, entry, field, value and what was expected.
"""

import json
from dataclasses import MISSING, dataclass, fields, is_dataclass, replace
from datetime import datetime
from functools import cache
from os import PathLike
from pathlib import Path
from re import fullmatch
from types import UnionType
from typing import Any, get_args, get_origin, get_type_hints

from engine.reading.slips import LONGEST_VALUE, likely_slip, nearest, one_line, quoted, shortened
from engine.record import CHOICES, POSSIBLE, Case, Impossible

FORMAT = "forebreath-case-1"
LARGEST_FILE_BYTES = 10_000_000  # a year of hourly entries is about 3 MB
LONGEST_MESSAGE = 300
_LONGEST_NAME = 70  # characters of a file's or a field's name in a message
_REQUIRED = ("entries",)  # by the format, although the record has a default
_TWICE = object()  # stands for the value of a key that an object holds more than once
_EXPECTED_TIME = "ISO 8601 with a zone, such as 2031-03-04T07:40:00Z"


class BadCase(ValueError):
    """A case file that cannot be read: one clear line, at most `LONGEST_MESSAGE` characters."""


def read_case(path: str | PathLike[str]) -> Case:
    """Read the case file at ``path``; `BadCase` for whatever is wrong with the file or in it."""
    try:
        with open(path, "rb") as file:
            data = file.read(LARGEST_FILE_BYTES + 1)
    except IsADirectoryError:
        raise _refusal(str(path), "is a folder: expected a case file") from None
    except (OSError, ValueError) as why:  # ValueError: a zero byte in the path
        reason = getattr(why, "strerror", None) or why
        raise _refusal(str(path), f"cannot be opened ({reason}): expected a case file") from None
    return case_from_bytes(data, Path(path).name)


def case_from_bytes(data: bytes, name: str) -> Case:
    """The case in the bytes of a file or an upload called ``name``; a byte order mark is passed over."""
    if len(data) > LARGEST_FILE_BYTES:
        raise _refusal(name, f"is too large: expected at most {LARGEST_FILE_BYTES // 1_000_000} MB")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as why:
        raise _refusal(name, f"is not UTF-8 at byte {why.start + 1}: expected a case file in UTF-8") from None
    return case_from_text(text, name)


def case_from_text(text: str, name: str) -> Case:
    """The case in the ``text`` of a file called ``name``; every number becomes a float.

    Raises `BadCase`, for example ``bed7.json: entry 2 (2031-03-04T08:25:00Z): settings.fio2 = 40: expected a
    number from 0.21 to 1; per cent is never used in case files, 40 per cent is 0.4``.
    """
    whole = _json(text, name)
    place = _Place(name)
    if not isinstance(whole, dict):
        raise place.refuse(whole, "one object in braces")
    if (stated := whole.pop("format", MISSING)) != FORMAT:
        raise place.at("format").refuse(stated, f'"{FORMAT}"')
    found: Case = _record(Case, whole, place)
    return found


def text_from_case(case: Case) -> str:
    """The text of a case file, which reads back as an equal case.

    Keys stand in the order of the records' fields; what is unmeasured or equals its default is left out;
    whole numbers carry no point; times are ISO 8601, UTC with Z or in their own zone.
    """
    return json.dumps({"format": FORMAT} | _plain(case), ensure_ascii=False, indent=1, allow_nan=False) + "\n"


def time_from_text(text: str) -> datetime:
    """The time in ISO 8601 text with a zone; ``ValueError`` for any other text.

    >>> time_from_text("2031-03-04T07:40:00+01:00").isoformat()
    '2031-03-04T07:40:00+01:00'
    """
    if not fullmatch(r"[0-9W-]+T[0-9:.,]+(Z|[+-][0-9:]+)", text):
        raise ValueError(f"{quoted(text)}: expected {_EXPECTED_TIME}")
    return datetime.fromisoformat(text)


def text_from_time(time: datetime) -> str:
    """ISO 8601 text of a time with a zone; UTC is written as Z.

    >>> text_from_time(datetime.fromisoformat("2031-03-04T07:40:00+00:00"))
    '2031-03-04T07:40:00Z'
    """
    text = time.isoformat()
    return text.removesuffix("+00:00") + "Z" if text.endswith("+00:00") else text


@dataclass(frozen=True, slots=True)
class _Place:
    """Where in which file: what a refusal names."""

    file: str
    entry: str = ""
    field: str = ""

    def at(self, key: str) -> "_Place":
        """The place of a field of the object at this place."""
        return replace(self, field=f"{self.field}.{key}" if self.field else key)

    def item(self, number: int, value: object) -> "_Place":
        """The place of an item of the list at this place, numbered from 1; an entry carries its time."""
        if self.field != "entries":
            return replace(self, field=f"{self.field}[{number}]")
        time = value.get("time") if isinstance(value, dict) else None
        shown = shortened(one_line(time), LONGEST_VALUE) if isinstance(time, str) else "no time"
        return replace(self, entry=f"entry {number} ({shown}): ", field="")

    def refuse(self, value: object, expected: str, slip: str = "") -> BadCase:
        """The refusal of a value at this place; `MISSING` for one that is not there, `_TWICE` for two."""
        field = shortened(one_line(self.field), _LONGEST_NAME)
        what = " = ".join(filter(None, (field, quoted(value))))
        if value is MISSING or value is _TWICE:
            what = f"{field} {'is missing' if value is MISSING else 'stands twice'}"
        says = f"{slip}; expected {expected}" if slip else f"expected {expected}"
        return _refusal(self.file, f"{self.entry}{what}: {says}")


def _refusal(file: str, says: str) -> BadCase:
    name = one_line(file)
    name = name if len(name) <= _LONGEST_NAME else "…" + name[1 - _LONGEST_NAME :]
    return BadCase(shortened(one_line(f"{name}: {says}"), LONGEST_MESSAGE))


def _json(text: str, name: str) -> Any:
    """The JSON value of the text: every number a float, every key that is doubled holding `_TWICE`."""

    def once(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        found: dict[str, Any] = {}
        for key, value in pairs:
            found[key] = _TWICE if key in found else value
        return found

    try:
        return json.loads(text, object_pairs_hook=once, parse_int=float)
    except json.JSONDecodeError as why:
        where = f"line {why.lineno}, column {why.colno}: {why.msg}"
        raise _refusal(name, f"malformed JSON at {where}; expected one object in braces") from None
    except RecursionError:
        raise _refusal(
            name, "is nested too deep: expected the objects of the case format and no more"
        ) from None


@cache
def _kinds(record: Any) -> dict[str, Any]:
    """Field name -> its type without ``| None``, in the order of the fields."""
    hints = get_type_hints(record)
    bare = {name: get_args(hint)[0] if isinstance(hint, UnionType) else hint for name, hint in hints.items()}
    return {field.name: bare[field.name] for field in fields(record)}


@cache
def _homes() -> dict[str, str]:
    """Field name -> the part of a case file that holds it."""
    entry = get_args(_kinds(Case)["entries"])[0]
    kinds = _kinds(Case) | _kinds(entry)
    parts: dict[str, Any] = {name: kind for name, kind in kinds.items() if is_dataclass(kind)}
    return {name: part for part, record in reversed(parts.items()) for name in _kinds(record)}


def _record(record: Any, given: object, place: _Place) -> Any:
    """One record from one JSON object, or the refusal of the first field that does not fit."""
    kinds = _kinds(record)
    if not isinstance(given, dict):
        raise place.refuse(given, "an object in braces")
    for key in (key for key in given if key not in kinds):
        slip = f"it belongs in {_homes()[key]}" if key in _homes() else nearest(key, kinds)
        raise place.at(key).refuse(given[key], "a field of the case format", slip)
    for field in fields(record):
        required = (field.default is MISSING) or field.name in _REQUIRED
        if required and field.name not in given:
            raise place.at(field.name).refuse(MISSING, _expected(field.name, kinds[field.name]))
    values = {key: _value(kinds[key], value, place.at(key)) for key, value in given.items()}
    try:
        return record(**values)
    except Impossible as why:
        raise _placed(why, given, place) from None


def _placed(why: Impossible, given: dict[str, Any], place: _Place) -> BadCase:
    """What a record refused, and where; a case names the fields of its entries as ``entries[2].time``."""
    field = why.field
    if found := fullmatch(r"entries\[(\d+)\]\.(.+)", field):
        number, field = int(found[1]), found[2]
        given = given["entries"][number - 1]
        place = place.at("entries").item(number, given)
    written: Any = given
    for key in field.split("."):
        written = written.get(key) if isinstance(written, dict) else None
    value = written if isinstance(written, str | float) else MISSING if why.value is None else why.value
    return place.at(field).refuse(value, why.expected, likely_slip(field.rpartition(".")[2], value))


def _value(kind: Any, value: object, place: _Place) -> Any:
    """One value as its record wants it; whether a number or a word is possible is left for the record."""
    name = place.field.rpartition(".")[2]
    if value is _TWICE:
        raise place.refuse(value, "each field once")
    if get_origin(kind) is tuple and isinstance(value, list):
        return tuple(_value(get_args(kind)[0], v, place.item(n, v)) for n, v in enumerate(value, start=1))
    if is_dataclass(kind) and isinstance(value, dict):
        return _record(kind, value, place)
    if kind is datetime and isinstance(value, str):
        return _time(value, place)
    if kind is float and isinstance(value, float):
        return value
    if kind is bool and isinstance(value, bool):
        return value
    if kind is str and isinstance(value, str):
        return _text(value, place)
    unmeasured = "; what is unmeasured is left out" if value is None else ""
    raise place.refuse(value, _expected(name, kind) + unmeasured, likely_slip(name, value))


def _time(value: str, place: _Place) -> datetime:
    try:
        return time_from_text(value)
    except ValueError:
        raise place.refuse(value, _EXPECTED_TIME) from None


def _text(value: str, place: _Place) -> str:
    try:
        value.encode()
    except UnicodeEncodeError:
        raise place.refuse(value, "text of whole letters, without lone surrogates") from None
    return value


def _expected(name: str, kind: Any) -> str:
    if name in POSSIBLE:
        low, high = POSSIBLE[name]
        return f"a number from {low:g} to {high:g}"
    if name in CHOICES:
        return f"one of {', '.join(CHOICES[name])}"
    if get_origin(kind) is tuple:
        return "a list in brackets"
    words = {str: "text in quotes", bool: "true or false", datetime: _EXPECTED_TIME}
    return words.get(kind, "an object in braces")


def _plain(value: Any) -> Any:
    """A record as JSON values."""
    if is_dataclass(value):
        kept = ((f, getattr(value, f.name)) for f in fields(value))
        return {f.name: _plain(v) for f, v in kept if f.name in _REQUIRED or v != f.default}
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    if isinstance(value, datetime):
        return text_from_time(value)
    if isinstance(value, float) and value.is_integer():
        return int(value)
    return value
