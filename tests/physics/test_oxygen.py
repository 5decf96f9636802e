"""Oxygen carriage against Severinghaus' table, two other curves, and published examples."""

import numpy as np
import pytest
from scipy.optimize import brentq

from engine.physics.acid_base import ph_at_standard_base_excess, ph_at_whole_blood_base_excess
from engine.physics.air import palvo2_mmhg
from engine.physics.oxygen import (
    O2_SOLUBILITY_ML_PER_DL_MMHG,
    o2_content_ml_per_dl,
    po2_at_37_mmhg,
    po2_at_temperature_mmhg,
    po2_from_so2_mmhg,
    po2_in_blood_mmhg,
    po2_standard_mmhg,
    shunt_fraction,
    so2_from_po2,
    so2_in_blood,
    so2_slope_per_mmhg,
)

BOHR = 0.04  # spread of published coefficients
SIX_POINTS = 0.007  # one digit in print, and the misfit of eq. 1
DIFFERENCE_STEP = 1e-6  # relative, of a central difference in doubles
SLOPE_FLOOR = 1e-10  # the same where the curve is flat
PER_CENT = 0.005  # whole per cent in print
SOLUBILITY = 0.0001  # two digits in print
PER_SHUNT_MMHG = 0.06  # one decimal
MILLER_MMHG = 2.0  # haemoglobin not stated
KPA_PER_MMHG = 0.133322387415
MMOL_PER_L_FROM_G_PER_DL = 0.6206

PAPER_WORST = 0.0055  # severinghaus1979 abstract: eq. 1 against Table 1
PAPER_MEAN, PAPER_MEAN_ROUNDING = 0.0026, 0.0001  # the same abstract, mean absolute difference
KELMAN_WORST = 0.012  # kelman1966 against Table 1 from 22 mmHg up
SIGGAARD_WORST = 0.0042  # siggaard1984 against Table 1
EQUATION_DIGITS = 0.6e-5  # the arithmetic table has five decimals
SECOND_DIGITS = 0.6e-4  # the second opinions have four
ELLIS_MMHG = 0.006  # two decimals
EXACT = 1e-9  # an exact inverse, in doubles
EQ3_PER_C = 0.0003  # four decimals, and P at 37 C taken at the point
CLOSED_SAMPLE_PER_C = 0.002  # agreement of eq. 3 with the mass balance
ISO_MMHG = 0.06  # one decimal
CONTENT_ML_PER_DL = 0.1  # one decimal in the textbook


def kelman1966(po2_mmhg):
    """G. R. Kelman, J. Appl. Physiol. 21, 1375, 1966, at pH 7.40, PCO2 40, 37 C."""
    a1, a2, a3 = -8532.2289, 2121.4010, -67.073989
    a4, a5, a6, a7 = 935960.87, -31346.258, 2396.1674, -67.104406
    x = po2_mmhg
    return (a1 * x + a2 * x**2 + a3 * x**3 + x**4) / (a4 + a5 * x + a6 * x**2 + a7 * x**3 + x**4)


def siggaard1984(po2_mmhg, ph=7.40, temperature_c=37.0):
    """O. Siggaard-Andersen et al., Clin. Chem. 30, 1646, 1984: saturation, and d logit / d ln PO2."""
    a, b = 1.04 * (7.4 - ph), 0.055 * (temperature_c - 37.0)
    x = np.log(po2_mmhg * KPA_PER_MMHG) - (1.946 + a + b)
    bent = np.tanh(0.5343 * x)
    logit = 1.875 + x + (3.5 + a) * bent
    return 1.0 / (1.0 + np.exp(-logit)), 1.0 + (3.5 + a) * 0.5343 * (1.0 - bent**2)


def test_severinghaus1979_table(table):
    """The paper's own 51 points and both of its claims."""
    rows = table("so2_severinghaus1979")
    misfit = np.abs(so2_from_po2(rows["po2_mmhg"]) - rows["so2"])
    assert len(misfit) == 51
    assert misfit.max() <= PAPER_WORST
    assert misfit.mean() == pytest.approx(PAPER_MEAN, abs=PAPER_MEAN_ROUNDING)


def test_severinghaus1979_arithmetic(table):
    rows = table("so2_severinghaus1979_equation")
    np.testing.assert_allclose(so2_from_po2(rows["po2_mmhg"]), rows["so2"], rtol=0, atol=EQUATION_DIGITS)


def test_ellis1989_table_and_round_trip(table):
    rows = table("po2_ellis1989")
    np.testing.assert_allclose(po2_from_so2_mmhg(rows["so2"]), rows["po2_mmhg"], rtol=0, atol=ELLIS_MMHG)
    po2 = np.geomspace(0.5, 600.0, 300)
    np.testing.assert_allclose(po2_from_so2_mmhg(so2_from_po2(po2)), po2, rtol=EXACT)


def test_saturation_beyond_its_range_is_not_made_up():
    assert po2_from_so2_mmhg(1.0) == np.inf
    assert float(po2_from_so2_mmhg(0.0)) == pytest.approx(0.0, abs=EXACT)
    assert np.isnan(po2_from_so2_mmhg([-0.01, 1.01, np.nan])).all()


def test_second_opinions_are_coded_as_published(table):
    for name, curve, worst, lowest in (
        ("so2_kelman1966", kelman1966, KELMAN_WORST, 22.0),
        ("so2_siggaard1984", lambda p: siggaard1984(p)[0], SIGGAARD_WORST, 1.0),
    ):
        rows = table(name)
        np.testing.assert_allclose(curve(rows["po2_mmhg"]), rows["so2"], rtol=0, atol=SECOND_DIGITS)
        paper = table("so2_severinghaus1979")
        within = paper["po2_mmhg"] >= lowest
        misfit = curve(paper["po2_mmhg"][within]) - paper["so2"][within]
        assert np.abs(misfit).max() <= worst + SECOND_DIGITS


def test_second_opinions_agree_with_the_engine(table):
    """Two curves that each keep to the table can differ by the sum of their misfits, no more."""
    po2 = table("so2_severinghaus1979")["po2_mmhg"]
    ours = so2_from_po2(po2)
    np.testing.assert_allclose(ours, siggaard1984(po2)[0], rtol=0, atol=PAPER_WORST + SIGGAARD_WORST)
    high = po2 >= 22.0
    np.testing.assert_allclose(ours[high], kelman1966(po2[high]), rtol=0, atol=PAPER_WORST + KELMAN_WORST)


def test_warmth_shifts_as_in_siggaard1984(table):
    """0.024 in powers of ten (kelman1966) and 0.055 in natural ones are the same shift."""
    po2 = table("so2_severinghaus1979")["po2_mmhg"]
    for temperature_c in (33.0, 35.0, 39.0, 41.0):
        ours = so2_in_blood(po2, 7.40, 40.0, temperature_c)
        theirs = siggaard1984(po2, temperature_c=temperature_c)[0]
        np.testing.assert_allclose(ours, theirs, rtol=0, atol=PAPER_WORST + SIGGAARD_WORST)


def test_bohr_coefficients():
    """Accepted: -0.48 titrating with CO2, -0.40 with fixed acid, both within 0.04 (from memory)."""
    pco2 = np.array([20.0, 80.0])
    ph = ph_at_whole_blood_base_excess(pco2, 0.0, 15.0, 1.0)
    p50 = po2_in_blood_mmhg(0.5, ph, pco2)
    assert np.diff(np.log10(p50)) / np.diff(ph) == pytest.approx(-0.48, abs=BOHR)
    fixed_acid = np.log10(po2_in_blood_mmhg(0.5, 7.20, 40.0) / po2_in_blood_mmhg(0.5, 7.40, 40.0)) / -0.20
    assert float(fixed_acid) == pytest.approx(-0.40, abs=BOHR)


def test_saturation_falls_by_six_points_from_ph_740_to_730():
    """Textbook, PO2 40; the pH is lowered by CO2 in the living. Its one digit and eq. 1 allow 0.007."""
    pco2 = brentq(lambda p: float(ph_at_standard_base_excess(p, -0.58)) - 7.30, 40.0, 80.0)
    fall = so2_in_blood(40.0, 7.40, 40.0) - so2_in_blood(40.0, 7.30, pco2)
    assert float(fall) == pytest.approx(0.06, abs=SIX_POINTS)


def test_blood_and_standard_curve_are_each_others_inverse():
    so2, ph, pco2 = np.meshgrid([0.3, 0.75, 0.97], [7.0, 7.4, 7.7], [15.0, 40.0, 120.0])
    po2 = po2_in_blood_mmhg(so2, ph, pco2, 39.0)
    np.testing.assert_allclose(so2_in_blood(po2, ph, pco2, 39.0), so2, rtol=EXACT)
    np.testing.assert_allclose(po2_standard_mmhg(po2, 7.40, 40.0), po2, rtol=EXACT)


def test_slope_is_the_derivative():
    po2, step = np.linspace(1.0, 300.0, 200), 1e-4
    numeric = (so2_from_po2(po2 + step) - so2_from_po2(po2 - step)) / (2 * step)
    np.testing.assert_allclose(
        so2_slope_per_mmhg(po2), numeric, rtol=DIFFERENCE_STEP, atol=SLOPE_FLOOR
    )  # of the finite difference


def test_sealed_sample_severinghaus1979_table(table):
    rows = table("po2_temperature_severinghaus1979")
    po2, per_c = rows["po2_mmhg"], rows["ln_po2_per_c"]
    ours = np.log(po2_at_temperature_mmhg(po2, 38.0) / po2)
    np.testing.assert_allclose(ours, per_c, rtol=0, atol=EQ3_PER_C)


def test_sealed_sample_keeps_its_oxygen_siggaard1984(table):
    """Mass balance of a closed sample, Hb 15: decides where the bracket of eq. 3 stands."""
    po2 = table("po2_temperature_severinghaus1979")["po2_mmhg"]
    so2, slope = siggaard1984(po2)
    dissolved = 0.0105 * po2 * KPA_PER_MMHG
    bound = 15.0 * MMOL_PER_L_FROM_G_PER_DL * slope * so2 * (1.0 - so2)
    per_c = (0.012 * dissolved + 0.073 * bound) / (dissolved + bound)
    ours = np.log(po2_at_temperature_mmhg(po2, 38.0) / po2)
    np.testing.assert_allclose(ours, per_c, rtol=0, atol=CLOSED_SAMPLE_PER_C)


def test_sealed_sample_bradley1956():
    """6 % per degree in the normal range (J. Appl. Physiol. 9, 201), printed without a decimal."""
    assert float(po2_at_temperature_mmhg(100.0, 38.0) / 100.0) == pytest.approx(1.06, abs=PER_CENT)


def test_temperature_there_and_back():
    at_37, temperature_c = np.meshgrid(np.geomspace(10.0, 700.0, 60), np.linspace(10.0, 45.0, 36))
    back = po2_at_37_mmhg(po2_at_temperature_mmhg(at_37, temperature_c), temperature_c)
    np.testing.assert_allclose(back, at_37, rtol=EXACT)


def test_textbook_contents():
    """Hb 15: 19.8 mL/dL arterial, 15.2 mixed venous, 4.6 apart at rest (textbook)."""
    arterial = o2_content_ml_per_dl(95.0, 0.97, 15.0)
    venous = o2_content_ml_per_dl(40.0, 0.75, 15.0)
    assert float(arterial) == pytest.approx(19.8, abs=CONTENT_ML_PER_DL)
    assert float(venous) == pytest.approx(15.2, abs=CONTENT_ML_PER_DL)
    assert float(arterial - venous) == pytest.approx(4.6, abs=2 * CONTENT_ML_PER_DL)


def test_solubility_siggaard1984():
    """0.0105 mmol/L/kPa; 22.39 mL STPD per mmol; printed to three digits."""
    ml_per_dl_mmhg = 0.0105 * 22.39 / 10.0 * KPA_PER_MMHG
    assert pytest.approx(ml_per_dl_mmhg, abs=SOLUBILITY) == O2_SOLUBILITY_ML_PER_DL_MMHG


def behind_a_shunt_mmhg(shunt, palvo2, difference_ml_per_dl, hb_g_per_dl):
    """PaO2 at pH 7.40 of a lung with one shunt and a known arterio-venous difference."""

    def content(po2):
        return float(o2_content_ml_per_dl(po2, so2_from_po2(po2), hb_g_per_dl))

    arterial = content(palvo2) - difference_ml_per_dl * shunt / (1.0 - shunt)
    return brentq(lambda po2: content(po2) - arterial, 1e-6, palvo2 + 1e-6)


def test_isoshunt_grid(table):
    rows = table("isoshunt_berggren1942")
    assert len(rows["shunt"]) == 81
    palvo2 = palvo2_mmhg(rows["fio2"], 760.0, 40.0)
    ours = [behind_a_shunt_mmhg(s, p, 5.0, 14.0) for s, p in zip(rows["shunt"], palvo2, strict=True)]
    np.testing.assert_allclose(ours, rows["pao2_mmhg"], rtol=0, atol=ISO_MMHG)


def test_shunt_equation_finds_the_shunt_of_every_grid_point(table):
    rows = table("isoshunt_berggren1942")
    palvo2 = palvo2_mmhg(rows["fio2"], 760.0, 40.0)
    pao2 = [behind_a_shunt_mmhg(s, p, 5.0, 14.0) for s, p in zip(rows["shunt"], palvo2, strict=True)]
    capillary = o2_content_ml_per_dl(palvo2, so2_from_po2(palvo2), 14.0)
    arterial = o2_content_ml_per_dl(pao2, so2_from_po2(pao2), 14.0)
    found = shunt_fraction(capillary, arterial, arterial - 5.0)
    np.testing.assert_allclose(found, rows["shunt"], rtol=0, atol=EXACT)


def test_difference_per_percent_of_shunt_on_pure_oxygen():
    """Evaluated elsewhere; the rule of thumb says 20 mmHg (textbook, from memory)."""
    shunt = np.array([0.02, 0.05, 0.10, 0.20, 0.25, 0.30])
    per_percent = [(673.0 - behind_a_shunt_mmhg(s, 673.0, 5.0, 14.0)) / (100.0 * s) for s in shunt]
    np.testing.assert_allclose(per_percent, [16.4, 16.9, 17.9, 19.8, 20.3, 19.0], rtol=0, atol=PER_SHUNT_MMHG)


def test_more_flow_through_the_same_shunt():
    """10 % shunt, VO2 250: PaO2 78 to 85 as output goes from 5 to 8 L/min (R. D. Miller, Anesthesia, 6th ed.,
    legend of Fig. 36-4; Hb not stated, here 14 and 15; within 2 mmHg)."""
    for hb in (14.0, 15.0):
        for output, pao2 in ((5.0, 78.0), (8.0, 85.0)):
            ours = behind_a_shunt_mmhg(0.10, 101.8, 250.0 / output / 10.0, hb)
            assert ours == pytest.approx(pao2, abs=MILLER_MMHG)


def test_a_worked_shunt_study():
    """J. G. Toffaletti, G. S. Zavorsky, Physiol. Rep. 2026: pure oxygen, PB 752, PaO2 587, PaCO2 38, Hb 15.2;
    four methods gave 2.8 to 5.2 %. Contents with SvO2 0.75 and calculated saturation on both sides."""
    palvo2 = palvo2_mmhg(1.0, 752.0, 38.0)
    capillary, arterial = (o2_content_ml_per_dl(p, so2_from_po2(p), 15.2) for p in (palvo2, 587.0))
    shunt = shunt_fraction(capillary, arterial, o2_content_ml_per_dl(40.0, 0.75, 15.2))
    assert 0.028 <= float(shunt) <= 0.052
