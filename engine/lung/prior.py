"""What is believed about a ventilated patient's lung before the first gas.

A state is eleven numbers on scales where a normal distribution is a fair belief (`PARAMETERS`), and one of
two kinds of patient: *passive* (the ventilator does the breathing, little moves between gases) and *active*
(the patient takes part, defends a PaCO2 of their own, and everything moves more). The kind is not charted;
the gases tell.

Sources of the means and SDs (references: `engine.lung`):

====================  ======================  ============================================================
parameter             mean (SD)               source
====================  ======================  ============================================================
logit_shunt           logit 0.13 (0.9)        90 % within 3 and 40 %: intensive care, none to severe ARDS;
                                              common practice, no source
ln_vq_log_sd          ln 0.9 (0.4)            healthy 0.36-0.47 (cardus1997), severe above 1.5 (memory)
logit_dead_space      logit 0.40 (0.7)        VD/VT 0.58 (0.09) in early ARDS (nuckton2002) less series part
ln_series_ml          ln 1.42 mL/kg (0.25)    1.5 (SD 0.5) mL/kg PBW, synthesis of fletcher1984, kiiski1992,
                                              haudebourg2022; the narrower SD by look-back over made patients
apparatus_share       0.75 (0.12)             campbell2000, prat2003: 0.5 to 1.0 of the nominal volume
ln_vco2               ln 3.1 mL/kg (0.23)     220 (SD 50) mL/min (stapel2015, kagan2018)
rq                    0.83 (0.05)             0.76-0.89 (rousing2016)
ln_cardiac_output     ln 5.5 L/min (0.25)     common practice, no source; decides PaO2 near the knee
standard_base_excess  first gas               mmol/L; the gas says it directly
logit_defence         1.3 (1.0)               share of a change of charted ventilation that an active patient
                                              takes back: by look-back over charted stays
ln_volatility         0 (0.35)                scale of all drift, personal
====================  ======================  ============================================================
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from engine.lung.breathing import Breathing
from engine.physics.mechanics import predicted_body_weight_kg
from engine.record import Patient

Array = NDArray[np.float64]

PARAMETERS = (
    "logit_shunt",
    "ln_vq_log_sd",
    "logit_dead_space",
    "ln_series_ml",
    "apparatus_share",
    "ln_vco2",
    "rq",
    "ln_cardiac_output",
    "standard_base_excess",
    "logit_defence",
    "ln_volatility",
)
INDEX = {name: number for number, name in enumerate(PARAMETERS)}

PBW_UNKNOWN_KG, PBW_UNKNOWN_SD = 66.0, 0.17  # sex or height not charted; ln SD. Common practice, no source
CENTRE = {
    "logit_shunt": -1.9,
    "ln_vq_log_sd": np.log(0.9),
    "logit_dead_space": -0.4,
    "ln_series_ml": np.log(1.42),  # per kg PBW
    "apparatus_share": 0.75,
    "ln_vco2": np.log(3.1),  # per kg PBW
    "rq": 0.83,
    "ln_cardiac_output": np.log(5.5 / 66.0),  # per kg PBW
    "standard_base_excess": 0.0,
    "logit_defence": 1.3,
    "ln_volatility": 0.0,
}
WIDTH = {
    "logit_shunt": 0.9,
    "ln_vq_log_sd": 0.4,
    "logit_dead_space": 0.7,
    "ln_series_ml": 0.25,
    "apparatus_share": 0.12,
    "ln_vco2": 0.23,
    "rq": 0.05,
    "ln_cardiac_output": 0.25,
    "standard_base_excess": 6.0,
    "logit_defence": 1.0,
    "ln_volatility": 0.35,
}
# What a condition moves: (shift of the centre, width instead).
CONDITION: dict[str, dict[str, tuple[float, float]]] = {
    "obstructive": {"ln_vq_log_sd": (0.25, 0.35), "logit_shunt": (-0.5, 0.8), "logit_dead_space": (0.2, 0.7)},
    "chronic_hypercapnia": {"logit_dead_space": (0.2, 0.7)},
    "pregnancy": {"ln_cardiac_output": (0.3, 0.25), "ln_vco2": (0.2, 0.23)},
}
ACTIVE_IF_TRIGGERING = 0.97
ACTIVE_IF_SUPPORTED = 0.97
ACTIVE_IF_SEEN_PASSIVE = 0.05  # total rate charted and equal to the set one
ACTIVE_IF_UNKNOWN = 0.7


@dataclass(frozen=True, slots=True, eq=False)
class Belief:
    """Draws of one lung: ``values`` (draws, parameters), and for each whether the patient is active.

    ``own`` (draws,) is a fixed uniform number that places the patient's own rate where the chart gives only
    a bound.
    """

    values: Array
    active: NDArray[np.bool_]
    own: Array

    def __len__(self) -> int:
        return len(self.own)

    def of(self, name: str) -> Array:
        """Draws of one of `PARAMETERS`, on its own scale."""
        return self.values[:, INDEX[name]]

    def take(self, rows: NDArray[np.int64]) -> "Belief":
        """The draws of these row numbers."""
        return Belief(self.values[rows], self.active[rows], self.own[rows])

    def readable(self) -> Mapping[str, Array]:
        """The parameters in the units a clinician knows, by name."""
        return {
            "shunt": logistic(self.of("logit_shunt")),
            "vq_log_sd": np.exp(self.of("ln_vq_log_sd")),
            "alveolar_dead_space": logistic(self.of("logit_dead_space")),
            "series_dead_space_ml": np.exp(self.of("ln_series_ml")),
            "apparatus_share": self.of("apparatus_share"),
            "vco2_ml_per_min": np.exp(self.of("ln_vco2")),
            "respiratory_quotient": self.of("rq"),
            "vo2_ml_per_min": np.exp(self.of("ln_vco2")) / self.of("rq"),
            "cardiac_output_l_per_min": np.exp(self.of("ln_cardiac_output")),
            "standard_base_excess_mmol_per_l": self.of("standard_base_excess"),
            "defence": self.defence(),
            "volatility": np.exp(self.of("ln_volatility")),
        }

    def defence(self) -> Array:
        """Share of a change of ventilation the patient takes back, 0-1; none in a passive patient."""
        return np.where(self.active, logistic(self.of("logit_defence")), 0.0)


@dataclass(frozen=True, slots=True, eq=False)
class Prior:
    """Centre and width of each parameter (parameters,), and the chance of an active patient."""

    centre: Array
    width: Array
    active: float


def logistic(x: Array) -> Array:
    """1 / (1 + exp(-x)), any shape."""
    return 1.0 / (1.0 + np.exp(-x))


def prior_of(patient: Patient, breathing: Breathing, standard_base_excess_mmol_per_l: float) -> Prior:
    """The prior before the first gas of a patient who breathes like this.

    ``standard_base_excess_mmol_per_l`` is that of the first gas: it is a measurement, and the prior is wide
    about it.
    """
    centre, width = dict(CENTRE), dict(WIDTH)
    for condition in patient.conditions:
        for name, (shift, instead) in CONDITION.get(condition, {}).items():
            centre[name] += shift
            width[name] = instead
    kg, kg_sd = PBW_UNKNOWN_KG, PBW_UNKNOWN_SD
    if patient.sex is not None and patient.height_cm is not None:
        kg, kg_sd = float(predicted_body_weight_kg(patient.sex, patient.height_cm)), 0.0
    for name in ("ln_series_ml", "ln_vco2", "ln_cardiac_output"):
        centre[name] += np.log(kg)
        width[name] = float(np.hypot(width[name], kg_sd))
    centre["standard_base_excess"] = standard_base_excess_mmol_per_l
    return Prior(
        np.array([centre[n] for n in PARAMETERS]),
        np.array([width[n] for n in PARAMETERS]),
        _active(breathing),
    )


def _active(breathing: Breathing) -> float:
    """The chance, before any gas, that the patient takes part in the breathing."""
    own = breathing.own_rate
    if own.charted and own.at_most_per_min == 0.0:
        return 0.0
    if own.triggering:
        return ACTIVE_IF_TRIGGERING
    if breathing.mode in ("support", "other"):
        return ACTIVE_IF_SUPPORTED
    return ACTIVE_IF_SEEN_PASSIVE if own.charted else ACTIVE_IF_UNKNOWN
