from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from scipy import integrate, stats

from massfit.posterior.likelihood import (
    collapse,
    estimator,
    log_latent_prior,
    log_scale_prior,
    log_stretch_prior,
)
from massfit.posterior.regression import without_site

LOG_SCALES = np.log([[25.0, 20.0, 12.0], [1.0, 50.0, 0.3], [80.0, 3.0, 60.0]])

FOUR = np.column_stack([LOG_SCALES, np.log([15.0, 60.0, 2.0])])

NETWORKS = {
    "complete": {},
    "missing pairs": {"missing": 0.4},
    "sites without a model": {"bare_sites": 2, "missing": 0.3},
    "one model": {"models": 1},
    "no model": {"models": 1, "sites": 3, "bare_sites": 3},
    "one site": {"sites": 1},
    "one phasor": {"sites": 1, "models": 1},
}


def log_likelihood(model, log_scales):
    return collapse(model, model.at(log_scales)).log_likelihood


def moments(model, log_scales):
    return collapse(model, model.at(log_scales)).moments()


@pytest.mark.parametrize(("name", "truth"), list(product(NETWORKS, [1.0, 0.0])))
def test_rows_give_what_the_dense_covariance_gives(invent, regression, dense_twin, name, truth):
    # without a model the circulation is in the prior: 100 Pa, common to all where nothing is known of places
    network = invent(**NETWORKS[name])
    model, twin = regression(network, truth=truth), dense_twin(network, truth=truth)
    mean, covariance = moments(model, LOG_SCALES)
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
    mean, covariance = moments(model, LOG_SCALES)
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
    mean, covariance = moments(regression(network), np.log([[25.0, 20.0, 12.0]]))
    np.testing.assert_allclose(mean[0], expected, rtol=1e-10)
    np.testing.assert_allclose(covariance[0], np.linalg.inv(precision), rtol=1e-10, atol=1e-8)


def test_the_estimator_is_the_linear_map_to_the_mean(invent, regression):
    model = regression(invent(missing=0.3))
    mean, _ = moments(model, LOG_SCALES)
    np.testing.assert_allclose(estimator(model, model.at(LOG_SCALES)) @ model.rows.value, mean, rtol=1e-9)


def test_the_common_error_of_the_models_does_not_average_down(invent, regression):
    # equal F at very many sites: Var = s^2 (1 + 1/M) / |F|^2 for r = 1 and s^2 / M / |F|^2 for r = 0
    network = invent(sites=1500, scales=(1.0, 1.0, 30.0))
    equal = replace(network, admittance=np.full((1, 1500), 1.2 + 0.1j))
    for truth, limit in ((1.0, 30.0**2 * 4.0 / 3.0), (0.0, 30.0**2 / 3.0)):
        model = regression(equal, truth=truth, atmosphere_sd=0.0)
        _, covariance = moments(model, np.log([[1.0, 1.0, 30.0]]))
        # the records' own (15 Pa)^2 / 1500 and the prior of A are below 0.5 %
        assert np.diag(covariance[0]) == pytest.approx(limit / abs(1.2 + 0.1j) ** 2, rel=0.005)


def test_a_site_that_is_left_out_is_as_if_it_had_never_been_there(invent, regression):
    network = invent(missing=0.3)
    keep = np.arange(8) != 3
    others = replace(network, observations=network.observations.select(keep), admittance=network.admittance[:, keep])
    left_out = log_likelihood(without_site(regression(network), 3), LOG_SCALES)
    np.testing.assert_allclose(left_out, log_likelihood(regression(others), LOG_SCALES), rtol=1e-12)


SHARED = {
    "groups": {"group_scatter": True},
    "distances": {"group_scatter": 2000.0},
    "neither": {"group_scatter": False},
}


@pytest.mark.parametrize("name", SHARED)
@pytest.mark.parametrize("shape", ["complete", "missing pairs", "sites without a model"])
def test_what_sites_share_is_what_the_dense_covariance_holds(invent, regression, dense_twin, name, shape):
    network = invent(**NETWORKS[shape], placed=True)
    model, twin = regression(network, **SHARED[name]), dense_twin(network, **SHARED[name])
    scales = FOUR[:, : model.scale_count]
    assert model.scale_count == (3 if name == "neither" else 4)
    mean, covariance = moments(model, scales)
    dense_mean, dense_covariance = twin.moments(scales)
    # 1e-9 is added to the correlations so that they have a root; else as above
    np.testing.assert_allclose(log_likelihood(model, scales), twin.log_likelihood(scales), rtol=1e-7)
    np.testing.assert_allclose(mean, dense_mean, rtol=1e-7, atol=1e-6)
    np.testing.assert_allclose(covariance, dense_covariance, rtol=1e-7, atol=1e-5)
    for wrong in ({"year_sd": 50.0}, {"group_scatter": 300.0}):
        other = dense_twin(network, **{**SHARED[name], **wrong})
        if scales.shape[1] == 4 or "year_sd" in wrong:
            assert np.abs(log_likelihood(model, scales) - other.log_likelihood(scales)).max() > 1e-3


def test_groups_agree_with_the_dense_covariance_to_the_last_digits(invent, regression, dense_twin):
    network = invent(missing=0.3, placed=True)
    model, twin = regression(network, group_scatter=True), dense_twin(network, group_scatter=True)
    np.testing.assert_allclose(log_likelihood(model, FOUR), twin.log_likelihood(FOUR), rtol=1e-9)


def test_stretched_scatter_is_a_covariance_of_its_own(invent, regression, dense_twin):
    network = invent(missing=0.3, placed=True)
    stretch = np.array([0.3, 1.0, 40.0, 2.0, 5.0, 0.7, 3.0, 3.0])
    model = regression(network, group_scatter=True, student=True)
    condition = replace(model.at(FOUR), stretch=np.tile(stretch[:7], (3, 1)))
    twin = dense_twin(network, group_scatter=True, stretch=stretch)
    np.testing.assert_allclose(collapse(model, condition).log_likelihood, twin.log_likelihood(FOUR), rtol=1e-9)
    plain = collapse(model, model.at(FOUR)).log_likelihood
    assert np.abs(plain - twin.log_likelihood(FOUR)).max() > 1.0


def test_all_load_members_at_once_are_each_alone(invent, regression):
    network = invent(members=3, placed=True)
    together = regression(network, member=slice(None), group_scatter=True)
    condition = together.at(np.tile(FOUR, (3, 1)))
    for member in (np.repeat([0, 1, 2], 3), np.array([2, 0, 1] * 3)):
        found = collapse(together, replace(condition, member=member))
        for k in range(3):
            alone = regression(network, member=k, group_scatter=True)
            expected = collapse(alone, alone.at(condition.log_scales[member == k])).log_likelihood
            np.testing.assert_allclose(found.log_likelihood[member == k], expected, rtol=1e-12)


def test_draws_of_what_is_shared_have_the_moments_of_the_dense_posterior(invent, regression):
    model = regression(invent(missing=0.3, placed=True), group_scatter=True)
    collapsed = collapse(model, model.at(np.tile(FOUR[:1], (40_000, 1))))
    annual = 500.0 * collapsed.solution(np.random.default_rng(1).standard_normal((40_000, model.columns.size)))[:, -2:]
    mean, covariance = (moment[0] for moment in collapsed.moments())
    sd = np.sqrt(np.diag(covariance))
    # four standard errors of 40,000 independent draws
    np.testing.assert_allclose(annual.mean(axis=0) / sd, mean / sd, atol=4 / np.sqrt(40_000))
    np.testing.assert_allclose(np.cov(annual.T) / np.outer(sd, sd), covariance / np.outer(sd, sd), atol=0.04)


def test_one_year_the_same_shares_and_no_group_are_the_simpler_model(invent, regression):
    network = invent(placed=True)
    seen = network.observations
    apart = replace(seen, position=seen.position + np.array([0.0, 0.1]) * np.arange(8)[:, None])
    bare = replace(apart, years=(), year_share=np.zeros((0, 0)), period_share=np.zeros(0))
    simple = log_likelihood(regression(replace(network, observations=bare)), LOG_SCALES)
    same = replace(apart, year_share=np.tile(seen.period_share, (8, 1)))
    for observations, change in ((same, {}), (apart, {"year_sd": 1e-6})):
        found = log_likelihood(regression(replace(network, observations=observations), **change), LOG_SCALES)
        np.testing.assert_allclose(found, simple, rtol=1e-9)
    vanishing = np.column_stack([LOG_SCALES, np.full(3, -30.0)])
    grouped = regression(replace(network, observations=bare), group_scatter=True)
    np.testing.assert_allclose(log_likelihood(grouped, vanishing), simple, rtol=1e-9)


def test_the_stretch_makes_student_scatter_of_normal():
    # the mixture of normal distributions over the stretch is Student's t with 4 degrees of freedom (scipy)
    x = np.linspace(-8.0, 14.0, 40_001)
    for u in (0.0, 1.3, 6.0):
        density = np.exp(log_stretch_prior(x)) * stats.norm.pdf(u, scale=np.exp(0.5 * x))
        assert integrate.trapezoid(density, x) == pytest.approx(stats.t.pdf(u, 4), rel=1e-6)


def test_the_prior_of_what_walkers_carry(invent, regression):
    model = regression(invent(), student=True)
    condition = replace(model.at(LOG_SCALES[:1]), stretch=np.full((1, 8), 2.5))
    one = stats.invgamma.logpdf(2.5, 2.0, scale=2.0) + np.log(2.5)
    assert log_latent_prior(model, condition)[0] == pytest.approx(8 * one, rel=1e-12)


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
