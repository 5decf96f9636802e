"""Settings that are tried on a patient, and what they would do to pressures and emptying of the chest."""

from dataclasses import dataclass

import numpy as np

from engine.checks.breathing import weight_for_volume_kg
from engine.checks.moment import LEAST_RATE_PER_MIN
from engine.estimates.chest import RATE_ALLOWANCE, Mechanics, flow_of, inspiratory_time_of
from engine.limits.row import Array, Uncertain, middle
from engine.physics.mechanics import (
    expiratory_time_s,
    plateau_after_tidal_volume_cmh2o,
    power_pressure_control_j_per_min,
    power_volume_control_j_per_min,
    time_constant_s,
    trapped_volume_ml,
)
from engine.record import Patient, Settings

_DRAWS = 2000

# Reasoned, no source. A plateau is read to the whole cmH2O, from a trace that is seldom flat, and drifts from
# breath to breath: SD 1. Compliance bends with volume (recruitment at the low end, overdistension at the
# high end): a step of a quarter (0.22 in the logarithm) moves it by 11 % (SD). It bends more with PEEP:
# 5 cmH2O opens or overstretches enough to move it by 15 % (SD) in either direction, 10 by 30 %, and hardly
# more beyond.
_PLATEAU_READING_SD = 1.0
_COMPLIANCE_SD_PER_LOG_VOLUME = 0.5
_COMPLIANCE_SD_PER_CMH2O = 0.03
_COMPLIANCE_SD_MOST = 0.35
# Of a measured resistance and compliance as they serve the time constant: reasoned, no source.
_COMPLIANCE_SD, _RESISTANCE_SD = 0.10, 0.20
# Textbook ranges of ventilated adults, from memory: compliance, mL/cmH2O; resistance with tube, cmH2O s/L.
_OBSTRUCTIVE = ((50.0, 90.0), (15.0, 30.0))
_OTHERS = ((25.0, 80.0), (5.0, 15.0))
_EMPTY_AFTER = 50.0  # time constants
_CAUTION = (2.0, 3.0)
"""The lung empties two to three times slower than resistance x compliance says: Richard 2003 Intensive Care
Med 29:1078, 1.2-1.4 s against 0.5."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Tried:
    """A patient, the settings tried, the chest as last measured, and draws of what is forecast."""

    patient: Patient
    settings: Settings
    mechanics: Mechanics
    ph: Uncertain
    pao2_mmhg: Uncertain
    paco2_mmhg: Uncertain
    total_rate_per_min: Uncertain
    effective_tidal_volume_ml: Uncertain
    seed: int

    @property
    def weight_kg(self) -> float | None:
        """Predicted body weight."""
        return weight_for_volume_kg(self.patient)

    @property
    def volume_ml(self) -> Uncertain:
        """The breath: the set one in volume control, else the effective one, else the last known."""
        if self.settings.mode == "volume" and self.settings.tidal_volume_ml is not None:
            return self.settings.tidal_volume_ml
        if self.effective_tidal_volume_ml is not None:
            return self.effective_tidal_volume_ml
        return self.settings.tidal_volume_ml or self.mechanics.tidal_volume_ml

    @property
    def rate_per_min(self) -> Uncertain:
        """The rate the chest lives with: the total one, never less than the set one; hardly any is none."""
        rate = self.settings.rate_per_min or 0.0
        fastest: Array = np.maximum(
            rate if self.total_rate_per_min is None else self.total_rate_per_min, rate
        )
        if not np.any(fastest >= LEAST_RATE_PER_MIN):
            return None
        return np.where(fastest >= LEAST_RATE_PER_MIN, fastest, np.nan) if fastest.ndim else float(fastest)

    @property
    def peep_moves(self) -> bool:
        """Whether PEEP is tried at another value than the plateau was read at, or that is not known."""
        return self.settings.peep_cmh2o != self.mechanics.set_peep_cmh2o

    @property
    def total_peep_cmh2o(self) -> float | None:
        """Total PEEP after the change: what was intrinsic stays on top of the set one."""
        chest, peep = self.mechanics, self.settings.peep_cmh2o
        if chest.peep_cmh2o is None or chest.set_peep_cmh2o is None or peep is None:
            return peep
        return chest.peep_cmh2o + peep - chest.set_peep_cmh2o

    def generator(self, purpose: int) -> np.random.Generator:
        """A stream of its own for each purpose, so that rows do not depend on each other's order."""
        return np.random.default_rng([self.seed, purpose])

    def draws(self) -> int:
        """As many draws as the forecast brings, so that they pair."""
        brought = (
            self.ph,
            self.pao2_mmhg,
            self.paco2_mmhg,
            self.total_rate_per_min,
            self.effective_tidal_volume_ml,
        )
        return max([np.size(v) for v in brought if v is not None and np.ndim(v) > 0], default=_DRAWS)


def not_passive(tried: Tried) -> str:
    """Why pressures of this chest would mean nothing after the change; empty where they would."""
    if tried.settings.mode not in ("volume", "pressure"):
        return f"mode {tried.settings.mode}, in which the patient breathes"
    total, rate = middle(tried.total_rate_per_min), tried.settings.rate_per_min
    if total is not None and rate is not None and total > rate + RATE_ALLOWANCE:
        return f"total rate about {total:.0f}/min, set {rate:g}: the patient triggers"
    if set_pressure_cmh2o(tried) is not None and total is not None:
        return ""  # the set pressure needs no plateau of a passive breath
    return tried.mechanics.why


def set_pressure_cmh2o(tried: Tried) -> float | None:
    """Pressure above PEEP that pressure control is told to reach."""
    return tried.settings.inspiratory_pressure_cmh2o if tried.settings.mode == "pressure" else None


def driving_pressure_draws(tried: Tried) -> Array | None:
    """Plateau less total PEEP after the change, without the error of reading.

    In pressure control the set pressure above PEEP, which it cannot pass; else tidal volume over compliance,
    whose spread grows with the step of volume and of PEEP (constants above). None where volume or plateau is
    not known.
    """
    above, count = set_pressure_cmh2o(tried), tried.draws()
    if above is not None:
        return np.full(count, above)
    chest, compliance, volume = tried.mechanics, tried.mechanics.compliance_ml_per_cmh2o, tried.volume_ml
    if tried.settings.mode not in ("volume", "pressure") or compliance is None or volume is None:
        return None
    volumes = np.broadcast_to(np.asarray(volume, dtype=np.float64), (count,))
    by_volume = _COMPLIANCE_SD_PER_LOG_VOLUME * np.abs(np.log(volumes / (chest.tidal_volume_ml or 1.0)))
    peep_step = (
        (tried.settings.peep_cmh2o or 0.0) - (chest.set_peep_cmh2o or 0.0) if tried.peep_moves else 0.0
    )
    by_peep = _COMPLIANCE_SD_PER_CMH2O * abs(peep_step)
    spread = np.minimum(np.hypot(by_volume, by_peep), _COMPLIANCE_SD_MOST)
    bent = compliance * np.exp(spread * _symmetric(tried.generator(1), count))
    return plateau_after_tidal_volume_cmh2o(volumes, bent, 0.0)


def plateau_draws(tried: Tried) -> Array | None:
    """Plateau after the change; None where it cannot be worked out."""
    pressure_control = set_pressure_cmh2o(tried) is not None
    driving, peep = driving_pressure_draws(tried), tried.total_peep_cmh2o
    peep = tried.settings.peep_cmh2o if pressure_control else peep
    return None if driving is None or peep is None else peep + driving


def as_read(tried: Tried, pressures_cmh2o: Array) -> Array:
    """Pressures as a person would read them off the ventilator."""
    return pressures_cmh2o + _PLATEAU_READING_SD * _symmetric(tried.generator(2), pressures_cmh2o.size)


def _symmetric(generator: np.random.Generator, count: int) -> Array:
    """Standard normal draws in pairs of opposite sign, so that they add spread and no shift."""
    half = generator.standard_normal((count + 1) // 2)
    return np.concatenate([half, -half])[:count]


def power_draws(tried: Tried) -> Array | None:
    """Mechanical power after the change; None where peak pressure, rate, volume or pressures are not known.

    Peak less plateau is carried on in proportion to flow.
    """
    driving, rate, volume, peep = (
        driving_pressure_draws(tried),
        tried.rate_per_min,
        tried.volume_ml,
        tried.total_peep_cmh2o,
    )
    if driving is None or rate is None or volume is None or peep is None:
        return None
    above = set_pressure_cmh2o(tried)
    if above is not None:
        return power_pressure_control_j_per_min(
            rate, volume, tried.settings.peep_cmh2o or 0.0, np.full(driving.size, above)
        )
    chest = tried.mechanics
    if (
        tried.settings.mode != "volume"
        or chest.mode != "volume"
        or chest.peak_cmh2o is None
        or chest.plateau_cmh2o is None
    ):
        return None
    then, now = chest.flow_l_per_min, flow_of(tried.settings)
    faster = (
        now / then if now is not None and then else (middle(volume) or 0.0) / (chest.tidal_volume_ml or 1.0)
    )
    peak = peep + driving + max(chest.peak_cmh2o - chest.plateau_cmh2o, 0.0) * faster
    return power_volume_control_j_per_min(rate, volume, peak, driving)


@dataclass(frozen=True, slots=True, eq=False)
class TimeConstants:
    """Draws of resistance x compliance as it is (``plain_s``), two to three times that (``cautious_s``), and
    where they come from (``said``)."""

    plain_s: Array
    cautious_s: Array
    said: str


def time_constants(tried: Tried) -> TimeConstants:
    """Of the chest after the change; rates and volumes do not move them.

    Compliance as measured in a passive patient, resistance from peak, plateau and a constant flow; else
    textbook ranges, of obstructive disease where it is charted.
    """
    count, rng, chest = tried.draws(), tried.generator(3), tried.mechanics
    obstructive = "obstructive" in tried.patient.conditions
    usual_compliance, usual_resistance = _OBSTRUCTIVE if obstructive else _OTHERS
    compliance = chest.compliance_ml_per_cmh2o if chest.passive else None
    resistance = chest.resistance_cmh2o_s_per_l if chest.passive else None
    plain_s = time_constant_s(
        _measured_or_usual(compliance, _COMPLIANCE_SD, usual_compliance, rng, count),
        _measured_or_usual(resistance, _RESISTANCE_SD, usual_resistance, rng, count),
    )
    usual = f"as usual in {'obstructive' if obstructive else 'ventilated'} adults"
    said = (
        f"compliance {usual if compliance is None else f'{compliance:.0f} mL/cmH2O measured'}, "
        f"resistance {usual if resistance is None else f'{resistance:.0f} cmH2O s/L measured'}"
    )
    return TimeConstants(plain_s, rng.uniform(*_CAUTION, size=count) * plain_s, said)


def _measured_or_usual(
    measured: float | None, log_sd: float, usual: tuple[float, float], rng: np.random.Generator, count: int
) -> Array:
    """Draws about a measured value, else evenly over the usual range; both streams advance alike."""
    spread, anywhere = rng.standard_normal(count), rng.uniform(*usual, size=count)
    return anywhere if measured is None else measured * np.exp(log_sd * spread)


def expiratory_times_s(tried: Tried) -> Uncertain:
    """Time left to exhale at the total rate; None where rate or inspiratory time is not known."""
    rate = tried.rate_per_min
    inspiratory_s = inspiratory_time_of(tried.settings, middle(rate)) or tried.mechanics.inspiratory_time_s
    if rate is None or inspiratory_s is None:
        return None
    left = expiratory_time_s(rate, inspiratory_s)
    return left if left.ndim else float(left)


def trapped_draws_ml(tried: Tried, left_s: Uncertain, time_constants_s: Array) -> Array | None:
    """Volume that one compartment would keep back at end-expiration; None where the breath is not known."""
    if tried.volume_ml is None or left_s is None:
        return None
    emptied_s = _EMPTY_AFTER * time_constants_s  # longer than this changes nothing and would overflow
    kept = trapped_volume_ml(tried.volume_ml, np.clip(left_s, 0.0, emptied_s), time_constants_s)
    return np.broadcast_to(kept, time_constants_s.shape)
