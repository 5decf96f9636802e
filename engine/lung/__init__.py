"""What is believed about one lung: its parameters, their priors with sources, how they drift, what gas they give.

`breathing` reads off the chart what drives gas exchange at one moment; `prior` says what is believed before the first
gas; `drift` how far a lung may have moved between two moments; `arterial` which gas a belief gives under a breathing.
"""

from engine.lung.arterial import Ventilation, arterial_gas, ventilation
from engine.lung.breathing import Breathing, breathing_at, own_rate_of
from engine.lung.drift import Drift, drift_between
from engine.lung.prior import PARAMETERS, Belief, Prior, prior_of
from engine.lung.settling import Gas, gas_on_the_way, settled_gas

__all__ = [
    "PARAMETERS",
    "Belief",
    "Breathing",
    "Drift",
    "Gas",
    "Prior",
    "Ventilation",
    "arterial_gas",
    "breathing_at",
    "drift_between",
    "gas_on_the_way",
    "own_rate_of",
    "prior_of",
    "settled_gas",
    "ventilation",
]
