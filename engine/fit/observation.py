"""How probable a charted gas is under a belief: what a sample scatters about the state of the body.

Scatter of consecutive samples in stable ventilated patients: CV 2.8-3.0 % of PaCO2, 3.6-5.1 % of PaO2, pH
0.02 (thorson1983, hess1992), heavy-tailed here. Measured saturation, cardiac output, VO2, VCO2 and mixed
venous saturation are used where given, with the scatter named beside each.
"""

from dataclasses import dataclass
from datetime import timedelta

import numpy as np
from numpy.typing import NDArray

from engine.lung.prior import Belief
from engine.lung.settling import Gas
from engine.physics.carbon_dioxide import pco2_at_temperature_mmhg
from engine.physics.exchange import Exchange
from engine.physics.oxygen import po2_at_37_mmhg
from engine.record import BloodGas, Case

Array = NDArray[np.float64]

PACO2_CV = 0.028  # hess1992
PAO2_CV = 0.036  # hess1992; thorson1983: 0.051
PH_SD = 0.012  # thorson1983: range 0.03 of six samples, less the part that PaCO2 explains
SAO2_SD = 0.015  # least significant change 1.3 % of back-to-back samples, plus misfit of a standard curve
TAIL = 5.0  # degrees of freedom of every scatter
DYSHB_LASTS = timedelta(hours=6)  # half-time of COHb is 4-6 h on air; common practice, no source
PH_PER_C = -0.0147  # rosenthal1948 (memory)
VCO2_CV, VO2_CV, OUTPUT_CV, SVO2_SD = 0.10, 0.10, 0.15, 0.03  # common practice, no source


def gas_at_37(gas: BloodGas) -> tuple[float, float, float]:
    """pH, PaCO2 and PaO2 as the analyser measured them, with a temperature correction taken back."""
    if not gas.temperature_corrected or gas.temperature_c is None:
        return gas.ph, gas.paco2_mmhg, gas.pao2_mmhg
    factor = float(pco2_at_temperature_mmhg(1.0, gas.temperature_c))
    ph = gas.ph - PH_PER_C * (gas.temperature_c - 37.0)
    return ph, gas.paco2_mmhg / factor, float(po2_at_37_mmhg(gas.pao2_mmhg, gas.temperature_c))


def dyshaemoglobins(case: Case, number: int) -> tuple[float, float]:
    """COHb and MetHb of the gas in entry ``number`` (from 0), each as last measured within `DYSHB_LASTS`.

    A gas without co-oximetry does not mean that what was there has gone.
    """
    time, found = case.entries[number].gas_time, [0.0, 0.0]
    for entry in case.entries[: number + 1]:
        if entry.gas is not None and time - entry.gas_time <= DYSHB_LASTS:
            for place, value in enumerate((entry.gas.cohb, entry.gas.methb)):
                found[place] = found[place] if value is None else value
    return found[0], found[1]


def carrying_hb_g_per_dl(case: Case, number: int) -> float:
    """Haemoglobin of the gas in entry ``number`` that can carry oxygen: dyshaemoglobins taken off."""
    gas = case.entries[number].gas
    assert gas is not None  # a usable gas
    return gas.hb_g_per_dl * (1.0 - sum(dyshaemoglobins(case, number)))


@dataclass(frozen=True, slots=True, kw_only=True)
class Observed:
    """One gas as evidence, and what was measured beside it; ``None`` where it was not."""

    ph: float
    paco2_mmhg: float
    pao2_mmhg: float
    sao2: float | None
    vco2_ml_per_min: float | None
    vo2_ml_per_min: float | None
    cardiac_output_l_per_min: float | None
    svo2: float | None

    def log_likelihood(self, belief: Belief, gas: Gas, exchange: Exchange) -> Array:
        """Log density of this observation for every draw, up to a constant; -inf where the lung cannot be."""
        terms = [
            _student(np.log(self.paco2_mmhg / gas.paco2_mmhg) / PACO2_CV),
            _student(np.log(self.pao2_mmhg / gas.pao2_mmhg) / PAO2_CV),
            _student((self.ph - gas.ph) / PH_SD),
        ]
        if self.sao2 is not None:
            terms.append(_student((self.sao2 - gas.sao2) / SAO2_SD))
        if self.svo2 is not None:
            terms.append(_student((self.svo2 - exchange.svo2) / SVO2_SD))
        vco2, output = np.exp(belief.of("ln_vco2")), np.exp(belief.of("ln_cardiac_output"))
        for measured, drawn, cv in (
            (self.vco2_ml_per_min, vco2, VCO2_CV),
            (self.vo2_ml_per_min, vco2 / belief.of("rq"), VO2_CV),
            (self.cardiac_output_l_per_min, output, OUTPUT_CV),
        ):
            if measured is not None:
                terms.append(_student(np.log(measured / drawn) / cv))
        total = np.sum(terms, axis=0)
        return np.where(np.isfinite(total) & ~exchange.held, total, -np.inf)


def _student(z: Array) -> Array:
    return np.asarray(-0.5 * (TAIL + 1.0) * np.log1p(z * z / TAIL))
