"""Typed numbers: comma or point, one reading or a question."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dashboard.typed import Unclear, read, stepped
from dashboard.wording import FIELDS

FIO2, RATE, VOLUME, TIME, PEEP, DEAD_SPACE = (
    FIELDS[name]
    for name in (
        "fio2", "rate_per_min", "tidal_volume_ml", "inspiratory_time_s", "peep_cmh2o",
        "apparatus_dead_space_ml",
    )
)  # fmt: skip


@pytest.mark.parametrize("text", ["7.4", "7,4", " 7,4 ", "7.40", "07,4", "7,4 s", "7.4s"])
def test_comma_and_point_are_one_number(text):
    assert read(text, TIME).value == 7.4


@pytest.mark.parametrize(("text", "value"), [(".9", 0.9), (",9", 0.9), ("1", 1.0), ("0,9", 0.9)])
def test_a_leading_mark_and_whole_numbers(text, value):
    assert read(text, TIME).value == value


def test_a_three_digit_fraction_is_taken_where_the_thousand_cannot_be():
    assert read("1,250", TIME).value == 1.25


@pytest.mark.parametrize("text", ["1,250", "1.250"])
def test_a_group_of_three_digits_is_refused_with_the_range_or_asked(text):
    with pytest.raises(Unclear, match=r"could be 1\.25 or 1250"):
        read(text, VOLUME)


@pytest.mark.parametrize("text", ["1,250", "1.250", "20,000", "12.500"])
@pytest.mark.parametrize("field", [RATE, PEEP, DEAD_SPACE, FIO2], ids=lambda field: field.name)
def test_a_group_of_three_in_a_field_of_whole_numbers_is_asked_not_read(text, field):
    """1250 breaths a minute cannot be, yet 1.25 is as little what was meant."""
    with pytest.raises(Unclear, match="thousands or decimals"):
        read(text, field)


def test_two_decimals_in_a_field_of_whole_numbers_are_read():
    assert read("12,25", RATE).value == 12.25


@pytest.mark.parametrize(
    "text", ["abc", "7,4,1", "1.2.3", "7 4", "1e3", "+5", "-5", "5,", "٧", "0x10", "nan", "inf", "5 mL"]
)
def test_what_is_no_single_number_is_quoted_back(text):
    with pytest.raises(Unclear) as told:
        read(text, RATE)
    assert text in told.value.says and "one comma or point" in told.value.says


@pytest.mark.parametrize("text", ["0.5", "0,5", "1", "1,0", ".21"])
def test_a_fraction_in_the_per_cent_field_is_asked_not_guessed(text):
    with pytest.raises(Unclear) as told:
        read(text, FIO2)
    assert "per cent" in told.value.says
    assert f"type {float(text.replace(',', '.')) * 100:g}" in told.value.says


@pytest.mark.parametrize(
    ("text", "value"), [("21", 0.21), ("50", 0.5), ("50 %", 0.5), ("35,5%", 0.355), ("100", 1.0)]
)
def test_per_cent_becomes_the_engine_s_fraction(text, value):
    assert read(text, FIO2).value == pytest.approx(value, abs=1e-12)  # one division by 100


@pytest.mark.parametrize(("text", "field"), [("20", FIO2), ("101", FIO2), ("121", RATE), ("19", VOLUME)])
def test_beyond_the_possible_is_refused_with_the_range(text, field):
    with pytest.raises(Unclear) as told:
        read(text, field)
    assert f"expected {field.range_text}" in told.value.says


def test_an_empty_field_means_as_charted():
    assert read("  ", RATE).value is None


def test_what_was_understood_is_said():
    assert read("0,9", TIME).says == "read as 0.9 s"
    assert read("50", FIO2).says == "read as 50 %"


@given(text=st.text(max_size=30), field=st.sampled_from(list(FIELDS.values())))
def test_any_text_is_a_possible_number_or_a_sentence(text, field):
    try:
        value = read(text, field).value
    except Unclear as why:
        assert why.says.endswith(".") and "\n" not in why.says
    else:
        assert value is None or field.low <= value <= field.high


@given(data=st.data(), field=st.sampled_from(list(FIELDS.values())))
def test_what_a_field_shows_reads_back_as_the_same_number(data, field):
    steps = data.draw(st.integers(0, 40))
    value = field.low
    for _ in range(steps):
        value = stepped(value, 1, field)
    assert read(field.on_screen(value), field).value == pytest.approx(
        value, abs=1e-9
    )  # rounding of one division


@pytest.mark.parametrize(
    ("field", "value", "direction", "after"),
    [
        (FIO2, 0.35, 1, 0.4),
        (FIO2, 0.98, 1, 1.0),
        (FIO2, 0.21, -1, 0.21),
        (RATE, 18, -1, 17),
        (VOLUME, None, 1, 30),
    ],
)
def test_steps_are_exact_and_stop_at_the_ends(field, value, direction, after):
    assert stepped(value, direction, field) == after
