"""Facts of the trade that every answer at the bedside rests on. Common practice, no source.

The trade rounds, and computes alveolar oxygen without the correction term; each tolerance below says so.
"""

import numpy as np
import pytest
from scipy.optimize import brentq

from engine.physics.air import (
    STANDARD_BAROMETRIC_MMHG,
    barometric_mmhg_from_altitude,
    palvo2_mmhg,
    palvo2_simple_mmhg,
    pio2_mmhg,
)
from engine.physics.carbon_dioxide import (
    alveolar_ventilation_l_per_min,
    alveolar_ventilation_of_breaths_l_per_min,
    bohr_dead_space,
    paco2_from_ventilation_mmhg,
)
from engine.physics.oxygen import o2_content_ml_per_dl, so2_from_po2

CORRECTION_MMHG = 6.0  # what the correction term adds at most here
NEAR_MMHG = 2.0  # told as "near" and as "the threshold"
TWO_DIGITS = 0.02  # relative
AIR = 0.21
WHOLE_MMHG = 0.5  # told as whole mmHg
ABOUT_MMHG = 1.0  # told as "about", on the simple equation
HYPOXIC_MMHG = 60.0
POINT = 0.01  # told in whole per cent of saturation, about
HB_G_PER_DL = 15.0


def simple(fio2, paco2_mmhg, barometric_mmhg=STANDARD_BAROMETRIC_MMHG):
    return float(palvo2_simple_mmhg(fio2, barometric_mmhg, paco2_mmhg))


def full(fio2, paco2_mmhg, barometric_mmhg=STANDARD_BAROMETRIC_MMHG):
    return float(palvo2_mmhg(fio2, barometric_mmhg, paco2_mmhg))


def test_air_at_sea_level():
    """Inspired PO2 150, alveolar about 100."""
    assert float(pio2_mmhg(AIR, STANDARD_BAROMETRIC_MMHG)) == pytest.approx(150.0, abs=WHOLE_MMHG)
    assert simple(AIR, 40.0) == pytest.approx(100.0, abs=ABOUT_MMHG)
    assert full(AIR, 40.0) == pytest.approx(100.0, abs=2 * ABOUT_MMHG)  # with the correction of 2 mmHg


def test_half_the_ventilation():
    """PaCO2 doubles to 80, alveolar PO2 drops to about 50, and FiO2 0.28 brings it back to 100."""
    ventilation = alveolar_ventilation_l_per_min(200.0, 40.0)
    assert float(paco2_from_ventilation_mmhg(200.0, ventilation / 2.0)) == pytest.approx(80.0)
    assert simple(AIR, 80.0) == pytest.approx(50.0, abs=ABOUT_MMHG)
    assert simple(0.28, 80.0) == pytest.approx(100.0, abs=ABOUT_MMHG)


def test_full_equation_keeps_the_order():
    """With the correction term the drop and the rescue are each within 6 mmHg of what is told."""
    assert full(AIR, 80.0) == pytest.approx(50.0, abs=CORRECTION_MMHG)
    assert full(0.28, 80.0) == pytest.approx(100.0, abs=CORRECTION_MMHG)


@pytest.mark.parametrize(
    ("po2_mmhg", "low", "high"), [(40.0, 0.74, 0.76), (50.0, 0.84, 0.86), (100.0, 0.97, 0.98)]
)
def test_three_points_of_the_curve(po2_mmhg, low, high):
    """About 75 % at 40, 85 % at 50, 97 to 98 % at 100."""
    assert low < float(so2_from_po2(po2_mmhg)) < high


@pytest.mark.parametrize(("fio2", "so2"), [(AIR, 0.87), (1.0, 0.92)])
def test_half_the_output_through_a_shunt(fio2, so2):
    """Mixed venous 75 %: about 87 % on air and only about 92 % on pure oxygen."""

    def content(po2_mmhg):
        return float(o2_content_ml_per_dl(po2_mmhg, so2_from_po2(po2_mmhg), HB_G_PER_DL))

    mixed = 0.5 * content(full(fio2, 40.0)) + 0.5 * content(40.0)
    arterial = brentq(lambda po2_mmhg: content(po2_mmhg) - mixed, 1.0, 700.0)
    assert float(so2_from_po2(arterial)) == pytest.approx(so2, abs=POINT)


def test_hypoxia_on_air_begins_near_paco2_75():
    paco2 = brentq(lambda p: full(AIR, p) - HYPOXIC_MMHG, 40.0, 120.0)
    assert paco2 == pytest.approx(75.0, abs=NEAR_MMHG)


def test_thin_oxygen():
    """FiO2 0.195 barely matters; 0.15 is the threshold."""
    normal, barely, threshold = (float(so2_from_po2(full(f, 40.0))) for f in (AIR, 0.195, 0.15))
    assert normal - barely < POINT
    assert full(0.195, 40.0) > 1.4 * HYPOXIC_MMHG
    assert full(0.15, 40.0) == pytest.approx(HYPOXIC_MMHG, abs=NEAR_MMHG)
    assert threshold == pytest.approx(0.90, abs=POINT)


def test_air_a_mile_high():
    """At 1,609 m alveolar PO2 is about 74."""
    assert full(AIR, 40.0, barometric_mmhg_from_altitude(1609.0)) == pytest.approx(74.0, abs=ABOUT_MMHG)


@pytest.mark.parametrize(("fraction", "mmhg"), [(0.0004, 0.3), (0.005, 3.8), (0.03, 23.0)])
def test_inspired_carbon_dioxide(fraction, mmhg):
    """0.04 % is 0.3 mmHg, 0.5 % 3.8, 3 % 23: Dalton's law on dry gas at sea level, to two digits."""
    dry = float(pio2_mmhg(fraction, STANDARD_BAROMETRIC_MMHG, 0.0))
    assert dry == pytest.approx(mmhg, rel=TWO_DIGITS)


def test_what_counts_of_a_breath():
    """Of 500 mL with 150 mL of dead space 350 mL count: mixed expired CO2 is diluted by as much."""
    one_breath = 1000.0 * float(alveolar_ventilation_of_breaths_l_per_min(1.0, 500.0, 150.0))
    assert one_breath == pytest.approx(350.0)
    assert float(bohr_dead_space(40.0, 40.0 * one_breath / 500.0)) == pytest.approx(150.0 / 500.0)


def test_fewer_larger_breaths_clear_more():
    """At the same minute volume of 8 L."""
    tidal_volume_ml = np.array([250.0, 400.0, 500.0, 800.0])
    cleared = alveolar_ventilation_of_breaths_l_per_min(8000.0 / tidal_volume_ml, tidal_volume_ml, 150.0)
    assert np.all(np.diff(cleared) > 0)
    assert np.all(np.diff(paco2_from_ventilation_mmhg(200.0, cleared)) < 0)
