"""Driving pressure, compliance and power against worked examples, and refused where they mean nothing."""

from datetime import timedelta

import pytest

from engine.estimates.chest import mechanics_of
from engine.record import BloodGas, Case, Entry, Settings
from tests.engine.conftest import CHART_START as START
from tests.engine.conftest import ONE_GAS as GAS
from tests.engine.conftest import Fields, case_of
from tests.engine.conftest import estimated as value
from tests.engine.conftest import find_estimate as find

POWER = 0.02  # J/min: the examples round 0.0980665 to 0.098

PASSIVE: Fields = {"plateau_cmh2o": 25, "peak_cmh2o": 30, "total_rate_per_min": 20}


def test_pressures_and_power():
    """ME-10 (Gattinoni 2016): VT 0.5, plateau 25, PEEP 10, peak 30 at 20/min make 22.05 J/min; ME-02."""
    assert value("driving_pressure_cmh2o", measured=PASSIVE) == pytest.approx(15)
    assert value("compliance_ml_per_cmh2o", measured=PASSIVE) == pytest.approx(500 / 15)
    assert value("mechanical_power_j_per_min", measured=PASSIVE) == pytest.approx(22.05, abs=POWER)
    smaller = {"settings": {"tidal_volume_ml": 420}, "measured": PASSIVE}
    assert value("compliance_ml_per_cmh2o", **smaller) == pytest.approx(28.0)


def test_power_of_pressure_control():
    """ME-19 (Becher 2019), simple form: VT 0.540, PEEP 10, 15 above at 20/min make 26.47 J/min."""
    settings = {"mode": "pressure", "inspiratory_pressure_cmh2o": 15}
    measured = PASSIVE | {"exhaled_tidal_volume_ml": 540}
    assert value("mechanical_power_j_per_min", settings=settings, measured=measured) == pytest.approx(
        26.47, abs=POWER
    )


def test_total_peep_counts():
    assert value("driving_pressure_cmh2o", measured=PASSIVE | {"total_peep_cmh2o": 13}) == pytest.approx(12)


PRESSURES = ("driving_pressure_cmh2o", "compliance_ml_per_cmh2o", "mechanical_power_j_per_min")


@pytest.mark.parametrize("name", PRESSURES)
@pytest.mark.parametrize(
    ("settings", "measured", "reason"),
    [
        ({}, PASSIVE | {"total_rate_per_min": 22}, "the patient triggers"),
        ({}, {"plateau_cmh2o": 25, "peak_cmh2o": 30}, "no total rate is charted"),
        ({"mode": "support"}, PASSIVE | {"exhaled_tidal_volume_ml": 500}, "in which the patient breathes"),
        ({}, PASSIVE | {"plateau_cmh2o": 10}, "not above PEEP"),
        ({}, {"total_rate_per_min": 20}, "no plateau pressure is charted"),
    ],
)
def test_pressures_are_refused_where_they_mean_nothing(
    name: str, settings: Fields, measured: Fields, reason: str
):
    found = find(name, settings=settings, measured=measured)
    assert found.value is None and reason in found.working


@pytest.mark.parametrize("name", PRESSURES)
def test_pressures_are_refused_at_another_peep(name: str):
    later = Entry(time=START + timedelta(hours=1), settings=Settings(peep_cmh2o=14), gas=BloodGas(**GAS))
    found = find(name, 1, measured=PASSIVE, then=later)
    assert found.value is None and "read at PEEP 10 cmH2O, PEEP is 14 now" in found.working


def test_paralysis_makes_a_patient_passive_without_a_total_rate():
    first = case_of(measured={"plateau_cmh2o": 25}).entries[0]
    told = Entry(
        time=first.time,
        settings=first.settings,
        measured=first.measured,
        gas=first.gas,
        events=("paralysis",),
    )
    assert mechanics_of(Case(label="Bed 7", entries=(told,))).passive
    ended = Entry(
        time=told.time, settings=told.settings, measured=told.measured, events=("paralysis", "paralysis_end")
    )
    assert not mechanics_of(Case(label="Bed 7", entries=(ended,))).passive
