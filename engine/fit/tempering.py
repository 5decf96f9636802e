"""From belief before a gas to belief after it: tempered sequential Monte Carlo.

Every draw is written as ``centre + width * e`` with standard normal ``e``, its own centre and width (where
it came from and how far it may have moved). The likelihood is let in by steps, each as large as keeps half
of the draws effective; after each step draws are resampled and moved by a Metropolis kernel that leaves the
tempered posterior unchanged. The kernel is a Crank-Nicolson step towards the normal law that the draws
themselves show, so it stays good in eleven dimensions.

References
----------
delmoral2006 : P. Del Moral, A. Doucet, A. Jasra, "Sequential Monte Carlo samplers", J. R. Stat. Soc. B 68,
411-436, 2006. cotter2013 : S. L. Cotter, G. O. Roberts, A. M. Stuart, D. White, "MCMC methods for
functions", Stat. Sci. 28, 424-446, 2013.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Rows = NDArray[np.int64]

EFFECTIVE_SHARE = 0.5  # of the draws, kept at each step of the likelihood
MOVES = 2  # of the kernel after each step
FIRST_STRIDE = 0.7  # of the kernel: 1 proposes afresh from the fitted normal, 0 stays
ACCEPTANCE = 0.35  # the stride grows above it and shrinks below
MOST_STEPS = 60


class Unexplained(FloatingPointError):
    """No draw of the belief can explain the observation at all."""


@dataclass(frozen=True, slots=True, eq=False)
class Tempered:
    """What tempering gives: the innovations, the row each draw descends from, and how it went.

    ``log_evidence`` is the log density of the observation under the belief before it; ``distinct`` the
    number of ancestors left; ``accepted`` the share of moves taken.
    """

    innovations: Array
    rows: Rows
    log_evidence: float
    distinct: int
    accepted: float


def temper(
    log_likelihood: Callable[[Array, Rows], Array], draws: int, dimensions: int, rng: np.random.Generator
) -> Tempered:
    """Draws of the posterior of ``e`` and their ancestors.

    Parameters
    ----------
    log_likelihood : callable
        Of innovations (draws, dimensions) and the ancestors' row numbers (draws,); -inf where impossible.
    draws, dimensions : int
    rng : numpy Generator

    Raises
    ------
    Unexplained
        If no draw can explain the observation at all.
    """
    e, rows = rng.standard_normal((draws, dimensions)), np.arange(draws)
    level = log_likelihood(e, rows)
    if not np.isfinite(level).any():
        raise Unexplained("no draw of the belief explains the observation")
    power, evidence, stride, taken, tried = 0.0, 0.0, FIRST_STRIDE, 0.0, 0
    for _ in range(MOST_STEPS):
        step = _step(level, 1.0 - power)
        weight, gain = _weights(step * level)
        power, evidence = power + step, evidence + gain
        chosen = _systematic(weight, rng)
        e, rows, level = e[chosen], rows[chosen], level[chosen]
        for _ in range(MOVES):
            e, level, share = _move(e, rows, level, power, stride, log_likelihood, rng)
            stride = float(np.clip(stride * np.exp(share - ACCEPTANCE), 0.05, 0.95))
            taken, tried = taken + share, tried + 1
        if power >= 1.0:
            break
    return Tempered(e, rows, evidence, len(np.unique(rows)), taken / max(tried, 1))


def _step(level: Array, left: float) -> float:
    """The largest step of the power that keeps enough draws effective, by bisection."""
    if _effective(left * level) >= EFFECTIVE_SHARE:
        return left
    low, high = 0.0, left
    for _ in range(40):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if _effective(middle * level) >= EFFECTIVE_SHARE else (low, middle)
    return max(low, 1e-9)


def _weights(log_weight: Array) -> tuple[Array, float]:
    top = log_weight.max()
    weight = np.exp(log_weight - top)
    return weight / weight.sum(), float(top + np.log(weight.mean()))


def _effective(log_weight: Array) -> float:
    weight = _weights(log_weight)[0]
    return float(1.0 / np.sum(weight**2) / len(weight))


def _systematic(weight: Array, rng: np.random.Generator) -> Rows:
    """Systematic resampling: one random number, least extra noise."""
    places = (rng.random() + np.arange(len(weight))) / len(weight)
    return np.minimum(np.searchsorted(np.cumsum(weight), places), len(weight) - 1)


def _move(
    e: Array,
    rows: Rows,
    level: Array,
    power: float,
    stride: float,
    log_likelihood: Callable[[Array, Rows], Array],
    rng: np.random.Generator,
) -> tuple[Array, Array, float]:
    """One Metropolis move of all draws; returns innovations, log likelihood and the share taken."""
    centre = e.mean(axis=0)
    factor = np.linalg.cholesky(np.cov(e, rowvar=False) + 1e-6 * np.eye(e.shape[1]))
    proposed = (
        centre + np.sqrt(1.0 - stride**2) * (e - centre) + stride * rng.standard_normal(e.shape) @ factor.T
    )
    new = log_likelihood(proposed, rows)

    def misfit(x: Array) -> Array:
        """Log of the target's prior over the normal law that the kernel leaves unchanged."""
        whitened = np.linalg.solve(factor, (x - centre).T)
        return np.asarray(-0.5 * np.sum(x**2, axis=1) + 0.5 * np.sum(whitened**2, axis=0))

    gain = power * (new - level) + misfit(proposed) - misfit(e)
    taken = np.log(rng.random(len(e))) < gain
    return (
        np.where(taken[:, None], proposed, e),
        np.where(taken, new, level),
        float(taken.mean()),
    )
