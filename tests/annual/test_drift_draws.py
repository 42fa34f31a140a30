"""Draws of the drift against brute force: own columns, dense matrices, a plain grid of time constants."""

import numpy as np
import pytest

from massfit.annual.drift_draws import draw_drift
from massfit.annual.noise import NoiseModel
from massfit.annual.record import ReducedRecord
from massfit.records.record import Calibrations
from massfit.settings import Priors

NOISE = NoiseModel(np.array([1 / 25.0]), np.array([12.0**2]), np.array([6.0]))
PRIORS = Priors()
DRAWS = 4000


def invented(drift: str, *, calibrated: bool = False, days: int = 420) -> ReducedRecord:
    rng = np.random.default_rng(3)
    t = np.arange(days, dtype=float)[np.r_[0:150, 170:days]]  # a gap of twenty days
    red = np.linalg.cholesky(dense(t)) @ rng.standard_normal(len(t))
    pressure = 700.0 * np.exp(-t / 60.0) + 50.0 * t / 365.25 + 80.0 * np.cos(2 * np.pi * t / 365.2422) + red
    pressure[t >= 250.0] += 40.0
    start = np.datetime64("2016-01-01", "ns")
    time = start + (t * 86_400e9).astype("timedelta64[ns]")
    readings = None
    if calibrated:
        own = np.array([5.0, 100.0, 200.0, 400.0])
        values = 700.0 * np.exp(-own / 60.0) + 50.0 * own / 365.25 + rng.normal(0.0, 8.0, 4)
        readings = Calibrations(start + (own * 86_400e9).astype("timedelta64[ns]"), values, np.full(4, 8.0))
    steps = (start + np.timedelta64(250, "D"),)
    return ReducedRecord("one", time, pressure, np.empty((0, len(t))), start, drift, steps, calibrations=readings)


def dense(t: np.ndarray) -> np.ndarray:
    return 144.0 * np.exp(-np.abs(t[:, None] - t) / 25.0) + 36.0 * np.eye(len(t))


def brute_force(record: ReducedRecord) -> tuple[np.ndarray, np.ndarray]:
    """Mean and covariance of the drift on the days, and at the calibrations behind them."""
    t = (record.time - record.start) / np.timedelta64(1, "D")
    readings = record.calibrations
    own = np.zeros(0) if readings is None else (readings.time - record.start) / np.timedelta64(1, "D")
    below = len(own)
    every = np.concatenate([t, own])
    of_record = np.arange(len(every)) < len(t)
    phase = 2 * np.pi * t / 365.2422
    padded = [np.append(f(k * phase), np.zeros(below)) for k in (1, 2) for f in (np.cos, np.sin)]
    flat = [*padded, of_record, of_record & (every >= 250.0), *([~of_record] if below else [])]
    columns = np.column_stack([*flat, every / 365.25]).astype(float)
    precision = np.append(np.zeros(len(flat)), (100.0 * PRIORS.drift_slope_sd_hpa_per_year) ** -2.0)
    covariance = np.zeros((len(every), len(every)))
    covariance[: len(t), : len(t)] = dense(t)
    covariance[len(t) :, len(t) :] = np.eye(below) * (0.0 if readings is None else readings.sd**2)
    inverse = np.linalg.inv(covariance)
    data = np.append(record.pressure, readings.pressure if below else [])
    times = np.geomspace(PRIORS.drift_time_min_days, t[-1], 120) if "exp" in record.drift else [None]
    drift = np.zeros(columns.shape[1], bool)
    drift[[4, 5, -1]] = True  # level, step, slope
    log_weight, means, covariances = [], [], []
    for time_constant in times:
        shape, own_precision, own_drift = columns, precision, drift
        if time_constant is not None:
            shape = np.column_stack([columns, np.exp(-every / time_constant)])
            own_precision = np.append(precision, (100.0 * PRIORS.drift_exponential_sd_hpa) ** -2.0)
            own_drift = np.append(drift, True)
        normal = shape.T @ inverse @ shape + np.diag(own_precision)
        spread = np.linalg.inv(normal)
        found = spread @ (shape.T @ inverse @ data)
        left = data - shape @ found
        log_weight.append(-0.5 * (left @ inverse @ data) - 0.5 * np.linalg.slogdet(normal)[1])
        rows = np.where(own_drift, shape, 0.0)
        means.append(rows @ found)
        covariances.append(rows @ spread @ rows.T)
    weight = np.exp(np.array(log_weight) - max(log_weight))
    weight /= weight.sum()
    mean = weight @ np.array(means)
    shift = np.array(means) - mean
    return mean, np.einsum("k,kij->ij", weight, np.array(covariances)) + (weight[:, None] * shift).T @ shift


@pytest.mark.parametrize("calibrated", [False, True], ids=["record alone", "with calibrations"])
@pytest.mark.parametrize("drift", ["linear", "exponential+linear"])
def test_draws_have_the_moments_of_the_posterior(drift: str, calibrated: bool) -> None:
    record = invented(drift, calibrated=calibrated)
    rng = np.random.default_rng(7)
    (drawn,) = draw_drift([record], NOISE, reference_year=2016, rng=rng, count=DRAWS)
    mean, covariance = brute_force(record)
    rows = np.array([0, 3, 20, 120, 200, 399])
    if calibrated:
        # their level is their own: changes from the first alone
        found = drawn.calibrations[:, 1:] - drawn.calibrations[:, :1]
        change = np.eye(4)[1:] - np.eye(4)[0]
        own, spread = change @ mean[-4:], change @ covariance[-4:, -4:] @ change.T
        compare(found, own, spread)
    compare(drawn.days[:, rows], mean[rows], covariance[np.ix_(rows, rows)])


def compare(drawn: np.ndarray, mean: np.ndarray, covariance: np.ndarray) -> None:
    sd = np.sqrt(np.diag(covariance))
    # four and a half standard errors of 4000 draws; tails of the mixture over time constants count double in the spread
    np.testing.assert_allclose((drawn.mean(axis=0) - mean) / sd, 0.0, atol=4.5 / np.sqrt(DRAWS))
    correlation = (np.cov(drawn.T) - covariance) / np.outer(sd, sd)
    np.testing.assert_allclose(correlation, 0.0, atol=2 * 4.5 / np.sqrt(DRAWS))


def test_deployments_of_a_site_are_drawn_together() -> None:
    """Two recorders side by side share the ocean's noise: their drifts are correlated."""
    first = invented("linear")
    second = ReducedRecord("two", first.time, first.pressure + 3.0, first.circulation, first.start, "linear")
    noise = NoiseModel(np.array([1 / 25.0]), np.array([12.0**2]), np.array([2.0, 2.0]))
    one, two = draw_drift([first, second], noise, reference_year=2016, rng=np.random.default_rng(1), count=500)
    slopes = [each.days[:, 99] - each.days[:, 0] for each in (one, two)]
    assert np.corrcoef(*slopes)[0, 1] > 0.9
