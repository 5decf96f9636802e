"""Gases drawn before the body had settled, read for what they are.

Scenario: PaCO2 60 mmHg, the rate is raised so that it would settle at 45; it reads 54 after 5 min, 48 to 49
after 30 and 46 after 60.
"""

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import numpy as np
import pytest

from engine.fit import fit
from engine.fit.observation import PACO2_CV
from engine.forecast import forecast
from engine.physics.acid_base import ph_at_standard_base_excess
from engine.physics.stores import paco2_on_the_way_mmhg
from engine.record import Case, Entry, Patient, Settings, Site

START = datetime(2031, 3, 4, 7, 0, tzinfo=UTC)
MINUTE, HOUR = timedelta(minutes=1), timedelta(hours=1)
MAN = Patient(sex="male", height_cm=175, weight_kg=72)
FIRST = Settings(mode="volume", rate_per_min=15, tidal_volume_ml=440, fio2=0.4, peep_cmh2o=8)
DRAWS = 600


MEASURED_ON_THE_WAY = (5.0, 30.0, 60.0)  # scenario 5: 60 towards 45 mmHg, read 54, 48 to 49 and 46
END_POINT_MMHG = 45.0
WITHIN_SCATTER = END_POINT_MMHG * PACO2_CV  # a gas itself is not better known


@pytest.fixture(scope="module")
def slowed(known_stay):
    """A lung at PaCO2 60 mmHg, and the rate at which it would settle at 45."""
    lung = known_stay().lung
    first = FIRST
    at_first = float(lung.exchange(first).paco2_mmhg)
    lung = replace(lung, vco2_ml_per_min=lung.vco2_ml_per_min * 60.0 / at_first)
    rates = np.linspace(15, 30, 1501)
    paco2 = np.array([float(lung.exchange(replace(first, rate_per_min=r)).paco2_mmhg) for r in rates[::50]])
    rate = float(np.interp(-END_POINT_MMHG, -paco2, rates[::50]))
    return lung, first, rate


def on_the_way(slowed, *minutes: float, dated: bool = True, drawn_before: float | None = None) -> Case:
    """60 mmHg, then the rate is raised: gases so many minutes after it."""
    lung, first, rate = slowed
    raised = replace(first, rate_per_min=rate)
    flow = lung.alveolar_l_per_min(raised) * (1.0 - lung.alveolar_dead_space)
    change = START + 2 * HOUR
    entries = [Entry(time=START, settings=first, gas=lung.gas(first), events=("paralysis",))]
    if dated:
        entries.append(Entry(time=change, settings=Settings(rate_per_min=rate)))
    for passed in minutes:
        paco2 = float(paco2_on_the_way_mmhg(passed, 60.0, END_POINT_MMHG, flow, MAN.weight_kg))
        ph = float(ph_at_standard_base_excess(paco2, lung.standard_base_excess))
        gas = lung.gas(raised, ph=ph, paco2_mmhg=paco2)
        entries.append(
            Entry(
                time=change + passed * MINUTE,
                gas=gas,
                settings=None if dated else Settings(rate_per_min=rate),
            )
        )
    if drawn_before is not None:
        gas = replace(lung.gas(first), drawn_at=change - drawn_before * MINUTE)
        entries.append(Entry(time=change + 10 * MINUTE, gas=gas))
    return Case(label="Bed 7", patient=MAN, site=Site(barometric_mmhg=760), entries=tuple(entries))


def end_point(case: Case) -> float:
    return forecast(fit(case, draws=DRAWS, read_as="done"), {}).settled["paco2_mmhg"].median


@pytest.mark.parametrize("minutes", MEASURED_ON_THE_WAY)
def test_a_gas_soon_after_a_dated_change_is_read_as_on_its_way(slowed, minutes):
    case = on_the_way(slowed, minutes)
    if minutes == 5.0:
        assert case.entries[-1].gas.paco2_mmhg == pytest.approx(54.0, abs=0.5)  # the scenario's own digit
    assert end_point(case) == pytest.approx(END_POINT_MMHG, abs=WITHIN_SCATTER)


def test_the_same_gas_hours_after_the_change_is_read_as_settled(slowed):
    case = on_the_way(slowed, 5.0)
    late = replace(case.entries[-1], time=case.entries[-1].time + 6 * HOUR)
    printed = late.gas.paco2_mmhg
    assert end_point(replace(case, entries=(*case.entries[:-1], late))) == pytest.approx(
        printed, rel=PACO2_CV
    )


def test_a_series_of_early_gases_is_read_as_one_course(slowed):
    assert end_point(on_the_way(slowed, 5.0, 30.0)) == pytest.approx(END_POINT_MMHG, abs=WITHIN_SCATTER)


@pytest.mark.xfail(
    strict=True,
    reason="a change that first stands with the gas is taken as settled, not integrated over: 5 min after it "
    "the end point comes out at 53 mmHg with 45 outside the 90 % interval",
)
def test_an_undated_change_is_not_taken_as_known(slowed):
    case = on_the_way(slowed, 5.0, dated=False)
    low, _ = forecast(fit(case, draws=DRAWS, read_as="done"), {}).settled["paco2_mmhg"].interval(0.9)
    assert low < END_POINT_MMHG


def test_a_sample_drawn_before_a_change_belongs_to_the_settings_before(slowed):
    fitted = fit(on_the_way(slowed, drawn_before=10.0), draws=DRAWS, read_as="done")
    assert fitted.surprise[-1] > -10.0
    assert forecast(fitted, {}).settled["paco2_mmhg"].median == pytest.approx(END_POINT_MMHG, abs=4.0)
