"""Bed, driven like a hand: choose, type, step, undo, upload."""

import json
import re
from dataclasses import replace
from datetime import UTC, datetime, timedelta

import pytest

from dashboard import demos, session
from dashboard.session import Held
from engine import forecast as forecasting
from engine.forecast import settings_asked
from engine.reading.case_file import text_from_case
from engine.record import Entry, Impossible, Settings

ICP = "demo:raised_icp"
TWENTY_MINUTES_OLD = re.compile(
    r"last gas [\d:]+ <em>(20|21) min ago"
)  # the minute may turn between load and look


@pytest.fixture
def bed(app, quick_engine):
    """The page with the first demo patient in hand."""
    app.run()
    assert not app.exception
    return app


@pytest.fixture
def own(bed, case):
    """The page with the test's own case in hand, its last gas 20 minutes old."""
    upload(bed, text_from_case(demos.moved_to_present(case, datetime.now(UTC))))
    return bed


def upload(app, text, name="case.json"):
    app.file_uploader[0].upload(name, text.encode(), "application/json").run()
    assert not app.exception


def field(app, name):
    return app.text_input(key=session.field_key(name))


def type_in(app, name, text):
    field(app, name).set_value(text).run()
    assert not app.exception


def press(app, key):
    app.button(key=key).click().run()
    assert not app.exception


def tried(html):
    return re.sub("<.*?>", "", re.search(r'class="fb-tried">(.*?)<span>', html, re.DOTALL).group(1))


def changes(html):
    return set(tried(html).removeprefix("Tried:").strip().removesuffix(".").split("; "))


def figure_of(app):
    """The figure handed to the live picture."""
    (element,) = app.get("bidi_component")
    return json.loads(json.loads(element.proto.json)["figure"])


def points(app, name):
    (trace,) = [part for part in figure_of(app)["data"] if part["name"] == name]
    return trace["x"], trace["y"]


# ------------------------------------------------------------------------------------------ what stands there


def test_first_page_shows_whose_data_now_expected_limits_and_the_caution(bed, html_of):
    page = html_of(bed)
    assert "Demo: invented patient" in page and TWENTY_MINUTES_OLD.search(page)
    for words in (
        "Now",
        "Expected",
        "Nearest",
        "Look again",
        "Cautions",
        "Gases so far",
        "Not for emergencies",
    ):
        assert words in page
    assert tried(page).strip() == "Tried: nothing; all as charted."


def test_every_demo_can_be_chosen_and_is_twenty_minutes_old(bed, html_of):
    options = bed.selectbox(key="patient").options
    assert len(options) >= 8 and options == sorted(
        options, key=lambda title: int(re.search(r"\d+", title)[0])
    )
    for name in demos.demo_titles():
        bed.selectbox(key="patient").select(f"demo:{name}").run()
        assert not bed.exception, name
        assert TWENTY_MINUTES_OLD.search(html_of(bed)), name


def test_choosing_another_patient_drops_the_change(bed, html_of):
    press(bed, "step_more_rate_per_min")
    bed.selectbox(key="patient").select(ICP).run()
    assert "nothing; all as charted" in tried(html_of(bed)) and bed.button(key="undo").disabled


# ----------------------------------------------------------------------------------------------- try a change


def test_typing_with_a_comma_is_used_and_echoed(own, html_of):
    type_in(own, "inspiratory_time_s", "1,1")
    assert field(own, "inspiratory_time_s").value == "1.1"
    assert "Inspiratory time 0.9 s → 1.1 s" in tried(html_of(own))


def test_table_and_picture_follow_a_change(own, html_of):
    before = points(own, "expected")
    type_in(own, "fio2", "80")
    assert "FiO₂ 60 % → 80 %" in tried(html_of(own))
    after = points(own, "expected")
    assert after[0][0] > before[0][0] and points(own, "measured")[0] == [66, 71, 74]
    assert f"<b>{after[0][0]:.0f}</b>" in html_of(own)


@pytest.mark.parametrize(
    ("text", "words"), [("0.5", "type 50"), ("1", "type 100"), ("abc", "not one number"), ("5", "21 to 100")]
)
def test_what_is_unclear_is_said_and_not_used(own, html_of, text, words):
    before = points(own, "expected")
    type_in(own, "fio2", text)
    page = html_of(own)
    assert words in page and "Still using 60 %." in page
    assert points(own, "expected") == before and "all as charted" in tried(page)
    type_in(own, "fio2", "70")
    assert "Still using" not in html_of(own)


def test_an_unclear_number_leaves_an_earlier_change_in_use(own, html_of):
    type_in(own, "rate_per_min", "26")
    type_in(own, "rate_per_min", "2 6")
    assert "Still using 26 /min." in html_of(own) and "→ 26 /min" in tried(html_of(own))


def test_a_change_that_cannot_be_is_said_in_the_digits_of_the_screen(own, html_of, monkeypatch):
    def refuses(*_, **__):
        raise Impossible("rate_per_min", 0.0, "more than 0 outside support mode")

    monkeypatch.setattr(forecasting, "forecast", refuses)
    type_in(own, "rate_per_min", "0")
    assert "Set rate 0 /min cannot be; expected more than 0" in html_of(own)


def test_markup_typed_into_a_field_stays_text(own, html_of):
    type_in(own, "fio2", "<img src=x>")
    assert "&lt;img" in html_of(own) and "<img" not in html_of(own)


def test_steppers_undo_and_back_to_charted(own, html_of):
    press(own, "step_more_rate_per_min")
    press(own, "step_more_rate_per_min")
    press(own, "step_less_fio2")
    assert changes(html_of(own)) == {"Set rate 22 /min → 24 /min", "FiO₂ 60 % → 55 %"}
    press(own, "undo")
    assert changes(html_of(own)) == {"Set rate 22 /min → 24 /min"}
    assert field(own, "fio2").value == "60" and field(own, "rate_per_min").value == "24"
    press(own, "as_charted")
    assert "all as charted" in tried(html_of(own)) and field(own, "rate_per_min").value == "22"
    press(own, "undo")
    assert "→ 24 /min" in tried(html_of(own))


def test_an_emptied_field_goes_back_to_the_charted_value(own, html_of):
    type_in(own, "tidal_volume_ml", "320")
    type_in(own, "tidal_volume_ml", "")
    assert field(own, "tidal_volume_ml").value == "350" and "all as charted" in tried(html_of(own))


def test_a_heated_humidifier_takes_the_exchanger_s_volume_with_it(own, html_of):
    own.segmented_control(key=session.field_key("humidifier")).set_value("heated").run()
    assert field(own, "apparatus_dead_space_ml").value == "0"
    assert "Humidifier exchanger → heated" in tried(html_of(own))
    assert "Apparatus dead space 55 mL → 0 mL" in tried(html_of(own))
    press(own, "undo")
    assert field(own, "apparatus_dead_space_ml").value == "55" and "all as charted" in tried(html_of(own))


def humidify(app, choice):
    app.segmented_control(key=session.field_key("humidifier")).set_value(choice).run()
    assert not app.exception


def heated(case, volume_ml=15):
    entry = case.entries[0]
    settings = replace(entry.settings, humidifier="heated", apparatus_dead_space_ml=volume_ml)
    return replace(case, entries=(replace(entry, settings=settings), *case.entries[1:]))


def test_an_exchanger_brings_its_volume_into_the_field(bed, case, html_of):
    """From 15 mL behind a heated humidifier: the field shows what is forecast with, and back."""
    upload(bed, text_from_case(demos.moved_to_present(heated(case), datetime.now(UTC))))
    expected = settings_asked({"humidifier": "exchanger"}, heated(case).entries[0].settings)
    humidify(bed, "exchanger")
    shown = field(bed, "apparatus_dead_space_ml").value
    assert float(shown) == expected.apparatus_dead_space_ml > 15
    assert f"Apparatus dead space 15 mL → {shown} mL" in tried(html_of(bed))
    humidify(bed, "heated")
    assert field(bed, "apparatus_dead_space_ml").value == "15" and "all as charted" in tried(html_of(bed))


def test_a_volume_typed_beside_another_humidifier_is_the_one_forecast(bed, case, monkeypatch):
    """Even the charted one, which as a change alone would be none."""
    upload(bed, text_from_case(demos.moved_to_present(heated(case), datetime.now(UTC))))
    sent, quick = [], forecasting.forecast
    monkeypatch.setattr(
        forecasting, "forecast", lambda fit, change, **more: sent.append(change) or quick(fit, change, **more)
    )
    humidify(bed, "exchanger")
    type_in(bed, "apparatus_dead_space_ml", "15")
    assert field(bed, "apparatus_dead_space_ml").value == "15"
    assert sent[-1] == {"humidifier": "exchanger", "apparatus_dead_space_ml": 15.0}
    humidify(bed, "heated")
    assert field(bed, "apparatus_dead_space_ml").value == "15"


def test_peep_can_be_tried_and_oxygen_is_not_forecast(own, html_of):
    type_in(own, "peep_cmh2o", "12")
    page = html_of(own)
    assert page.count("not forecast<small>") == 2 and "PaO2 is not forecast after a change of PEEP" in page


def test_if_breathing_effort_stops(own, html_of):
    before = points(own, "expected")
    own.toggle(key="effort_stops").set_value(True).run()
    assert "breathing effort stops" in tried(html_of(own)) and points(own, "expected")[1] > before[1]
    press(own, "undo")
    assert own.toggle(key="effort_stops").value is False and "all as charted" in tried(html_of(own))


def test_a_case_in_support_has_a_support_field_and_no_inspiratory_time(bed, case):
    support = Settings(mode="support", support_pressure_cmh2o=10)
    entries = (*case.entries, Entry(time=case.entries[-1].time + timedelta(minutes=5), settings=support))
    moved = demos.moved_to_present(replace(case, entries=entries), datetime.now(UTC))
    upload(bed, text_from_case(moved))
    keys = {item.key for item in bed.text_input}
    assert (
        session.field_key("support_pressure_cmh2o") in keys
        and session.field_key("inspiratory_time_s") not in keys
    )


# ------------------------------------------------------------------------------------------------------ units


def test_kpa_and_grams_per_litre_by_choice(own, html_of):
    assert ">53<" in html_of(own) and "Hb g/dL" in html_of(own)
    own.segmented_control(key="unit_gas").set_value("kPa")
    own.segmented_control(key="unit_haemoglobin").set_value("g/L").run()
    page = html_of(own)
    assert ">7.1<" in page and "Hb g/L" in page and ">98<" in page and "PaCO₂ mmHg" not in page
    assert points(own, "measured")[1][-1] == pytest.approx(7.066, abs=5e-4)  # 53 mmHg, three decimals


def test_sentences_follow_the_unit_of_the_house(bed, html_of):
    bed.selectbox(key="patient").set_value("demo:triggering").run()
    assert "PaCO2 50 mmHg would mean" in html_of(bed)
    bed.segmented_control(key="unit_gas").set_value("kPa").run()
    page = html_of(bed)
    assert "PaCO2 6.7 kPa would mean" in page and "mmHg" not in page


# ---------------------------------------------------------------------------------------------------- uploads


def test_a_good_file_comes_to_hand(bed, case, html_of):
    upload(bed, text_from_case(demos.moved_to_present(case, datetime.now(UTC))))
    page = html_of(bed)
    assert "Bed 7: 6 entries read from the file." in page and "<b>Bed 7</b>" in page
    assert "Demo: invented patient" not in page
    assert bed.selectbox(key="patient").value == "upload:1"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("{", "case.json"),
        (
            '{"format": "forebreath-case-1", "label": "Bed 7", "patient": {}, "site": {},'
            ' "entries": [], "name": "x"}',
            "name",
        ),
        (
            '{"format": "forebreath-case-1", "label": "Bed 7", "patient": {}, "site": {}, "entries":'
            ' [{"time": "2031-03-04T07:40:00Z", "settings": {"fio2": 40}}]}',
            "fio2",
        ),
    ],
)
def test_a_bad_file_is_refused_with_its_reason_and_the_patient_in_hand_stays(own, html_of, text, words):
    press(own, "step_more_rate_per_min")
    before, change = points(own, "expected"), tried(html_of(own))
    upload(own, text)
    page = html_of(own)
    assert "File not opened, nothing changed." in page and words in page
    assert "<b>Bed 7</b>" in page and tried(page) == change and points(own, "expected") == before


def test_a_file_that_is_no_text_is_refused_too(own, html_of):
    own.file_uploader[0].upload("scan.json", b"\xff\xfe\x00", "application/json").run()
    assert not own.exception and "File not opened" in html_of(own)


def test_a_file_from_another_day_is_read_as_of_its_last_entry(bed, case, html_of):
    """And the age of its gas is the true one, with the caution that a gas of this age has anywhere."""
    now = datetime.now(UTC)
    day_old = demos.moved(demos.moved_to_present(case, now), timedelta(hours=-25), UTC)
    upload(bed, text_from_case(day_old))
    page, last = html_of(bed), day_old.entries[-1].time
    assert f"Not live: file of {last.day} {last:%b %Y}, read as of its last entry at {last:%H:%M}" in page
    assert re.search(r"25 h 2[01] min ago: older than 8 h", page) and "<em>0 min ago" not in page


def test_a_case_without_a_gas_says_why_there_is_no_forecast(app, case, html_of):
    app.run()
    upload(app, text_from_case(replace(case, entries=case.entries[:1])))
    page = html_of(app)
    assert "No forecast: " in page and "no blood gas" in page and "no usable gas" in page


def test_without_demo_patients_the_page_asks_for_a_file(
    app, quick_engine, case, html_of, monkeypatch, tmp_path
):
    monkeypatch.setattr(demos, "FOLDER", tmp_path)
    app.run()
    assert not app.exception and "No patient in hand" in html_of(app)
    upload(app, "{")
    assert "File not opened, nothing changed." in html_of(app)
    upload(app, text_from_case(case))
    assert "<b>Bed 7</b>" in html_of(app) and "Expected" in html_of(app)


def test_a_broken_demo_file_is_left_out(app, quick_engine, case, monkeypatch, tmp_path):
    (tmp_path / "good_one.json").write_text(text_from_case(case))
    (tmp_path / "broken.json").write_text("{")
    monkeypatch.setattr(demos, "FOLDER", tmp_path)
    app.run()
    assert not app.exception and app.selectbox(key="patient").options == ["Bed 7 · good one"]


def test_what_is_downloaded_reads_back_as_the_same_case(case):
    from engine.reading.case_file import case_from_text

    held = Held(case=case, title="Bed 7", demo=False)
    assert case_from_text(text_from_case(held.case), "case.json") == case


# -------------------------------------------------------------------------------------------- the real engine


def test_settings_charted_after_the_last_gas_are_in_force(case):
    """A change made since the gas is what the next gas is drawn on."""
    from engine.fit import fit
    from engine.forecast import forecast

    later = Entry(time=case.entries[-1].time + timedelta(minutes=5), settings=Settings(fio2=0.9))
    fitted = fit(replace(case, entries=(*case.entries, later)), draws=200)
    assert forecast(fitted, {}).settings.fio2 == 0.9


@pytest.mark.slow
def test_the_page_stands_on_the_real_engine(app, html_of):
    app.run()
    bed = app.selectbox(key="patient").select(ICP).run(timeout=240)
    assert not bed.exception
    page = html_of(bed)
    assert "Expected" in page and 'class="fb-nearest' in page and "No forecast" not in page
    lows = [float(low) for low in re.findall(r"<i>90 %</i> (\d+)–", page)]
    assert len(lows) == 3 and all(low > 0 for low in lows)  # PaCO2, PaO2, SaO2
