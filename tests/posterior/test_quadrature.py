import numpy as np
import pytest
from scipy import stats
from scipy.special import logsumexp

from massfit.posterior.likelihood import annual_given_scales, log_likelihood, log_scale_prior
from massfit.posterior.quadrature import integrate_scales, scale_axes

PRIOR = np.array([30.0, 30.0, 15.0])

NETWORKS = {
    "eight sites, three models": {},
    "missing pairs": {"missing": 0.5},
    "two sites": {"sites": 2, "models": 2},
    "one site": {"sites": 1},
    "one model": {"models": 1},
    "one phasor": {"sites": 1, "models": 1},
    "no site scatter": {"scales": (0.1, 20.0, 12.0)},
    "twenty sites": {"sites": 20},
    "few pairs": {"models": 2, "missing": 0.9},
}


def brute_force(twin, sizes=(40, 40, 40), low=(0.02, 0.02, 0.02), high=(600.0, 400.0, 400.0)):
    """Rectangle rule on a plain grid in the scales themselves (squared spacing), dense covariance at each."""
    grids = [np.linspace(np.sqrt(a), np.sqrt(b), n) for a, b, n in zip(low, high, sizes, strict=True)]
    roots = np.stack(np.meshgrid(*grids, indexing="ij"), axis=-1).reshape(-1, 3)
    scales = roots**2
    prior = np.log(2.0 * stats.t.pdf(scales / PRIOR, 4) / PRIOR).sum(axis=1) + np.log(2.0 * roots).sum(axis=1)
    mass, means, covariances = [], [], []
    for part in np.array_split(np.arange(len(scales)), 40):
        log_scales = np.log(scales[part])
        mass.append(twin.log_likelihood(log_scales) + prior[part])
        mean, covariance = twin.moments(log_scales)
        means.append(mean)
        covariances.append(covariance)
    log_mass = np.concatenate(mass)
    weight = np.exp(log_mass - logsumexp(log_mass))
    mean = weight @ np.concatenate(means)
    shift = np.concatenate(means) - mean
    covariance = np.einsum("n,nij->ij", weight, np.concatenate(covariances)) + (weight[:, None] * shift).T @ shift
    evidence = logsumexp(log_mass) + np.log([grid[1] - grid[0] for grid in grids]).sum()
    return mean, covariance, evidence


@pytest.mark.parametrize("name", ["two sites", "one model", "one phasor"])
def test_moments_and_evidence_agree_with_brute_force(invent, dense_twin, regression, name):
    shape = {**NETWORKS[name], "sites": min(NETWORKS[name].get("sites", 3), 3)}
    network = invent(**shape)
    route = integrate_scales(regression(network), PRIOR)
    mean, covariance, evidence = brute_force(dense_twin(network))
    sd = np.sqrt(np.diag(covariance))
    # the brute force itself is cut at large scales and coarse: 1 % of a standard deviation
    np.testing.assert_allclose(route.mean / sd, mean / sd, atol=0.01)
    np.testing.assert_allclose(np.sqrt(np.diag(route.covariance)) / sd, 1.0, atol=0.02)
    assert route.log_evidence == pytest.approx(evidence, abs=0.06)


@pytest.mark.parametrize("name", NETWORKS)
def test_the_nodes_are_enough(invent, regression, name):
    model = regression(invent(**NETWORKS[name]))
    route, finer = integrate_scales(model, PRIOR), integrate_scales(model, PRIOR, (61, 47, 61))
    sd = np.sqrt(np.diag(finer.covariance))
    np.testing.assert_allclose(route.mean / sd, finer.mean / sd, atol=0.005)
    np.testing.assert_allclose(np.sqrt(np.diag(route.covariance)) / sd, 1.0, atol=0.01)


def test_too_few_nodes_are_not_enough(invent, regression):
    model = regression(invent(sites=20))
    coarse, finer = integrate_scales(model, PRIOR, (4, 3, 4)), integrate_scales(model, PRIOR)
    ratio = np.sqrt(np.diag(coarse.covariance) / np.diag(finer.covariance))
    assert np.abs(ratio - 1.0).max() > 0.02


@pytest.mark.parametrize("models", [1, 3])
def test_the_nodes_hold_the_same_conditionals_as_the_first_route(invent, regression, models):
    model = regression(invent(models=models, missing=0.3))
    route = integrate_scales(model, PRIOR)
    mean, covariance = annual_given_scales(model, route.log_scales)
    np.testing.assert_allclose(route.node_mean, mean, rtol=1e-7, atol=1e-5)
    np.testing.assert_allclose(route.node_covariance, covariance, rtol=1e-7, atol=1e-5)
    density = log_likelihood(model, route.log_scales) + log_scale_prior(route.log_scales, PRIOR)
    np.testing.assert_allclose(np.log(route.weight) - density, np.log(route.weight[0]) - density[0], atol=1e-6)


def test_axes_of_the_sum_have_a_constant_jacobian():
    to_log_scales = scale_axes(False)
    for point in np.array([[0.3, -4.0, 1.0], [2.0, 0.0, -3.0], [1.0, 7.0, 0.0]]):
        step = 1e-5
        columns = [(to_log_scales(point + step * e) - to_log_scales(point - step * e)) / (2 * step) for e in np.eye(3)]
        assert abs(np.linalg.det(np.array(columns))) == pytest.approx(0.5, abs=1e-8)
        site, local, _ = to_log_scales(point)
        assert 0.5 * np.log(np.exp(2 * site) + np.exp(2 * local)) == pytest.approx(point[0], abs=1e-12)
        assert 2 * (local - site) == pytest.approx(point[1], abs=1e-12)


def test_quantiles_are_those_of_the_mixture(invent, regression):
    route = integrate_scales(regression(invent()), PRIOR)
    rng = np.random.default_rng(3)
    node = rng.choice(len(route.weight), size=200_000, p=route.weight)
    sd = np.sqrt(np.diagonal(route.node_covariance, axis1=1, axis2=2))
    draws = route.node_mean[node] + sd[node] * rng.standard_normal((200_000, 2))
    probabilities = np.array([0.025, 0.16, 0.5, 0.975])
    found = np.array([(draws < q).mean(axis=0) for q in route.quantiles(probabilities)])
    # four binomial standard errors of 200,000 draws
    np.testing.assert_allclose(found, np.repeat(probabilities[:, None], 2, axis=1), atol=4 * 0.5 / np.sqrt(200_000))
