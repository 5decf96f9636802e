"""Every formula takes arrays of any shape, and unknown in is unknown out."""

import inspect
from types import ModuleType

import numpy as np
import pytest

from engine.physics import acid_base, air, carbon_dioxide, mechanics, oxygen, stores

MODULES = (acid_base, air, carbon_dioxide, mechanics, oxygen, stores)

# A usual value for every argument there is, so that a new formula is tried without being listed.
USUAL = {
    "alveolar_ventilation_l_per_min": 4.3,
    "altitude_m": 1500.0,
    "arterial_o2_ml_per_dl": 19.0,
    "barometric_mmhg": 752.0,
    "base_excess_mmol_per_l": -3.0,
    "capillary_o2_ml_per_dl": 20.0,
    "compliance_ml_per_cmh2o": 40.0,
    "dead_space_ml": 150.0,
    "driving_pressure_cmh2o": 12.0,
    "expiratory_time_s": 2.0,
    "final_alveolar_ventilation_l_per_min": 4.3,
    "fio2": 0.4,
    "flow_l_per_min": 40.0,
    "fraction": 0.5,
    "hb_g_per_dl": 12.0,
    "hco3_mmol_per_l": 24.0,
    "height_cm": 170.0,
    "ie_ratio": 0.5,
    "inspiratory_pressure_cmh2o": 15.0,
    "inspiratory_time_s": 1.0,
    "minutes": 20.0,
    "minutes_to_90": 4.0,
    "normal_score": 0.5,
    "paco2_before_mmhg": 60.0,
    "paco2_mmhg": 40.0,
    "paco2_settled_mmhg": 45.0,
    "palvco2_mmhg": 38.0,
    "pco2_mmhg": 40.0,
    "pco2_mmhg_at_37": 40.0,
    "peak_cmh2o": 30.0,
    "peep_cmh2o": 8.0,
    "pexpco2_mmhg": 25.0,
    "ph": 7.35,
    "plateau_cmh2o": 25.0,
    "po2_mmhg": 80.0,
    "po2_mmhg_at_37": 80.0,
    "rate_per_min": 20.0,
    "resistance_cmh2o_s_per_l": 12.0,
    "respiratory_quotient": 0.8,
    "rise_time_s": 0.2,
    "so2": 0.9,
    "standard_base_excess_mmol_per_l": -2.0,
    "temperature_c": 36.0,
    "tidal_volume_ml": 420.0,
    "time_constant_s": 0.5,
    "total_peep_cmh2o": 9.0,
    "trapped_volume_ml": 60.0,
    "vco2_ml_per_min": 220.0,
    "venous_o2_ml_per_dl": 15.0,
    "water_vapour_mmhg": 47.0,
    "weight_kg": 80.0,
}
NO_NUMBER = {"sex": "female", "obstructive": False, "stores": stores.ADULT}
SHAPES = [(), (3,), (2, 3), (0,)]


def formulas():
    def of(module: ModuleType):
        everything = inspect.getmembers(module, inspect.isfunction)
        return [f for name, f in everything if not name.startswith("_") and "engine.physics" in f.__module__]

    return sorted({f for module in MODULES for f in of(module)}, key=lambda f: f.__name__)


FORMULAS = formulas()
NUMBERS = [(f, name) for f in FORMULAS for name in inspect.signature(f).parameters if name not in NO_NUMBER]


def call(formula, **given):
    usual = USUAL | NO_NUMBER | given
    return formula(**{name: usual[name] for name in inspect.signature(formula).parameters})


@pytest.mark.parametrize("formula", FORMULAS, ids=lambda f: f.__name__)
@pytest.mark.parametrize("shape", SHAPES)
def test_keeps_the_shape(formula, shape):
    numbers = [name for name in inspect.signature(formula).parameters if name in USUAL]
    result = call(formula, **{name: np.full(shape, USUAL[name]) for name in numbers})
    assert result.shape == shape
    assert result.dtype == np.float64
    assert np.isfinite(result).all()


@pytest.mark.parametrize(("formula", "name"), NUMBERS, ids=lambda x: getattr(x, "__name__", x))
def test_broadcasts_and_keeps_unknown_unknown(formula, name):
    """One argument a list with a hole: the others stay plain, and only the hole is a hole."""
    usual = USUAL[name]
    result = call(formula, **{name: [[usual], [np.nan], [usual]]})
    assert result.shape == (3, 1)
    assert np.isnan(result[:, 0]).tolist() == [False, True, False]
    np.testing.assert_array_equal(result[0], call(formula))


def test_all_formulas_are_tried():
    assert len(FORMULAS) >= 45
