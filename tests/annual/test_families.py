"""The forms of noise and their priors against closed forms."""

import numpy as np
import pytest
from scipy import stats

from massfit.annual.families import NoiseFamily, half_t, half_t_score, noise_families
from massfit.settings import Priors

SCALES = np.array([2.0, 20.0, 200.0])
ONE = np.ones(1)


def family(form):
    return NoiseFamily(form, SCALES, red_scale=50.0, white_scale=20.0)


@pytest.mark.parametrize("score", [-6.0, -3.0, -1.0, 0.0, 1.0, 3.0, 5.0])
def test_amplitudes_are_quantiles_of_half_t(score):
    amplitude = half_t(np.array([score]), 50.0)
    # the probability beyond keeps its digits on either side
    inside = stats.t(4).cdf(amplitude / 50.0) - 0.5
    np.testing.assert_allclose(2 * inside, stats.norm.cdf(score), rtol=1e-7)
    np.testing.assert_allclose(half_t_score(amplitude, 50.0), score, atol=1e-5)


@pytest.mark.parametrize("form", ["white", "exponential", "smooth", "power-law", "sum"])
@pytest.mark.parametrize("score", [-40.0, 40.0])
def test_scores_of_any_size_give_a_covariance(form, score):
    model = family(form).model(np.full(family(form).size, score), ONE)
    assert np.isfinite(model.variances).all()
    assert model.variances.sum() >= 0
    assert np.all(model.white >= 0)


def test_time_scale_is_uniform_in_its_logarithm():
    # a tenth of the prior lies in every tenth of the decades
    scores = stats.norm.ppf(np.array([0.1, 0.5, 0.9]))
    times = [1 / family("exponential").model(np.array([0.0, score, 0.0]), ONE).rates[0] for score in scores]
    np.testing.assert_allclose(np.log(np.array(times) / 2) / np.log(100), [0.1, 0.5, 0.9])


def test_smooth_noise_is_matern_within_a_hundredth():
    # closed form: smoothness 3/2 has correlation (1 + x) exp(-x), 1/e at x = 2.1462
    model = family("smooth").model(np.zeros(3), ONE)
    lags = np.arange(0.0, 200.0)
    x = 2.146193 * lags / 20.0
    found = np.exp(-np.outer(lags, model.rates)) @ model.variances / model.red_sd**2
    assert found[20] == pytest.approx(np.exp(-1), abs=0.005)
    np.testing.assert_allclose(found, (1 + x) * np.exp(-x), atol=0.01)


@pytest.mark.parametrize(("probability", "exponent"), [(0.2, -0.8), (1 / 3, -1.0), (2 / 3, -1.5)])
def test_power_law_has_its_exponent(probability, exponent):
    model = family("power-law").model(np.array([0.0, stats.norm.ppf(probability), -40.0]), ONE)
    # between the corners of the longest and the shortest time scale
    frequencies = np.geomspace(1 / 2000.0, 1 / 20.0, 60)  # two ripples of the ladder
    slope = np.polyfit(np.log(frequencies), np.log(model.spectrum(frequencies)), 1)[0]
    assert slope == pytest.approx(exponent, abs=0.05)


def test_white_noise_of_each_deployment_follows_its_ratio():
    model = family("exponential").model(np.zeros(3), np.array([1.0, 3.0]))
    np.testing.assert_allclose(model.white, half_t(np.zeros(1), 20.0) * [1.0, 3.0])


def test_settings_name_the_forms():
    # named twice, a form counts once
    priors = Priors(noise_forms=("sum", "white", "sum"), noise_time_scales_days=(5.0,), white_noise_hpa=0.1)
    found = noise_families(priors)
    assert [each.form for each in found] == ["sum", "white"]
    assert [each.size for each in found] == [2, 1]
    assert found[0].white_scale == 10.0


@pytest.mark.parametrize("form", ["white", "exponential", "smooth", "power-law", "sum"])
def test_searches_start_with_the_variance_given(form):
    starts = [family(form).model(scores, ONE) for scores in family(form).starts(30.0)]
    np.testing.assert_allclose([np.hypot(start.red_sd, start.white[0]) for start in starts], 30.0, rtol=1e-4)
    # from nearly all of it red to nearly all of it white
    shares = [start.white[0] ** 2 / 900.0 for start in starts]
    assert form == "white" or (min(shares) < 0.02 and max(shares) > 0.85)
