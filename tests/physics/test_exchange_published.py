"""The lung of many units at its homogeneous limits and against published and computed tables."""

import numpy as np
import pytest

from engine.physics.acid_base import (
    ph_at_whole_blood_base_excess,
    standard_base_excess_mmol_per_l,
    whole_blood_base_excess_mmol_per_l,
)
from engine.physics.air import palvo2_mmhg
from engine.physics.carbon_dioxide import paco2_from_ventilation_mmhg
from engine.physics.exchange import UNITS, steady_state
from engine.physics.oxygen import o2_content_ml_per_dl, shunt_fraction, so2_in_blood

EXACT = 1e-6  # relative, the solver's own tolerance
SAME_SHUNT = 1e-5  # of cardiac output: contents of 20 mL/dL differenced
PAO2_MMHG, PACO2_MMHG = 0.5, 0.2  # stated with the rows in air
OXYGEN_MMHG = 1.0  # stated with the rows on oxygen
FEWER_UNITS = 0.02  # of PaO2, asked of the lung with its usual units; here worst at log SD 2
GAP_MMHG = 0.05  # stated with the rows of shunt alone
GAP_SHARE = 0.0006  # printed with one decimal of a per cent
WHOLE_ROWS_TO_SD = 1.5  # beyond it those rows cut ventilation off, see test_exchange
ISO_NO_SHUNT_MMHG = 0.2  # stated with the grid for the same assumptions
ISO_SHARE = (
    0.01  # of PaO2: the grid puts arterial PCO2 into alveolar gas, up to 5.5 mmHg too much behind a shunt
)
CARDUS_MMHG = 2.0  # stated with the measured 6 mmHg
MILLER_MMHG = 2.0  # haemoglobin not stated
IDEAL_MMHG = 1.0  # of 673: what low V/Q leaves on pure oxygen
HB, OUTPUT, VO2, VCO2 = 15.0, 6.0, 300.0, 240.0  # of the computed rows
SETTLING = 80  # passes of ventilation towards a wanted PaCO2, and of base excess


def lung(**given):
    """A homogeneous lung in air, with what is given in its place."""
    usual = {
        "shunt": 0.0,
        "vq_log_sd": 0.0,
        "alveolar_dead_space": 0.0,
        "alveolar_ventilation_l_per_min": 5.0,
        "vco2_ml_per_min": VCO2,
        "vo2_ml_per_min": VO2,
        "cardiac_output_l_per_min": OUTPUT,
        "hb_g_per_dl": HB,
        "standard_base_excess_mmol_per_l": 0.0,
        "fio2": 0.21,
    }
    return steady_state(**(usual | given))


def sought(*, paco2_mmhg=None, blood_excess=None, alveolar_ventilation_l_per_min=5.0, **given):
    """The lung with the ventilation that gives this PaCO2, and the standard base excess that gives this base
    excess of arterial blood, where one is asked for.
    """
    ventilation, excess = alveolar_ventilation_l_per_min, given.pop("standard_base_excess_mmol_per_l", 0.0)
    for _ in range(SETTLING):
        given["standard_base_excess_mmol_per_l"] = excess
        gas = lung(alveolar_ventilation_l_per_min=ventilation, **given)
        if paco2_mmhg is not None:
            ventilation = ventilation * gas.paco2_mmhg / paco2_mmhg
        if blood_excess is not None:
            ph = ph_at_whole_blood_base_excess(gas.paco2_mmhg, blood_excess, HB, gas.sao2)
            excess = standard_base_excess_mmol_per_l(ph, gas.paco2_mmhg)
    return gas


def mixed_alveolar_po2_mmhg(gas, fio2, quotient):
    """Of all ventilated units together: exact by mass balance, whatever their spread."""
    return palvo2_mmhg(fio2, 760.0, gas.mixed_alveolar_pco2_mmhg, quotient)


# Homogeneous limits: the textbook equations.


@pytest.mark.parametrize("ventilation", [2.0, 4.3, 9.0])
@pytest.mark.parametrize("dead_space", [0.0, 0.5])
def test_alveolar_ventilation_equation(ventilation, dead_space):
    gas = lung(alveolar_ventilation_l_per_min=ventilation, alveolar_dead_space=dead_space)
    wanted = paco2_from_ventilation_mmhg(VCO2, ventilation * (1.0 - dead_space))
    np.testing.assert_allclose(gas.paco2_mmhg, wanted, rtol=EXACT)
    np.testing.assert_allclose(gas.mixed_alveolar_pco2_mmhg, wanted * (1.0 - dead_space), rtol=EXACT)


@pytest.mark.parametrize("quotient", [0.7, 0.8, 1.0])
def test_full_alveolar_gas_equation(quotient):
    """Arterial blood of a homogeneous lung has the alveolar tension, F-term and all, at every FiO2
    (fenn1946).
    """
    fio2 = np.array([0.21, 0.4, 0.7, 1.0])
    gas = lung(vo2_ml_per_min=VCO2 / quotient, fio2=fio2)
    np.testing.assert_allclose(gas.pao2_mmhg, palvo2_mmhg(fio2, 760.0, gas.paco2_mmhg, quotient), rtol=EXACT)


def end_capillary_o2(gas, fio2, quotient, hb):
    """Content of blood that left homogeneous alveoli, buffered as whole blood."""
    palvco2, palvo2 = gas.mixed_alveolar_pco2_mmhg, mixed_alveolar_po2_mmhg(gas, fio2, quotient)
    excess = whole_blood_base_excess_mmol_per_l(gas.ph, gas.paco2_mmhg, hb, gas.sao2)
    so2 = np.ones_like(palvo2)
    for _ in range(20):  # saturation and pH of each other
        ph = ph_at_whole_blood_base_excess(palvco2, excess, hb, so2)
        so2 = so2_in_blood(palvo2, ph, palvco2)
    return o2_content_ml_per_dl(palvo2, so2, hb)


def test_shunt_equation_finds_the_shunt():
    """berggren1942 on the contents of a homogeneous lung behind a shunt."""
    shunt, fio2 = np.meshgrid([0.02, 0.1, 0.2, 0.35, 0.5], [0.3, 0.6, 1.0])
    gas = lung(shunt=shunt, fio2=fio2)
    assert not gas.held.any()
    arterial = o2_content_ml_per_dl(gas.pao2_mmhg, gas.sao2, HB)
    venous = arterial - VO2 / OUTPUT / 10.0
    found = shunt_fraction(end_capillary_o2(gas, fio2, VCO2 / VO2, HB), arterial, venous)
    np.testing.assert_allclose(found, shunt, rtol=0, atol=SAME_SHUNT)


def test_isoshunt_grid(table):
    """Hb 14, arterio-venous difference 5 mL/dL, PaCO2 40, pH 7.40, R 0.8: the grid's assumptions but one. Its
    alveolar gas has the arterial PCO2; here a shunt keeps alveolar PCO2 below it, so PaO2 comes out higher by
    under 1 %.
    """
    rows = table("isoshunt_berggren1942")
    gas = sought(
        paco2_mmhg=40.0,
        shunt=rows["shunt"],
        fio2=rows["fio2"],
        hb_g_per_dl=14.0,
        vco2_ml_per_min=200.0,
        vo2_ml_per_min=250.0,
        cardiac_output_l_per_min=5.0,
        standard_base_excess_mmol_per_l=standard_base_excess_mmol_per_l(7.40, 40.0),
    )
    same = rows["shunt"] == 0.0
    np.testing.assert_allclose(gas.pao2_mmhg[same], rows["pao2_mmhg"][same], rtol=0, atol=ISO_NO_SHUNT_MMHG)
    np.testing.assert_allclose(gas.pao2_mmhg, rows["pao2_mmhg"], rtol=ISO_SHARE)
    assert np.all(gas.pao2_mmhg[~same] > rows["pao2_mmhg"][~same])


def test_more_flow_through_the_same_shunt():
    """10 % shunt, VO2 250: PaO2 78 to 85 as output goes from 5 to 8 L/min (R. D. Miller, Anesthesia, 6th ed.,
    legend of Fig. 36-4; Hb not stated, here 14 and 15).
    """
    hb, output = np.meshgrid([14.0, 15.0], [5.0, 8.0])
    gas = sought(
        paco2_mmhg=40.0,
        shunt=0.10,
        hb_g_per_dl=hb,
        vo2_ml_per_min=250.0,
        vco2_ml_per_min=200.0,
        cardiac_output_l_per_min=output,
    )
    np.testing.assert_allclose(gas.pao2_mmhg, [[78.0, 78.0], [85.0, 85.0]], rtol=0, atol=MILLER_MMHG)


@pytest.mark.parametrize("shunt", [0.1, 0.2, 0.25])
def test_below_thirty_per_cent_of_shunt_p_over_f_is_lowest_in_the_middle(shunt):
    """M. S. Gowda, R. A. Klocke, Crit. Care Med. 25, 41-45, 1997, abstract: higher at both ends of FiO2."""
    fio2 = np.linspace(0.21, 1.0, 80)
    p_over_f = lung(shunt=shunt, fio2=fio2).pao2_mmhg / fio2
    lowest = p_over_f.argmin()
    assert 0 < lowest < len(fio2) - 1
    assert np.all(np.diff(p_over_f[: lowest + 1]) < 0.0) and np.all(np.diff(p_over_f[lowest:]) > 0.0)


@pytest.mark.parametrize("shunt", [0.35, 0.4, 0.5])
def test_above_thirty_per_cent_of_shunt_p_over_f_falls_then_nearly_flattens(shunt):
    """The same abstract: nearly flat above FiO2 0.5. Here: it loses less from there to 1.0 than from 0.21 to
    0.5.
    """
    p_over_f = lung(shunt=shunt, fio2=[0.21, 0.5, 1.0]).pao2_mmhg / np.array([0.21, 0.5, 1.0])
    first, second = -np.diff(p_over_f)
    assert first > 2.0 * second > 0.0


# Spread of V/Q.


def test_lognormal_rows_in_air(table):
    """VQ-006 to VQ-027 with their A-a and a-A differences, as wide as they are the same model."""
    rows = table("vq_lognormal_air")
    rows = {name: values[rows["vq_log_sd"] <= WHOLE_ROWS_TO_SD] for name, values in rows.items()}
    assert len(rows["row"]) == 20
    gas = sought(
        blood_excess=0.0,
        vq_log_sd=rows["vq_log_sd"],
        alveolar_ventilation_l_per_min=rows["alveolar_ventilation_l_per_min"],
    )
    gap = gas.paco2_mmhg - gas.mixed_alveolar_pco2_mmhg
    behind = mixed_alveolar_po2_mmhg(gas, 0.21, VCO2 / VO2) - gas.pao2_mmhg
    assert not gas.held.any()
    np.testing.assert_allclose(gas.pao2_mmhg, rows["pao2_mmhg"], rtol=0, atol=PAO2_MMHG)
    np.testing.assert_allclose(gas.paco2_mmhg, rows["paco2_mmhg"], rtol=0, atol=PACO2_MMHG)
    np.testing.assert_allclose(behind, rows["alveolar_arterial_po2_mmhg"], rtol=0, atol=PAO2_MMHG)
    whole = rows["vq_log_sd"] < WHOLE_ROWS_TO_SD  # at 1.5 itself the cut tail makes 0.2 mmHg of the gap
    wanted = rows["arterial_alveolar_pco2_mmhg"]
    np.testing.assert_allclose(gap[whole], wanted[whole], rtol=0, atol=PACO2_MMHG)


def test_lognormal_rows_on_oxygen(table):
    """VQ-030 to VQ-039: PaO2 against FiO2 under spread, shunt and both, with the 41 units of the rows."""
    rows = table("vq_lognormal_oxygen")
    given = {"vq_log_sd": rows["vq_log_sd"], "shunt": rows["shunt"], "fio2": rows["fio2"]}
    many, usual = (sought(paco2_mmhg=40.0, blood_excess=0.0, **given, units=n) for n in (41, UNITS))
    np.testing.assert_allclose(many.pao2_mmhg, rows["pao2_mmhg"], rtol=0, atol=OXYGEN_MMHG)
    np.testing.assert_allclose(usual.pao2_mmhg, rows["pao2_mmhg"], rtol=FEWER_UNITS)


def test_shunt_alone_looks_like_dead_space(table):
    """SHT-012, at PaCO2 40 mmHg."""
    rows = table("vq_shunt_gap")
    gas = sought(paco2_mmhg=40.0, blood_excess=0.0, shunt=rows["shunt"])
    gap = gas.paco2_mmhg - gas.mixed_alveolar_pco2_mmhg
    np.testing.assert_allclose(gap, rows["arterial_alveolar_pco2_mmhg"], rtol=0, atol=GAP_MMHG)
    np.testing.assert_allclose(gap / gas.paco2_mmhg, rows["share_of_paco2"], rtol=0, atol=GAP_SHARE)


@pytest.mark.parametrize("wanted", [{"paco2_mmhg": 40.0}, {}], ids=["PaCO2 40", "ventilation kept"])
def test_spread_of_the_old_costs_oxygen(wanted):
    """P. Cardus et al., Am. J. Respir. Crit. Care Med. 156, 648-653, 1997, abstract: log SD of flow 0.36 at
    20 years, 0.47 at 70, and PaO2 6 mmHg lower.
    """
    young, old = sought(vq_log_sd=[0.36, 0.47], blood_excess=0.0, **wanted).pao2_mmhg
    assert young - old == pytest.approx(6.0, abs=CARDUS_MMHG)


@pytest.mark.parametrize("vq_log_sd", [0.5, 1.0, 1.5])
def test_pure_oxygen_leaves_no_difference_to_spread_alone(vq_log_sd):
    """Without nitrogen a unit of any ventilation holds oxygen and CO2 only: blood leaves it full."""
    in_air, on_oxygen = sought(paco2_mmhg=40.0, vq_log_sd=vq_log_sd, fio2=[0.21, 1.0]).pao2_mmhg
    assert 0.0 <= palvo2_mmhg(1.0, 760.0, 40.0) - on_oxygen <= IDEAL_MMHG
    assert palvo2_mmhg(0.21, 760.0, 40.0) - in_air > 10.0 * IDEAL_MMHG


def test_two_lungs_with_one_gas_in_air_part_on_oxygen():
    """20 % of shunt and a log SD of 1.0 have the same PaO2 in air and differ by 100 mmHg at FiO2 0.4 (VQ-031,
    VQ-035): why one gas cannot tell them apart."""
    in_air, at_40 = (
        sought(paco2_mmhg=40.0, blood_excess=0.0, shunt=[0.2, 0.0], vq_log_sd=[0.0, 1.0], fio2=fio2).pao2_mmhg
        for fio2 in (0.21, 0.4)
    )
    assert in_air[0] == pytest.approx(in_air[1], abs=OXYGEN_MMHG)
    assert at_40[1] - at_40[0] == pytest.approx(184.5 - 82.2, abs=2 * OXYGEN_MMHG)
