"""The sampler where the answer is known in closed form: linear-Gaussian, two modes, and none at all.

A sampler's own error is of the order 1 / sqrt(draws); moved draws are not independent, so each tolerance
counts only a share of them.
"""

import numpy as np
import pytest
from scipy.stats import kstest, multivariate_normal, norm

from engine.fit.tempering import Tempered, temper

DRAWS = 4000
# Over 30 seeds means spread 1.0 to 1.2, the share of one of two modes 1.7 times as far as independent draws.
INDEPENDENT = DRAWS / 1.7**2
FOUR_SE = 4.0 / np.sqrt(INDEPENDENT)  # of a mean, in posterior SD: one in 16,000 by chance
SD_ERROR = 4.0 / np.sqrt(2.0 * INDEPENDENT)  # of an SD, as a share of it
EVIDENCE_ERROR = 0.15  # of log evidence: over seeds of 1,000 draws it spreads by 0.09, eight of them by 0.03
DIMENSIONS = 6

# y = A e + noise, e standard normal in six dimensions, three measurements of very different precision.
DESIGN = np.array(
    [
        [1.0, 0.5, 0.0, 0.2, 0.0, 0.0],
        [0.0, 1.0, -0.8, 0.0, 0.3, 0.0],
        [0.3, 0.0, 0.4, 0.0, 0.0, 1.0],
    ]
)
NOISE_SD = np.array([0.05, 0.1, 0.5])
MEASURED = np.array([1.5, -1.0, 0.7])


def linear(e: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Log density of `MEASURED` under each draw."""
    return norm.logpdf(MEASURED, e @ DESIGN.T, NOISE_SD).sum(axis=1)


def run(seed: int = 1, draws: int = DRAWS, log_likelihood=linear, dimensions: int = DIMENSIONS) -> Tempered:
    return temper(log_likelihood, draws, dimensions, np.random.default_rng(seed))


@pytest.fixture(scope="module")
def found() -> Tempered:
    return run()


def closed_form() -> tuple[np.ndarray, np.ndarray]:
    precision = np.eye(DIMENSIONS) + DESIGN.T @ np.diag(NOISE_SD**-2) @ DESIGN
    covariance = np.linalg.inv(precision)
    return covariance @ DESIGN.T @ (MEASURED / NOISE_SD**2), covariance


def test_mean_of_a_linear_posterior(found):
    mean, covariance = closed_form()
    away = (found.innovations.mean(axis=0) - mean) / np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(away, 0.0, atol=FOUR_SE)


def test_covariance_of_a_linear_posterior(found):
    _, covariance = closed_form()
    # Whitened by the true covariance the draws must have the unit matrix, in every direction at once.
    white = found.innovations @ np.linalg.inv(np.linalg.cholesky(covariance)).T
    np.testing.assert_allclose(np.cov(white, rowvar=False), np.eye(DIMENSIONS), atol=2.0 * SD_ERROR)


def test_whole_marginals_of_a_linear_posterior(found):
    mean, covariance = closed_form()
    for k in range(DIMENSIONS):
        statistic = kstest(found.innovations[:, k], norm(mean[k], np.sqrt(covariance[k, k])).cdf).statistic
        assert statistic < 1.95 / np.sqrt(INDEPENDENT)  # Kolmogorov's critical value at 0.001


def test_log_evidence_against_the_closed_form():
    true = multivariate_normal(np.zeros(3), DESIGN @ DESIGN.T + np.diag(NOISE_SD**2)).logpdf(MEASURED)
    over_seeds = [run(seed, draws=1000).log_evidence for seed in range(8)]
    assert np.mean(over_seeds) == pytest.approx(true, abs=EVIDENCE_ERROR)


def test_ancestors_are_known_and_move_with_their_draws():
    """Half of the ancestors stand at 0, half at 10; only the second half explains a measurement near 10."""
    centre = np.where(np.arange(1000) < 500, 0.0, 10.0)

    def near_ten(e: np.ndarray, rows: np.ndarray) -> np.ndarray:
        return norm.logpdf(10.5, centre[rows] + e[:, 0], 0.3)

    result = run(draws=1000, log_likelihood=near_ten, dimensions=2)
    assert np.all(centre[result.rows] == 10.0)
    assert result.distinct == len(np.unique(result.rows)) <= 500
    shrink = 1.0 / (1.0 + 0.3**2)
    assert result.innovations[:, 0].mean() == pytest.approx(
        0.5 * shrink, abs=0.3 * FOUR_SE * np.sqrt(DRAWS / 1000)
    )
    # Half of the draws are lost at once: the evidence is that of a mixture.
    assert result.log_evidence == pytest.approx(
        np.log(0.5) + norm.logpdf(0.5, 0.0, np.hypot(1.0, 0.3)), abs=EVIDENCE_ERROR
    )


MODE, MODE_SD = 1.2, 0.2


def two_modes(e: np.ndarray, rows: np.ndarray) -> np.ndarray:
    """Only |e| is seen, so that plus and minus explain it alike."""
    return norm.logpdf(MODE, np.abs(e[:, 0]), MODE_SD)


def test_two_modes_keep_their_weight_and_width():
    shares, centres = [], []
    for seed in range(6):
        first = run(seed, log_likelihood=two_modes, dimensions=3).innovations[:, 0]
        shares.append(np.mean(first > 0.0))
        centres.append(np.abs(first).mean())
    assert np.mean(shares) == pytest.approx(0.5, abs=4.0 * 0.5 / np.sqrt(6 * INDEPENDENT))
    shrink = 1.0 / (1.0 + MODE_SD**2)
    width = MODE_SD * np.sqrt(shrink)
    assert np.mean(centres) == pytest.approx(MODE * shrink, abs=4.0 * width / np.sqrt(6 * INDEPENDENT))


def test_likelihood_that_says_nothing_leaves_the_belief_as_it_was():
    result = run(log_likelihood=lambda e, rows: np.zeros(len(e)))
    assert result.log_evidence == pytest.approx(0.0, abs=1e-12)  # exact: every weight is one
    np.testing.assert_allclose(result.innovations.mean(axis=0), 0.0, atol=FOUR_SE)
    np.testing.assert_allclose(result.innovations.std(axis=0), 1.0, atol=SD_ERROR)
    assert result.distinct == DRAWS


def test_impossible_draws_are_never_kept():
    """A wall: the observation cannot be explained below zero, and the tail beyond it must come out right."""
    result = run(log_likelihood=lambda e, rows: np.where(e[:, 0] > 0.0, 0.0, -np.inf), dimensions=2)
    assert np.all(result.innovations[:, 0] > 0.0)
    assert result.innovations[:, 0].mean() == pytest.approx(np.sqrt(2.0 / np.pi), abs=FOUR_SE * 0.603)
    assert result.log_evidence == pytest.approx(np.log(0.5), abs=4.0 / np.sqrt(DRAWS))


def test_same_seed_same_draws_other_seed_others():
    first, second, other = run(3, 500), run(3, 500), run(4, 500)
    np.testing.assert_array_equal(first.innovations, second.innovations)
    np.testing.assert_array_equal(first.rows, second.rows)
    assert first.log_evidence == second.log_evidence
    assert not np.array_equal(first.innovations, other.innovations)


def test_nothing_explains():
    with pytest.raises(FloatingPointError, match="no draw of the belief explains the observation"):
        run(draws=100, log_likelihood=lambda e, rows: np.full(len(e), -np.inf))
