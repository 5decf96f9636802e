"""What is not forecast, and why: the quantities and a plain sentence each."""

from collections.abc import Mapping
from typing import Any, NamedTuple

import numpy as np

from engine.fit import Fit
from engine.forecast.predict import Prediction
from engine.forecast.result import QUANTITIES

LEAST_VOLUME_OVER_SERIES = 1.5  # below it streaming flow carries gas and no forecast is made (briscoe1954)
LEAST_SOLVED = 0.95  # of the draws: with fewer, those that are left are the lucky ones

NO_SUPPORT = (
    "Not forecast: the patient is under extracorporeal support, and the gas no longer tells what the lung "
    "does."
)
SUPPORT_SINCE = (
    "Not forecast: extracorporeal support has run since the last gas. A gas drawn after it has stopped is "
    "needed."
)
NO_STEADY_STATE = (
    "Not forecast: in too many of the lungs that fit this patient, oxygen uptake or CO2 output cannot be "
    "kept up under these settings, and no steady state is reached."
)
BEYOND_PACO2_MMHG = 150.0
NO_SUCH_PACO2 = (
    f"Not forecast: PaCO2 would pass {BEYOND_PACO2_MMHG:.0f} mmHg, beyond anything this was measured on."
)
NO_PEEP = (
    "PaO2 and SaO2 are not forecast: how a lung answers a change of PEEP cannot be read off its gases "
    "(of 983 patients of one trial the middle half changed P/F by -16 to 47 mmHg)."
)


class Refusal(NamedTuple):
    """Quantities that are not forecast, and the reason in words."""

    quantities: frozenset[str]
    reason: str


_ALL = frozenset(QUANTITIES)


def refusals(fit: Fit, p: Prediction, changed: Mapping[str, Any]) -> tuple[Refusal, ...]:
    """All that apply; one that refuses everything stands alone."""
    if fit.case.extracorporeal_now():
        return (Refusal(_ALL, NO_SUPPORT),)
    if any("extracorporeal_start" in e.events for e in fit.case.entries[fit.gas_number + 1 :]):
        return (Refusal(_ALL, SUPPORT_SINCE),)
    if p.breathing.tidal_volume_ml < LEAST_VOLUME_OVER_SERIES * _series_ml(p):
        return (Refusal(_ALL, _too_small_a_breath(p)),)
    if np.isfinite(p.settled.pao2_mmhg).mean() < LEAST_SOLVED:
        return (Refusal(_ALL, NO_STEADY_STATE),)
    if np.nanmedian(p.settled.paco2_mmhg) > BEYOND_PACO2_MMHG:
        return (Refusal(_ALL, NO_SUCH_PACO2),)
    return (Refusal(frozenset({"pao2_mmhg", "sao2"}), NO_PEEP),) if "peep_cmh2o" in changed else ()


def _series_ml(p: Prediction) -> float:
    """Median series dead space of a breath of usual size: what small breaths leave of it is the unknown."""
    device_ml = p.belief.of("apparatus_share") * p.breathing.apparatus_dead_space_ml
    return float(np.median(np.exp(p.belief.of("ln_series_ml")) + device_ml))


def _too_small_a_breath(p: Prediction) -> str:
    return (
        f"Not forecast: a tidal volume of {p.breathing.tidal_volume_ml:.0f} mL is less than 1.5 times the "
        f"series dead space (about {_series_ml(p):.0f} mL), and what it clears is not known."
    )
