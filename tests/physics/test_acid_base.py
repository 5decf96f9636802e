"""Bicarbonate, base excess and titration against worked values, bedside rules and published patients."""

import numpy as np
import pytest

from engine.physics.acid_base import (
    hco3_mmol_per_l,
    ph_at_standard_base_excess,
    ph_at_whole_blood_base_excess,
    ph_from_hco3,
    standard_base_excess_mmol_per_l,
    whole_blood_base_excess_mmol_per_l,
)

RULE_UP, RULE_DOWN = 0.3, 0.5  # mmol/L per 10 mmHg, spread of the published slopes
STEP_DIGITS = 0.0006  # three decimals
HYDROGEN_SLOPE = 0.08  # nmol/L per mmHg, spread of the recalled slopes
PRINTED_PH = 0.01  # two decimals; textbooks' own constants differ by 0.005
TWO_DECIMALS = 0.006
PH_DIGITS = 0.0011  # three decimals
HYDROGEN_DIGITS = 0.11  # nmol/L, one decimal
EXACT = 1e-9
NORMAL_SBE = float(standard_base_excess_mmol_per_l(7.40, 40.0))


def test_c46_worked_values(table):
    rows = table("acid_base_c46")
    given = (rows["ph"], rows["pco2_mmhg"])
    np.testing.assert_allclose(hco3_mmol_per_l(*given), rows["hco3_mmol_per_l"], rtol=0, atol=TWO_DECIMALS)
    ours = standard_base_excess_mmol_per_l(*given)
    np.testing.assert_allclose(ours, rows["standard_base_excess_mmol_per_l"], rtol=0, atol=TWO_DECIMALS)


def test_lang2002_worked_values(table):
    rows = table("base_excess_lang2002")
    ours = whole_blood_base_excess_mmol_per_l(rows["ph"], rows["pco2_mmhg"], rows["hb_g_per_dl"], rows["so2"])
    np.testing.assert_allclose(ours, rows["base_excess_mmol_per_l"], rtol=0, atol=TWO_DECIMALS)


def test_acute_titration_table(table):
    rows = table("titration_c46")
    ph = ph_at_standard_base_excess(rows["paco2_mmhg"], NORMAL_SBE)
    np.testing.assert_allclose(ph, rows["ph"], rtol=0, atol=PH_DIGITS)
    hco3 = hco3_mmol_per_l(ph, rows["paco2_mmhg"])
    np.testing.assert_allclose(hco3, rows["hco3_mmol_per_l"], rtol=0, atol=TWO_DECIMALS)
    np.testing.assert_allclose(10.0 ** (9.0 - ph), rows["hydrogen_nmol_per_l"], rtol=0, atol=HYDROGEN_DIGITS)


def bicarbonate_per_ten_mmhg(paco2):
    start, end = (
        hco3_mmol_per_l(7.40, 40.0),
        hco3_mmol_per_l(ph_at_standard_base_excess(paco2, NORMAL_SBE), paco2),
    )
    return float((end - start) / abs(paco2 - 40.0) * 10.0)


def test_acute_rules_brackett1965_arbus1969():
    """+1 mmol/L per 10 mmHg up, -2 per 10 down (N. Engl. J. Med. 272, 6 and 280, 117)."""
    assert bicarbonate_per_ten_mmhg(80.0) == pytest.approx(1.0, abs=RULE_UP)
    assert bicarbonate_per_ten_mmhg(20.0) == pytest.approx(-2.0, abs=RULE_DOWN)


def test_whole_blood_buffering_would_break_the_rule_downwards():
    """Why a patient's pH is forecast with standard base excess: blood alone gives -3 per 10 mmHg down."""
    excess = whole_blood_base_excess_mmol_per_l(7.40, 40.0, 15.0, 1.0)
    ph = ph_at_whole_blood_base_excess(20.0, excess, 15.0, 1.0)
    per_ten = (hco3_mmol_per_l(ph, 20.0) - hco3_mmol_per_l(7.40, 40.0)) / 2.0
    assert float(per_ten) < -2.5


def test_ph_steps_per_ten_mmhg():
    """Evaluated elsewhere: -0.076 from 40 to 50, -0.059 per 10 to 80, +0.096 to 30, +0.114 per 10 to 20."""
    ph = ph_at_standard_base_excess([50.0, 80.0, 30.0, 20.0], NORMAL_SBE)
    per_ten = (ph - 7.40) / np.array([1.0, 4.0, 1.0, 2.0])
    np.testing.assert_allclose(per_ten, [-0.076, -0.059, 0.096, 0.114], rtol=0, atol=STEP_DIGITS)


def test_hydrogen_ion_rises_as_in_man():
    """0.75 to 0.77 nmol/L per mmHg in acute hypercapnia (Brackett 1965, from memory), give or take 0.08."""
    paco2 = np.array([40.0, 90.0])
    hydrogen = 10.0 ** (9.0 - ph_at_standard_base_excess(paco2, NORMAL_SBE))
    assert np.diff(hydrogen)[0] / 50.0 == pytest.approx(0.76, abs=HYDROGEN_SLOPE)


def test_textbook_extremes():
    """No buffering, PCO2 70 and bicarbonate 24: pH 7.16; compensated to 36: 7.33. The textbook's own pair
    (0.03 and 6.1) lies 0.005 above ours, and it prints two decimals."""
    assert float(ph_from_hco3(24.0, 70.0)) == pytest.approx(7.16, abs=PRINTED_PH)
    assert float(ph_from_hco3(36.0, 70.0)) == pytest.approx(7.33, abs=PRINTED_PH)


def test_chronic_hypercapnia_gonzalez2018():
    """28 stable patients (Kidney Int. Rep. 3, 1163): means 52.8 mmHg, 29.9 mmol/L, pH 7.37 close."""
    assert float(ph_from_hco3(29.9, 52.8)) == pytest.approx(7.37, abs=PRINTED_PH)


def test_standard_and_zander_normal():
    """The standard's own normal reads -0.6, Zander's 0.0: 'normal is zero' is only true of the second."""
    assert pytest.approx(-0.58, abs=TWO_DECIMALS) == NORMAL_SBE
    assert float(whole_blood_base_excess_mmol_per_l(7.40, 40.0, 15.0, 1.0)) == pytest.approx(
        0.0, abs=TWO_DECIMALS
    )


def test_desaturation_raises_base_excess_by_the_published_term():
    """0.2 Hb (1 - S), lang2002: 0.75 mmol/L at Hb 15 and 75 %."""
    full, venous = (whole_blood_base_excess_mmol_per_l(7.37, 46.0, 15.0, s) for s in (1.0, 0.75))
    assert float(full - venous) == pytest.approx(0.75)


def test_metabolic_acidosis_and_chronic_hypercapnia_patients():
    """Worked for this project: PaCO2 from 18 to 30 and 40 at -24, and from 65 to 50 and 40."""
    acidosis = ph_at_standard_base_excess([30.0, 40.0], standard_base_excess_mmol_per_l(7.10, 18.0))
    np.testing.assert_allclose(acidosis, [7.00, 6.93], rtol=0, atol=PRINTED_PH)
    chronic = ph_at_standard_base_excess([50.0, 40.0], standard_base_excess_mmol_per_l(7.35, 65.0))
    np.testing.assert_allclose(chronic, [7.45, 7.52], rtol=0, atol=PRINTED_PH)


def test_there_and_back_over_all_that_can_enter():
    ph, pco2 = np.meshgrid(np.linspace(6.3, 8.0, 35), np.geomspace(5.0, 250.0, 30))
    np.testing.assert_allclose(ph_from_hco3(hco3_mmol_per_l(ph, pco2), pco2), ph, atol=EXACT)
    standard = ph_at_standard_base_excess(pco2, standard_base_excess_mmol_per_l(ph, pco2))
    np.testing.assert_allclose(standard, ph, atol=EXACT)
    for hb, so2 in ((1.0, 1.0), (15.0, 0.7), (30.0, 0.05)):
        excess = whole_blood_base_excess_mmol_per_l(ph, pco2, hb, so2)
        np.testing.assert_allclose(ph_at_whole_blood_base_excess(pco2, excess, hb, so2), ph, atol=EXACT)


def test_more_carbon_dioxide_is_more_acid():
    pco2 = np.linspace(10.0, 150.0, 100)
    assert np.all(np.diff(ph_at_standard_base_excess(pco2, -5.0)) < 0)
    assert np.all(np.diff(ph_at_whole_blood_base_excess(pco2, -5.0, 10.0, 0.9)) < 0)
