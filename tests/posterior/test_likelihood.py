from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from scipy import integrate, stats

from massfit.posterior.likelihood import (
    annual_given_scales,
    estimator,
    joined,
    log_likelihood,
    log_scale_prior,
    without_site,
)

LOG_SCALES = np.log([[25.0, 20.0, 12.0], [1.0, 50.0, 0.3], [80.0, 3.0, 60.0]])

NETWORKS = {
    "complete": {},
    "missing pairs": {"missing": 0.4},
    "sites without a model": {"bare_sites": 2, "missing": 0.3},
    "one model": {"models": 1},
    "no model": {"models": 1, "sites": 3, "bare_sites": 3},
    "one site": {"sites": 1},
    "one phasor": {"sites": 1, "models": 1},
}


@pytest.mark.parametrize(("name", "truth"), list(product(NETWORKS, [1.0, 0.0])))
def test_rows_give_what_the_dense_covariance_gives(invent, regression, dense_twin, name, truth):
    network = invent(**NETWORKS[name])
    model, twin = regression(network, truth=truth), dense_twin(network, truth=truth)
    mean, covariance = annual_given_scales(model, LOG_SCALES)
    dense_mean, dense_covariance = twin.moments(LOG_SCALES)
    # round-off of a dense solve with a prior of (5 hPa)^2 beside errors of 0.1 hPa
    np.testing.assert_allclose(log_likelihood(model, LOG_SCALES), twin.log_likelihood(LOG_SCALES), rtol=1e-9)
    np.testing.assert_allclose(mean, dense_mean, rtol=1e-8, atol=1e-7)
    np.testing.assert_allclose(covariance, dense_covariance, rtol=1e-8, atol=1e-6)


def averaged(twin, observations):
    """Take the dense twin's phasors of the sites in `mean_only` together: one mean each, in the vector itself."""
    kept, turn = [], []
    for s, site in enumerate(observations.sites):
        own = [i for i, (t, _) in enumerate(twin.pairs) if t == s]
        means = [own] if site in observations.mean_only else [[i] for i in own]
        turn += [np.isin(np.arange(len(twin.pairs)), mean) / len(mean) for mean in means]
        kept.append(1 if site in observations.mean_only else len(own))
    whole = np.kron(np.array(turn), np.eye(2))
    twin.value, twin.annual, twin.counts = whole @ twin.value, whole @ twin.annual, np.array(kept)
    twin.terms = {name: whole @ term @ whole.T for name, term in twin.terms.items()}
    return twin


@pytest.mark.parametrize("truth", [1.0, 0.0])
@pytest.mark.parametrize("means", [{"site 2", "site 5"}, {f"site {s}" for s in range(1, 9)}])
def test_a_mean_over_models_alone_gives_what_the_dense_covariance_gives(invent, regression, dense_twin, means, truth):
    network = invent(missing=0.3)
    network = replace(network, observations=replace(network.observations, mean_only=frozenset(means)))
    model = regression(network, truth=truth)
    whole = regression(replace(network, observations=replace(network.observations, mean_only=frozenset())), truth=truth)
    twin = averaged(dense_twin(network, truth=truth), network.observations)
    mean, covariance = annual_given_scales(model, LOG_SCALES)
    dense_mean, dense_covariance = twin.moments(LOG_SCALES)
    # round-off as above
    np.testing.assert_allclose(log_likelihood(model, LOG_SCALES), twin.log_likelihood(LOG_SCALES), rtol=1e-9)
    np.testing.assert_allclose(mean, dense_mean, rtol=1e-8, atol=1e-7)
    np.testing.assert_allclose(covariance, dense_covariance, rtol=1e-8, atol=1e-6)
    # control: the contrasts would have said more
    assert np.abs(log_likelihood(whole, LOG_SCALES) - twin.log_likelihood(LOG_SCALES)).min() > 1.0


def test_a_wrong_admittance_is_seen_by_the_dense_covariance(invent, regression, dense_twin):
    network = invent(members=2)
    wrong = log_likelihood(regression(network, member=1), LOG_SCALES)
    assert np.abs(wrong - dense_twin(network).log_likelihood(LOG_SCALES)).min() > 1e-3


def test_no_atmosphere_error_and_vanishing_scales_need_no_special_case(invent, regression, dense_twin):
    network = invent(missing=0.3)
    none = np.array([[-40.0, -40.0, -40.0]])
    model, twin = regression(network, atmosphere_sd=0.0), dense_twin(network, atmosphere_sd=0.0)
    np.testing.assert_allclose(log_likelihood(model, none), twin.log_likelihood(none), rtol=1e-9)


def test_one_phasor_has_the_closed_form_of_a_shrunk_measurement(invent, regression):
    # one site, one model, F known: A ~ N(0, p), z = F A + error of variance C + s^2 (all terms) per component
    network = invent(sites=1, models=1)
    seen = network.observations
    total = seen.covariance[0] + (4.0**2 + 25.0**2 + 20.0**2 + 2.0 * 12.0**2) * np.eye(2)
    factor = network.admittance[0, 0]
    turn = np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])
    precision = np.eye(2) / 500.0**2 + turn.T @ np.linalg.solve(total, turn)
    expected = np.linalg.solve(precision, turn.T @ np.linalg.solve(total, seen.mean_phasor[0]))
    mean, covariance = annual_given_scales(regression(network), np.log([[25.0, 20.0, 12.0]]))
    np.testing.assert_allclose(mean[0], expected, rtol=1e-10)
    np.testing.assert_allclose(covariance[0], np.linalg.inv(precision), rtol=1e-10, atol=1e-8)


def test_the_estimator_is_the_linear_map_to_the_mean(invent, regression):
    model = regression(invent(missing=0.3))
    mean, _ = annual_given_scales(model, LOG_SCALES)
    np.testing.assert_allclose(estimator(model, LOG_SCALES) @ model.rows.value, mean, rtol=1e-9)


def test_the_common_error_of_the_models_does_not_average_down(invent, regression):
    # equal F at very many sites: Var = s^2 (1 + 1/M) / |F|^2 for r = 1 and s^2 / M / |F|^2 for r = 0
    network = invent(sites=1500, scales=(1.0, 1.0, 30.0))
    equal = replace(network, admittance=np.full((1, 1500), 1.2 + 0.1j))
    for truth, limit in ((1.0, 30.0**2 * 4.0 / 3.0), (0.0, 30.0**2 / 3.0)):
        model = regression(equal, truth=truth, atmosphere_sd=0.0)
        _, covariance = annual_given_scales(model, np.log([[1.0, 1.0, 30.0]]))
        # the records' own (15 Pa)^2 / 1500 and the prior of A are below 0.5 %
        assert np.diag(covariance[0]) == pytest.approx(limit / abs(1.2 + 0.1j) ** 2, rel=0.005)


def test_leaving_a_site_out_and_joining_it_again_changes_nothing(invent, regression):
    model = regression(invent(missing=0.3))
    alone = model
    for s in range(8):
        if s != 3:
            alone = without_site(alone, s)
    whole = joined(without_site(model, 3), alone)
    np.testing.assert_allclose(log_likelihood(whole, LOG_SCALES), log_likelihood(model, LOG_SCALES), rtol=1e-12)


def test_the_prior_of_a_scale_is_half_t_with_four_degrees_of_freedom():
    prior = np.array([30.0, 30.0, 15.0])
    scales = np.array([12.0, 70.0, 3.0])
    expected = sum(np.log(2.0 * stats.t.pdf(s / p, 4) / p) + np.log(s) for s, p in zip(scales, prior, strict=True))
    assert log_scale_prior(np.log(scales), prior) == pytest.approx(expected, abs=1e-12)

    def density(x):
        centre = np.log(prior)
        return np.exp(log_scale_prior(np.array([x, *centre[1:]]), prior) - log_scale_prior(centre, prior))

    area = integrate.quad(density, -25, 12, limit=200)[0]
    at_centre = 2.0 * stats.t.pdf(1.0, 4)
    assert area * at_centre == pytest.approx(1.0, abs=1e-6)
