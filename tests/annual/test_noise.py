"""Red noise in O(n) against dense matrices (slow independent twin), and the priors against their closed form."""

import numpy as np
import pytest
from scipy import stats

from massfit.annual.noise import WHITE_FLOOR, NoiseCovariance, NoisePriors

SCALES = np.array([2.0, 20.0, 200.0])
AMPLITUDES = np.array([0.5, 1.2, 0.7, 0.3])


def dense(days, amplitudes):
    lags = np.abs(days[:, None] - days)
    red = sum(s**2 * np.exp(-lags / tau) for s, tau in zip(amplitudes[:-1], SCALES, strict=True))
    return red + amplitudes[-1] ** 2 * np.eye(len(days))


@pytest.fixture
def days():
    rng = np.random.default_rng(5)
    irregular = np.sort(rng.choice(600, size=180, replace=False)).astype(float)
    # two instruments on some days
    return np.sort(np.append(irregular, irregular[40:90]))


def test_operations_match_dense_matrices(days):
    covariance, noise = dense(days, AMPLITUDES), NoiseCovariance(days, SCALES, AMPLITUDES)
    columns = np.random.default_rng(1).normal(size=(len(days), 3))
    inverse = np.linalg.inv(covariance)
    assert noise.log_determinant == pytest.approx(np.linalg.slogdet(covariance)[1], rel=1e-9)
    np.testing.assert_allclose(noise.solve(columns), inverse @ columns, atol=1e-9)
    np.testing.assert_allclose(noise.multiply(columns), covariance @ columns, atol=1e-9)
    white = noise.whiten(columns)
    np.testing.assert_allclose(white.T @ white, columns.T @ inverse @ columns, rtol=1e-9)


def test_vanishing_white_noise_keeps_shared_days_definite(days):
    noise = NoiseCovariance(days, SCALES, np.array([0.5, 1.2, 0.7, 0.0]))
    expected = np.linalg.slogdet(dense(days, np.array([0.5, 1.2, 0.7, 1.2 * WHITE_FLOOR])))[1]
    assert noise.log_determinant == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("score", [-6.0, -3.0, -1.0, 0.0, 1.0, 3.0, 5.0])
def test_amplitudes_are_quantiles_of_half_t(score):
    noise = NoisePriors(SCALES[:1], np.array([50.0, 20.0]))
    amplitudes = noise.amplitudes(np.array([score, score]))
    # the probability beyond keeps its digits on either side
    inside = stats.t(4).cdf(amplitudes / [50.0, 20.0]) - 0.5
    np.testing.assert_allclose(2 * inside, stats.norm.cdf(score), rtol=1e-7)


def test_scores_of_any_size_give_finite_amplitudes():
    noise = NoisePriors(SCALES[:1], np.array([50.0, 20.0]))
    extreme = noise.amplitudes(np.array([[-40.0, 40.0], [8.0, -9.0]]))
    assert np.isfinite(extreme).all()
    assert (extreme >= 0).all()
