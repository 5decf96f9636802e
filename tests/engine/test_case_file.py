"""Case files: what is read, how it is written back, and what each refusal says."""

import json
from collections.abc import Callable
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from engine.reading.case_file import (
    LARGEST_FILE_BYTES,
    LONGEST_MESSAGE,
    BadCase,
    case_from_bytes,
    case_from_text,
    read_case,
    text_from_case,
    text_from_time,
    time_from_text,
)
from engine.reading.slips import LONGEST_VALUE, quoted
from engine.record import Baseline, BloodGas, Case, Entry, Measured, Patient, Settings, Site, Target

SHARED_CASES = Path(__file__).parents[2] / ".." / "shared" / "cases"
FIRST, SECOND = "2031-03-04T07:40:00Z", "2031-03-04T08:25:00Z"
TEXT = """{
 "format": "forebreath-case-1",
 "label": "Bed 7",
 "patient": {
  "sex": "female",
  "height_cm": 164,
  "conditions": ["obstructive", "chronic_hypercapnia"],
  "baseline": {"paco2_mmhg": 58}
 },
 "site": {"barometric_mmhg": 752},
 "target": {"ph_low": 7.3, "ph_high": 7.45},
 "entries": [
  {
   "time": "2031-03-04T07:40:00Z",
   "settings": {"mode": "volume", "rate_per_min": 18, "tidal_volume_ml": 380, "fio2": 0.5, "ie_ratio": 0.5},
   "change_reason": "procedure"
  },
  {
   "time": "2031-03-04T08:25:00Z",
   "measured": {"plateau_cmh2o": 22, "spo2": 0.93},
   "gas": {
    "ph": 7.28, "paco2_mmhg": 57, "pao2_mmhg": 66, "hb_g_per_dl": 9.8, "sao2": 0.91,
    "drawn_at": "2031-03-04T09:10:00+01:00", "temperature_corrected": true, "temperature_c": 36.1
   },
   "events": ["suction"],
   "note": "Sekret zäh"
  }
 ]
}"""
CASE = Case(
    label="Bed 7",
    patient=Patient(
        sex="female",
        height_cm=164.0,
        conditions=("obstructive", "chronic_hypercapnia"),
        baseline=Baseline(paco2_mmhg=58.0),
    ),
    site=Site(barometric_mmhg=752.0),
    target=Target(ph_low=7.3, ph_high=7.45),
    entries=(
        Entry(
            time=datetime(2031, 3, 4, 7, 40, tzinfo=UTC),
            settings=Settings(
                mode="volume", rate_per_min=18.0, tidal_volume_ml=380.0, fio2=0.5, ie_ratio=0.5
            ),
            change_reason="procedure",
        ),
        Entry(
            time=datetime(2031, 3, 4, 8, 25, tzinfo=UTC),
            measured=Measured(plateau_cmh2o=22.0, spo2=0.93),
            gas=BloodGas(
                ph=7.28,
                paco2_mmhg=57.0,
                pao2_mmhg=66.0,
                hb_g_per_dl=9.8,
                sao2=0.91,
                drawn_at=datetime(2031, 3, 4, 8, 10, tzinfo=UTC),
                temperature_corrected=True,
                temperature_c=36.1,
            ),
            events=("suction",),
            note="Sekret zäh",
        ),
    ),
)
AT_SECOND = f"bed7.json: entry 2 ({SECOND}): "


def refusal(text: str | bytes, name: str = "bed7.json") -> str:
    read = case_from_bytes if isinstance(text, bytes) else case_from_text
    with pytest.raises(BadCase) as caught:
        read(text, name)  # type: ignore[arg-type]  # each reader is given its own kind
    message = str(caught.value)
    assert message.isprintable()
    assert len(message) <= LONGEST_MESSAGE
    return message


def refusal_of(change: Callable[[dict], object]) -> str:
    """The refusal of the example after ``change`` has been made to its objects."""
    whole = json.loads(TEXT)
    change(whole)
    return refusal(json.dumps(whole))


def in_settings(**values: object) -> str:
    return refusal_of(lambda whole: whole["entries"][0]["settings"].update(values))


def in_gas(**values: object) -> str:
    return refusal_of(lambda whole: whole["entries"][1]["gas"].update(values))


# What is read and written


def test_the_example_is_read_in_full():
    assert case_from_text(TEXT, "bed7.json") == CASE


def test_every_number_becomes_a_float():
    case = case_from_text(TEXT, "bed7.json")
    assert isinstance(case.patient.height_cm, float)
    assert isinstance(case.entries[0].settings.rate_per_min, float)


def test_a_written_case_reads_back_equal():
    assert case_from_text(text_from_case(CASE), "copy.json") == CASE


def test_writing_keeps_the_order_of_the_records_and_leaves_out_what_is_unmeasured():
    given = json.loads(TEXT)
    shuffled = json.dumps({key: given[key] for key in reversed(given)})
    written = text_from_case(case_from_text(shuffled, "bed7.json"))
    assert written == text_from_case(case_from_text(TEXT, "bed7.json"))
    assert list(json.loads(written)) == ["format", "label", "patient", "site", "target", "entries"]
    assert list(json.loads(written)["entries"][1]["gas"])[:4] == [
        "ph",
        "paco2_mmhg",
        "pao2_mmhg",
        "hb_g_per_dl",
    ]
    assert "null" not in written
    assert '"rate_per_min": 18,' in written
    assert '"drawn_at": "2031-03-04T09:10:00+01:00",' in written


def test_the_smallest_case_keeps_its_entries():
    smallest = '{"format": "forebreath-case-1", "label": "Bed 7", "entries": []}'
    assert case_from_text(smallest, "bed7.json") == Case(label="Bed 7")
    assert json.loads(text_from_case(Case(label="Bed 7"))) == json.loads(smallest)


def test_empty_parts_survive_the_round_trip():
    entry = Entry(time=CASE.entries[0].time, settings=Settings(), measured=Measured(), note="")
    case = Case(label="Bed 7", patient=Patient(baseline=Baseline()), target=Target(), entries=(entry,))
    assert case_from_text(text_from_case(case), "bed7.json") == case


def test_a_byte_order_mark_is_passed_over():
    assert case_from_bytes(b"\xef\xbb\xbf" + TEXT.encode(), "bed7.json") == CASE


@pytest.mark.parametrize(
    ("text", "time"),
    [
        ("2031-03-04T07:40:00Z", datetime(2031, 3, 4, 7, 40, tzinfo=UTC)),
        ("2031-03-04T07:40Z", datetime(2031, 3, 4, 7, 40, tzinfo=UTC)),
        ("2031-03-04T07:40:00.5+00:00", datetime(2031, 3, 4, 7, 40, 0, 500_000, tzinfo=UTC)),
        ("20310304T074000Z", datetime(2031, 3, 4, 7, 40, tzinfo=UTC)),
        ("2031-03-04T07:40:00-03:30", datetime(2031, 3, 4, 11, 10, tzinfo=UTC)),
    ],
)
def test_iso_8601_times_with_a_zone_are_read(text, time):
    assert time_from_text(text) == time


def test_times_are_written_with_z_or_their_zone():
    assert text_from_time(datetime(2031, 3, 4, 7, 40, tzinfo=UTC)) == "2031-03-04T07:40:00Z"
    summer = datetime(2031, 7, 4, 7, 40, tzinfo=ZoneInfo("Europe/Vienna"))
    assert text_from_time(summer) == "2031-07-04T07:40:00+02:00"
    odd = datetime(2031, 3, 4, 7, 40, tzinfo=timezone(timedelta(seconds=15)))
    assert time_from_text(text_from_time(odd)) == odd


@pytest.mark.skipif(not SHARED_CASES.is_dir(), reason="the shared case files are not beside this checkout")
def test_all_shared_cases_are_read_and_written_as_they_stand():
    paths = sorted(SHARED_CASES.rglob("*.json"))
    assert paths
    for path in paths:
        case, given = read_case(path), json.loads(path.read_text("utf-8"))
        assert json.loads(text_from_case(case)) == given, path.name
        assert case_from_text(text_from_case(case), path.name) == case
        assert [text_from_time(entry.time) for entry in case.entries] == [e["time"] for e in given["entries"]]


# Files


def test_a_file_is_read_from_its_path(tmp_path):
    path = tmp_path / "bed7.json"
    path.write_text(TEXT, encoding="utf-8")
    assert read_case(path) == read_case(str(path)) == CASE


@pytest.mark.parametrize(
    ("name", "says"),
    [("none.json", "No such file"), ("", "is a folder"), ("a\0b.json", "null byte"), ("x" * 300, "too long")],
)
def test_a_path_that_is_no_file_is_refused(tmp_path, name, says):
    with pytest.raises(BadCase, match=says) as caught:
        read_case(tmp_path / name)
    assert str(caught.value).isprintable()
    assert len(str(caught.value)) <= LONGEST_MESSAGE


def test_a_file_is_named_without_its_folder(tmp_path):
    path = tmp_path / "bed7.json"
    path.write_text("{}", encoding="utf-8")
    with pytest.raises(BadCase, match=r"^bed7\.json: format is missing"):
        read_case(path)


def test_a_file_of_any_length_is_refused_beyond_the_largest():
    padded = TEXT.encode() + b" " * (LARGEST_FILE_BYTES - len(TEXT.encode()))
    assert case_from_bytes(padded, "bed7.json") == CASE
    assert refusal(padded + b" ") == "bed7.json: is too large: expected at most 10 MB"


def test_text_that_is_not_utf_8_is_refused():
    assert refusal(TEXT.encode("latin-1")).startswith("bed7.json: is not UTF-8 at byte ")
    assert (
        refusal(TEXT.encode("utf-16")) == "bed7.json: is not UTF-8 at byte 1: expected a case file in UTF-8"
    )


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "malformed JSON at line 1, column 1"),
        ("{", "malformed JSON at line 1, column 2"),
        (TEXT + "}", "malformed JSON at line 29, column 2: Extra data"),
        (TEXT.replace(",", ";", 1), "malformed JSON at line 2, column 31"),
        ("\ufeff" + TEXT, "malformed JSON"),
        ("[" * 100_000, "is nested too deep"),
        ('{"a":' * 100_000, "is nested too deep"),
        ("[]", "a list of 0: expected one object in braces"),
        ("null", "null: expected one object in braces"),
        ("7", "7: expected one object in braces"),
        ('"Bed 7"', '"Bed 7": expected one object in braces'),
    ],
)
def test_text_that_is_no_object_is_refused(text, says):
    assert refusal(text).startswith(f"bed7.json: {says}")


def test_odd_and_endless_file_names_still_make_one_line():
    assert refusal("[]", "a\nb\x1b[2J.json").startswith(r"a\nb\x1b[2J.json: ")
    assert refusal("[]", "x" * 999 + "bed7.json").startswith("…x")


# The case as a whole


@pytest.mark.parametrize("value", ["forebreath-case-2", "", None, 1, ["forebreath-case-1"]])
def test_another_format_is_refused(value):
    message = refusal_of(lambda whole: whole.update(format=value))
    assert message == f'bed7.json: format = {quoted(value)}: expected "forebreath-case-1"'


@pytest.mark.parametrize("key", ["format", "label", "entries"])
def test_what_a_case_requires(key):
    assert refusal_of(lambda whole: whole.pop(key)).startswith(f"bed7.json: {key} is missing: expected ")


def test_an_empty_label_is_refused():
    assert refusal_of(lambda whole: whole.update(label=" ")) == 'bed7.json: label = " ": expected a bed label'


def test_a_list_where_an_object_is_due_and_the_other_way_round():
    assert refusal_of(lambda w: w.update(site=[752])) == (
        "bed7.json: site = a list of 1: expected an object in braces"
    )
    assert refusal_of(lambda w: w.update(entries={})) == (
        "bed7.json: entries = an object: expected a list in brackets"
    )
    assert refusal_of(lambda w: w["entries"].insert(0, [])) == (
        "bed7.json: entry 1 (no time): a list of 0: expected an object in braces"
    )
    assert refusal_of(lambda w: w["patient"].update(conditions="obstructive")) == (
        'bed7.json: patient.conditions = "obstructive": expected a list in brackets'
    )


def test_keys_that_stand_twice_are_refused_wherever_they_stand():
    assert refusal(TEXT.replace('"label"', '"label": "Bed 8", "label"')) == (
        "bed7.json: label stands twice: expected each field once"
    )
    assert refusal(TEXT.replace('"ph"', '"ph": 7.3, "ph"')) == (
        AT_SECOND + "gas.ph stands twice: expected each field once"
    )
    assert refusal(TEXT.replace('"format"', '"format": "forebreath-case-1", "format"')).startswith(
        "bed7.json: format stands twice"
    )
    assert "gas.odd stands twice" in refusal(TEXT.replace('"ph"', '"odd": 1, "odd": 2, "ph"'))


# Fields


def test_an_unknown_field_is_named_with_what_was_probably_meant():
    assert in_settings(fi02=0.5) == (
        f"bed7.json: entry 1 ({FIRST}): settings.fi02 = 0.5: "
        "perhaps fio2; expected a field of the case format"
    )
    assert "perhaps paco2_mmhg" in in_gas(paco2_kpa=7.6)
    assert "it belongs in measured" in in_gas(spo2=0.9)
    assert "it belongs in gas" in refusal_of(lambda whole: whole.update(lactate_mmol_per_l=2))
    assert refusal_of(lambda whole: whole.update(zzz={})) == (
        "bed7.json: zzz = an object: expected a field of the case format"
    )


@pytest.mark.parametrize("name", ["ph", "paco2_mmhg", "pao2_mmhg", "hb_g_per_dl"])
def test_what_a_gas_requires(name):
    message = refusal_of(lambda whole: whole["entries"][1]["gas"].pop(name))
    assert message.startswith(AT_SECOND + f"gas.{name} is missing: expected a number from ")


@pytest.mark.parametrize("name", ["mode", "fio2", "rate_per_min", "tidal_volume_ml"])
def test_settings_missing_at_a_gas_are_named_at_the_gas(name):
    message = refusal_of(lambda whole: whole["entries"][0]["settings"].pop(name))
    assert message.startswith(AT_SECOND + f"settings.{name} is missing: expected ")


def test_null_is_refused_everywhere():
    left_out = "; what is unmeasured is left out"
    assert in_gas(sao2=None) == AT_SECOND + "gas.sao2 = null: expected a number from 0.05 to 1" + left_out
    for part in ("patient", "site", "target", "label"):
        assert refusal_of(lambda whole, part=part: whole.update({part: None})).endswith(left_out)


@pytest.mark.parametrize(
    ("value", "shown"),
    [
        (True, "true"),
        ("0.4", '"0.4": a number stands without quotes;'),
        ([0.4], "a list of 1"),
        ({}, "an object"),
        (float("nan"), "NaN"),
        (float("inf"), "Infinity"),
        (10**400, "Infinity"),
        (1.0000001, "1.0000001"),
        (0.2099, "0.2099"),
        (-0.5, "-0.5"),
    ],
)
def test_what_is_no_possible_number_is_refused(value, shown):
    message = in_settings(fio2=value)
    assert message.startswith(f"bed7.json: entry 1 ({FIRST}): settings.fio2 = {shown}")
    assert message.endswith("expected a number from 0.21 to 1")


def test_a_number_too_long_for_any_float_is_refused():
    for digits in ("9" * 5000, "1e999", "-" + "9" * 5000):
        assert "settings.fio2 = " in refusal(TEXT.replace('"fio2": 0.5', f'"fio2": {digits}'))


@pytest.mark.parametrize(
    ("change", "says"),
    [
        (lambda w: w.update(label=7), "label = 7: expected text in quotes"),
        (
            lambda w: w["patient"].update(sex="Female"),
            'sex = "Female": perhaps female; expected one of female, male',
        ),
        (lambda w: w["patient"].update(conditions=[1]), "conditions[1] = 1: expected text in quotes"),
        (
            lambda w: w["entries"][1].update(events=["prine"]),
            'events = "prine": perhaps prone; expected any of',
        ),
        (lambda w: w["entries"][1].update(events=["a", None]), "events[2] = null: expected text in quotes"),
        (lambda w: w["entries"][1].update(note={}), "note = an object: expected text in quotes"),
        (lambda w: w["entries"][1].update(note="\ud800"), r'note = "\ud800": expected text of whole letters'),
        (
            lambda w: w["entries"][1].update(change_reason="whim"),
            'change_reason = "whim": expected one of patient',
        ),
        (
            lambda w: w["entries"][1]["gas"].update(temperature_corrected=1),
            "temperature_corrected = 1: expected true",
        ),
        (
            lambda w: w["entries"][1]["gas"].pop("temperature_c"),
            "gas.temperature_c is missing: expected the temper",
        ),
        (
            lambda w: w["entries"][1]["gas"].update(excluded=""),
            'gas.excluded = "": expected the reason as text',
        ),
        (
            lambda w: w["target"].update(ph_high=7.3),
            "target.ph_high = 7.3: expected more than the low end, 7.3",
        ),
        (
            lambda w: w["entries"][0]["settings"].update(rate_per_min=0),
            "settings.rate_per_min = 0: expected more",
        ),
    ],
)
def test_words_lists_and_rules_of_the_record(change, says):
    assert says in refusal_of(change)


def test_a_long_value_is_quoted_short():
    message = in_settings(mode="volume\n" * 999)
    value = message.partition("settings.mode = ")[2].partition(": ")[0]
    assert len(value) <= LONGEST_VALUE
    assert value.startswith(r'"volume\nvolume')


# Times


@pytest.mark.parametrize(
    "time",
    [
        "2031-03-04T08:25:00",
        "2031-03-04",
        "2031-03-04 08:25:00Z",
        "2031-03-04T25:25:00Z",
        "2031-02-30T08:25:00Z",
        "2031-03-04T08:25:00Z ",
        "04.03.2031T08:25Z",
        "8:25",
        "",
    ],
)
def test_a_time_that_is_not_iso_8601_with_a_zone_is_refused(time):
    message = refusal_of(lambda whole: whole["entries"][1].update(time=time))
    assert f"): time = {quoted(time)}: expected ISO 8601 with a zone" in message
    assert message.startswith("bed7.json: entry 2 (")
    assert "gas.drawn_at = " in in_gas(drawn_at=time)


@pytest.mark.parametrize("value", [1_930_000_000, None, True, [], {}])
def test_a_time_that_is_no_text_is_refused(value):
    message = refusal_of(lambda whole: whole["entries"][1].update(time=value))
    assert message.startswith(f"bed7.json: entry 2 (no time): time = {quoted(value)}: expected ISO 8601")


def test_an_entry_without_time_is_refused():
    message = refusal_of(lambda whole: whole["entries"][1].pop("time"))
    assert message.startswith("bed7.json: entry 2 (no time): time is missing: expected ISO 8601 with a zone")


@pytest.mark.parametrize(
    "time", ["2031-03-04T07:40:00Z", "2031-03-04T07:39:59Z", "2031-03-04T08:39:00+01:00"]
)
def test_times_out_of_order_are_refused(time):
    message = refusal_of(lambda whole: whole["entries"][1].update(time=time))
    assert message == (
        f'bed7.json: entry 2 ({time}): time = "{time}": expected a time after 2031-03-04T07:40:00+00:00'
    )


def test_times_in_order_across_zones_are_read():
    whole = json.loads(TEXT)
    whole["entries"][1]["time"] = "2031-03-04T06:25:00-02:00"
    assert case_from_text(json.dumps(whole), "bed7.json") == CASE


def test_a_year_no_table_holds_is_refused():
    message = refusal_of(lambda whole: whole["entries"][1].update(time="9999-12-31T23:59:59-14:00"))
    assert "expected a year from 1900 to 2250" in message


def test_the_slip_stands_in_the_refusal():
    assert in_settings(fio2=40).endswith(
        "settings.fio2 = 40: per cent is never used in case files, 40 per cent is 0.4; "
        "expected a number from 0.21 to 1"
    )
