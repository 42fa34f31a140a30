from dataclasses import replace

import numpy as np
import pytest
from scipy import integrate, stats
from scipy.special import logsumexp

from massfit.posterior.importance import Proposal, fit_proposal, integrate_scales
from massfit.posterior.likelihood import collapse, log_scale_prior
from massfit.posterior.proposal import _draw_on_grid, predict_rows, propose_latents, stretch_grid

PRIOR = np.array([30.0, 30.0, 15.0, 15.0])

NETWORKS = {
    "eight sites, three models": {},
    "missing pairs": {"missing": 0.5},
    "one site": {"sites": 1},
    "one model": {"models": 1},
    "one phasor": {"sites": 1, "models": 1},
    "no site scatter": {"scales": (0.1, 20.0, 12.0)},
    "twenty sites": {"sites": 20, "placed": True},
    "no model": {"models": 1, "sites": 5, "bare_sites": 5, "placed": True},
}


def brute_force(twin, sizes=(40, 40, 40), low=(0.02, 0.02, 0.02), high=(600.0, 400.0, 400.0)):
    """Rectangle rule on a plain grid in the scales themselves (squared spacing), dense covariance at each."""
    grids = [np.linspace(np.sqrt(a), np.sqrt(b), n) for a, b, n in zip(low, high, sizes, strict=True)]
    roots = np.stack(np.meshgrid(*grids, indexing="ij"), axis=-1).reshape(-1, 3)
    scales = roots**2
    prior = np.log(2.0 * stats.t.pdf(scales / PRIOR[:3], 4) / PRIOR[:3]).sum(axis=1) + np.log(2.0 * roots).sum(axis=1)
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


def route_of(model, **choices):
    return integrate_scales(model, PRIOR[: model.scale_count], **choices)


@pytest.mark.parametrize("name", ["missing pairs", "one model", "one phasor"])
def test_moments_and_evidence_agree_with_brute_force(invent, dense_twin, regression, name):
    shape = {**NETWORKS[name], "sites": min(NETWORKS[name].get("sites", 3), 3)}
    network = invent(**shape)
    route = route_of(regression(network), draws=8000)
    mean, covariance, evidence = brute_force(dense_twin(network))
    sd = np.sqrt(np.diag(covariance))
    # the brute force itself is cut at large scales and coarse: 1 % of a standard deviation
    np.testing.assert_allclose(route.mean / sd, mean / sd, atol=0.01)
    np.testing.assert_allclose(np.sqrt(np.diag(route.covariance)) / sd, 1.0, atol=0.025)
    assert route.log_evidence == pytest.approx(evidence, abs=0.06)


def student_brute_force(network, prior=30.0):
    """Integrate (A, s_site) on a plain grid: one model, no error but the record's and Student scatter (scipy's t)."""
    seen, factor = network.observations, network.admittance[0]
    grid = np.linspace(-100.0, 260.0, 181)
    a, b = np.meshgrid(grid, grid, indexing="ij")
    roots = np.linspace(0.1, 24.0, 60)
    log_mass = []
    for root in roots:
        scale = root**2
        log_density = np.full(a.shape, np.log(2.0 * stats.t.pdf(scale / prior, 4) / prior) + np.log(2.0 * root))
        log_density += stats.norm.logpdf(a, scale=500.0) + stats.norm.logpdf(b, scale=500.0)
        for s, covariance in enumerate(seen.covariance):
            z = factor[s] * (a + 1j * b)
            residual = np.stack([seen.mean_phasor[s, 0] - z.real, seen.mean_phasor[s, 1] - z.imag], axis=-1)
            # one stretch for both components: mixture over it on a fine grid of quantiles
            stretch = stats.invgamma.ppf((np.arange(200) + 0.5) / 200, 2.0, scale=2.0)
            densities = []
            for w in stretch:
                total = covariance + scale**2 * w * np.eye(2)
                square = np.einsum("xyi,ij,xyj->xy", residual, np.linalg.inv(total), residual)
                densities.append(-0.5 * square - 0.5 * np.linalg.slogdet(2.0 * np.pi * total)[1])
            log_density += logsumexp(densities, axis=0) - np.log(200)
        log_mass.append(log_density)
    weight = np.exp(np.array(log_mass) - logsumexp(log_mass))
    mean = np.array([(weight * a).sum(), (weight * b).sum()])
    variance = np.array([(weight * (a - mean[0]) ** 2).sum(), (weight * (b - mean[1]) ** 2).sum()])
    return mean, np.sqrt(variance), logsumexp(log_mass) + np.log((grid[1] - grid[0]) ** 2 * (roots[1] - roots[0]))


@pytest.mark.slow
def test_student_scatter_agrees_with_brute_force(invent, regression):
    network = invent(3, sites=4, models=1, scales=(25.0, 0.0, 0.0))
    phasor = network.observations.part_phasor.copy()
    phasor[2] += 90.0  # one site off
    network = replace(network, observations=replace(network.observations, part_phasor=phasor))
    model = regression(network, student=True, atmosphere_sd=1e-6)
    # scales whose priors hold them at nothing
    route = integrate_scales(model, np.array([30.0, 1e-6, 1e-6]), draws=8000)
    mean, sd, evidence = student_brute_force(network)
    # grids of 2 Pa, 200 quantiles of the stretch, and some 4000 effective nodes
    np.testing.assert_allclose(route.mean / sd, mean / sd, atol=0.03)
    np.testing.assert_allclose(np.sqrt(np.diag(route.covariance)) / sd, 1.0, atol=0.03)
    assert route.log_evidence == pytest.approx(evidence, abs=0.05)


@pytest.mark.parametrize("student", [False, True], ids=["normal", "student"])
@pytest.mark.parametrize("name", NETWORKS)
def test_the_proposal_fits_every_kind_of_network(invent, regression, name, student):
    model = regression(invent(**NETWORKS[name]), student=student, group_scatter=True)
    route = route_of(model)
    assert route.effective_nodes > 400  # of 2000


def test_many_places_do_not_spoil_the_weights(invent, regression):
    model = regression(invent(sites=100, placed=True), student=True, group_scatter=True)
    assert route_of(model, draws=1000).effective_nodes > 150


def test_one_outlier_or_the_other_are_both_seen(invent, regression):
    # two sites that contradict each other: either may be the wrong one, and A has two modes
    network = invent(4, sites=2, models=1, scales=(1.0, 1.0, 1.0))
    phasor = network.observations.part_phasor.copy()
    phasor[1] += 300.0
    network = replace(network, observations=replace(network.observations, part_phasor=phasor))
    model = regression(network, student=True)
    route = integrate_scales(model, np.array([3.0, 3.0, 3.0]), draws=6000)
    first_is_wrong = route.weight @ (route.stretch[:, 0] > 10 * route.stretch[:, 1])
    second_is_wrong = route.weight @ (route.stretch[:, 1] > 10 * route.stretch[:, 0])
    # alike but for their record errors; a common large scale is the third explanation
    assert 0.5 < first_is_wrong / second_is_wrong < 2.0
    assert min(first_is_wrong, second_is_wrong) > 0.005
    assert route.effective_nodes > 600  # of 6000


def test_the_nodes_hold_exact_conditionals(invent, regression):
    model = regression(invent(missing=0.3, placed=True), student=True, group_scatter=True)
    route = route_of(model)
    mean, covariance = collapse(model, route.condition).moments()
    np.testing.assert_allclose(route.node_mean, mean, rtol=1e-9)
    np.testing.assert_allclose(route.node_covariance, covariance, rtol=1e-9, atol=1e-9)


def test_a_poor_proposal_is_fitted_anew_and_the_answer_stays(invent, regression):
    model = regression(invent(sites=12, placed=True), group_scatter=True)
    good = fit_proposal(model, PRIOR, rng=np.random.default_rng(1))
    poor = Proposal(good.centre + 1.5, 1.8 * good.root, good.prediction)
    fine, coarse = (route_of(model, start=start, draws=6_000, rng=np.random.default_rng(2)) for start in (good, poor))
    sd = np.sqrt(np.diag(fine.covariance))
    # too few of its nodes count: more are drawn, from a proposal fitted anew
    assert len(coarse.weight) > 6_000 >= len(fine.weight)
    assert coarse.effective_nodes > 250
    error = np.hypot(fine.standard_error, coarse.standard_error)
    assert np.all(np.abs(fine.mean - coarse.mean) < 4 * error)
    np.testing.assert_allclose(np.sqrt(np.diag(coarse.covariance)) / sd, 1.0, atol=0.03)


def test_the_density_of_the_proposal_is_that_of_its_draws():
    rng = np.random.default_rng(1)
    centre = rng.standard_normal((5, 2))
    proposal = Proposal(centre, np.array([[0.5, 0.0], [0.2, 0.4]]), None)
    grid = np.linspace(-14.0, 14.0, 281)
    points = np.stack(np.meshgrid(grid, grid, indexing="ij"), axis=-1).reshape(-1, 2)
    density = np.exp(proposal.log_density(points))
    step = (grid[1] - grid[0]) ** 2
    # heavy tails: what lies beyond 14 is left out
    assert density.sum() * step == pytest.approx(1.0, abs=2e-3)
    draws = proposal.draw(40_000, rng)
    edge = 1.05  # half-way between two points of the grid
    inside, chosen = (np.abs(where).max(axis=1) < edge for where in (draws, points))
    assert inside.mean() == pytest.approx(density[chosen].sum() * step, abs=0.01)


def test_draws_between_nodes_follow_their_density():
    x = stretch_grid(20)
    density = np.exp(-0.5 * (x - 2.0) ** 2) + 0.3 * np.exp(-2.0 * (x - 6.0) ** 2)
    drawn, log_density = _draw_on_grid(np.tile(density, (100_000, 1)), x, np.random.default_rng(1))
    area = integrate.trapezoid(density, x)
    np.testing.assert_allclose(np.exp(log_density), np.interp(drawn, x, density) / area, rtol=1e-9)
    for edge in (1.0, 2.5, 5.0, 6.3):
        fine = np.append(np.linspace(x[0], edge, 2001), 0.0)[:-1]
        expected = integrate.trapezoid(np.interp(fine, x, density), fine) / area
        # four binomial standard errors of 100,000 draws
        assert (drawn < edge).mean() == pytest.approx(expected, abs=4 * 0.5 / np.sqrt(100_000))


def test_a_row_is_predicted_from_the_others(invent, regression):
    network = invent(sites=20)
    model = regression(network)
    condition = model.at(np.log([[25.0, 20.0, 12.0]]))
    prediction = predict_rows(model, condition, collapse(model, condition), np.random.default_rng(1), draws=4000)
    keep = np.arange(20) != 4
    others = replace(network, observations=network.observations.select(keep), admittance=network.admittance[:, keep])
    rest = regression(others)
    left = collapse(rest, rest.at(condition.log_scales)).root[0]
    mine = np.flatnonzero(model.rows.site[: model.rows.mean_count] == 4)
    unit = np.ones(model.columns.size)
    unit[model.columns.common] = 12.0
    turned = np.linalg.solve(left[:-1, :-1], (model.design[0, mine] * unit).T)
    # the row itself is taken out as if all were independent: 4000 draws, and the other row of the site stays
    np.testing.assert_allclose(prediction.variance[mine], (turned**2).sum(axis=0), rtol=0.15)
    np.testing.assert_allclose(
        prediction.residual[mine], model.rows.value[mine] - left[-1, :-1] @ turned, atol=0.3 * np.sqrt(250.0)
    )


def test_parts_are_drawn_in_proportion_to_their_density(invent, regression, two_parts):
    network = two_parts(invent(), 2, [30.0, 10.0], weight=0.3, narrow=0.5)
    model = regression(network, mixed=("site 3",))
    condition = model.at(np.tile(np.log([[25.0, 20.0, 12.0]]), (20_000, 1)))
    one = condition.take(np.array([0]))
    prediction = predict_rows(model, one, collapse(model, one), np.random.default_rng(1), draws=500)
    drawn, log_density = propose_latents(model, condition, prediction, np.random.default_rng(2))
    first = drawn.part[:, 2] == 0
    assert 0.02 < first.mean() < 0.98
    for chosen, share in ((first, first.mean()), (~first, (~first).mean())):
        np.testing.assert_allclose(np.exp(log_density[chosen]), share, atol=4 * 0.5 / np.sqrt(20_000))


def test_many_parts_of_a_mixture_are_all_within_reach(invent, regression):
    """Sixteen narrow parts, far apart: against every part summed on a grid of the scales."""
    network = invent(sites=4)
    seen, rng = network.observations, np.random.default_rng(8)
    phasor, covariance = np.repeat(seen.part_phasor, 16, axis=1), np.repeat(seen.part_covariance, 16, axis=1)
    phasor[2] += 100.0 * rng.standard_normal((16, 1, 2))
    covariance[2] *= 0.05
    weight = np.tile(np.eye(16)[0], (4, 1))
    weight[2] = rng.dirichlet(np.full(16, 3.0))
    observations = replace(seen, weight=weight, part_phasor=phasor, part_covariance=covariance)
    model = regression(replace(network, observations=observations), mixed=("site 3",))
    axes = [np.linspace(-3.0, 5.5, 24), np.linspace(-3.0, 4.5, 22), np.linspace(-3.0, 5.5, 24)]
    log_scales = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    mass, means = [], []
    for part in range(16):
        condition = model.at(log_scales)
        condition.part[:, 2] = part
        collapsed = collapse(model, condition)
        mass.append(collapsed.log_likelihood + model.rows.log_weight[2, part] + log_scale_prior(log_scales, PRIOR[:3]))
        means.append(collapsed.moments()[0])
    share = np.exp(np.array(mass) - logsumexp(mass))
    route = integrate_scales(model, PRIOR[:3], draws=8000)
    error = np.abs(route.mean - np.einsum("kn,knc->c", share, np.array(means)))
    assert np.all(error < 4.0 * route.standard_error + 0.01 * np.sqrt(np.diag(route.covariance)))
    drawn = np.bincount(route.part[:, 2], weights=route.weight, minlength=16)
    np.testing.assert_allclose(drawn, share.sum(axis=1), atol=0.03)
    assert route.effective_nodes > 1000


def test_quantiles_are_those_of_the_mixture(invent, regression):
    route = route_of(regression(invent()))
    rng = np.random.default_rng(3)
    node = rng.choice(len(route.weight), size=200_000, p=route.weight)
    sd = np.sqrt(np.diagonal(route.node_covariance, axis1=1, axis2=2))
    draws = route.node_mean[node] + sd[node] * rng.standard_normal((200_000, 2))
    probabilities = np.array([0.025, 0.16, 0.5, 0.975])
    found = np.array([(draws < q).mean(axis=0) for q in route.quantiles(probabilities)])
    # four binomial standard errors of 200,000 draws
    np.testing.assert_allclose(found, np.repeat(probabilities[:, None], 2, axis=1), atol=4 * 0.5 / np.sqrt(200_000))


def test_the_prior_stays_where_nothing_is_said(invent, regression):
    # one phasor says nothing on s_common: half-t with 4 degrees of freedom has median 0.741 of its scale (scipy)
    route = route_of(regression(invent(sites=1, models=1)), draws=8000)
    order = np.argsort(route.log_scales[:, 2])
    median = np.interp(0.5, np.cumsum(route.weight[order]), route.log_scales[order, 2])
    assert np.exp(median) / 15.0 == pytest.approx(0.741, rel=0.05)
    assert np.isfinite(log_scale_prior(route.log_scales, PRIOR[:3])).all()
