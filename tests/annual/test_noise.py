"""Red noise in O(n) against dense matrices (slow independent twin), and its spectrum."""

import numpy as np
import pytest

from massfit.annual.noise import RESOLUTION, WHITE_FLOOR, NoiseCovariance, NoiseModel

WHITE = np.array([0.3, 0.8])
MODELS = {
    "sum": NoiseModel(1.0 / np.array([2.0, 20.0, 200.0]), np.array([0.25, 1.44, 0.49]), WHITE),
    # one Ornstein-Uhlenbeck process driven by another
    "smooth": NoiseModel(np.array([0.1, 0.12]), np.array([0.12, -0.1]) / 0.02, WHITE),
    "white": NoiseModel(np.zeros(0), np.zeros(0), WHITE),
}


def dense(days, instrument, model):
    lags = np.abs(days[:, None] - days)
    red = sum((v * np.exp(-r * lags) for r, v in zip(model.rates, model.variances, strict=True)), np.zeros_like(lags))
    least = RESOLUTION**2 + WHITE_FLOOR**2 * model.variances.sum()
    return red + np.diag(model.white[instrument] ** 2 + least)


@pytest.fixture
def days():
    rng = np.random.default_rng(5)
    irregular = np.sort(rng.choice(600, size=180, replace=False)).astype(float)
    # two instruments on some days
    return np.sort(np.append(irregular, irregular[40:90]))


@pytest.fixture
def instrument(days):
    return np.append(0, np.diff(days) == 0).astype(np.int64)


@pytest.mark.parametrize("form", MODELS)
def test_operations_match_dense_matrices(days, instrument, form):
    covariance = dense(days, instrument, MODELS[form])
    noise = NoiseCovariance(days, instrument, MODELS[form])
    columns = np.random.default_rng(1).normal(size=(len(days), 3))
    inverse = np.linalg.inv(covariance)
    assert noise.log_determinant == pytest.approx(np.linalg.slogdet(covariance)[1], rel=1e-9)
    np.testing.assert_allclose(noise.solve(columns), inverse @ columns, atol=1e-9)
    np.testing.assert_allclose(noise.multiply(columns), covariance @ columns, atol=1e-9)
    white = noise.whiten(columns)
    np.testing.assert_allclose(white.T @ white, columns.T @ inverse @ columns, rtol=1e-9)


def test_vanishing_white_noise_keeps_shared_days_definite(days, instrument):
    model = NoiseModel(np.array([0.05]), np.array([1e6]), np.zeros(2))
    noise = NoiseCovariance(days, instrument, model)
    expected = np.linalg.slogdet(dense(days, instrument, model))[1]
    assert noise.log_determinant == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("form", MODELS)
def test_spectrum_is_the_transform_of_the_covariance(form):
    # closed form: density = 2 sum over daily lags of covariance times cosine
    model, frequencies = MODELS[form], np.array([1e-4, 1 / 365.0, 0.02, 0.2, 0.5])
    lags = np.arange(1, 8000)
    covariance = np.exp(-np.outer(lags, model.rates)) @ model.variances
    expected = 2 * (model.variances.sum() + np.mean(WHITE**2))
    expected = expected + 4 * np.cos(2 * np.pi * np.outer(frequencies, lags)) @ covariance
    np.testing.assert_allclose(model.spectrum(frequencies), expected, rtol=1e-9)


def test_memory_is_the_integral_of_the_correlation():
    # closed form: an Ornstein-Uhlenbeck term has its own time scale, one driven by another the sum of both
    assert NoiseModel(np.array([0.05]), np.array([3.0]), WHITE).memory_days == pytest.approx(20.0)
    assert MODELS["smooth"].memory_days == pytest.approx(10.0 + 1 / 0.12)
    assert MODELS["white"].memory_days == 0.0


@pytest.mark.parametrize("form", MODELS)
def test_change_is_what_the_covariance_loses(form):
    # closed form: the mean square of x(t + lag) - x(t) is twice the variance less the covariance
    covariance = dense(np.array([0.0, 17.0]), np.array([0, 0]), MODELS[form])
    white = WHITE[0] ** 2 + RESOLUTION**2 + WHITE_FLOOR**2 * MODELS[form].variances.sum()
    assert MODELS[form].change(17.0) == pytest.approx(2 * (covariance[0, 0] - white - covariance[0, 1]), abs=1e-12)


def test_coloured_columns_have_the_covariance_and_whiten_undoes_them():
    rng = np.random.default_rng(2)
    days = np.sort(np.concatenate([rng.uniform(0, 60, 30), [7.0, 7.0]]))
    instrument = np.arange(32) % 2
    model = NoiseModel(np.array([0.05, 0.06]), np.array([6.0, -5.0]) * 900.0, np.array([8.0, 3.0]))
    noise = NoiseCovariance(days, instrument, model)
    root = noise.color(np.eye(32))
    np.testing.assert_allclose(root @ root.T, noise.multiply(np.eye(32)), rtol=0, atol=1e-9 * 900)
    np.testing.assert_allclose(noise.whiten(root), np.eye(32), atol=1e-9)
