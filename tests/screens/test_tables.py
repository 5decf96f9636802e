"""Tables in HTML text: the right number at the right place, nothing of a patient unescaped."""

import re
from dataclasses import replace
from datetime import timedelta

import pytest

from dashboard.tables.cautions import cautions_list, checks_list, recheck_lines, tried_line
from dashboard.tables.expected import expected_table, range_text
from dashboard.tables.gases import gases_table
from dashboard.tables.limits import in_order, limits_at_a_glance, limits_table, margin_of, nearest_limit
from dashboard.tables.who import settings_changed_at, who_line
from dashboard.wording import Units
from engine.checks import Check
from engine.estimates import estimates_for
from engine.forecast import Recheck
from engine.record import BloodGas, Entry, Patient, Settings, Target

BINARY = 1e-9  # differences of decimals as a binary computer has them


def words(html: str) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]*>", " ", html)).strip()


def rows(html: str) -> list[list[str]]:
    return [
        [words(cell) for cell in re.findall(r"<t[hd][^>]*>(.*?)</t[hd]>", row)]
        for row in re.findall(r"<tr[^>]*>(.*?)</tr>", html)
    ]


# ------------------------------------------------------------------------------------------- now and expected


def test_now_above_expected_with_both_intervals(case, forecast_of, now):
    forecast = forecast_of({"fio2": 0.8})
    head, measured, expected = rows(expected_table(case, forecast, Units(), now))
    assert [cell.split()[0] for cell in head[1:]] == ["pH", "PaCO₂", "PaO₂", "SaO₂"]
    assert measured[0].startswith("Now measured 15:10") and measured[1:] == ["7.31", "53", "74", "–"]
    low, high = forecast.next_gas["paco2_mmhg"].interval(0.9)
    assert f"90 % {low:.0f}–{high:.0f}" in expected[2] and "50 % " in expected[2]
    assert "70 % in target" in expected[2] and "in target" not in expected[3]


def test_targets_stand_in_the_head(case, forecast_of, now):
    head = rows(expected_table(case, forecast_of(), Units("kPa"), now))[0]
    assert head[1:] == [
        "pH target 7.30–7.45", "PaCO₂ kPa target 5.1–6.7", "PaO₂ kPa target at least 8.0", "SaO₂ % no target",
    ]  # fmt: skip
    assert range_text("sao2", Target(sao2_high=0.96), Units()) == "at most 96"


def test_what_is_not_forecast_is_said_and_not_drawn_as_a_number(case, forecast_of, now):
    expected = rows(expected_table(case, forecast_of({"peep_cmh2o": 12.0}), Units(), now))[2]
    assert expected[3] == expected[4] == "not forecast the reason stands under Cautions"


def test_values_used_stand_beside_the_result(forecast_of, now):
    line = words(tried_line(forecast_of({"fio2": 0.8, "rate_per_min": 24.0}), True, now))
    assert "FiO₂ 60 % → 80 %; Set rate 22 /min → 24 /min; breathing effort stops" in line
    assert "nothing else has changed since the gas at 15:10" in line
    assert "nothing; all as charted" in words(tried_line(forecast_of(), False, now))


def test_the_chance_of_the_whole_target_stands_at_the_row(case, forecast_of, now):
    assert rows(expected_table(case, forecast_of(), Units(), now))[2][0].endswith(
        "settled 50 % all in target"
    )


# ----------------------------------------------------------------------------------------------------- limits


@pytest.mark.parametrize(
    ("value", "end", "ok", "left"),
    [
        (24.0, 30.0, True, 6.0),
        (32.0, 30.0, False, -2.0),
        (7.25, 7.15, True, 0.10),
        (7.05, 7.15, False, -0.10),
        (7.5, "4-8", True, 0.5),
        (4.5, "4 to 8", True, 0.5),
        (9.0, "4-8", False, -1.0),
    ],
)
def test_margins_to_either_side(make_limit, value, end, ok, left):
    assert margin_of(make_limit("x", value, end, ok)).left == pytest.approx(left, abs=BINARY)


@pytest.mark.parametrize(
    ("value", "end", "ok"), [(None, 30.0, None), (3.0, None, None), (3.0, "unclear", True)]
)
def test_no_margin_where_something_is_unknown(make_limit, value, end, ok):
    assert margin_of(make_limit("x", value, end, ok)) is None


def test_a_value_on_its_limit_is_at_it(make_limit):
    assert "at the limit, 5 cmH₂O" in limits_table(
        [make_limit("peep", 5.0, "5 to 24 cmH2O", True, unit="cmH2O")], Units()
    )


def test_breaches_come_first_then_the_least_room_then_the_unknown(make_limit):
    limits = [
        make_limit("roomy", 10.0, 30.0, True),
        make_limit("unknown", None, 30.0, None),
        make_limit("tight", 29.0, 30.0, True),
        make_limit("soft breach", 16.0, 15.0, False, level="soft"),
        make_limit("hard breach", 31.0, 30.0, False),
    ]
    assert [row.name for row in in_order(limits)] == [
        "hard breach",
        "soft breach",
        "tight",
        "roomy",
        "unknown",
    ]


SURE, UNSURE = 0.9, 0.899  # either side of engine.limits.SURELY_KEPT


def test_a_hard_limit_in_doubt_is_not_shown_as_kept_and_outranks_a_comfortable_one(make_limit):
    """The median of 62 is above the floor, yet one gas in five would read below it."""
    floor = make_limit("pao2_floor", 62.0, 55.0, True, unit="mmHg", probability=0.8)
    rate = make_limit("set_rate", 34.0, 35.0, True, unit="/min")
    headline = nearest_limit([rate, floor], Units())
    assert words(headline) == ("A hard limit in doubt Low PaO₂ 62 mmHg in doubt: 20 % chance below 55 mmHg")
    assert "fb-doubt" in headline and "fb-breach" not in headline
    assert "in doubt: 20 % chance below 7.3 kPa" in words(nearest_limit([rate, floor], Units("kPa")))
    _, first, second = rows(limits_table([rate, floor], Units()))
    assert first[0] == "in doubt" and "20 % chance below" in first[4] and second[0] == "inside"


def test_the_glance_says_in_doubt_with_the_chance_on_the_bad_side(make_limit):
    broken = make_limit("set_rate", 36.0, 35.0, False, unit="/min")
    above = make_limit("ph_ceiling", 7.5, 7.55, True, probability=0.7)
    either = make_limit("tidal_volume", 6.0, "4 to 8 mL/kg", True, unit="mL/kg", probability=0.6)
    unjudged = make_limit("plateau", 29.0, 30.0, None, unit="cmH2O", probability=0.65)
    glance = rows(limits_at_a_glance([above, either, unjudged, broken], Units()))
    assert [row[2] for row in glance] == [
        "in doubt: 40 % chance outside 4 to 8 mL/kg",
        "in doubt: 35 % chance above 30 cmH₂O",
        "in doubt: 30 % chance above 7.55",
    ]


@pytest.mark.parametrize(
    ("probability", "verdict"), [(SURE, "inside"), (UNSURE, "in doubt"), (None, "inside")]
)
def test_each_side_of_doubt(make_limit, probability, verdict):
    row = make_limit("pao2_floor", 62.0, 55.0, True, unit="mmHg", probability=probability)
    assert rows(limits_table([row], Units()))[1][0] == verdict


def test_short_of_a_cautious_figure_is_said_in_ink(make_limit):
    short = make_limit(
        "expiratory_time", 2.1, 3.2, None, level="soft", unit="s", probability=0.05, short=True
    )
    rate = make_limit("set_rate", 22.0, 35.0, True, unit="/min")
    glance, table = limits_at_a_glance([rate, short], Units()), limits_table([rate, short], Units())
    assert rows(glance) == [["Expiratory time", "2.1 s", "short of the cautious figure, 3.2 s"]]
    assert rows(table)[1][0] == "short" and "fb-past" not in glance + table
    assert "Set rate" in nearest_limit([rate, short], Units())


def test_order_past_and_in_doubt_hard_before_soft(make_limit):
    limits = [
        make_limit("inside", 10.0, 30.0, True),
        make_limit("soft doubt", 10.0, 30.0, True, level="soft", probability=0.5),
        make_limit("soft past", 31.0, 30.0, False, level="soft"),
        make_limit("hard doubt", 10.0, 30.0, True, probability=0.89),
        make_limit("hard past", 31.0, 30.0, False, probability=0.2),
    ]
    assert [row.name for row in in_order(limits)] == [
        "hard past", "hard doubt", "soft past", "soft doubt", "inside",
    ]  # fmt: skip


def test_nearest_limit_in_large_words(make_limit):
    rate = make_limit("set_rate", 33.0, 35.0, True, unit="/min")
    assert (
        words(nearest_limit([rate], Units())) == "Nearest hard limit Set rate 33 /min 2 /min left to 35 /min"
    )
    past = words(nearest_limit([replace(rate, value=36.0, ok=False)], Units()))
    assert past == "Past a hard limit Set rate 36 /min 1 /min above 35 /min"
    assert "fb-breach" in nearest_limit([replace(rate, value=36.0, ok=False)], Units())
    assert "none known yet" in nearest_limit([replace(rate, ok=None)], Units())


def test_every_limit_shows_number_limit_margin_and_source(make_limit):
    head, row = rows(
        limits_table([make_limit("fio2", 0.5, 0.6, True, level="soft", probability=0.95)], Units())
    )
    assert dict(zip(head, row, strict=True)) == {
        "": "inside", "Limit on": "FiO₂", "Value": "50 %", "Limit": "60 % (soft)",
        "Margin": "10 % left to 60 %", "Chance inside": "95 %",
        "What it says": "fio2 says", "Source": "source2031",
    }  # fmt: skip


def test_a_range_names_its_unit_once(make_limit):
    kpa = limits_table([make_limit("paco2_brain", 40.0, "35 to 45 mmHg", True, unit="mmHg")], Units("kPa"))
    assert "4.7 to 6.0 kPa (hard)" in kpa and ">5.3 kPa<" in kpa and "0.7 kPa left to 4.7 kPa" in kpa


def test_the_glance_leaves_out_the_nearest_and_the_unknown(make_limit):
    limits = [make_limit(f"row{n}", 30.0 - n, 30.0, True) for n in range(1, 7)] + [
        make_limit("u", None, 1.0, None)
    ]
    assert [row[0] for row in rows(limits_at_a_glance(limits, Units()))] == ["row2", "row3", "row4", "row5"]
    assert limits_at_a_glance(limits[:1], Units()) == ""


# ------------------------------------------------------------------------------------------------------ gases


def test_gases_so_far_with_textbook_numbers_and_the_settings_then(case, now):
    found = {number: estimates_for(case, number) for number, entry in enumerate(case.entries) if entry.gas}
    head, *lines = rows(gases_table(case, found, Units(), now))
    assert len(lines) == 4 and len(head) == len(lines[0])
    last = dict(zip(head, lines[-1], strict=True))
    assert (last["Drawn"], last["pH"], last["PaCO₂ mmHg"], last["PaO₂ mmHg"]) == ("15:10", "7.31", "53", "74")
    assert last["P/F mmHg"] == f"{74 / 0.6:.0f}" and last["FiO₂ %"] == "60" and last["SaO₂ %"] == "–"
    assert last["Minute volume L/min"] == "7.4" and last["Hb g/dL"] == "9.8"
    assert re.fullmatch(r"[+−]\d\.\d", last["Base excess mmol/L"])
    assert "rate 22 /min" in last["Settings then"] and "rate 18 /min" in lines[0][-1]


def test_a_gas_that_is_not_used_says_why(case, now):
    lines = rows(gases_table(case, {}, Units(), now))
    assert lines[3][-1].startswith("not used: venous")


def test_house_units_in_the_gas_table(case, now):
    head, first, *_ = rows(gases_table(case, {}, Units("kPa", "g/L"), now))
    line = dict(zip(head, first, strict=True))
    assert line["PaCO₂ kPa"] == "8.3" and line["Hb g/L"] == "98"


# ---------------------------------------------------------------------------------------- who, when, cautions


def test_whose_data_and_how_old(case, now):
    line = words(who_line(case, True, True, now))
    assert line.startswith(
        "Bed 7 female, 164 cm last gas 15:10 20 min ago settings since 11:30 4 h 00 min ago"
    )
    assert "Demo: invented patient" in line and "Not live" not in line
    assert "Demo" not in who_line(case, False, True, now)


def test_an_old_gas_is_said(case, now):
    assert "older than 8 h" in who_line(case, False, True, now + timedelta(hours=8))
    assert "older than 8 h" not in who_line(case, False, True, now + timedelta(hours=7))


def test_a_file_from_another_day_tells_the_true_age_of_its_gas(case, now):
    line = words(who_line(case, False, False, now + timedelta(hours=25)))
    assert "Not live: file of 4 Mar 2031, read as of its last entry at 15:10" in line
    assert "last gas 04 Mar 15:10 25 h 20 min ago: older than 8 h" in line
    assert "settings since 04 Mar 11:30 29 h 00 min ago" in line


def test_an_old_gas_is_told_by_its_consequence(case, now):
    line = who_line(case, False, True, now + timedelta(hours=9))
    assert "the lung may have moved since" in line and "no basis" not in line


def test_what_is_not_charted_is_said(case, now):
    line = who_line(replace(case, patient=Patient(), entries=case.entries[:1]), False, True, now)
    assert "sex not charted, height not charted" in line and "no usable gas" in line


def test_settings_age_counts_from_the_last_real_change(case, now):
    repeated = Entry(time=now - timedelta(minutes=5), settings=Settings(rate_per_min=22))
    assert settings_changed_at(case) == settings_changed_at(replace(case, entries=(*case.entries, repeated)))
    assert settings_changed_at(replace(case, entries=())) is None


def test_two_times_to_look_again(forecast_of, now):
    lines = words(recheck_lines(forecast_of(), Units(), now))
    assert "if changed now, 15:30" in lines and "15:40 early look" in lines and "16:25 settled gas" in lines
    silent = replace(
        forecast_of(), recheck=Recheck(early_minutes=None, settled_minutes=None, reason="No change.")
    )
    assert words(recheck_lines(silent, Units(), now)) == "Look again if changed now, 15:30 No change."


def test_cautions_stand_in_their_order(forecast_of):
    said = words(cautions_list(forecast_of({"peep_cmh2o": 12.0}), Units()))
    assert said.index("PaO2 is not forecast") < said.index("It is assumed")
    assert cautions_list(replace(forecast_of(), cautions=()), Units()) == ""


def test_only_doubtful_checks_are_shown():
    def check(name, ok):
        return Check(name=name, value=None, limit=None, ok=ok, says=f"{name} says", source="source2031")

    shown = words(checks_list([check("good", True), check("doubt", False), check("unknown", None)], Units()))
    assert "doubt says source2031" in shown and "good" not in shown and "unknown" not in shown
    assert checks_list([check("good", True)], Units()) == ""


def test_repeated_doubts_are_told_once_the_latest_first():
    def doubt(name, says):
        return Check(name=name, value=None, limit=None, ok=False, says=says, source="source2031")

    shown = words(
        checks_list(
            [doubt("a", "first"), doubt("b", "other"), doubt("a", "second"), doubt("a", "third")], Units()
        )
    )
    assert shown.startswith("Doubtful in the chart third 2 more like it before.")
    assert "other source2031" in shown and "first" not in shown and "second" not in shown


# --------------------------------------------------------------------------------------------------- escaping


def test_nothing_typed_into_a_case_reaches_the_page_as_markup(case, forecast_of, make_limit, now):
    evil = "<img src=x onerror=alert(1)>"
    gas = BloodGas(ph=7.3, paco2_mmhg=40, pao2_mmhg=80, hb_g_per_dl=10, excluded=evil)
    bad = replace(case, label=evil, entries=(*case.entries, Entry(time=now, gas=gas)))
    check = Check(name=evil, value=evil, limit=evil, ok=False, says=evil, source=evil)
    row = make_limit(evil, 1.0, evil + "4-8", True, says=evil, source=evil, unit=evil)
    pages = (
        who_line(bad, False, True, now),
        gases_table(bad, {}, Units(), now),
        checks_list([check], Units()),
        cautions_list(replace(forecast_of(), cautions=(evil,)), Units()),
        recheck_lines(
            replace(forecast_of(), recheck=Recheck(early_minutes=None, settled_minutes=None, reason=evil)),
            Units(),
            now,
        ),
        nearest_limit([row], Units())
        + limits_table([row], Units())
        + limits_at_a_glance([row, row], Units()),
        tried_line(replace(forecast_of(), changed={evil: (evil, evil)}), False, now),
    )
    assert all("&lt;img" in page and "<img" not in page for page in pages)
