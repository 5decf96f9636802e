"""Textbook numbers against worked examples; the source stands beside each."""

from datetime import timedelta

import pytest

from engine.estimates import ESTIMATES, estimates_for
from engine.record import Entry
from tests.engine.conftest import CHART_START as START
from tests.engine.conftest import Fields, case_of
from tests.engine.conftest import estimated as value
from tests.engine.conftest import find_estimate as find

PRINTED_WHOLE = 0.5  # the example is printed without decimals
PRINTED_TENTH = 0.051  # printed to one decimal
PRINTED_HUNDREDTH = 0.0051  # printed to two decimals
TENTH_OF_A_PERCENT = 0.0005  # a fraction printed to a tenth of a per cent
GRID = 0.001  # of shunt: the grid prints PaO2 to 0.1 mmHg
ROUNDED_CONSTANT = 0.002  # the example works with 0.86 for 0.863

# Oxygenation


@pytest.mark.parametrize(
    ("fio2", "barometric", "paco2", "expected"),
    [  # Fenn, Rahn & Otis 1946 in full, worked values AGE-003, AGE-008, AGE-011 of the reference table
        (0.21, 760, 36, 106.62),
        (0.5, 760, 80, 266.50),
        (1.0, 752, 38, 667.00),
    ],
)
def test_alveolar_po2(fio2: float, barometric: float, paco2: float, expected: float):
    parts = {
        "settings": {"fio2": fio2},
        "site": {"barometric_mmhg": barometric},
        "gas": {"paco2_mmhg": paco2},
    }
    assert value("palvo2_mmhg", **parts) == pytest.approx(expected, abs=PRINTED_HUNDREDTH)
    assert value("aa_difference_mmhg", **parts) == pytest.approx(expected - 80, abs=PRINTED_HUNDREDTH)
    assert value("aa_ratio", **parts) == pytest.approx(80 / expected, abs=PRINTED_HUNDREDTH)


@pytest.mark.parametrize(
    ("paco2", "low", "high"),
    [(30, 58, 60), (40, 46, 48), (60, 22, 24)],  # breathing air at 3,500 m, barometric 493 to 505
)
def test_alveolar_po2_at_altitude_takes_the_station_and_not_sea_level(paco2: float, low: float, high: float):
    for site in ({"barometric_mmhg": 497}, {"altitude_m": 3500}):
        parts = {"settings": {"fio2": 0.21}, "site": site, "gas": {"paco2_mmhg": paco2, "pao2_mmhg": 21}}
        found = value("palvo2_mmhg", **parts)
        assert low - PRINTED_WHOLE <= found <= high + PRINTED_WHOLE
    assert "assumed, as at sea level" in find("palvo2_mmhg", site={"altitude_m": None}).assumes


@pytest.mark.parametrize(
    ("fio2", "pao2", "shunt"),
    [  # iso-shunt grid: Hb 14, a-v difference 5, PaCO2 40, PB 760, R 0.8 (computed; Berggren 1942)
        (0.21, 63.3, 0.20),
        (0.4, 80.4, 0.20),
        (0.4, 123.4, 0.10),
        (0.6, 54.0, 0.40),
        (1.0, 165.7, 0.25),
        (1.0, 588.3, 0.05),
    ],
)
def test_shunt_on_the_grid(fio2: float, pao2: float, shunt: float):
    found = find("shunt", settings={"fio2": fio2}, gas={"pao2_mmhg": pao2})
    assert found.value == pytest.approx(shunt, abs=GRID)  # PaO2 is printed to 0.1 mmHg
    assert "5 mL/dL assumed" in found.assumes


def test_shunt_of_a_healthy_adult_on_pure_oxygen():
    """Toffaletti & Zavorsky 2026: 2.8 to 5.2 % by four methods; 4.7 by the one that assumes 5 mL/dL."""
    gas = {"pao2_mmhg": 587, "paco2_mmhg": 38, "sao2": 0.993, "hb_g_per_dl": 15.2}
    found = value("shunt", settings={"fio2": 1.0}, site={"barometric_mmhg": 752}, gas=gas)
    assert found == pytest.approx(0.047, abs=TENTH_OF_A_PERCENT)  # printed to a tenth of a per cent


def test_shunt_with_a_measured_venous_saturation_says_so():
    assumed, measured = find("shunt"), find("shunt", measured={"svo2": 0.65})
    assert "from SvO2 65 % measured" in measured.assumes
    assert "from SvO2" not in assumed.assumes
    assert value("shunt", measured={"svo2": 0.55}) < value("shunt", measured={"svo2": 0.75})


def test_shunt_from_uptake_and_output():
    found = find(
        "shunt", gas={"pao2_mmhg": 80.4}, measured={"vo2_ml_per_min": 250, "cardiac_output_l_per_min": 5}
    )
    assert found.value == pytest.approx(0.20, abs=GRID)  # 250 / 50 is 5 mL/dL: the grid again
    assert "VO2 and cardiac output measured" in found.assumes


def test_carboxyhaemoglobin_carries_no_oxygen():
    assert "Ca 13" in find("shunt", gas={"cohb": 0.25}).working  # 17.9 x 0.75


def test_no_shunt_where_arterial_exceeds_alveolar():
    found = find("shunt", gas={"pao2_mmhg": 300})
    assert found.value is None and "not valid here" in found.working


def test_berlin_and_oximeter_ratios():
    """P/F: ARDS Definition Task Force 2012. S/F: Rice 2007, for SpO2 up to 97 %."""
    assert value("pf_ratio_mmhg") == pytest.approx(200)
    assert value("sf_ratio", measured={"spo2": 0.97}) == pytest.approx(242.5)
    beyond = find("sf_ratio", measured={"spo2": 0.98})
    assert beyond.value is None and "above 97 %" in beyond.working
    assert find("sf_ratio").value is None
    high = find("pf_ratio_mmhg", site={"altitude_m": 3500}).working
    assert "above 1,000 m" in high and "above 1,000 m" not in find("pf_ratio_mmhg").working


def test_oxygenation_index():
    """TG-41 of the reference table: FiO2 0.6, mean pressure 18, PaO2 72 make 15.0."""
    parts = {"settings": {"fio2": 0.6}, "measured": {"mean_airway_cmh2o": 18}, "gas": {"pao2_mmhg": 72}}
    assert value("oxygenation_index", **parts) == pytest.approx(15.0)
    assert find("oxygenation_index").working == "not charted: mean airway pressure"


def test_a_measured_quotient_replaces_the_assumed_one():
    measured = {"vco2_ml_per_min": 250, "vo2_ml_per_min": 250}
    assert value("palvo2_mmhg", measured=measured) == pytest.approx(0.4 * 713 - 40)
    assert "1.00 measured" in find("palvo2_mmhg", measured=measured).assumes


# Ventilation


def test_ventilatory_ratio():
    """VR-03 (Sinha 2009): VT 420, rate 24, PaCO2 50, PBW 70 make 1.92."""
    parts = {
        "settings": {"tidal_volume_ml": 420, "rate_per_min": 24},
        "gas": {"paco2_mmhg": 50},
        "patient": {"sex": "male", "height_cm": (60 + 20 / 2.3) * 2.54},  # PBW 70
    }
    assert value("predicted_body_weight_kg", **parts) == pytest.approx(70)
    assert value("ventilatory_ratio", **parts) == pytest.approx(1.92, abs=PRINTED_HUNDREDTH)
    assert value("tidal_volume_ml_per_kg", **parts) == pytest.approx(6.0)


@pytest.mark.parametrize(
    ("sex", "inches", "weight"),
    [
        ("female", 55, 34.0),
        ("male", 60, 50.0),
        ("female", 66, 59.3),
        ("male", 78, 91.4),
    ],  # ARDS Network table
)
def test_predicted_body_weight(sex: str, inches: float, weight: float):
    found = value("predicted_body_weight_kg", patient={"sex": sex, "height_cm": inches * 2.54})
    assert found == pytest.approx(weight, abs=PRINTED_TENTH)


def test_nothing_per_kg_without_height():
    for name in ("predicted_body_weight_kg", "tidal_volume_ml_per_kg", "ventilatory_ratio"):
        found = find(name, patient={"sex": "male"})
        assert found.value is None and "height" in found.working


def test_dead_space_from_a_measured_output():
    """VA-27 (Siddiki 2010): VCO2 200, VE 10, PaCO2 45 make 0.618 with the constant rounded to 0.86."""
    found = find("dead_space", measured={"vco2_ml_per_min": 200}, gas={"paco2_mmhg": 45})
    assert found.value == pytest.approx(0.618, abs=ROUNDED_CONSTANT)
    assert "measured" in found.assumes


def test_dead_space_from_an_assumed_output_says_so():
    found = find("dead_space")
    assert found.value == pytest.approx(1 - 0.863 * 220 / (10 * 40), abs=PRINTED_HUNDREDTH)
    assert "220 mL/min assumed (SD 50)" in found.assumes
    impossible = find("dead_space", settings={"rate_per_min": 6})
    assert impossible.value is None and "not valid here" in impossible.working


@pytest.mark.parametrize(
    ("settings", "measured", "litres"),
    [
        ({}, {}, 10.0),
        ({}, {"total_rate_per_min": 30}, 15.0),
        ({}, {"minute_volume_l_per_min": 9.1}, 9.1),
        ({"mode": "support"}, {"exhaled_tidal_volume_ml": 400, "total_rate_per_min": 25}, 10.0),
        ({"mode": "volume"}, {"exhaled_tidal_volume_ml": 400}, 10.0),  # the set volume rules
    ],
)
def test_minute_ventilation_takes_what_rules(settings: Fields, measured: Fields, litres: float):
    found = value("minute_ventilation_l_per_min", settings=settings, measured=measured)
    assert found == pytest.approx(litres)


# Acid and base


@pytest.mark.parametrize(
    ("ph", "paco2", "hco3", "excess"),
    [(7.40, 40, 24.22, -0.58), (7.25, 60, 25.72, -1.51), (7.10, 30, 9.10, -20.56), (7.30, 80, 38.48, 12.06)],
)  # CLSI C46, rows AB-008, AB-009, AB-010, AB-013 (computed)
def test_bicarbonate_and_base_excess(ph: float, paco2: float, hco3: float, excess: float):
    gas = {"ph": ph, "paco2_mmhg": paco2}
    assert value("hco3_mmol_per_l", gas=gas) == pytest.approx(hco3, abs=PRINTED_HUNDREDTH)
    assert value("standard_base_excess_mmol_per_l", gas=gas) == pytest.approx(excess, abs=PRINTED_HUNDREDTH)


# All rows


def test_every_row_shows_its_numbers_its_source_and_what_it_assumes():
    measured = {
        "plateau_cmh2o": 25,
        "peak_cmh2o": 30,
        "total_rate_per_min": 20,
        "mean_airway_cmh2o": 15,
        "spo2": 0.95,
    }
    found = estimates_for(case_of(measured=measured), 0)
    assert len(found) == len(ESTIMATES) == len({e.name for e in found})
    for estimate in found:
        assert estimate.value is not None and "=" in estimate.equation + estimate.working, estimate
        assert any(digit.isdigit() for digit in estimate.working), estimate
        assert estimate.source and estimate.assumes, estimate


@pytest.mark.parametrize(
    ("gas", "reason"), [({"specimen": "venous"}, "venous"), ({"excluded": "clotted"}, "excluded (clotted)")]
)
def test_no_shunt_from_a_gas_that_is_not_arterial(gas: Fields, reason: str):
    found = {e.name: e for e in estimates_for(case_of(gas=gas), 0)}
    assert found["shunt"].value is None and reason in found["shunt"].working
    assert found["aa_difference_mmhg"].value is None
    assert found["standard_base_excess_mmol_per_l"].value is not None


def test_no_shunt_under_extracorporeal_support():
    found = find("shunt", patient={"conditions": ("extracorporeal",)})
    assert found.value is None and "extracorporeal support" in found.working


def test_a_corrected_gas_is_worked_at_37():
    """Severinghaus 1979 eq. 3: 78.8 mmHg at 33 C is 100 at 37."""
    gas = {"pao2_mmhg": 78.8, "temperature_corrected": True, "temperature_c": 33}
    assert value("pf_ratio_mmhg", gas=gas) == pytest.approx(100 / 0.4, abs=PRINTED_WHOLE)


def test_an_entry_without_a_gas_has_no_estimates():
    case = case_of(then=Entry(time=START + timedelta(hours=1)))
    with pytest.raises(LookupError):
        estimates_for(case, 1)
    with pytest.raises(LookupError):
        estimates_for(case, 2)
