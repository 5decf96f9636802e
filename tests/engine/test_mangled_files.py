"""Mangled case files: whatever stands in a file, reading gives a `Case` or one clear line, nothing else."""

import json
from collections.abc import Callable, Iterator
from copy import deepcopy
from dataclasses import MISSING, fields, is_dataclass
from dataclasses import replace as replaced
from datetime import UTC, datetime, timedelta, timezone
from random import Random
from types import UnionType
from typing import Any, get_args, get_origin, get_type_hints

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.reading.case_file import (
    FORMAT,
    LONGEST_MESSAGE,
    BadCase,
    case_from_bytes,
    case_from_text,
    text_from_case,
)
from engine.record import CHOICES, CONDITIONS, EVENTS, POSSIBLE, Case, Entry, Impossible, Settings

MANGLED_FILES = 10_000  # as many as the design asks for
SEED = 2031
NAME = "bed7.json"
VALID: dict[str, Any] = {
    "format": FORMAT,
    "label": "Bed 7",
    "patient": {
        "sex": "female",
        "height_cm": 164,
        "conditions": ["obstructive"],
        "baseline": {"paco2_mmhg": 58},
    },
    "site": {"barometric_mmhg": 752},
    "target": {"ph_low": 7.3, "ph_high": 7.45, "pao2_low_mmhg": 60},
    "entries": [
        {
            "time": "2031-03-04T07:40:00Z",
            "settings": {"mode": "volume", "rate_per_min": 18, "tidal_volume_ml": 380, "fio2": 0.5},
            "change_reason": "procedure",
        },
        {
            "time": "2031-03-04T08:25:00Z",
            "measured": {"total_rate_per_min": 18, "plateau_cmh2o": 22, "spo2": 0.93},
            "gas": {
                "ph": 7.28,
                "paco2_mmhg": 57,
                "pao2_mmhg": 66,
                "sao2": 0.91,
                "hb_g_per_dl": 9.8,
                "drawn_at": "2031-03-04T08:20:00Z",
                "temperature_corrected": True,
                "temperature_c": 36.4,
                "specimen": "arterial",
            },
            "events": ["suction", "prone"],
            "note": "zähes Sekret",
        },
        {"time": "2031-03-04T09:00:00+01:00", "settings": {"fio2": 0.6}},
        {
            "time": "2031-03-04T10:40:00Z",
            "gas": {"ph": 7.3, "paco2_mmhg": 55, "pao2_mmhg": 71, "hb_g_per_dl": 9.6},
        },
    ],
}
VALID["entries"][2]["time"] = "2031-03-04T10:00:00+01:00"  # 09:00 in UTC, so in order
ODD_VALUES: tuple[Any, ...] = (
    None, True, False, 0, -1, 1, 40, 1e-9, 1e308, 10**30, float("nan"), float("inf"), -float("inf"),
    "", " ", "0.5", "volume", "suction", "\ud800", "\x00", "\u2028", "x" * 500, "2031-03-04T08:25:00",
    "9999-12-31T23:59Z", "0001-01-01T00:00:00+14:00", [], [[]], [None], {}, {"": None}, {"ph": 7.4},
    [1] * 300,
)  # fmt: skip
ODD_BYTES = (
    b"",
    b"\x00",
    b"\xff",
    b"\xe4",
    b'"',
    b"{",
    b"}",
    b"[",
    b"]",
    b",",
    b":",
    b"\n",
    b"e",
    b"-",
    b"9" * 400,
    b"NaN",
)


def outcome(data: bytes) -> Case | str:
    """The case, which must survive the round trip, or the refusal, which must be one clear line."""
    try:
        case = case_from_bytes(data, NAME)
    except BadCase as why:
        message = str(why)
        assert message.startswith(f"{NAME}: "), message
        assert message.isprintable(), message
        assert len(message) <= LONGEST_MESSAGE, message
        assert "expected" in message or len(message) == LONGEST_MESSAGE, message
        return message
    assert case_from_text(text_from_case(case), NAME) == case
    return case


def bytes_of(whole: object) -> bytes:
    return json.dumps(whole, allow_nan=True).encode()


def places(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """The path of everything inside a JSON value."""
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, inner in items:
        yield (*path, key)
        yield from places(inner, (*path, key))


def within(whole: Any, path: tuple[Any, ...]) -> Any:
    for key in path:
        whole = whole[key]
    return whole


def test_the_unmangled_file_is_read():
    assert isinstance(outcome(bytes_of(VALID)), Case)


# Ten thousand at once, by a generator of our own


def drop(random: Random, parent: Any, key: Any) -> None:
    del parent[key]


def replace(random: Random, parent: Any, key: Any) -> None:
    parent[key] = random.choice(ODD_VALUES)


def scale(random: Random, parent: Any, key: Any) -> None:
    """A number ten, a hundred or a thousand times too large or too small, or with its sign turned."""
    if isinstance(parent[key], int | float):
        parent[key] = parent[key] * random.choice((0.001, 0.01, 0.1, 10, 100, -1))


def rename(random: Random, parent: Any, key: Any) -> None:
    if isinstance(parent, dict):
        parent[random.choice((key.upper(), key + "x", key[:-1], key.replace("mmhg", "kpa"), ""))] = (
            parent.pop(key)
        )


def swap(random: Random, parent: Any, key: Any) -> None:
    """Two neighbours change places: among entries, their times too are then out of order."""
    other = random.choice(list(parent) if isinstance(parent, dict) else range(len(parent)))
    parent[key], parent[other] = parent[other], parent[key]


def wrap(random: Random, parent: Any, key: Any) -> None:
    parent[key] = [parent[key]] if random.random() < 0.5 else {str(key): parent[key]}


def mangled_tree(random: Random) -> bytes:
    """The valid file with one to three of its values mangled."""
    whole = deepcopy(VALID)
    for _ in range(random.choice((1, 1, 2, 3))):
        path = random.choice(list(places(whole)) or [()])
        if path:
            random.choice((drop, replace, scale, rename, swap, wrap))(
                random, within(whole, path[:-1]), path[-1]
            )
    return bytes_of(whole)


def mangled_bytes(random: Random) -> bytes:
    """The valid file cut short, or with bytes spliced in, cut out or doubled."""
    data = bytes_of(VALID)
    start, end = sorted(random.randrange(len(data)) for _ in range(2))
    short = min(end, start + random.randrange(12))
    return random.choice(
        (
            data[:start],
            data[:start] + random.choice(ODD_BYTES) + data[start:],
            data[:start] + random.randbytes(3) + data[short:],
            data[:start] + data[short:],
            data[:end] + data[start:],
        )
    )


def doubled_key(random: Random) -> bytes:
    """The valid file with one line of an object standing twice."""
    lines = json.dumps(VALID, indent=0).splitlines()
    number = random.choice(
        [n for n, line in enumerate(lines) if ":" in line and line.endswith(",") and "{" not in line]
    )
    return "\n".join([*lines[:number], lines[number], *lines[number:]]).encode()


@pytest.mark.slow
def test_ten_thousand_mangled_files_give_a_case_or_one_clear_line():
    random = Random(SEED)
    mangle: tuple[Callable[[Random], bytes], ...] = (mangled_tree, mangled_tree, mangled_bytes, doubled_key)
    outcomes = [outcome(random.choice(mangle)(random)) for _ in range(MANGLED_FILES)]
    refused = [o for o in outcomes if isinstance(o, str)]
    assert 0 < len(refused) < MANGLED_FILES
    for word in (
        "is missing",
        "stands twice",
        "null",
        "malformed JSON",
        "not UTF-8",
        "a time after",
        "perhaps",
    ):
        assert any(word in message for message in refused), f"no mangled file was refused with: {word}"


def test_every_doubled_key_is_refused():
    random = Random(SEED)
    for _ in range(200):
        assert "twice" in str(outcome(doubled_key(random)))


def test_null_in_any_place_is_refused():
    for path in places(VALID):
        whole = deepcopy(VALID)
        within(whole, path[:-1])[path[-1]] = None
        assert "null" in str(outcome(bytes_of(whole))), path


def test_every_refusal_within_an_entry_names_it():
    for path in places(VALID["entries"], ("entries",)):
        whole = deepcopy(VALID)
        within(whole, path[:-1])[path[-1]] = float("nan")
        message = str(outcome(bytes_of(whole)))
        assert message.startswith(f"{NAME}: entry {path[1] + 1} ("), (path, message)


# Anything at all, found by hypothesis

ANY_JSON = st.recursive(
    st.none() | st.booleans() | st.floats() | st.integers() | st.text(max_size=12),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=8), inner, max_size=3),
    max_leaves=8,
)
PLACES = st.sampled_from(list(places(VALID)))
QUIET = settings(max_examples=300, deadline=None, derandomize=True, database=None)


@QUIET
@given(st.binary(max_size=200))
def test_any_bytes(data):
    assert isinstance(outcome(data), str)  # nothing this short is a case by chance


@QUIET
@given(ANY_JSON)
def test_any_json(value):
    assert isinstance(outcome(bytes_of(value)), str)


@QUIET
@given(PLACES, ANY_JSON)
def test_any_json_in_any_place(path, value):
    whole = deepcopy(VALID)
    within(whole, path[:-1])[path[-1]] = value
    outcome(bytes_of(whole))


@QUIET
@given(PLACES, st.text(max_size=30), ANY_JSON)
def test_any_other_key_in_any_object(path, key, value):
    whole = deepcopy(VALID)
    parent = within(whole, path[:-1])
    if isinstance(parent, dict) and key not in parent:
        parent[key] = value
        found = outcome(bytes_of(whole))
        assert isinstance(found, str) or key in known_keys()


def known_keys() -> set[str]:
    return {f.name for record in records(Case) for f in fields(record)}


def records(record: type) -> Iterator[type]:
    """A record and all records in its fields."""
    yield record
    for hint in get_type_hints(record).values():
        for inner in (hint, *get_args(hint)):
            if is_dataclass(inner):
                yield from records(inner)


@QUIET
@given(st.text(alphabet='{}[]":,0123456789.eE-+ nulltrefasNI\\', max_size=60))
def test_text_that_looks_like_json(text):
    assert isinstance(outcome(text.encode()), str)


# Any case a record accepts survives the round trip

TEXTS = st.text(st.characters(exclude_categories=["Cs"]), min_size=1, max_size=20).filter(str.strip)
FULL = Settings(mode="volume", rate_per_min=18.0, tidal_volume_ml=380.0, fio2=0.5)
TIMES = st.datetimes(
    datetime(1901, 1, 1),
    datetime(2249, 12, 31),
    timezones=st.sampled_from(
        [UTC, timezone(timedelta(hours=-3, minutes=-30)), timezone(timedelta(seconds=7))]
    ),
)


def values_for(name: str, hint: Any) -> st.SearchStrategy[Any]:
    """What a field of this name and type may hold."""
    if name in POSSIBLE:
        return st.floats(*POSSIBLE[name], allow_nan=False)
    if name in CHOICES:
        return st.sampled_from(CHOICES[name])
    if name in ("conditions", "events"):
        return st.lists(st.sampled_from(CONDITIONS if name == "conditions" else EVENTS), max_size=3).map(
            tuple
        )
    kind = get_args(hint)[0] if isinstance(hint, UnionType) else hint
    if get_origin(kind) is tuple:
        return st.just(())
    if is_dataclass(kind):
        return some(kind)
    return {bool: st.booleans(), str: TEXTS, datetime: TIMES}[kind]


def some(record: type) -> st.SearchStrategy[Any]:
    """Any record of this kind that its own rules accept."""
    hints = get_type_hints(record)
    required = {f.name: values_for(f.name, hints[f.name]) for f in fields(record) if f.default is MISSING}
    optional = {f.name: values_for(f.name, hints[f.name]) for f in fields(record) if f.default is not MISSING}
    return st.fixed_dictionaries(required, optional=optional).map(lambda v: made(record, v)).filter(bool)


def made(record: type, values: dict[str, Any]) -> Any:
    try:
        return record(**values)
    except Impossible:
        return None


@st.composite
def cases(draw: st.DrawFn) -> Case:
    """A case of up to three entries, settings for a gas in the first; of none where order is wrong."""
    case = draw(some(Case))
    entries = sorted(draw(st.lists(some(Entry), max_size=3)), key=lambda entry: entry.time)
    first = [replaced(entry, settings=FULL) for entry in entries[:1]]
    return made(Case, values_of(case) | {"entries": (*first, *entries[1:])}) or case


def values_of(record: Any) -> dict[str, Any]:
    return {f.name: getattr(record, f.name) for f in fields(record)}


@QUIET
@given(cases())
def test_any_case_survives_the_round_trip(case):
    text = text_from_case(case)
    assert case_from_text(text, NAME) == case
    assert text_from_case(case_from_text(text, NAME)) == text
    assert "null" not in json.dumps(list(places(json.loads(text))))
    assert text.encode().decode() == text
