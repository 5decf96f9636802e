"""Every check on each side of its limit; scenarios and slips are in test_checks_warn.py."""

from dataclasses import replace
from datetime import timedelta
from pathlib import Path

import pytest

from engine.checks import OF_EACH_ENTRY, OF_EACH_GAS, OF_THE_STAY, Check, checks_for
from engine.physics.acid_base import ph_at_standard_base_excess
from engine.record import Case
from tests.engine.conftest import CHART_GAS as GAS
from tests.engine.conftest import CHART_SETTINGS as SETTINGS
from tests.engine.conftest import CHART_START as START
from tests.engine.conftest import Fields, chart, earlier_gas, entry, row, rows

REAL = Path(__file__).parents[2] / ".." / "shared" / "cases" / "real"


def base_excess(of: float) -> Fields:
    """A gas at PaCO2 44 with this standard base excess."""
    return {"ph": float(ph_at_standard_base_excess(44.0, of))}


PRESSURE = {"mode": "pressure", "inspiratory_pressure_cmh2o": 14}

# name: (inside, outside). The gas of the chart has a computed bicarbonate of 24.3 and a base excess of -1.1
# mmol/L, and a saturation of 95 % on the curve; predicted body weight is 73.2 kg.
EACH_SIDE: dict[str, tuple[Case, Case]] = {
    "Extracorporeal support": (
        chart(events=("extracorporeal_start", "extracorporeal_stop")),
        chart(events=("extracorporeal_start",)),
    ),
    "Barometric pressure": (
        chart(site={"barometric_mmhg": 530, "altitude_m": 3500}),
        chart(site={"barometric_mmhg": 760, "altitude_m": 3500}),
    ),
    "Height": (chart(patient={"height_cm": 140}), chart(patient={"height_cm": 139})),
    "Target likely": (chart(target={"ph_low": 7.15}), chart(target={"ph_low": 7.14})),
    "Target for the condition": (
        chart(target={"paco2_high_mmhg": 45}, patient={"conditions": ("raised_icp",)}),
        chart(target={"paco2_high_mmhg": 46}, patient={"conditions": ("raised_icp",)}),
    ),
    "pH and PaCO2 targets agree": (  # at -1.1 mmol/L a PaCO2 of 60 means pH 7.26
        chart(target={"ph_low": 7.25, "paco2_low_mmhg": 60}),
        chart(target={"ph_low": 7.27, "paco2_low_mmhg": 60}),
    ),
    "A gas since the lung was changed": (
        chart(entry(90, events=("prone",))),
        replace(chart(), entries=(*chart().entries, entry(150, events=("prone",)))),
    ),
    "Metabolic acidosis": (chart(gas=base_excess(-9.9)), chart(gas=base_excess(-10.1))),
    "Chronic hypercapnia": (  # pH at a PaCO2 of 40 is 7.44 and 7.46
        chart(gas={"ph": 7.37, "paco2_mmhg": 50}, patient={"conditions": ("chronic_hypercapnia",)}),
        chart(gas={"ph": 7.39, "paco2_mmhg": 50}, patient={"conditions": ("chronic_hypercapnia",)}),
    ),
    "Total rate against set rate": (
        chart(measured={"total_rate_per_min": 17}),
        chart(measured={"total_rate_per_min": 18}),
    ),
    "Total rate not below set rate": (
        chart(measured={"total_rate_per_min": 14}),
        chart(measured={"total_rate_per_min": 13}),
    ),
    "Tidal volume for this body": (
        chart(settings={"tidal_volume_ml": 731}),
        chart(settings={"tidal_volume_ml": 733}),
    ),
    "Exhaled against set volume": (
        chart(measured={"exhaled_tidal_volume_ml": 366}),
        chart(measured={"exhaled_tidal_volume_ml": 365}),
    ),
    "Minute volume against rate and volume": (  # 16 x 430 = 6.88
        chart(measured={"minute_volume_l_per_min": 8.2}),
        chart(measured={"minute_volume_l_per_min": 8.3}),
    ),
    "I:E the right way round": (
        chart(entry(30, settings={"ie_ratio": 0.5})),
        chart(entry(30, settings={"ie_ratio": 2})),
    ),
    "Rate and inspiratory time go together": (
        chart(settings={"inspiratory_time_s": 3.2}),
        chart(settings={"inspiratory_time_s": 3.3}),
    ),
    "Plateau above PEEP": (chart(measured={"plateau_cmh2o": 9}), chart(measured={"plateau_cmh2o": 8})),
    "Peak not below plateau": (
        chart(measured={"plateau_cmh2o": 22, "peak_cmh2o": 21}),
        chart(measured={"plateau_cmh2o": 22, "peak_cmh2o": 20}),
    ),
    "PEEP and plateau fit the volume": (  # 430 mL over 3 and over 2 cmH2O
        chart(measured={"plateau_cmh2o": 11}),
        chart(measured={"plateau_cmh2o": 10}),
    ),
    "Total PEEP not below set PEEP": (
        chart(measured={"total_peep_cmh2o": 7}),
        chart(measured={"total_peep_cmh2o": 6}),
    ),
    "Mean airway pressure in its place": (
        chart(measured={"mean_airway_cmh2o": 14, "peak_cmh2o": 26}),
        chart(measured={"mean_airway_cmh2o": 27, "peak_cmh2o": 26}),
    ),
    "Set pressure counted above PEEP": (
        chart(settings=PRESSURE, measured={"peak_cmh2o": 22}),
        chart(settings=PRESSURE, measured={"peak_cmh2o": 14}),
    ),
    "Plateau of a passive patient": (
        chart(measured={"plateau_cmh2o": 22, "total_rate_per_min": 17}),
        chart(measured={"plateau_cmh2o": 22, "total_rate_per_min": 18}),
    ),
    "FiO2 left standing": (
        chart(settings={"fio2": 1.0}, measured={"spo2": 0.97}),
        chart(settings={"fio2": 1.0}, measured={"spo2": 0.98}),
    ),
    "Gas can be used": (chart(), chart(gas={"specimen": "venous"})),
    "Sample time": (
        chart(gas={"drawn_at": START + timedelta(minutes=100)}),
        chart(
            entry(110, settings={"fio2": 0.5}), gas={"drawn_at": START + timedelta(minutes=100)}
        ),  # the change came after the sample
    ),
    "Minutes since a change": (
        chart(entry(100, settings={"rate_per_min": 20})),
        chart(entry(101, settings={"rate_per_min": 20})),
    ),
    "Arterial, not venous": (  # PaO2 45 is a saturation of 79 %
        chart(gas={"pao2_mmhg": 45}, measured={"spo2": 0.86}),
        chart(gas={"pao2_mmhg": 45}, measured={"spo2": 0.89}),
    ),
    "pH and PaCO2 in their places": (
        chart(gas={"ph": 7.0, "paco2_mmhg": 7.9}),
        chart(gas={"ph": 7.0, "paco2_mmhg": 7.3}),
    ),
    "Tensions in mmHg, not kPa": (
        chart(gas={"ph": 6.95, "paco2_mmhg": 12, "pao2_mmhg": 90}),
        chart(gas={"paco2_mmhg": 5.3, "pao2_mmhg": 13.0}),
    ),
    "Bicarbonate against pH and PaCO2": (
        chart(gas={"hco3_mmol_per_l": 26.7}),
        chart(gas={"hco3_mmol_per_l": 26.8}),
    ),
    "pH and PaCO2 go together": (  # 4.2 and 3.8 mmol/L
        chart(gas={"ph": 6.94, "paco2_mmhg": 20}),
        chart(gas={"ph": 6.89, "paco2_mmhg": 20}),
    ),
    "Base excess against the gas before": (
        chart(earlier_gas(), gas=base_excess(-11.1)),
        chart(earlier_gas(), gas=base_excess(-11.2)),
    ),
    "SaO2 against the curve": (chart(gas={"sao2": 0.91}), chart(gas={"sao2": 0.90})),
    "SpO2 against SaO2": (
        chart(gas={"sao2": 0.93}, measured={"spo2": 0.98}),
        chart(gas={"sao2": 0.93}, measured={"spo2": 1.0}),
    ),
    "Carboxyhaemoglobin": (chart(gas={"cohb": 0.09}), chart(gas={"cohb": 0.10})),
    "Methaemoglobin": (chart(gas={"methb": 0.02}), chart(gas={"methb": 0.03})),
    "Unit of haemoglobin": (chart(gas={"hb_g_per_dl": 20}), chart(gas={"hb_g_per_dl": 21})),
    "Haemoglobin against the gas before": (
        chart(earlier_gas(), gas={"hb_g_per_dl": 8.8}),
        chart(earlier_gas(), gas={"hb_g_per_dl": 8.7}),
    ),
    "PaO2 within reach of FiO2": (  # alveolar PO2 in air is 94 mmHg here, 104 with scatter
        chart(settings={"fio2": 0.21}, gas={"pao2_mmhg": 103}),
        chart(settings={"fio2": 0.21}, gas={"pao2_mmhg": 105}),
    ),
    "End-tidal CO2 not above arterial": (
        chart(measured={"etco2_mmhg": 50}),
        chart(measured={"etco2_mmhg": 51}),
    ),
}
# name: a chart in which the check cannot judge
UNKNOWN: dict[str, Case] = {
    "Barometric pressure": chart(site={}),
    "Predicted body weight": chart(patient={"sex": None}),
    "Pneumothorax": chart(patient={"conditions": ("pneumothorax",)}),
    "Minutes since a change": replace(
        chart(), entries=(entry(0, settings=SETTINGS), entry(120, settings={"rate_per_min": 20}, gas=GAS))
    ),
    "Arterial, not venous": chart(gas={"pao2_mmhg": 45}),
    "Plateau of a passive patient": chart(measured={"plateau_cmh2o": 22}),
    "Unit of haemoglobin": chart(gas={"hb_g_per_dl": 9}),
    "FiO2 of 1 meant": chart(entry(30, settings={"fio2": 1.0})),
    "SpO2 that stands alone": chart(entry(110, measured={"spo2": 0.97}), measured={"spo2": 0.80}),
}
SLIP = chart(
    *(entry(minutes, measured={"spo2": spo2}) for minutes, spo2 in ((60, 1.0), (75, 0.57), (90, 1.0))),
)
CORRECTED = chart(gas={"temperature_corrected": True, "temperature_c": 33})


@pytest.mark.parametrize("name", EACH_SIDE)
def test_each_side_of_the_limit(name: str):
    inside, outside = EACH_SIDE[name]
    assert row(inside, name).ok is True
    assert row(outside, name).ok is False


@pytest.mark.parametrize("name", UNKNOWN)
def test_says_so_where_it_cannot_judge(name: str):
    assert row(UNKNOWN[name], name).ok is None


def _all_rows() -> list[Check]:
    cases = [*(c for pair in EACH_SIDE.values() for c in pair), *UNKNOWN.values(), SLIP, CORRECTED]
    return [check for case in cases for check in checks_for(case)]


def test_every_check_of_the_registers_is_tried_here():
    assert len({check.name for check in _all_rows()}) == len({*OF_THE_STAY, *OF_EACH_ENTRY, *OF_EACH_GAS})


def test_every_row_speaks_names_its_source_and_orders_nothing():
    orders = (" must ", " should ", " increase ", " reduce ", " administer ", " turn ")
    for check in _all_rows():
        assert check.says[0].isupper() and check.says.endswith((".", "?")), check
        assert check.source, check
        assert not any(order in f" {check.says.lower()} " for order in orders), check


def test_rows_of_an_entry_name_its_time():
    of_stay = {row.name for check in OF_THE_STAY for row in [check(SLIP)] if row}
    for case in (SLIP, EACH_SIDE["Plateau of a passive patient"][1]):
        for check in checks_for(case):
            if check.name not in of_stay:
                assert "2031-03-04" in check.says and any(
                    t in check.says for t in ("07:40", "08:55", "09:40")
                )


def test_rows_come_in_the_order_of_entries():
    case = chart(entry(30, measured={"plateau_cmh2o": 20}), measured={"plateau_cmh2o": 24})
    names = [check.value for check in rows(case, "Plateau above PEEP")]
    assert names == [20, 24]


def test_an_empty_case_still_answers_for_the_stay():
    case = Case(label="Bed 7")
    assert {check.name for check in checks_for(case)} == {
        "Extracorporeal support",
        "Barometric pressure",
        "Predicted body weight",
    }
