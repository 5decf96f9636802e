"""A forecast in words and digits: what stands where on the page, and how it is rounded."""

import re
from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone

import numpy as np

from engine.forecast import Draws, Forecast, Recheck
from engine.handover.forecast_text import CAUTION, forecast_text
from engine.limits import SURELY_KEPT, Limit
from engine.record import Case, Entry, Settings

START = datetime(2031, 3, 4, 7, 40, tzinfo=UTC)
VOLUME = Settings(mode="volume", rate_per_min=18.0, tidal_volume_ml=380.0, fio2=0.5, peep_cmh2o=8.0)
CASE = Case(label="Bed 7", entries=(Entry(time=START, settings=VOLUME),))


def a_forecast(**of_forecast: object) -> Forecast:
    """A forecast made by hand, of numbers that are easy to recognise on the page."""
    spread = np.linspace(-1.0, 1.0, 2001)
    draws = {
        "ph": Draws(7.33 + 0.1 * spread),
        "paco2_mmhg": Draws(50.0 + 10.0 * spread),
        "pao2_mmhg": Draws(70.0 + 20.0 * spread),
        "sao2": Draws(0.93 + 0.02 * spread),
    }
    made = Forecast(
        version="0",
        seed=1,
        label="Bed 7",
        made_from=START + timedelta(minutes=45),
        at=START + timedelta(minutes=60),
        settings=replace(VOLUME, fio2=0.6),
        changed={"fio2": (0.5, 0.6)},
        minutes=None,
        now={"ph": 7.284, "paco2_mmhg": 57.4, "pao2_mmhg": 65.6, "sao2": None},
        next_gas=draws,
        settled=draws,
        in_target={"paco2": None, "ph": 0.642, "pao2": None, "sao2": None, "all": 0.642},
        harm={"pao2_below_55": 0.12, "ph_below_7_15": 0.0, "ph_above_7_55": 0.999},
        limits=(a_limit(ok=True),),
        recheck=Recheck(early_minutes=15.0, settled_minutes=90.0, reason="Stores of CO2 empty slowly."),
        cautions=("Nothing else is assumed to change.",),
    )
    return replace(made, **of_forecast)


def a_limit(**of_limit: object) -> Limit:
    values = {
        "name": "plateau pressure",
        "level": "hard",
        "value": 32.4,
        "limit": 30.0,
        "unit": "cmH2O",
        "ok": False,
        "probability": None,
        "says": "It would pass.",
        "source": "a trial, 2000",
    }
    return Limit(**values | of_limit)


def paragraph(text: str) -> str:
    """The text with its line breaks taken out, so that a sentence is found wherever it was wrapped."""
    return " ".join(text.split())


def test_the_table_keeps_measured_and_forecast_apart():
    lines = forecast_text(a_forecast(), CASE, "Bed 7").splitlines()
    assert lines[0] == "Bed 7: forecast of the next gas, once settled, the change below"
    assert [re.split(r"\s{2,}", line.strip()) for line in lines[3:8]] == [
        ["measured", "forecast", "50 % interval", "90 % interval"],
        ["pH", "7.28", "7.33", "7.28 to 7.38", "7.24 to 7.42"],
        ["PaCO2 mmHg", "57", "50", "45 to 55", "41 to 59"],
        ["PaO2 mmHg", "66", "70", "60 to 80", "52 to 88"],
        ["SaO2 %", "-", "93", "92 to 94", "91 to 95"],
    ]


def test_a_quantity_that_is_not_forecast_says_so():
    draws = a_forecast().next_gas | {"pao2_mmhg": None}
    lines = forecast_text(a_forecast(next_gas=draws), CASE, "Bed 7").splitlines()
    assert re.split(r"\s{2,}", lines[6].strip()) == ["PaO2 mmHg", "66", "not forecast"]


def test_the_headline_says_when_and_whether_anything_was_touched():
    text = forecast_text(a_forecast(changed={}, settings=VOLUME, minutes=30.0), CASE, "Bed 7")
    assert text.startswith("Bed 7: forecast of the next gas, 30 min after the change, nothing touched")


def test_ages_of_gas_and_settings():
    text = paragraph(forecast_text(a_forecast(), CASE, "Bed 7"))
    assert "At 2031-03-04 08:40 UTC the last gas (2031-03-04 08:25) is 15 min old, " in text
    assert " old, settings were last charted 60 min ago." in text
    late = forecast_text(a_forecast(at=START + timedelta(hours=10)), CASE, "Bed 7")
    assert "is 9 h 15 min old, settings were last charted 10 h 00 min ago." in late


def test_all_clock_times_are_in_the_zone_of_now():
    zone = timezone(timedelta(hours=1))
    text = forecast_text(a_forecast(at=(START + timedelta(hours=1)).astimezone(zone)), CASE, "Bed 7")
    assert "At 2031-03-04 09:40 UTC+01:00 the last gas (2031-03-04 09:25) is 15 min old" in text


def test_settings_after_the_change_carry_units():
    whole = Settings(
        mode="volume",
        rate_per_min=24.0,
        tidal_volume_ml=380.0,
        fio2=0.6,
        peep_cmh2o=8.0,
        inspiratory_time_s=0.9,
        flow_l_per_min=40.0,
        humidifier="heated",
    )
    changed = {"fio2": (0.5, 0.6), "humidifier": (None, "heated"), "rate_per_min": (18.0, 24.0)}
    text = paragraph(forecast_text(a_forecast(settings=whole, changed=changed), CASE, "Bed 7"))
    assert (
        "Settings: mode volume, rate 24 /min (was 18 /min), tidal volume 380 mL, FiO2 60 % (was 50 %), "
        "PEEP 8 cmH2O, inspiratory time 0.9 s, flow 40 L/min, humidifier heated (was not known)."
    ) in text


def test_chances_are_per_cent_and_never_nothing_or_certain():
    text = paragraph(forecast_text(a_forecast(), CASE, "Bed 7"))
    assert "In the target range once settled: pH 64 %, all together 64 %." in text
    assert "At the next gas: PaO2 below 55 mmHg 12 %, pH below 7.15 <1 %, pH above 7.55 >99 %." in text
    nothing = dict.fromkeys(a_forecast().in_target)
    assert "In the target range once settled: not known." in forecast_text(
        a_forecast(in_target=nothing), CASE, "Bed 7"
    )


def test_limits_touched_show_number_limit_and_source():
    rows = (
        a_limit(),
        a_limit(name="fio2", value=0.8, limit=0.6, unit="", level="soft"),
        a_limit(name="driving_pressure", value=14.0, limit=15.0, level="soft", ok=True),
        a_limit(name="ph_warning", value=7.21, limit=7.2, unit="", ok=True, probability=SURELY_KEPT - 0.01),
        a_limit(name="rate", value=30.0, limit=35.0, unit="/min", ok=True, probability=SURELY_KEPT),
        a_limit(name="power", value=None, limit="see source", ok=None),
        a_limit(name="trapping", value=None, limit="none", unit="", ok=None, probability=0.0),
    )
    text = paragraph(forecast_text(a_forecast(limits=rows), CASE, "Bed 7"))
    assert "Limits: 4 passed or in doubt, 2 kept, 1 not known." in text
    assert "- plateau pressure 32.4 cmH2O, limit 30 cmH2O (hard): It would pass. (a trial, 2000)" in text
    assert "- FiO2 80 %, limit 60 % (soft): " in text
    assert "- pH warning 7.21, limit 7.2 (hard, inside with 89 %): " in text
    assert "- trapping not known, limit none (hard, inside with <1 %): " in text
    assert "- Not known: power." in text
    assert "driving pressure" not in text and "rate 30" not in text


def test_recheck_times_are_clock_times_with_their_reason():
    text = paragraph(forecast_text(a_forecast(), CASE, "Bed 7"))
    assert (
        "Recheck if changed at 2031-03-04 08:40: early look at 2031-03-04 08:55 (after 15 min), "
        "settled gas at 2031-03-04 10:10 (after 90 min). Stores of CO2 empty slowly."
    ) in text
    none = Recheck(early_minutes=None, settled_minutes=None, reason="Nothing is changed.")
    assert "Recheck: Nothing is changed." in forecast_text(a_forecast(recheck=none), CASE, "Bed 7")


def test_cautions_and_the_standing_caution_close_the_page():
    lines = forecast_text(a_forecast(), CASE, "Bed 7").splitlines()
    assert "- Nothing else is assumed to change." in lines
    assert lines[-1] == CAUTION
    for words in (
        "Estimates, not measurements",
        "Local protocol",
        "Not for emergencies",
        "Not a certified medical",
    ):
        assert words in CAUTION


def test_the_gravest_limit_stands_first():
    rows = (
        a_limit(name="mechanical_power", value=23.0, limit=17.0, unit="J/min", level="soft"),
        a_limit(name="ph_ceiling", value=7.53, limit=7.55, unit="", ok=True, probability=0.8),
        a_limit(name="plateau", value=31.0),
    )
    text = paragraph(forecast_text(a_forecast(limits=rows), CASE, "Bed 7"))
    places = [text.index(f"- {word}") for word in ("plateau", "pH ceiling", "mechanical power")]
    assert places == sorted(places)
