"""Every limit on each side, unmeasured, and never a set value outside a hard limit called ok."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from engine.limits import TABLE, Mechanics, limits_for
from engine.record import Patient
from tests.engine.conftest import CHEST, MAN_OF_70_KG, with_condition
from tests.engine.conftest import TRIED as SETTINGS
from tests.engine.conftest import find_limit as find


def with_settings(**changed: object) -> dict[str, object]:
    return {"tried": replace(SETTINGS, **changed)}


def with_plateau(plateau: float) -> dict[str, object]:
    return {"chest": replace(CHEST, plateau_cmh2o=plateau, peak_cmh2o=max(30.0, plateau))}


ICP, RIGHT, PREGNANT = (with_condition(c) for c in ("raised_icp", "right_heart_failure", "pregnancy"))

# name, level, just inside, just outside
EACH_SIDE: tuple[tuple[str, str, dict[str, object], dict[str, object]], ...] = (
    ("tidal_volume", "hard", with_settings(tidal_volume_ml=560), with_settings(tidal_volume_ml=561)),
    ("tidal_volume", "hard", with_settings(tidal_volume_ml=280), with_settings(tidal_volume_ml=279)),
    ("set_rate", "hard", with_settings(rate_per_min=35), with_settings(rate_per_min=36)),
    ("set_rate", "hard", with_settings(rate_per_min=6), with_settings(rate_per_min=5)),
    ("plateau", "hard", with_plateau(30), with_plateau(30.5)),
    ("driving_pressure", "soft", with_plateau(25), with_plateau(25.5)),
    ("fio2", "soft", with_settings(fio2=0.6), with_settings(fio2=0.61)),
    ("peep", "soft", with_settings(peep_cmh2o=5), with_settings(peep_cmh2o=4)),
    ("peep", "soft", with_settings(peep_cmh2o=24), with_settings(peep_cmh2o=25)),
    # 0.098 x rate x 0.42 x (30 - 7) J/min is 17 at 17.95/min
    ("mechanical_power", "soft", with_settings(rate_per_min=17.9), with_settings(rate_per_min=18)),
    ("ph_floor", "hard", {"ph": 7.15}, {"ph": 7.149}),
    ("ph_warning", "soft", {"ph": 7.20}, {"ph": 7.199}),
    ("ph_ceiling", "hard", {"ph": 7.55}, {"ph": 7.551}),
    ("pao2_floor", "hard", {"pao2_mmhg": 55.0}, {"pao2_mmhg": 54.9}),
    ("pao2_ceiling", "soft", {"pao2_mmhg": 300.0}, {"pao2_mmhg": 300.1}),
    ("paco2_brain", "hard", ICP | {"paco2_mmhg": 35.0}, ICP | {"paco2_mmhg": 34.9}),
    ("paco2_brain", "hard", ICP | {"paco2_mmhg": 45.0}, ICP | {"paco2_mmhg": 45.1}),
    ("pao2_brain", "soft", ICP | {"pao2_mmhg": 80.0}, ICP | {"pao2_mmhg": 79.9}),
    ("pao2_brain", "soft", ICP | {"pao2_mmhg": 120.0}, ICP | {"pao2_mmhg": 120.1}),
    ("paco2_right_heart", "hard", RIGHT | {"paco2_mmhg": 48.0}, RIGHT | {"paco2_mmhg": 48.1}),
    ("paco2_pregnancy", "soft", PREGNANT | {"paco2_mmhg": 32.0}, PREGNANT | {"paco2_mmhg": 32.1}),
    ("paco2_pregnancy", "soft", PREGNANT | {"paco2_mmhg": 28.0}, PREGNANT | {"paco2_mmhg": 27.9}),
)


@pytest.mark.parametrize(("name", "level", "inside", "outside"), EACH_SIDE)
def test_each_side_of_the_limit(name: str, level: str, inside: dict[str, object], outside: dict[str, object]):
    kept, broken = find(name, **inside), find(name, **outside)
    assert kept.ok is True and broken.ok is False
    assert kept.level == broken.level == level
    assert kept.source and kept.says.endswith(".")


def test_every_limit_of_the_table_has_two_sides_here():
    both = {name for name, *_ in EACH_SIDE} | {"expiratory_time"}
    assert len(both) == len(TABLE)


def test_a_condition_that_is_not_there_brings_no_row():
    names = {row.name for row in limits_for(MAN_OF_70_KG, SETTINGS, CHEST, paco2_mmhg=60.0)}
    assert not names & {"paco2_brain", "pao2_brain", "paco2_right_heart", "paco2_pregnancy"}


UNKNOWN: dict[str, dict[str, object]] = {
    "tidal_volume": {"patient": Patient(sex="male")},
    "set_rate": with_settings(rate_per_min=None),
    "plateau": {"chest": Mechanics()},
    "driving_pressure": {"chest": Mechanics()},
    "mechanical_power": {"chest": replace(CHEST, peak_cmh2o=None)},
    "expiratory_time": {"tried": replace(SETTINGS, inspiratory_time_s=None), "chest": Mechanics()},
    "fio2": with_settings(fio2=None),
    "peep": with_settings(peep_cmh2o=None),
    "ph_floor": {},
    "ph_warning": {},
    "ph_ceiling": {},
    "pao2_floor": {},
    "pao2_ceiling": {},
    "paco2_brain": ICP,
    "pao2_brain": ICP,
    "paco2_right_heart": RIGHT,
    "paco2_pregnancy": PREGNANT,
}


@pytest.mark.parametrize("name", UNKNOWN)
def test_unmeasured_is_unknown_and_never_ok(name: str):
    found = find(name, **UNKNOWN[name])
    assert found.ok is None and found.value is None and found.probability is None
    assert found.says


def test_volume_without_sex_or_height_says_so():
    assert "needs sex and height" in find("tidal_volume", patient=Patient(height_cm=178)).says


# Probability


def test_probability_is_the_share_of_draws_inside():
    draws = np.concatenate([np.full(30, 7.10), np.full(70, 7.30)])
    found = find("ph_floor", ph=draws)
    assert (
        found.probability == pytest.approx(0.70) and found.ok is True and found.value == pytest.approx(7.30)
    )
    assert find("ph_floor", ph=7.30).probability is None


def test_draws_that_failed_count_for_nothing():
    draws = np.array([7.10, 7.30, np.nan, 7.30])
    assert find("ph_floor", ph=draws).probability == pytest.approx(2 / 3)
    assert find("ph_floor", ph=np.full(3, np.nan)).ok is None


def test_the_breath_that_arrives_is_uncertain_where_the_set_one_is_not():
    found = find("tidal_volume", effective_tidal_volume_ml=np.array([400.0, 420.0, 440.0, 600.0]))
    assert found.value == pytest.approx(6.0) and found.ok is True and found.probability == pytest.approx(0.75)
    support = replace(SETTINGS, mode="support", support_pressure_cmh2o=8)
    assert find("tidal_volume", tried=support, effective_tidal_volume_ml=np.full(4, 630.0)).ok is False


def test_same_seed_same_answer():
    tried = replace(SETTINGS, tidal_volume_ml=520)
    assert limits_for(MAN_OF_70_KG, tried, CHEST, seed=3) == limits_for(MAN_OF_70_KG, tried, CHEST, seed=3)
    assert find("plateau", tried=tried, seed=3) != find("plateau", tried=tried, seed=4)


# Set values


@settings(max_examples=60, deadline=None)
@given(
    rate=st.floats(0.5, 120),
    volume=st.floats(20, 2500),
    mode=st.sampled_from(["volume", "pressure", "support", "other"]),
    total=st.none() | st.floats(0, 120),
    effective=st.none() | st.floats(20, 2500),
)
def test_a_set_value_outside_a_hard_limit_is_never_ok(
    rate: float, volume: float, mode: str, total: float | None, effective: float | None
):
    tried = replace(SETTINGS, rate_per_min=rate, tidal_volume_ml=volume, mode=mode)
    forecast = {"total_rate_per_min": total, "effective_tidal_volume_ml": effective}
    rows = {row.name: row for row in limits_for(MAN_OF_70_KG, tried, CHEST, **forecast)}
    if rate > 35 or (rate < 6 and mode != "support"):
        assert rows["set_rate"].ok is False
    if mode == "volume" and not 280 <= volume <= 560:
        assert rows["tidal_volume"].ok is False
    for row in rows.values():
        assert row.probability is None or 0.0 <= row.probability <= 1.0
        assert row.ok is None or row.value is not None


def test_a_row_inside_by_its_median_alone_is_in_doubt():
    """Of 100 draws, 10 below the floor leave it kept; 11 do not, though the median is far inside."""
    for below, verdict in ((10, "inside"), (11, "in doubt"), (51, "past")):
        found = find("pao2_floor", pao2_mmhg=np.repeat([50.0, 70.0], [below, 100 - below]))
        assert found.verdict == verdict
    assert find("pao2_floor", pao2_mmhg=70.0).verdict == "inside"  # one number carries no doubt
    assert find("pao2_floor").verdict == "unknown"
