"""The belief about a lung, carried from gas to gas.

Between two gases it drifts (`engine.lung.drift`); each gas narrows it (`engine.fit.tempering`). A new gas
updates the draws and refits nothing. The same seed gives the same draws.

References
----------
liu2001 : J. Liu, M. West, "Combined parameter and state estimation in simulation-based filtering", in
    "Sequential Monte Carlo Methods in Practice", Springer, 197-223, 2001.
"""

from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import datetime, timedelta

import numpy as np
from numpy.typing import NDArray

from engine.fit.observation import Observed, carrying_hb_g_per_dl, gas_at_37
from engine.fit.tempering import Unexplained, temper
from engine.fit.underway import underway_at
from engine.lung.arterial import arterial_gas, ventilation
from engine.lung.breathing import Breathing, breathing_at, measured_value
from engine.lung.drift import READ_AS, drift_between, heavy_tail
from engine.lung.prior import PARAMETERS, Belief, Prior, prior_of
from engine.lung.settling import gas_on_the_way, settled_gas
from engine.physics.acid_base import standard_base_excess_mmol_per_l
from engine.physics.air import STANDARD_BAROMETRIC_MMHG, barometric_mmhg_from_altitude
from engine.physics.exchange import Exchange
from engine.record import Case, Settings, Site

Array = NDArray[np.float64]
Rows = NDArray[np.int64]

DRAWS = 1000
FIT_UNITS = 13  # V/Q nodes while fitting: PaO2 of the worst of a thousand lungs within 2 %, below scatter
SMOOTHING = 0.15  # share of the posterior SD that each draw is moved by before it drifts
NEARBY = timedelta(hours=1)  # a cardiac output, VO2, VCO2 or SvO2 this old still belongs to the gas
STANDARD_WEIGHT_KG = 70.0


class NothingToSay(ValueError):
    """There is no usable gas to learn from; says why."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Fit:
    """The belief after the last usable gas of a case, and what a forecast needs beside it.

    ``surprise`` is, for each gas so far, its log density under the belief before it; ``distinct`` the number
    of ancestors left of the draws at the last gas.
    """

    case: Case
    seed: int
    read_as: str
    belief: Belief
    reference: Breathing
    gas_number: int
    hb_g_per_dl: float
    barometric_mmhg: float
    surprise: tuple[float, ...]
    distinct: int

    @property
    def gas_time(self) -> datetime:
        """When the last usable gas was drawn."""
        return self.case.entries[self.gas_number].gas_time


def fit(case: Case, *, seed: int = 1, draws: int = DRAWS, read_as: str = "seen") -> Fit:
    """The belief after all usable gases of ``case``.

    Parameters
    ----------
    case : Case
    seed : int
        Same seed, same draws.
    draws : int
    read_as : str
        ``seen``: charted changes of FiO2 are evidence about the lung. ``done``: they are not.

    Raises
    ------
    NothingToSay
        If no gas of the case can be used.
    """
    fits = deque(fits_along(case, seed=seed, draws=draws, read_as=read_as), maxlen=1)
    if not fits:
        raise NothingToSay(_why_nothing(case))
    return up_to(fits[0], case)


def _why_nothing(case: Case) -> str:
    gases = [e.gas for e in case.entries if e.gas is not None]
    if not gases:
        return "there is no blood gas in this case yet"
    return (
        "no gas of this case can be used: each is venous, capillary, excluded or under extracorporeal support"
    )


def _no_lung(observed: Observed, hb: float, time: datetime) -> str:
    return (
        f"no lung explains the gas of {time:%Y-%m-%d %H:%M} (pH {observed.ph:.2f}, PaCO2 "
        f"{observed.paco2_mmhg:.0f} and PaO2 {observed.pao2_mmhg:.0f} mmHg, {hb:.1f} g/dL of haemoglobin "
        "that carries oxygen): check it, or exclude it with the reason"
    )


def barometric_mmhg(site: Site) -> float:
    """Station pressure where measured, else by altitude, else 760."""
    if site.barometric_mmhg is not None:
        return site.barometric_mmhg
    if site.altitude_m is not None:
        return float(barometric_mmhg_from_altitude(site.altitude_m))
    return STANDARD_BAROMETRIC_MMHG


def fits_along(case: Case, *, seed: int = 1, draws: int = DRAWS, read_as: str = "seen") -> Iterator[Fit]:
    """The belief after each usable gas in turn; each `Fit` holds the case up to and with that gas's entry."""
    if read_as not in READ_AS:
        raise ValueError(f"read_as = {read_as!r}: expected one of {', '.join(READ_AS)}")
    rng, now = np.random.default_rng(seed), None
    for number in case.usable_gases():
        now = _after_gas(case.before(number + 1), number, now, rng, seed, draws, read_as)
        yield now


def _after_gas(
    case: Case,
    number: int,
    last: Fit | None,
    rng: np.random.Generator,
    seed: int,
    draws: int,
    read_as: str,
) -> Fit:
    gas, time = case.entries[number].gas, case.entries[number].gas_time
    assert gas is not None  # a usable gas
    observed, hb, pressure = (
        _observed(case, number, time),
        carrying_hb_g_per_dl(case, number),
        barometric_mmhg(case.site),
    )
    breathing = breathing_at(case, _settings_of_gas(case, number))
    underway = underway_at(case, time)
    reference = breathing if last is None else last.reference
    if last is None:
        excess = float(standard_base_excess_mmol_per_l(observed.ph, observed.paco2_mmhg))
        before, centre, width = _from_prior(prior_of(case.patient, breathing, excess), rng, draws)
    else:
        before, centre, width = _from_last(last, case, number, time, rng, read_as)
    weight_kg = case.patient.weight_kg or STANDARD_WEIGHT_KG
    obstructive = "obstructive" in case.patient.conditions

    def drawn(e: Array, rows: Rows) -> Belief:
        values = centre[rows] + width[rows] * e
        return Belief(values, before.active[rows], before.own[rows])

    def give(belief: Belief, breathing: Breathing) -> Exchange:
        given = ventilation(belief, breathing, reference)
        return arterial_gas(
            belief, breathing, given, hb_g_per_dl=hb, barometric_mmhg=pressure, units=FIT_UNITS
        )

    def log_likelihood(e: Array, rows: Rows) -> Array:
        belief = drawn(e, rows)
        exchange = give(belief, breathing)
        if underway is None:
            return observed.log_likelihood(belief, settled_gas(exchange), exchange)
        unsettled = gas_on_the_way(
            belief,
            give(belief, breathing_at(case, underway.before)),
            exchange,
            underway.minutes,
            alveolar_l_per_min=ventilation(belief, breathing, reference).alveolar_l_per_min,
            weight_kg=weight_kg,
            obstructive=obstructive,
        )
        return observed.log_likelihood(belief, unsettled, exchange)

    try:
        found = temper(log_likelihood, draws, len(PARAMETERS), rng)
    except Unexplained:
        if last is not None:  # begin anew: what was believed is no help with this gas
            return _after_gas(case, number, None, rng, seed, draws, read_as)
        raise NothingToSay(_no_lung(observed, hb, time)) from None
    return Fit(
        case=case,
        seed=seed,
        read_as=read_as,
        belief=drawn(found.innovations, found.rows),
        reference=reference,
        gas_number=number,
        hb_g_per_dl=hb,
        barometric_mmhg=pressure,
        surprise=(*(last.surprise if last else ()), found.log_evidence),
        distinct=found.distinct,
    )


def _from_prior(prior: Prior, rng: np.random.Generator, draws: int) -> tuple[Belief, Array, Array]:
    shape = (draws, len(PARAMETERS))
    active = rng.permutation(np.arange(draws) < round(prior.active * draws))
    own = (rng.permutation(draws) + 0.5) / draws
    centre, width = np.broadcast_to(prior.centre, shape), np.broadcast_to(prior.width, shape)
    return Belief(np.array(centre), active, own), centre, width


def _from_last(
    last: Fit, case: Case, number: int, time: datetime, rng: np.random.Generator, read_as: str
) -> tuple[Belief, Array, Array]:
    since = case.entries[last.gas_number + 1 : number + 1]
    hours = max((time - last.gas_time) / timedelta(hours=1), 0.0)
    in_force, start = settings_at(case, last.gas_number), _smoothed(last.belief, rng)
    tail = heavy_tail(rng, len(start))
    drift = drift_between(start, since, in_force, hours, tail, read_as=read_as)
    return start, start.values + drift.shift, drift.sd


def _smoothed(belief: Belief, rng: np.random.Generator) -> Belief:
    """The draws of each kind redrawn from a normal kernel that keeps their mean and covariance (liu2001).

    What hardly drifts would else descend from ever fewer of the first draws.
    """
    values = belief.values.copy()
    for kind in (True, False):
        rows = np.flatnonzero(belief.active == kind)
        if len(rows) > values.shape[1]:
            centre = values[rows].mean(axis=0)
            noise = rng.multivariate_normal(
                np.zeros(len(centre)), np.cov(values[rows], rowvar=False), len(rows)
            )
            values[rows] = centre + np.sqrt(1.0 - SMOOTHING**2) * (values[rows] - centre) + SMOOTHING * noise
    return Belief(values, belief.active, belief.own)


def settings_at(case: Case, number: int) -> Settings:
    """Settings in force from entry ``number`` on."""
    in_force = Settings()
    for entry in case.entries[: number + 1]:
        in_force = in_force.then(entry.settings)
    return in_force


def _settings_of_gas(case: Case, number: int) -> Settings:
    """Settings in force when the gas of entry ``number`` was drawn, which may be before it was charted.

    Where those then in force do not yet make a breath, the ones charted with the gas are all that is known.
    """
    charted, time = settings_at(case, number), case.entries[number].gas_time
    drawn = max((n for n in range(number + 1) if case.entries[n].time <= time), default=number)
    then = settings_at(case, drawn)
    complete = None not in (
        then.mode,
        then.rate_per_min,
        then.fio2,
        then.tidal_volume_ml or charted.tidal_volume_ml,
    )
    return then if complete else charted


def _observed(case: Case, number: int, time: datetime) -> Observed:
    gas = case.entries[number].gas
    assert gas is not None  # a usable gas
    ph, paco2, pao2 = gas_at_37(gas)
    beside = {
        field: measured_value(case, field, time, NEARBY)
        for field in ("vco2_ml_per_min", "vo2_ml_per_min", "cardiac_output_l_per_min", "svo2")
    }
    return Observed(ph=ph, paco2_mmhg=paco2, pao2_mmhg=pao2, sao2=gas.sao2, **beside)


def up_to(fit: Fit, case: Case) -> Fit:
    """The same belief with what was charted since its last gas, and no later gas."""
    return replace(fit, case=case)
