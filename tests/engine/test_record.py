"""The records: each side of every rule, and what a case says about its own entries."""

import pickle
from dataclasses import fields, replace
from datetime import UTC, datetime, timedelta
from typing import get_type_hints

import pytest

from engine.record import (
    CHOICES,
    CONDITIONS,
    EVENTS,
    POSSIBLE,
    Baseline,
    BloodGas,
    Case,
    Entry,
    Impossible,
    Measured,
    Patient,
    Settings,
    Site,
    Target,
)

START = datetime(2031, 3, 4, 7, 40, tzinfo=UTC)
NAIVE = datetime(2031, 3, 4, 7, 40)
GAS = BloodGas(ph=7.28, paco2_mmhg=57.0, pao2_mmhg=66.0, hb_g_per_dl=9.8)
VOLUME = Settings(mode="volume", rate_per_min=18.0, tidal_volume_ml=380.0, fio2=0.5, peep_cmh2o=8.0)
SMALLEST = {
    Patient: Patient(),
    Baseline: Baseline(),
    Site: Site(),
    Target: Target(),
    Settings: Settings(),
    Measured: Measured(),
    BloodGas: GAS,
    Entry: Entry(time=START),
}
NUMBERS = [
    (record, field.name)
    for record in SMALLEST
    for field in fields(record)
    if get_type_hints(record)[field.name] in (float, float | None)
]
WORDS = [(record, field.name) for record in SMALLEST for field in fields(record) if field.name in CHOICES]
SHARE_OF_RANGE = (
    1e-6  # how far beyond an end is tried: well above rounding, well below any digit a chart shows
)


def minutes(number: float) -> datetime:
    return START + timedelta(minutes=number)


def gas_at(number: float, **fields_of_gas: object) -> Entry:
    return Entry(time=minutes(number), gas=replace(GAS, **fields_of_gas))


def case_of(*entries: Entry, settings: Settings = VOLUME, **of_case: object) -> Case:
    """A case whose settings are charted ten minutes before the start."""
    return Case(label="Bed 7", entries=(Entry(time=minutes(-10), settings=settings), *entries), **of_case)


def refused(field: str, make: object, *arguments: object, **named: object) -> Impossible:
    with pytest.raises(Impossible) as caught:
        make(*arguments, **named)
    assert caught.value.field == field
    return caught.value


# Numbers


def test_every_number_of_every_record_is_guarded_and_no_guard_is_idle():
    assert {name for _, name in NUMBERS} == set(POSSIBLE)


@pytest.mark.parametrize(("record", "name"), NUMBERS)
def test_numbers_up_to_both_ends_are_possible(record, name):
    for end in POSSIBLE[name]:
        assert getattr(replace(SMALLEST[record], **{name: end}), name) == end


@pytest.mark.parametrize(("record", "name"), NUMBERS)
def test_numbers_beyond_both_ends_are_impossible(record, name):
    low, high = POSSIBLE[name]
    step = SHARE_OF_RANGE * (high - low)
    for value in (low - step, high + step, float("nan"), float("inf"), -float("inf"), 10**400):
        why = refused(name, replace, SMALLEST[record], **{name: value})
        assert why.value is value
        assert why.expected == f"a number from {low:g} to {high:g}"


@pytest.mark.parametrize(("record", "name"), NUMBERS)
@pytest.mark.parametrize("value", [True, "7", [7], {}])
def test_what_is_no_number_is_impossible(record, name, value):
    refused(name, replace, SMALLEST[record], **{name: value})


def test_unmeasured_is_none_and_not_among_the_given():
    assert Settings(fio2=0.5).given() == {"fio2": 0.5}
    assert Settings().given() == {}


# Words


@pytest.mark.parametrize(("record", "name"), WORDS)
def test_known_words_enter_and_others_do_not(record, name):
    for word in CHOICES[name]:
        assert getattr(replace(SMALLEST[record], **{name: word}), name) == word
    for word in ("", CHOICES[name][0].upper(), "else", 1, ["volume"]):
        refused(name, replace, SMALLEST[record], **{name: word})


def test_conditions_and_events_are_known_words():
    assert Patient(conditions=CONDITIONS).conditions == CONDITIONS
    assert Entry(time=START, events=EVENTS).events == EVENTS
    assert refused("conditions", Patient, conditions=("obstructive", "asthma")).value == "asthma"
    assert refused("events", Entry, time=START, events=("suction", "Suction")).value == "Suction"


# Target


@pytest.mark.parametrize(
    ("low", "high", "quantity", "range_"),
    [
        ("ph_low", "ph_high", "ph", (7.30, 7.45)),
        ("paco2_low_mmhg", "paco2_high_mmhg", "paco2_mmhg", (35.0, 45.0)),
        ("pao2_low_mmhg", "pao2_high_mmhg", "pao2_mmhg", (60.0, 80.0)),
        ("sao2_low", "sao2_high", "sao2", (0.88, 0.92)),
    ],
)
def test_a_target_range_has_its_ends_in_order(low, high, quantity, range_):
    bottom, top = range_
    assert Target(**{low: bottom, high: top}).range_of(quantity) == range_
    assert Target(**{low: bottom}).range_of(quantity) == (bottom, None)
    assert Target(**{high: top}).range_of(quantity) == (None, top)
    refused(high, Target, **{low: top, high: bottom})
    refused(high, Target, **{low: top, high: top})


# Settings


def test_settings_hold_until_they_are_given_again():
    later = VOLUME.then(Settings(fio2=0.6))
    assert later == replace(VOLUME, fio2=0.6)
    assert VOLUME.then(None) == VOLUME
    assert VOLUME.then(Settings()) == VOLUME


def test_inspiratory_time_and_ie_ratio_let_go_of_each_other():
    timed = Settings(inspiratory_time_s=0.9)
    assert timed.then(Settings(ie_ratio=0.5)) == Settings(ie_ratio=0.5)
    assert Settings(ie_ratio=0.5).then(timed) == timed
    both = Settings(inspiratory_time_s=1.0, ie_ratio=0.5)
    assert timed.then(both) == both


def test_a_change_is_another_value_never_a_first_one_or_a_repeat():
    assert VOLUME.differing(VOLUME.then(Settings(fio2=0.6, rate_per_min=18.0))) == ("fio2",)
    assert VOLUME.differing(VOLUME.then(Settings(pause_s=0.2))) == ()


# Blood gas


def test_a_gas_corrected_for_temperature_says_which():
    corrected = replace(GAS, temperature_corrected=True, temperature_c=34.0)
    assert corrected.temperature_c == 34.0
    assert replace(GAS, temperature_c=34.0).temperature_corrected is False
    refused("temperature_c", replace, GAS, temperature_corrected=True)


def test_a_gas_is_excluded_for_a_reason():
    assert replace(GAS, excluded="air bubble").excluded == "air bubble"
    for blank in ("", "  "):
        refused("excluded", replace, GAS, excluded=blank)


def test_some_haemoglobin_is_left_to_carry_oxygen():
    assert replace(GAS, cohb=0.5, methb=0.49).methb == 0.49
    refused("methb", replace, GAS, cohb=0.5, methb=0.5)


# Time


@pytest.mark.parametrize(("record", "name"), [(Entry(time=START), "time"), (GAS, "drawn_at")])
def test_times_have_a_zone_and_a_year_every_table_holds(record, name):
    for good in (START, datetime(1900, 1, 1, tzinfo=UTC), datetime(2250, 12, 31, tzinfo=UTC)):
        assert getattr(replace(record, **{name: good}), name) == good
    for bad in (NAIVE, datetime(1899, 12, 31, tzinfo=UTC), datetime(2251, 1, 1, tzinfo=UTC)):
        refused(name, replace, record, **{name: bad})


def test_a_gas_is_timed_by_its_sample_where_that_is_known():
    assert gas_at(30).gas_time == minutes(30)
    assert gas_at(30, drawn_at=minutes(22)).gas_time == minutes(22)
    assert Entry(time=START).gas_time == START


def test_a_sample_drawn_after_it_was_charted_is_doubtful_not_impossible():
    assert case_of(gas_at(30, drawn_at=minutes(31))).usable_gases() == (1,)


def test_entries_rise_in_time():
    case = case_of(gas_at(0), gas_at(1))
    assert [entry.time for entry in case.entries] == [minutes(-10), minutes(0), minutes(1)]
    refused("entries[3].time", case_of, gas_at(0), gas_at(0))
    refused("entries[3].time", case_of, gas_at(0), gas_at(-1))


def test_arterial_gases_rise_in_time_of_drawing():
    later = gas_at(60, drawn_at=minutes(31))
    assert case_of(gas_at(30), later).usable_gases() == (1, 2)
    for drawn in (30, 29):
        refused("entries[3].gas.drawn_at", case_of, gas_at(30), gas_at(60, drawn_at=minutes(drawn)))


@pytest.mark.parametrize("other", [{"specimen": "venous"}, {"excluded": "charted twice"}])
def test_a_gas_that_is_not_used_may_be_drawn_with_another(other):
    assert case_of(gas_at(30), gas_at(60, drawn_at=minutes(30), **other)).usable_gases() == (1,)


# Case


def test_a_case_has_a_label():
    assert Case(label="Bed 7").entries == ()
    for blank in ("", " \t"):
        refused("label", Case, label=blank)


@pytest.mark.parametrize("name", ["mode", "fio2", "rate_per_min", "tidal_volume_ml"])
def test_a_gas_needs_settings_in_force(name):
    assert case_of(gas_at(0)).usable_gases() == (1,)
    refused(f"entries[2].settings.{name}", case_of, gas_at(0), settings=replace(VOLUME, **{name: None}))


def test_settings_may_come_with_the_gas_but_not_after_it():
    together = Entry(time=START, settings=VOLUME, gas=GAS)
    assert Case(label="Bed 7", entries=(together,)).usable_gases() == (0,)
    late = Entry(time=minutes(5), settings=VOLUME)
    refused("entries[1].settings.mode", Case, label="Bed 7", entries=(gas_at(0), late))


@pytest.mark.parametrize("mode", ["pressure", "support", "other"])
def test_an_exhaled_volume_serves_where_no_volume_is_set(mode):
    pressure = replace(VOLUME, mode=mode, tidal_volume_ml=None)
    exhaled = Measured(exhaled_tidal_volume_ml=400.0)
    missing = "entries[2].settings.tidal_volume_ml"
    assert case_of(replace(gas_at(0), measured=exhaled), settings=pressure).usable_gases() == (1,)
    refused(missing, case_of, gas_at(0), settings=pressure)
    refused(missing, case_of, gas_at(0), Entry(time=minutes(5), measured=exhaled), settings=pressure)
    nothing = Measured(exhaled_tidal_volume_ml=0.0)
    refused(missing, case_of, replace(gas_at(0), measured=nothing), settings=pressure)


def test_an_exhaled_volume_does_not_replace_the_set_one_in_volume_mode():
    seen = replace(gas_at(0), measured=Measured(exhaled_tidal_volume_ml=400.0))
    unset = replace(VOLUME, tidal_volume_ml=None)
    refused("entries[2].settings.tidal_volume_ml", case_of, seen, settings=unset)


@pytest.mark.parametrize("mode", ["volume", "pressure", "other"])
def test_a_set_rate_of_nothing_is_for_support_only(mode):
    no_backup = replace(VOLUME, mode="support", rate_per_min=0.0)
    assert case_of(gas_at(0), settings=no_backup).usable_gases() == (1,)
    refused("entries[2].settings.rate_per_min", case_of, gas_at(0), settings=replace(no_backup, mode=mode))


def test_settings_in_force_at_each_entry():
    case = case_of(gas_at(0), Entry(time=minutes(5), settings=Settings(fio2=0.6)), gas_at(60))
    assert [s.fio2 for _, s in case.entries_with_settings()] == [0.5, 0.5, 0.6, 0.6]
    assert [e for e, _ in case.entries_with_settings()] == list(case.entries)


def test_a_case_as_it_stood_before_an_entry():
    case = case_of(gas_at(0), gas_at(60))
    assert case.before(2).entries == case.entries[:2]
    assert case.before(0).entries == ()
    assert case.before(2).label == case.label


# Which gases can be used


@pytest.mark.parametrize(
    ("of_gas", "used"),
    [
        ({}, True),
        ({"specimen": "venous"}, False),
        ({"specimen": "capillary"}, False),
        ({"excluded": "clot"}, False),
    ],
)
def test_only_arterial_gases_that_are_not_excluded_are_used(of_gas, used):
    assert case_of(gas_at(0, **of_gas)).usable_gases() == ((1,) if used else ())


def test_no_gas_is_used_under_extracorporeal_support():
    started = replace(gas_at(30), events=("extracorporeal_start",))
    stopped = replace(gas_at(90), events=("extracorporeal_stop",))
    case = case_of(gas_at(0), started, gas_at(60), stopped, gas_at(120))
    assert case.usable_gases() == (1, 5)
    assert [case.before(n).extracorporeal_now() for n in range(7)] == [False] * 3 + [True] * 2 + [False] * 2


def test_a_patient_who_comes_on_extracorporeal_support_is_under_it_until_it_stops():
    supported = Patient(conditions=("extracorporeal",))
    stopped = Entry(time=minutes(30), events=("extracorporeal_stop",))
    case = case_of(gas_at(0), stopped, gas_at(60), patient=supported)
    assert case.usable_gases() == (3,)
    assert case.before(2).extracorporeal_now()
    assert not case.extracorporeal_now()


# Across processes


def test_cases_and_refusals_cross_from_one_process_to_another():
    case = case_of(gas_at(0), patient=Patient(sex="female", baseline=Baseline(paco2_mmhg=58.0)))
    assert pickle.loads(pickle.dumps(case)) == case
    why = refused("fio2", Settings, fio2=40.0)
    copy = pickle.loads(pickle.dumps(why))
    assert (copy.field, copy.value, copy.expected) == (why.field, why.value, why.expected)
    assert str(copy) == str(why) == "fio2 = 40.0 is impossible: expected a number from 0.21 to 1"
