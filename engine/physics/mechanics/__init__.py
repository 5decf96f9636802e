"""Mechanics of the ventilated lung: pressures of a breath, power, emptying, and predicted body weight."""

from engine.physics.mechanics.ardsnet import (
    HIGHER_PEEP_TABLE_CMH2O,
    LOWER_PEEP_TABLE_CMH2O,
    predicted_body_weight_kg,
)
from engine.physics.mechanics.emptying import (
    expiratory_time_s,
    fraction_exhaled,
    inspiratory_time_s,
    intrinsic_peep_cmh2o,
    time_constant_s,
    trapped_volume_ml,
)
from engine.physics.mechanics.power import (
    J_PER_CMH2O_L,
    power_pressure_control_j_per_min,
    power_pressure_control_with_rise_j_per_min,
    power_volume_control_full_j_per_min,
    power_volume_control_j_per_min,
)
from engine.physics.mechanics.pressures import (
    compliance_ml_per_cmh2o,
    driving_pressure_cmh2o,
    plateau_after_tidal_volume_cmh2o,
    resistance_cmh2o_s_per_l,
)

__all__ = [
    "HIGHER_PEEP_TABLE_CMH2O",
    "J_PER_CMH2O_L",
    "LOWER_PEEP_TABLE_CMH2O",
    "compliance_ml_per_cmh2o",
    "driving_pressure_cmh2o",
    "expiratory_time_s",
    "fraction_exhaled",
    "inspiratory_time_s",
    "intrinsic_peep_cmh2o",
    "plateau_after_tidal_volume_cmh2o",
    "power_pressure_control_j_per_min",
    "power_pressure_control_with_rise_j_per_min",
    "power_volume_control_full_j_per_min",
    "power_volume_control_j_per_min",
    "predicted_body_weight_kg",
    "resistance_cmh2o_s_per_l",
    "time_constant_s",
    "trapped_volume_ml",
]
