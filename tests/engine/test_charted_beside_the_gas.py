"""What stands in the chart beside and since the last gas is not forgotten."""

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import numpy as np
import pytest

from engine.fit import fit
from engine.fit.observation import DYSHB_LASTS, dyshaemoglobins
from engine.forecast import forecast
from engine.lung import breathing_at
from engine.lung.breathing import last_settings, own_rate_of
from engine.record import BloodGas, Case, Entry, Measured, Patient, Settings, Site

START = datetime(2031, 3, 4, 8, tzinfo=UTC)
HOUR = timedelta(hours=1)
FEW = 300
VOLUME = Settings(mode="volume", rate_per_min=16, tidal_volume_ml=450, fio2=0.5, peep_cmh2o=5)
PRESSURE = Settings(mode="pressure", rate_per_min=16, inspiratory_pressure_cmh2o=12, fio2=0.5, peep_cmh2o=5)
GAS = BloodGas(ph=7.38, paco2_mmhg=42, pao2_mmhg=80, hb_g_per_dl=11)


def a_case(*entries: Entry) -> Case:
    patient = Patient(sex="male", height_cm=175, weight_kg=75)
    return Case(label="Bed 7", patient=patient, site=Site(barometric_mmhg=760), entries=entries)


def said(case: Case, change: dict[str, float], word: str) -> bool:
    return any(word in caution for caution in forecast(fit(case, draws=FEW), change).cautions)


def test_carbon_monoxide_is_not_gone_with_the_first_gas_that_does_not_measure_it():
    poisoned = Entry(time=START, settings=VOLUME, gas=replace(GAS, cohb=0.25))
    plain = Entry(time=START + HOUR / 2, gas=GAS)
    case = a_case(poisoned, plain)
    assert dyshaemoglobins(case, 1) == (0.25, 0.0)
    assert said(case, {"fio2": 0.4}, "Carboxyhaemoglobin 25 %")
    assert not said(case, {"fio2": 0.4}, "watch SpO2")
    measured = a_case(poisoned, replace(plain, gas=replace(GAS, cohb=0.02)))
    assert dyshaemoglobins(measured, 1) == (0.02, 0.0)
    late = a_case(poisoned, replace(plain, time=START + DYSHB_LASTS + HOUR))
    assert dyshaemoglobins(late, 1) == (0.0, 0.0)


def test_methaemoglobin_blinds_the_oximeter_too():
    case = a_case(Entry(time=START, settings=VOLUME, gas=replace(GAS, methb=0.3)))
    assert said(case, {"fio2": 0.4}, "Methaemoglobin 30 %")
    assert not said(case, {"fio2": 0.4}, "watch SpO2")


@pytest.mark.parametrize(("spo2", "doubted"), [(0.95, False), (0.82, True)])
def test_an_spo2_that_does_not_fit_the_last_gas_is_said(spo2, doubted):
    since = Entry(time=START + 2 * HOUR, measured=Measured(spo2=spo2))
    case = a_case(Entry(time=START, settings=VOLUME, gas=GAS), since)
    assert said(case, {}, "does not fit it") == doubted


def test_now_and_expected_are_at_one_temperature():
    cold = replace(GAS, ph=7.44, paco2_mmhg=35, pao2_mmhg=64, temperature_corrected=True, temperature_c=33.0)
    found = forecast(fit(a_case(Entry(time=START, settings=VOLUME, gas=cold)), draws=FEW), {})
    now, expected = found.now["paco2_mmhg"], found.next_gas["paco2_mmhg"]
    assert now is not None and expected is not None
    low, high = expected.interval(0.5)
    assert low < now < high  # nothing is changed
    assert any("33.0 C" in caution for caution in found.cautions)


def test_a_charted_step_of_pressure_moves_the_volume_that_was_read_before_it():
    read = Entry(time=START, settings=PRESSURE, measured=Measured(exhaled_tidal_volume_ml=450), gas=GAS)
    step = Entry(time=START + HOUR, settings=Settings(inspiratory_pressure_cmh2o=18))
    charted, tried = a_case(read, step), a_case(read)
    moved = breathing_at(charted, last_settings(charted))
    assert moved.tidal_volume_ml == pytest.approx(450 * 18 / 12)
    assert moved == replace(
        breathing_at(tried, last_settings(tried).then(Settings(inspiratory_pressure_cmh2o=18)))
    )
    again = replace(step, measured=Measured(exhaled_tidal_volume_ml=600))
    assert breathing_at(a_case(read, again), last_settings(charted)).tidal_volume_ml == 600


def test_a_rate_follows_from_minute_volume_where_no_total_is_charted():
    measured = Measured(minute_volume_l_per_min=9.9, exhaled_tidal_volume_ml=450)
    supported = Settings(mode="support", rate_per_min=0, support_pressure_cmh2o=10, fio2=0.4)
    case = a_case(Entry(time=START, settings=supported, measured=measured, gas=GAS))
    assert own_rate_of(case).per_min == pytest.approx(22.0)
    assert np.isfinite(fit(case, draws=FEW).belief.values).all()


def test_a_change_charted_with_the_gas_is_said_to_have_no_time():
    first = Entry(time=START, settings=VOLUME, gas=GAS)
    dated = a_case(
        first, Entry(time=START + HOUR, settings=Settings(fio2=0.6)), Entry(time=START + 2 * HOUR, gas=GAS)
    )
    undated = a_case(first, Entry(time=START + 2 * HOUR, settings=Settings(fio2=0.6), gas=GAS))
    assert said(undated, {}, "no time of its own")
    assert not said(dated, {}, "no time of its own")


@pytest.mark.parametrize("mode", ["support", "pressure"])
def test_effort_that_stops_takes_an_unknown_part_of_the_volume_with_it(mode):
    settings = replace(PRESSURE, mode=mode, support_pressure_cmh2o=10 if mode == "support" else None)
    measured = Measured(total_rate_per_min=26, exhaled_tidal_volume_ml=450)
    case = a_case(Entry(time=START, settings=settings, measured=measured, gas=GAS))
    found = forecast(fit(case, draws=FEW), {}, effort_stops=True)
    assert any("without effort it will be smaller" in caution for caution in found.cautions)
