"""Every conversion against pint, a general library of units, and back again."""

import inspect

import numpy as np
import pint
import pytest

from engine import units

HAEM, PER_HAEM = 0.0006, 0.0001  # three and four decimals in use
SAME = 1e-6  # relative: pint carries mercury and water to seven digits
BACK = 1e-12

# Target unit, source unit, values; pint's own names.
AGAINST_PINT = {
    units.kpa_from_mmhg: ("kPa", "mmHg"),
    units.mmhg_from_kpa: ("mmHg", "kPa"),
    units.hpa_from_mmhg: ("hPa", "mmHg"),
    units.mmhg_from_hpa: ("mmHg", "mbar"),
    units.hpa_from_cmh2o: ("mbar", "cmH2O"),
    units.cmh2o_from_hpa: ("cmH2O", "hPa"),
    units.g_per_l_from_g_per_dl: ("g/L", "g/dL"),
    units.g_per_dl_from_g_per_l: ("g/dL", "g/L"),
    units.l_from_ml: ("L", "mL"),
    units.ml_from_l: ("mL", "L"),
    units.percent_from_fraction: ("percent", ""),
    units.fraction_from_percent: ("", "percent"),
    units.inch_from_cm: ("inch", "cm"),
    units.cm_from_inch: ("cm", "inch"),
    units.m_from_foot: ("m", "foot"),
    units.c_from_fahrenheit: ("degC", "degF"),
}
INVERSES = [
    (units.kpa_from_mmhg, units.mmhg_from_kpa),
    (units.hpa_from_mmhg, units.mmhg_from_hpa),
    (units.hpa_from_cmh2o, units.cmh2o_from_hpa),
    (units.g_per_l_from_g_per_dl, units.g_per_dl_from_g_per_l),
    (units.mmol_per_l_hb_from_g_per_dl, units.g_per_dl_from_mmol_per_l_hb),
    (units.l_from_ml, units.ml_from_l),
    (units.percent_from_fraction, units.fraction_from_percent),
    (units.inch_from_cm, units.cm_from_inch),
]
BY_HAND = {units.mmol_per_l_hb_from_g_per_dl, units.g_per_dl_from_mmol_per_l_hb}  # pint knows no haemoglobin

registry = pint.UnitRegistry()


@pytest.mark.parametrize("convert", AGAINST_PINT, ids=lambda f: f.__name__)
def test_against_pint(convert):
    target, source = AGAINST_PINT[convert]
    values = np.array([0.3, 1.0, 40.0, 98.6, 760.0])
    theirs = registry.Quantity(values, source).to(target).magnitude
    np.testing.assert_allclose(convert(values), theirs, rtol=SAME)
    assert convert(40.0) == pytest.approx(convert(values)[2])


@pytest.mark.parametrize(("there", "back"), INVERSES, ids=lambda f: f.__name__)
def test_there_and_back(there, back):
    values = np.array([0.01, 7.5, 123.4])
    np.testing.assert_allclose(back(there(values)), values, rtol=BACK)


def test_haemoglobin_per_haem():
    """1 mmol/L = 1.611 g/dL (common practice, no source)."""
    assert units.g_per_dl_from_mmol_per_l_hb(1.0) == pytest.approx(1.611, abs=HAEM)
    assert units.mmol_per_l_hb_from_g_per_dl(1.0) == pytest.approx(0.6206, abs=PER_HAEM)


def test_every_conversion_is_checked():
    conversions = {f for name, f in inspect.getmembers(units, inspect.isfunction) if "_from_" in name}
    assert conversions == set(AGAINST_PINT) | BY_HAND


@pytest.mark.parametrize("convert", [*AGAINST_PINT, *BY_HAND], ids=lambda f: f.__name__)
def test_kind_shape_and_nan(convert):
    assert isinstance(convert(1.0), float)
    assert convert(np.ones((2, 3))).shape == (2, 3)
    assert np.isnan(convert(float("nan")))
