"""Pressures, power and emptying after a change, and the chest as it is read from the chart."""

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
import pytest

from engine.limits import Mechanics, limits_for, mechanics_of
from engine.lung.breathing import last_settings
from engine.reading.case_file import read_case
from engine.record import Case, Entry, Measured, Patient, Settings
from tests.engine.conftest import CHEST, with_condition
from tests.engine.conftest import TRIED as SETTINGS
from tests.engine.conftest import find_limit as find

DEMOS = Path(__file__).parents[2] / "demo_patients"

MEDIAN_OF_DRAWS = 0.05  # cmH2O: the median of 2,000 draws with a spread of 1.7
POWER = 0.02  # J/min: the example rounds 0.0980665 to 0.098
TIME_S = 0.1  # of a median of 2,000 draws, and of ranges given to one decimal

# Pressures after a change


def test_pressures_of_a_larger_breath():
    """ME-01 of the reference table: compliance 30, so 510 mL at PEEP 10 make a plateau of 27."""
    tried = replace(SETTINGS, tidal_volume_ml=510)
    plateau, driving = find("plateau", tried=tried), find("driving_pressure", tried=tried)
    assert plateau.value == pytest.approx(27, abs=MEDIAN_OF_DRAWS)
    assert driving.value == pytest.approx(17, abs=MEDIAN_OF_DRAWS) and driving.ok is False
    assert "07:40 on 2031-03-04" in plateau.says


def test_spread_grows_with_the_step():
    """A plateau of 27 is safer unchanged than predicted from a smaller breath, or from another PEEP."""
    unchanged = find("plateau", chest=replace(CHEST, plateau_cmh2o=27)).probability
    larger = find("plateau", tried=replace(SETTINGS, tidal_volume_ml=510)).probability
    peep = find("plateau", tried=replace(SETTINGS, peep_cmh2o=13)).probability
    assert unchanged is not None and larger is not None and peep is not None
    assert unchanged > larger > 0.5 and unchanged > peep > 0.5


def test_peep_is_tried_with_a_plateau_only():
    tried = replace(SETTINGS, peep_cmh2o=14)
    plateau = find("plateau", tried=tried)
    assert plateau.value == pytest.approx(28, abs=MEDIAN_OF_DRAWS) and "this is wide" in plateau.says
    for name in ("driving_pressure", "mechanical_power"):
        found = find(name, tried=tried)
        assert found.value is None and found.ok is None
        assert "Not valid here: the plateau was read at PEEP 10, tried is 14 cmH2O" in found.says


def test_a_triggering_patient_has_no_driving_pressure_and_a_plateau_only_as_a_breach():
    for more in (
        {"chest": replace(CHEST, passive=False, why="the patient triggers")},
        {"total_rate_per_min": 24.0},
    ):
        assert find("plateau", **more).ok is None
        assert "may read too low" in find("plateau", **more).says
        found = find("driving_pressure", **more)
        assert found.value is None and "Not valid here" in found.says
    high = replace(CHEST, passive=False, why="the patient triggers", plateau_cmh2o=32)
    assert find("plateau", chest=high).ok is False


def test_support_has_no_plateau_and_no_lowest_rate():
    tried = replace(SETTINGS, mode="support", rate_per_min=0, tidal_volume_ml=None)
    assert find("plateau", tried=tried).value is None
    rate = find("set_rate", tried=tried)
    assert rate.ok is True and rate.limit == 35 and "Backup" in rate.says


def test_pressure_control_takes_the_set_pressure():
    tried = replace(SETTINGS, mode="pressure", inspiratory_pressure_cmh2o=14, tidal_volume_ml=None)
    known = {"tried": tried, "chest": Mechanics(), "total_rate_per_min": 18.0}
    assert find("plateau", **known).value == pytest.approx(24)
    assert find("driving_pressure", **known).value == pytest.approx(14)
    higher = known | {"tried": replace(tried, inspiratory_pressure_cmh2o=21)}
    assert find("plateau", **higher).ok is False
    assert find("driving_pressure", tried=tried, chest=Mechanics()).ok is None  # passive or not is not known


def test_intrinsic_peep_stays_on_top():
    chest = replace(CHEST, peep_cmh2o=13)
    assert find("driving_pressure", chest=chest).value == pytest.approx(11)
    found = find("plateau", chest=chest, tried=replace(SETTINGS, peep_cmh2o=5))
    assert found.value == pytest.approx(19, abs=MEDIAN_OF_DRAWS) and "Intrinsic PEEP" in found.says


def test_power_of_the_worked_example():
    """ME-10 (Gattinoni 2016): 22.05 J/min; the evidence against it stands beside it."""
    chest = replace(CHEST, tidal_volume_ml=500, plateau_cmh2o=25, flow_l_per_min=30)
    found = find(
        "mechanical_power", chest=chest, tried=replace(SETTINGS, tidal_volume_ml=500, rate_per_min=20)
    )
    assert found.value == pytest.approx(22.05, abs=POWER) and found.ok is False
    assert "Coppola 2020" in found.says and "association" in found.says


# Time to exhale


def test_expiratory_time_against_three_cautious_time_constants():
    """C 30 mL/cmH2O and R 14.3 cmH2O s/L are 0.43 s; times 2 to 3, times 3: about 3.2 s are asked for."""
    found = find("expiratory_time", tried=replace(SETTINGS, rate_per_min=10))
    assert (
        found.value == pytest.approx(5.0)
        and found.limit == pytest.approx(3.2, abs=TIME_S)
        and found.ok is True
    )
    fast = find("expiratory_time", tried=replace(SETTINGS, rate_per_min=30))
    assert fast.value == pytest.approx(1.0) and fast.ok is False and "Trapping is likely" in fast.says
    assert found.probability is not None and fast.probability is not None
    assert found.probability > 0.95 and fast.probability < 0.05


def leaving(left_s: float) -> dict[str, object]:
    """An inspiration of 1 s at the rate that leaves so many seconds to exhale."""
    return {"tried": replace(SETTINGS, rate_per_min=60 / (left_s + 1.0))}


PLAIN_S = 0.030 * 6 / 0.42  # of `CHEST`: 30 mL/cmH2O x 14.3 cmH2O s/L
MEDIAN = 0.02  # share: the median of 2,000 draws with a log SD of 0.22


def test_expiratory_time_either_side_of_the_cautious_figure():
    """Richard 2003: lungs empty slower than resistance x compliance. Short of that is said, no breach."""
    asked = find("expiratory_time").limit
    assert isinstance(asked, float)
    kept, short = (find("expiratory_time", **leaving(asked + by)) for by in (0.01, -0.01))
    assert kept.ok is True and kept.verdict == "in doubt" and not kept.short
    assert short.ok is None and short.verdict == "short" and "Short of the cautious figure" in short.says
    assert short.limit == kept.limit and short.probability is not None
    assert find("expiratory_time", **leaving(2 * asked)).verdict == "inside"


def test_expiratory_time_either_side_of_three_plain_time_constants():
    """Resistance x compliance alone, a lower bound, already leaves too little: that is a breach."""
    for share, verdict in ((1 + MEDIAN, "short"), (1 - MEDIAN, "past")):
        found = find("expiratory_time", **leaving(3 * PLAIN_S * share))
        assert found.verdict == verdict, share
        assert ("Trapping is likely" in found.says) is (verdict == "past")


@pytest.mark.parametrize(("kept_ml", "verdict"), [(29, "short"), (31, "past")])
def test_expiratory_time_either_side_of_30_ml_trapped_in_a_large_breath(kept_ml: float, verdict: str):
    """A breath V keeps V x / (1 - x), x = exp(-time / time constant): even 3.2 plain ones can trap 30 mL."""
    shape = np.exp(-3.2)
    volume_ml = kept_ml * (1 - shape) / shape
    chest = replace(CHEST, tidal_volume_ml=volume_ml, plateau_cmh2o=10 + volume_ml / 30)
    found = find(
        "expiratory_time",
        chest=replace(chest, peak_cmh2o=chest.plateau_cmh2o + 6),
        tried=replace(SETTINGS, tidal_volume_ml=volume_ml, rate_per_min=60 / (3.2 * PLAIN_S + 1.0)),
    )
    assert found.verdict == verdict


def test_the_total_rate_counts_for_emptying():
    found = find("expiratory_time", total_rate_per_min=np.full(500, 30.0))
    assert found.value == pytest.approx(1.0)
    assert find("expiratory_time", total_rate_per_min=np.full(500, 12.0)).value == pytest.approx(60 / 18 - 1)


def test_textbook_ranges_by_condition_where_nothing_was_measured():
    plain = find("expiratory_time", chest=Mechanics())
    obstructive = find("expiratory_time", chest=Mechanics(), **with_condition("obstructive"))
    assert (
        "as usual in ventilated adults" in plain.says and "as usual in obstructive adults" in obstructive.says
    )
    assert isinstance(plain.limit, float) and isinstance(obstructive.limit, float)
    assert plain.limit < obstructive.limit
    assert plain.limit == pytest.approx(
        3 * 2.5 * 0.05 * 10, rel=0.2
    )  # middle of the ranges, whose product is skewed


def test_a_lower_rate_traps_less_in_asthma():
    """450 mL, inspiration 1 s, 24 to 14 a minute: the row names the gas kept back, and it falls."""
    asthma = with_condition("obstructive")["patient"]
    assert isinstance(asthma, Patient)
    chest = replace(
        CHEST, tidal_volume_ml=450, plateau_cmh2o=17.5, peak_cmh2o=28.75, flow_l_per_min=27
    )  # 60 x 25: 1.5 s
    kept = []
    for rate in (24, 14):
        tried = replace(SETTINGS, tidal_volume_ml=450, rate_per_min=rate)
        says = find("expiratory_time", patient=asthma, chest=chest, tried=tried).says
        kept.append(float(says.split("about ")[1].split(" mL")[0]))
    assert kept[1] < 0.5 * kept[0]


# The chest as charted

START = datetime(2031, 3, 4, 7, 40, tzinfo=UTC)


def chart(*, hours: float = 0.0, settings: Settings = SETTINGS, **measured: float) -> Case:
    """An entry with readings, and a last one so many hours later."""
    first = Entry(time=START, settings=settings, measured=Measured(**measured))
    later = () if hours == 0.0 else (Entry(time=START + timedelta(hours=hours)),)
    return Case(label="Bed 7", entries=(first, *later))


def test_the_chest_is_read_with_the_settings_of_then():
    found = mechanics_of(chart(plateau_cmh2o=24, peak_cmh2o=30, total_rate_per_min=19))
    assert found == replace(CHEST, plateau_cmh2o=24, rate_per_min=18)
    assert found.compliance_ml_per_cmh2o == pytest.approx(30)
    assert found.resistance_cmh2o_s_per_l == pytest.approx(6 / 0.42)


@pytest.mark.parametrize(
    ("total", "mode", "passive"),
    [(19, "volume", True), (20, "volume", False), (19, "pressure", True), (18, "support", False)],
)
def test_passive_means_no_triggering_in_a_controlled_mode(total: float, mode: str, passive: bool):
    case = chart(settings=replace(SETTINGS, mode=mode), plateau_cmh2o=24, total_rate_per_min=total)
    assert mechanics_of(case).passive is passive
    assert bool(mechanics_of(case).why) is not passive


@pytest.mark.parametrize(("hours", "plateau"), [(24, 24), (24.1, None)])
def test_an_old_plateau_is_let_go(hours: float, plateau: float | None):
    assert mechanics_of(chart(hours=hours, plateau_cmh2o=24)).plateau_cmh2o == plateau


def test_total_peep_counts_until_set_peep_moves():
    case = chart(plateau_cmh2o=24, total_peep_cmh2o=13)
    assert mechanics_of(case).peep_cmh2o == 13
    moved = Entry(
        time=START + timedelta(hours=1), settings=Settings(peep_cmh2o=8), measured=Measured(plateau_cmh2o=22)
    )
    assert mechanics_of(Case(label="Bed 7", entries=(*case.entries, moved))).peep_cmh2o == 8


def test_no_entries_no_chest():
    assert mechanics_of(Case(label="Bed 7")) == Mechanics()


def test_a_plateau_read_at_a_slower_rate_is_not_kept_where_gas_would_be_trapped():
    """Hazard 10: trapped gas raises the plateau by an amount that a slower reading does not tell."""
    case = read_case(DEMOS / "severe_asthma.json")
    rows = {}
    for rate in (14.0, 24.0):
        settings = last_settings(case).then(Settings(rate_per_min=rate))
        found = limits_for(
            case.patient,
            settings,
            mechanics_of(case),
            ph=None,
            pao2_mmhg=None,
            paco2_mmhg=None,
            total_rate_per_min=rate,
            effective_tidal_volume_ml=settings.tidal_volume_ml,
            seed=1,
        )
        rows[rate] = next(row for row in found if row.name == "plateau")
    assert rows[14.0].ok is True
    assert rows[24.0].ok is None and rows[24.0].probability is None
    assert "trapped" in rows[24.0].says
