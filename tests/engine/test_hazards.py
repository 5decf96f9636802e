"""Where it could hurt: old data, pressures of a breathing patient, PEEP, support, mix-ups, units.

Each test goes the whole way, from a case to what is forecast and said.
"""

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import numpy as np
import pytest

from engine.checks import checks_for
from engine.estimates import estimates_for
from engine.fit import Fit, NothingToSay, fit
from engine.forecast import QUANTITIES, Forecast, forecast
from engine.handover.forecast_text import forecast_text
from engine.limits import Limit
from engine.record import BloodGas, Case, Entry, Impossible, Measured, Patient, Settings, Site

START = datetime(2031, 3, 4, 7, 0, tzinfo=UTC)
MINUTE, HOUR = timedelta(minutes=1), timedelta(hours=1)
DRAWS = 300
MAN = Patient(sex="male", height_cm=175, weight_kg=75)
SETTINGS = Settings(
    mode="volume", rate_per_min=18, tidal_volume_ml=440, fio2=0.5, peep_cmh2o=8, inspiratory_time_s=1.0
)
GAS = BloodGas(ph=7.36, paco2_mmhg=44.0, pao2_mmhg=82.0, hb_g_per_dl=12.5)
PASSIVE_CHEST = Measured(total_rate_per_min=18, plateau_cmh2o=22, peak_cmh2o=28)


def a_case(*later: Entry, gas: BloodGas = GAS, patient: Patient = MAN, **first: object) -> Case:
    """A gas at 07:30 after settings at 07:00, and what follows."""
    entries = (
        Entry(time=START, settings=SETTINGS),
        Entry(time=START + 30 * MINUTE, gas=gas, **({"measured": PASSIVE_CHEST} | first)),
        *later,
    )
    return Case(label="Bed 7", patient=patient, site=Site(barometric_mmhg=760), entries=entries)


def fitted(case: Case) -> Fit:
    return fit(case, draws=DRAWS)


def said(found: Forecast, *words: str) -> bool:
    return any(all(word in caution for word in words) for caution in found.cautions)


def limit(found: Forecast, name: str) -> Limit:
    return next(row for row in found.limits if row.name == name)


# 9 Old data


@pytest.mark.parametrize(("minutes", "old"), [(0, False), (8 * 60, False), (8 * 60 + 1, True)])
def test_9_a_gas_of_more_than_eight_hours_is_called_old(minutes, old):
    one = fitted(a_case())
    assert said(forecast(one, {}, at=one.gas_time + minutes * MINUTE), "The last gas is", "h old") == old


def test_9_age_of_gas_and_settings_stand_beside_the_forecast():
    one = fitted(a_case(Entry(time=START + 90 * MINUTE, settings=Settings(rate_per_min=20))))
    found = forecast(one, {"fio2": 0.6}, at=START + 3 * HOUR)
    assert (found.made_from, found.at) == (START + 30 * MINUTE, START + 3 * HOUR)
    text = " ".join(forecast_text(found, one.case, "Bed 7").split())
    assert "the last gas (2031-03-04 07:30) is 2 h 30 min old" in text
    assert "settings were last charted 90 min ago" in text


@pytest.mark.parametrize("event", ["prone", "drain", "recruitment", "reintubation"])
def test_9_what_makes_another_lung_is_said_until_a_gas_is_drawn(event):
    changed = Entry(time=START + HOUR, events=(event,))
    since = fitted(a_case(changed))
    words = (f"Since the last gas: {event}", "before a new gas")
    assert said(forecast(since, {}), *words)
    again = fitted(a_case(changed, Entry(time=START + 2 * HOUR, gas=GAS)))
    assert not said(forecast(again, {}), *words)
    # With the gas in one entry the check counts it as a gas since; so does the forecast.
    together = a_case(events=(event,))
    row = next(c for c in checks_for(together) if c.name == "A gas since the lung was changed")
    assert row.ok is True and not said(forecast(fitted(together), {}), *words)
    unchanged = fitted(a_case())
    widths = [
        np.ptp(forecast(one, {}, at=START + 2 * HOUR).next_gas["pao2_mmhg"].interval(0.9))
        for one in (since, unchanged)
    ]
    assert widths[0] > 1.2 * widths[1]


def test_9_an_old_gas_is_forecast_wider_not_just_worded_so():
    one = fitted(a_case())
    young, old = (
        np.ptp(forecast(one, {}, at=one.gas_time + hours * HOUR).next_gas["paco2_mmhg"].interval(0.9))
        for hours in (0, 24)
    )
    assert old > young


# 10 Driving pressure only for a passive patient at the measured PEEP


def test_10_a_passive_patient_has_a_driving_pressure():
    row = limit(forecast(fitted(a_case()), {}), "driving_pressure")
    assert row.value == pytest.approx(14.0, abs=0.5) and row.ok is True  # 22 less 8


@pytest.mark.parametrize(
    ("measured", "events", "change", "why"),
    [
        (replace(PASSIVE_CHEST, total_rate_per_min=28), (), {}, "the patient triggers"),
        (replace(PASSIVE_CHEST, total_rate_per_min=None), (), {}, "not known"),
        (PASSIVE_CHEST, (), {"mode": "support", "support_pressure_cmh2o": 10.0}, "the patient breathes"),
        (PASSIVE_CHEST, (), {"peep_cmh2o": 12.0}, "the plateau was read at PEEP 8, tried is 12"),
    ],
)
def test_10_else_it_is_not_valid_here(measured, events, change, why):
    found = forecast(fitted(a_case(measured=measured, events=events)), change)
    row = limit(found, "driving_pressure")
    assert (row.value, row.ok, row.probability) == (None, None, None)
    assert row.says.startswith("Not valid here") and why in row.says


@pytest.mark.parametrize(("total_rate", "valid"), [(18, True), (28, False)])
def test_10_compliance_is_not_worked_out_of_a_breathing_patient(total_rate, valid):
    case = a_case(measured=replace(PASSIVE_CHEST, total_rate_per_min=total_rate))
    rows = {e.name: e for e in estimates_for(case, 1)}
    for name in ("driving_pressure_cmh2o", "compliance_ml_per_cmh2o"):
        assert (rows[name].value is not None) == valid
        assert ("not valid here" in rows[name].working) == (not valid)


# 11 PEEP tried


@pytest.mark.parametrize("peep", [5.0, 14.0])
def test_11_peep_tried_forecasts_no_oxygen_and_says_why(peep):
    found = forecast(fitted(a_case()), {"peep_cmh2o": peep})
    assert found.next_gas["pao2_mmhg"] is None and found.settled["sao2"] is None
    assert found.harm["pao2_below_55"] is None
    assert said(found, "PaO2 and SaO2 are not forecast", "PEEP", "cannot be read off its gases")
    row = limit(found, "plateau")
    assert row.value is not None and 0.0 < row.probability <= 1.0
    assert "compliance may move either way" in row.says


def test_11_peep_tried_with_oxygen_still_forecasts_no_oxygen():
    found = forecast(fitted(a_case()), {"peep_cmh2o": 12.0, "fio2": 0.8})
    assert found.next_gas["pao2_mmhg"] is None
    assert found.next_gas["paco2_mmhg"] is not None


def test_11_a_charted_change_of_peep_widens_oxygen():
    raised = Entry(time=START + HOUR, settings=Settings(peep_cmh2o=12))
    at = START + 2 * HOUR
    widths = [
        np.ptp(forecast(fitted(case), {}, at=at).next_gas["pao2_mmhg"].interval(0.9))
        for case in (a_case(), a_case(raised))
    ]
    assert widths[1] > 1.2 * widths[0]


# 12 Extracorporeal support


ON, OFF = (("extracorporeal_start",), ("extracorporeal_stop",))
SWEPT = replace(GAS, paco2_mmhg=35.0, pao2_mmhg=300.0, ph=7.45)  # what the membrane does, not the lung


def supported(*after: Entry) -> Case:
    during = Entry(time=START + 3 * HOUR, gas=SWEPT)
    return a_case(Entry(time=START + 2 * HOUR, events=ON), during, *after)


def test_12_no_forecast_while_support_runs_and_its_gases_teach_nothing():
    one = fitted(supported())
    assert one.gas_number == 1  # the gas before the start
    np.testing.assert_array_equal(one.belief.values, fitted(a_case()).belief.values)
    found = forecast(one, {"fio2": 0.6})
    assert all(found.next_gas[q] is None and found.settled[q] is None for q in QUANTITIES)
    assert said(found, "Not forecast", "extracorporeal support")
    row = next(c for c in checks_for(one.case) if c.name == "Extracorporeal support")
    assert row.ok is False and "no forecast" in row.says


def test_12_nor_after_it_has_stopped_before_a_new_gas():
    stopped = supported(Entry(time=START + 5 * HOUR, events=OFF))
    found = forecast(fitted(stopped), {})
    assert all(found.next_gas[q] is None for q in QUANTITIES)
    assert said(found, "has run since the last gas")
    drawn = replace(stopped, entries=(*stopped.entries, Entry(time=START + 6 * HOUR, gas=GAS)))
    assert forecast(fitted(drawn), {}).next_gas["pao2_mmhg"] is not None


def test_12_a_patient_who_came_on_support_has_nothing_to_fit():
    with pytest.raises(NothingToSay, match="extracorporeal support"):
        fitted(a_case(patient=replace(MAN, conditions=("extracorporeal",))))


# 13 Wrong patient


def test_13_a_forecast_carries_its_bed_and_its_last_gas():
    other = replace(
        a_case(gas=replace(GAS, ph=7.21, paco2_mmhg=71.0), patient=replace(MAN, height_cm=160)), label="Bed 8"
    )
    found = {case.label: forecast(fitted(case), {"fio2": 0.6}) for case in (a_case(), other)}
    for label, ph in (("Bed 7", 7.36), ("Bed 8", 7.21)):
        assert found[label].label == found[label].as_json()["case"] == label
        assert found[label].now["ph"] == ph
    again = forecast(fitted(a_case()), {"fio2": 0.6})  # nothing of one patient stays for the next
    assert again.as_json() == found["Bed 7"].as_json()


# 14 Units: the slips that are asked about, and those that cannot enter


@pytest.mark.parametrize(
    ("case", "name", "ok"),
    [
        (a_case(gas=replace(GAS, paco2_mmhg=5.9, pao2_mmhg=10.9)), "Tensions in mmHg, not kPa", False),
        (a_case(gas=replace(GAS, ph=7.3, paco2_mmhg=7.2)), "pH and PaCO2 in their places", False),
        (a_case(gas=replace(GAS, hb_g_per_dl=9.0)), "Unit of haemoglobin", None),
        (
            a_case(
                Entry(
                    time=START + HOUR,
                    settings=Settings(fio2=1.0),
                    measured=Measured(spo2=0.97),
                )
            ),
            "FiO2 of 1 meant",
            None,
        ),
        (
            a_case(
                Entry(
                    time=START + HOUR,
                    settings=Settings(mode="pressure", inspiratory_pressure_cmh2o=22),
                    measured=Measured(peak_cmh2o=22, exhaled_tidal_volume_ml=430),
                )
            ),
            "Set pressure counted above PEEP",
            False,
        ),
        (a_case(Entry(time=START + HOUR, settings=Settings(ie_ratio=2.0))), "I:E the right way round", False),
    ],
)
def test_14_slips_of_unit_are_asked_about_never_corrected(case, name, ok):
    row = [c for c in checks_for(case) if c.name == name][-1]
    assert row.ok is ok
    assert "?" in row.says or "Look" in row.says or "cannot tell" in row.says
    assert not [
        c for c in checks_for(a_case()) if c.name == name and c.ok is False
    ]  # nor asked without cause
    if case.entries[1].gas != GAS:
        assert fit(case, draws=DRAWS).case.entries[1].gas == case.entries[1].gas


@pytest.mark.parametrize(
    ("field", "value"),
    [("hb_g_per_dl", 125.0), ("paco2_mmhg", 4.9), ("ph", 44.0), ("sao2", 96.0), ("cohb", 3.0)],
)
def test_14_what_no_unit_explains_cannot_enter(field, value):
    with pytest.raises(Impossible) as why:
        replace(GAS, **{field: value})
    assert why.value.field == field and "a number from" in why.value.expected


def test_14_per_cent_is_no_fio2():
    with pytest.raises(Impossible, match="fio2 = 60"):
        forecast(fitted(a_case()), {"fio2": 60.0})
