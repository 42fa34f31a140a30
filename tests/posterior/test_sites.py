from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from massfit.posterior.importance import integrate_scales
from massfit.posterior.mixtures import sites_by_mixture
from massfit.posterior.network_model import Choices
from massfit.posterior.rows import observation_rows
from massfit.posterior.sites import leave_one_out, mixture_effect
from massfit.settings import PosteriorSettings, Priors

PRIOR = np.array([30.0, 30.0, 15.0])


def moved(network, site, shift):
    phasor = network.observations.part_phasor.copy()
    phasor[site] += shift
    return replace(network, observations=replace(network.observations, part_phasor=phasor))


def check(network, regression, **choices):
    model = regression(network, **choices)
    return leave_one_out(model, [integrate_scales(model, PRIOR)])


@pytest.mark.parametrize("shape", [{"sites": 6}, {"sites": 6, "missing": 0.4}, {"sites": 12, "models": 2}])
def test_leaving_out_agrees_with_the_dense_prediction_after_a_direct_refit(invent, dense_twin, regression, shape):
    network = invent(**shape)
    checks = check(network, regression)
    twin = dense_twin(network)
    seen = network.observations
    for s in (0, 3):
        keep = np.arange(len(seen.sites)) != s
        others = replace(network, observations=seen.select(keep), admittance=network.admittance[:, keep])
        route = integrate_scales(regression(others), PRIOR)
        # the mean of the site's models, predicted from the other sites with the full covariance of all phasors
        mine = np.repeat([pair[0] == s for pair in twin.pairs], 2)
        average = np.tile(np.eye(2), mine.sum() // 2) / (mine.sum() // 2)
        chosen = np.argsort(route.weight)[-300:]
        weight = route.weight[chosen] / route.weight[chosen].sum()
        residuals, covariances = [], []
        for log_scales in route.log_scales[chosen]:
            total = twin.noise(log_scales[None])[0] + twin.annual @ twin.annual.T
            gain = np.linalg.solve(total[np.ix_(~mine, ~mine)], total[np.ix_(~mine, mine)]).T
            residuals.append(average @ (twin.value[mine] - gain @ twin.value[~mine]))
            left = total[np.ix_(mine, mine)] - gain @ total[np.ix_(~mine, mine)]
            covariances.append(average @ left @ average.T)
        residual = weight @ np.array(residuals)
        shift = np.array(residuals) - residual
        covariance = np.einsum("n,nij->ij", weight, covariances) + (weight[:, None] * shift).T @ shift
        expected = np.sqrt(residual @ np.linalg.solve(covariance, residual) / 2.0)
        # 150 nodes of the whole network weighed again, and 300 of the refit's nodes: a few per cent
        assert checks[s].standardised_residual == pytest.approx(expected, rel=0.1)
        wide = stats.multivariate_normal([0, 0], covariance + 150.0**2 * np.eye(2)).pdf(residual)
        narrow = stats.multivariate_normal([0, 0], covariance).pdf(residual)
        probability = 0.05 * wide / (0.05 * wide + 0.95 * narrow)
        assert checks[s].outlier_probability == pytest.approx(probability, rel=0.3)


@pytest.mark.parametrize("student", [False, True], ids=["normal", "student"])
def test_a_site_that_is_wrong_stands_out_and_the_others_do_not(invent, regression, student):
    network = invent(sites=12)
    clean, wrong = (check(each, regression, student=student) for each in (network, moved(network, 4, [250.0, -100.0])))
    assert wrong[4].outlier_probability > 0.9
    assert wrong[4].standardised_residual > 3.0
    assert max(c.outlier_probability for c in clean) < 0.5
    assert all(c.outlier_probability < 0.5 for s, c in enumerate(wrong) if s != 4)


def test_a_site_alone_is_predicted_by_the_prior(invent, regression):
    network = invent(sites=1)
    (found,) = check(network, regression, student=True)
    # 0.85 hPa under a prior of 5 hPa
    assert 0.0 < found.standardised_residual < 0.3
    assert found.outlier_probability < 0.06


def effect(network, regression, site):
    model, mixed = regression(network), regression(network, mixed=(f"site {site + 1}",))
    return mixture_effect(model, mixed, model.at(np.log([[5.0, 20.0, 12.0]])), site)


def test_a_mixture_of_equal_parts_changes_nothing(invent, regression, two_parts):
    found = effect(two_parts(invent(), 2, [0.0, 0.0]), regression, 2)
    assert (round(found.shift_sd, 9), round(found.sd_ratio, 9)) == (0.0, 1.0)


def test_sites_that_one_gaussian_does_not_describe_are_found(invent, two_parts):
    choices = Choices(PosteriorSettings(), Priors(), 0.04)
    network = two_parts(invent(sites=6), 2, [60.0, 60.0], weight=0.3, narrow=0.2)
    assert sites_by_mixture(network.observations, network.admittance, choices) == ("site 3",)
    alike = two_parts(invent(sites=6), 2, [1.0, 1.0], weight=0.3)
    assert sites_by_mixture(alike.observations, alike.admittance, choices) == ()
    single = invent(sites=6)
    assert sites_by_mixture(single.observations, single.admittance, choices) == ()


def test_the_effect_of_a_mixture_is_that_of_direct_sampling(invent, regression, two_parts):
    """Weigh draws of A, a and c (given all other sites) with the mixture against the Gaussian of the site."""
    network = two_parts(invent(), 2, [40.0, 20.0], weight=0.3, narrow=0.3)
    seen, model = network.observations, regression(network)
    found = effect(network, regression, 2)
    rng = np.random.default_rng(1)
    unit = np.concatenate([np.ones(2), np.full(6, 12.0), np.ones(2)])
    rows = observation_rows(seen)
    other = rows.site != 2
    is_mean = np.arange(len(rows.site)) < rows.mean_count
    variance = rows.variance + 25.0 * is_mean + 400.0 * (rows.model_weight**2).sum(axis=1)
    design = model.design[0] * unit
    precision = np.eye(10) + design[other].T @ (design[other] / variance[other, None])
    mean = np.linalg.solve(precision, design[other].T @ (rows.value[other] / variance[other]))
    draws = rng.multivariate_normal(mean, np.linalg.inv(precision), size=400_000)
    density = np.zeros(len(draws))
    at_site = two_parts(network, 2, [0.0, 0.0]).observations if seen.weight.shape[1] == 1 else seen
    for k in range(2):
        weight = seen.weight.copy()
        weight[2] = np.arange(2) == k
        part = observation_rows(replace(at_site, weight=weight))
        mine = part.site == 2
        common = np.einsum("rm,mn,rc->rnc", part.model_weight, np.linalg.cholesky(np.eye(3) + 1.0), part.direction)
        total = part.model_weight.sum(axis=1, keepdims=True)
        factor = network.admittance[0, 2]
        turn = np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])
        own = np.hstack([4.0 * total * part.direction, common.reshape(-1, 6), 500.0 * total * (part.direction @ turn)])
        is_mean = np.arange(len(part.site)) < part.mean_count
        spread = part.variance + 25.0 * is_mean + 400.0 * (part.model_weight**2).sum(axis=1)
        residual = part.value[mine] - draws @ (own[mine] * unit).T
        log_density = -0.5 * (residual**2 / spread[mine] + np.log(spread[mine])).sum(axis=1)
        density += seen.weight[2, k] * np.exp(log_density)
    weight = density / density.sum()
    annual = 500.0 * draws[:, -2:]
    mixture_mean = weight @ annual
    mixture_sd = np.sqrt(weight @ (annual - mixture_mean) ** 2)
    full = np.eye(10) + design.T @ (design / variance[:, None])
    gaussian_mean = 500.0 * np.linalg.solve(full, design.T @ (rows.value / variance))[-2:]
    gaussian_sd = 500.0 * np.sqrt(np.diag(np.linalg.inv(full))[-2:])
    # 400,000 weighted draws: 0.01 standard deviations
    assert abs(found.shift_sd) == pytest.approx(np.abs((mixture_mean - gaussian_mean) / gaussian_sd).max(), abs=0.01)
    ratio = mixture_sd / gaussian_sd
    assert found.sd_ratio == pytest.approx(ratio[np.abs(np.log(ratio)).argmax()], abs=0.01)
