"""What the checks say to the patients a good answer must fit, and to slips of the chart."""

from datetime import timedelta
from pathlib import Path

import pytest

from engine.reading.case_file import read_case
from engine.record import Baseline
from tests.engine.conftest import CHART_START as START
from tests.engine.conftest import chart, earlier_gas, entry, row, rows

REAL = Path(__file__).parents[2] / ".." / "shared" / "cases" / "real"

PRESSURE = {"mode": "pressure", "inspiratory_pressure_cmh2o": 14}
SLIP = chart(
    *(entry(minutes, measured={"spo2": spo2}) for minutes, spo2 in ((60, 1.0), (75, 0.57), (90, 1.0))),
)


# The patients a good answer must fit (scenarios of the project; sizes computed, directions common practice).


def test_metabolic_acidosis_says_what_a_normal_paco2_would_mean():
    """pH 7.10 at PaCO2 18, base excess -24: 30 would mean about 7.00, 40 about 6.93."""
    found = row(chart(gas={"ph": 7.10, "paco2_mmhg": 18}), "Metabolic acidosis")
    assert found.ok is False and found.value == pytest.approx(-24.2, abs=0.05)  # printed to one decimal
    assert (
        "30 mmHg would mean pH about 7.00" in found.says and "40 mmHg would mean pH about 6.9" in found.says
    )
    assert row(chart(gas={"ph": 7.10, "paco2_mmhg": 18}), "Tensions in mmHg, not kPa").ok is True


def test_chronic_hypercapnia_says_what_a_normal_paco2_would_mean():
    """pH 7.35 at PaCO2 65: 50 means pH about 7.45, 40 about 7.52."""
    patient = {"conditions": ("chronic_hypercapnia",), "baseline": Baseline(paco2_mmhg=64)}
    found = row(chart(gas={"ph": 7.35, "paco2_mmhg": 65}, patient=patient), "Chronic hypercapnia")
    assert found.ok is False
    assert "50 mmHg would mean pH about 7.44" in found.says or "about 7.45" in found.says
    assert "40 mmHg would mean pH about 7.52" in found.says
    assert "at home it is about 64 mmHg" in found.says


def test_compensated_hypercapnia_that_nobody_charted_is_noticed_and_not_asserted():
    found = row(chart(gas={"ph": 7.39, "paco2_mmhg": 58}), "Chronic hypercapnia")
    assert found.ok is False and "not charted as chronic" in found.says
    assert not rows(chart(gas={"ph": 7.30, "paco2_mmhg": 50}), "Chronic hypercapnia")


def test_carboxyhaemoglobin_makes_spo2_worthless():
    """COHb 25 %, SpO2 99 %: oxyhaemoglobin about 75 %, and no word of a lower FiO2 as a gain."""
    gas = {"cohb": 0.25, "pao2_mmhg": 180, "sao2": 0.99}
    found = row(chart(gas=gas, measured={"spo2": 0.99}), "Carboxyhaemoglobin")
    assert found.ok is False and "SpO2 cannot be trusted (SpO2 99 % at 09:40)" in found.says
    assert "oxyhaemoglobin is about 74 %" in found.says  # 0.99 x 0.75
    assert "no reason for a lower FiO2" in found.says


def test_pure_oxygen_for_carbon_monoxide_is_no_slip():
    parts = {"settings": {"fio2": 1.0}, "measured": {"spo2": 0.99}}
    assert row(chart(**parts), "FiO2 left standing").ok is False
    assert row(chart(**parts, gas={"cohb": 0.25}), "FiO2 left standing").ok is True


def test_sea_level_is_assumed_only_aloud():
    assert "760 mmHg is assumed" in row(chart(site={}), "Barometric pressure").says
    found = row(chart(site={"altitude_m": 3500}), "Barometric pressure")
    assert found.ok is True and found.value == 493  # standard air; 493 to 505 in the scenario


def test_a_saturation_slip_between_two_good_ones_is_found():
    found = rows(SLIP, "SpO2 that stands alone")
    assert [(check.value, check.ok) for check in found] == [(0.57, False)]
    assert "08:55 on 2031-03-04" in found[0].says and "08:40" in found[0].says and "09:10" in found[0].says


@pytest.mark.parametrize(("spo2", "doubted"), [(0.88, False), (0.87, True), (1.0, False)])
def test_a_saturation_slip_has_two_sides(spo2: float, doubted: bool):
    readings = [entry(m, measured={"spo2": s}) for m, s in ((60, 0.97), (75, spo2), (90, 0.98))]
    assert bool(rows(chart(*readings), "SpO2 that stands alone")) == doubted


def test_the_slip_in_a_real_chart_is_found():
    if not REAL.is_dir():
        pytest.skip("no shared cases beside the repository")
    found = [
        check for path in REAL.glob("*.json") for check in rows(read_case(path), "SpO2 that stands alone")
    ]
    assert 0.57 in {check.value for check in found}


# Units and slips


def test_pressure_from_zero_is_asked_about():
    assert (
        "counted from zero"
        in row(chart(settings=PRESSURE, measured={"peak_cmh2o": 14}), "Set pressure counted above PEEP").says
    )


def test_swapped_ph_and_kpa_are_spelled_out():
    says = row(chart(gas={"ph": 6.9, "paco2_mmhg": 7.3}), "pH and PaCO2 in their places").says
    assert "pH 7.3 with PaCO2 6.9 kPa" in says and "25 mmol/L" in says


def test_kpa_is_offered_in_mmhg():
    says = row(chart(gas={"paco2_mmhg": 5.3, "pao2_mmhg": 13}), "Tensions in mmHg, not kPa").says
    assert "40 and 98 mmHg" in says


def test_one_low_tension_alone_can_be_kpa_too():
    assert row(chart(gas={"pao2_mmhg": 12}), "Tensions in mmHg, not kPa").ok is False


def test_haemoglobin_in_mmol_is_asked_once_and_never_converted():
    found = rows(chart(earlier_gas(hb_g_per_dl=9), gas={"hb_g_per_dl": 9}), "Unit of haemoglobin")
    assert [check.ok for check in found] == [None] and "14.5 g/dL" in found[0].says


def test_a_transfusion_explains_haemoglobin():
    case = chart(earlier_gas(), gas={"hb_g_per_dl": 18}, events=("transfusion",))
    assert row(case, "Haemoglobin against the gas before").ok is True


def test_a_corrected_gas_is_read_at_37():
    """Severinghaus 1979 eq. 3: 100 mmHg at 37 C is 78.8 at 33 C; pH rises 0.0147 per degree of cooling."""
    corrected = chart(gas={"pao2_mmhg": 78.8, "temperature_corrected": True, "temperature_c": 33})
    found = row(corrected, "Tensions at 37 C")
    assert found.ok is False and "PaO2 100 mmHg" in found.says and "pH 7.30" in found.says
    assert not rows(chart(), "Tensions at 37 C")


def test_a_sample_drawn_after_it_was_charted_is_doubted():
    case = chart(gas={"drawn_at": START + timedelta(minutes=130)})
    assert row(case, "Sample time").ok is False


def test_a_gas_under_extracorporeal_support_is_not_used():
    found = row(chart(entry(60, events=("extracorporeal_start",))), "Gas can be used")
    assert found.ok is False and "extracorporeal" in found.says


def test_a_gas_just_after_a_change_names_the_change_in_words():
    says = row(chart(entry(110, settings={"rate_per_min": 20, "fio2": 0.6})), "Minutes since a change").says
    assert "10 min after a change (rate, FiO2)" in says


def test_air_left_standing_beside_a_low_saturation():
    name, air = "FiO2 left standing", {"fio2": 0.21}
    assert row(chart(settings=air, measured={"spo2": 0.89}), name).ok is False
    assert row(chart(settings=air, measured={"spo2": 0.90}), name).ok is True
    just_turned = chart(entry(110, settings=air), measured={"spo2": 0.85})
    assert row(just_turned, name).ok is True


def test_full_oxygen_for_suction_needs_no_question():
    case = chart(entry(30, settings={"fio2": 1.0}, events=("suction",)))
    assert row(case, "FiO2 of 1 meant").ok is True


def test_a_drain_answers_the_pneumothorax():
    patient = {"conditions": ("pneumothorax",)}
    assert row(chart(entry(60, events=("drain",)), patient=patient), "Pneumothorax").ok is True


def test_support_mode_is_never_passive():
    case = chart(settings={"mode": "support"}, measured={"plateau_cmh2o": 20, "total_rate_per_min": 16})
    assert row(case, "Plateau of a passive patient").ok is False
