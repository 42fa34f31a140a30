"""What a site is judged by: recovery of known truth, dense twins, and controls that must fail."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.annual.design import build_design
from massfit.annual.diagnostics import diagnose_site
from massfit.annual.fit import fit_site
from massfit.settings import Priors

TRUTH = np.array([60.0, 50.0])
RED = Priors(noise_forms=("exponential",))
WHITE = Priors(noise_forms=("white",))


def judge(records, priors=RED):
    rng = np.random.default_rng(1)
    fit = fit_site(records, models=[], reference_year=2016, rng=rng, priors=priors)
    return fit, diagnose_site(records, fit, reference_year=2016, rng=rng, priors=priors)


@pytest.fixture(scope="module")
def record(make_record, make_red):
    rng = np.random.default_rng(31)
    ocean = make_red(rng, 1400, 30.0, 15.0)
    whole = make_record(rng, count=1400, size=-900.0, time_constant=50.0, slope=150.0, ocean=ocean, white=8.0)
    # lost days and a gap of two months
    kept = rng.random(1400) > 0.05
    kept[600:660] = False
    blank = np.empty((0, int(kept.sum())))
    return replace(whole, time=whole.time[kept], pressure=whole.pressure[kept], circulation=blank)


@pytest.fixture(scope="module")
def right(record):
    return judge([record])


@pytest.fixture(scope="module")
def wrong(record):
    """Control: the noise is taken as white."""
    return judge([record], WHITE)


def excess(spectrum):
    return (spectrum.density / spectrum.expected - 1) * np.sqrt(spectrum.frequencies)


def test_residual_spectrum_is_what_the_fit_expects(right, wrong):
    spectrum = right[1].spectrum
    # a mean of m exponential deviates has a standard error of 1 / sqrt(m)
    assert np.mean(excess(spectrum) ** 2) < 2.5
    assert np.abs(excess(wrong[1].spectrum)).max() > 20.0
    # Parseval: the density integrates to the variance of the residuals
    total = np.sum(spectrum.density * spectrum.frequencies) / (365.25 * 1400 / 365.25)
    assert total == pytest.approx(right[0].reduced_sd ** 2, rel=0.15)


def test_expected_spectrum_matches_dense_matrices(make_record):
    rng = np.random.default_rng(3)
    part = make_record(rng, count=120, every=3, drift="linear")
    fit, judged = judge([part])
    design = build_design([part], reference_year=2016, priors=RED)
    noise, model = design.covariance(fit.noise.typical), fit.noise.typical
    covariance, columns = noise.multiply(np.eye(120)), design.fixed
    inverse = np.linalg.inv(covariance)
    hat = columns @ np.linalg.solve(columns.T @ inverse @ columns + np.diag(design.precision), columns.T @ inverse)
    left = (np.eye(120) - hat) @ covariance @ (np.eye(120) - hat).T
    frequency = judged.spectrum.cycles_per_year[:5] / 365.25
    angle = 2 * np.pi * frequency * design.days[:, None]
    cosine, sine = np.cos(angle), np.sin(angle)
    expected = 2 / 120 * (np.sum(cosine * (left @ cosine), axis=0) + np.sum(sine * (left @ sine), axis=0))
    # bins of one frequency; the twin leaves out what the slope's prior adds, which is tiny
    assert np.all(judged.spectrum.frequencies[:3] == 1)
    np.testing.assert_allclose(judged.spectrum.expected[:3], expected[:3], rtol=1e-3)
    np.testing.assert_allclose(judged.spectrum.noise, model.spectrum(judged.spectrum.cycles_per_year / 365.25))


def test_whitened_residuals_are_white_where_the_noise_is_right(right, wrong):
    assert right[1].whiteness.p_value > 1e-3
    assert right[1].whiteness.mean_square == pytest.approx(1.0, abs=0.15)
    assert wrong[1].whiteness.p_value < 1e-9
    assert wrong[1].whiteness.autocorrelation[0] > 0.5


def test_each_year_holds_the_cycle_and_a_year_that_differs_is_seen(record, right):
    years = right[1].years
    assert [year.year for year in years] == [2016, 2017, 2018, 2019]
    assert sum(year.days for year in years) == right[0].days
    for year in years:
        away = year.phasor - TRUTH
        assert away @ np.linalg.solve(year.covariance, away) < 13.8  # chi-square of 2: 0.999
    time = (record.time - np.datetime64("2016-01-01", "ns")).astype(float) / 86400e9
    odd = 80.0 * np.cos(2 * np.pi * time / 365.2422) * (record.time.astype("M8[Y]").astype(int) == 48)
    changed = judge([replace(record, pressure=record.pressure + odd)])[1].years
    moved = np.array([new.phasor - old.phasor for new, old in zip(changed, years, strict=True)])
    assert moved[2, 0] == pytest.approx(80.0, abs=25.0)
    assert np.abs(moved[[0, 1, 3]]).max() < 30.0


def test_drift_band_holds_the_drift(record, right):
    (curve,) = right[1].drifts
    age = (curve.time - record.start).astype(float) / 86400e9
    truth = 150.0 * age / 365.25 - 900.0 * np.exp(-age / 50.0)
    assert np.abs((curve.drift - truth) / curve.sd).max() < 4.0
    # widest at the ends; its mean is that of the fit
    assert curve.sd[-1] > curve.sd[len(age) // 2]
    daily = np.interp(age, (right[0].drifts[0].time - record.start).astype(float) / 86400e9, right[0].drifts[0].drift)
    np.testing.assert_allclose(curve.drift, daily, atol=0.5 * curve.sd.max())


def test_inflation_is_that_of_generalised_least_squares(make_record):
    # slow independent twin, for a drift that is linear
    part = make_record(np.random.default_rng(5), count=300, drift="linear")
    fit, judged = judge([part])
    design = build_design([part], reference_year=2016, priors=RED)
    inverse = np.linalg.inv(design.covariance(fit.noise.typical).multiply(np.eye(300)))

    def sigma(columns, precision):
        covariance = np.linalg.inv(columns.T @ inverse @ columns + np.diag(precision))
        return np.sqrt(np.trace(covariance[:2, :2]))

    alone = sigma(design.fixed[:, [0, 1, 4]], np.zeros(3))
    assert judged.inflation == pytest.approx(sigma(design.fixed, design.precision) / alone, rel=1e-9)
    assert judged.inflation > 1.2


def test_a_record_that_is_fitted_exactly_leaves_white_residuals(make_record):
    silent = make_record(np.random.default_rng(6), count=300, white=0.0, semi=(0.0, 0.0), phasor=(0.0, 0.0), slope=0.0)
    judged = judge([silent], WHITE)[1]
    assert judged.whiteness.p_value == pytest.approx(1.0)
    assert not judged.whiteness.autocorrelation.any()
