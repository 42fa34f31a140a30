import numpy as np
import pytest
from scipy import stats

from massfit.posterior.explore import EnsembleTask, _Walk, run_ensembles
from massfit.posterior.importance import integrate_scales
from massfit.posterior.latents import draw_latents, draw_site_scale
from massfit.posterior.likelihood import collapse, log_scale_prior

PRIOR = np.array([30.0, 30.0, 15.0, 15.0])


def task(model, seed=4, steps=30):
    return EnsembleTask(model, PRIOR[: model.scale_count], 2, steps, np.random.default_rng(seed))


@pytest.mark.parametrize("student", [False, True], ids=["normal", "student"])
def test_a_run_can_be_repeated_and_holds_every_member(invent, regression, student):
    model = regression(invent(members=3, placed=True), member=slice(None), group_scatter=True, student=student)
    first, again = run_ensembles(task(model)), run_ensembles(task(model))
    for one, other in zip(first, again, strict=True):
        np.testing.assert_array_equal(one, other)
    ensembles, members, steps, walkers, scales = first.log_scales.shape
    assert (ensembles, members, steps, scales) == (2, 3, 30, 4)
    assert first.node_covariance.shape == (2, 3, 30, walkers, 2, 2)
    assert first.years.shape == (2, 3, len(first.kept), walkers, 4, 2)
    assert np.unique(first.log_scales[:, :, -1]).size > 0.9 * first.log_scales[:, :, -1].size


def test_moments_belong_to_the_scales_beside_them(invent, regression):
    model = regression(invent(members=2), member=slice(None))
    chains = run_ensembles(task(model))
    for member in (0, 1):
        log_scales = chains.log_scales[:, member].reshape(-1, 3)
        mean, covariance = collapse(model, model.at(log_scales, member)).moments()
        np.testing.assert_allclose(chains.node_mean[:, member].reshape(-1, 2), mean, rtol=1e-9)
        np.testing.assert_allclose(chains.node_covariance[:, member].reshape(-1, 2, 2), covariance, rtol=1e-9)


def test_scales_that_nothing_was_said_about_follow_their_prior(invent, regression):
    # one phasor says nothing on s_common: half-t with 4 degrees of freedom has median 0.741 of its scale (scipy)
    chains = run_ensembles(task(regression(invent(sites=1, models=1)), steps=300))
    median = np.exp(np.median(chains.log_scales[..., 2]))
    assert median / 15.0 == pytest.approx(0.741, rel=0.08)


def test_absurd_scales_are_refused(invent, regression):
    walk = _Walk(task(regression(invent())), 8)
    roots = np.array([[5.0, 5.0, 1e13], [5.0, 1e-20, 5.0], [5.0, -5.0, 5.0], [5.0, 0.0, 5.0], [5.0, 5.0, 5.0]])
    density = walk._log_posterior(np.column_stack([roots, np.arange(5.0)]))
    assert np.isneginf(density[:4]).all()
    assert np.isfinite(density[4])


def carried(model, condition, rng, steps, prior):
    """Gibbs steps of stretches, parts and s_site at fixed other scales."""
    for _ in range(steps):
        collapsed = collapse(model, condition)
        shared = collapsed.solution(rng.standard_normal((len(condition), model.columns.size)))
        condition = draw_site_scale(model, draw_latents(model, condition, shared, rng), prior, rng)
    return condition


def test_what_walkers_carry_and_the_site_scale_have_their_exact_posterior(invent, regression):
    """Stretches by Gibbs and s_site with the variances held: against importance-weighted nodes."""
    model = regression(invent(sites=5, placed=True), student=True)
    prior = np.array([30.0, 1e-6, 1e-6])
    route = integrate_scales(model, prior, draws=20_000)
    start = model.at(np.tile(np.log([30.0, 1e-9, 1e-9]), (4000, 1)))
    found = carried(model, start, np.random.default_rng(1), 60, prior)
    for values, nodes in (
        (np.log(found.stretch), np.log(route.stretch)),
        (found.log_scales[:, :1], route.log_scales[:, :1]),
    ):
        mean = route.weight @ nodes
        sd = np.sqrt(route.weight @ (nodes - mean) ** 2)
        error = np.sqrt(1 / 4000 + 1 / route.effective_nodes)
        np.testing.assert_allclose((values.mean(axis=0) - mean) / sd, 0.0, atol=4.5 * error)
        np.testing.assert_allclose(values.std(axis=0) / sd, 1.0, atol=0.1)


def test_parts_have_the_share_of_their_density(invent, regression, two_parts):
    network = two_parts(invent(sites=4), 2, [30.0, 10.0], weight=0.3, narrow=0.4)
    model = regression(network, mixed=("site 3",))
    log_scales = np.log([[25.0, 20.0, 12.0]])
    alone = []
    for part in (0, 1):
        condition = model.at(log_scales)
        condition.part[:, 2] = part
        alone.append(collapse(model, condition).log_likelihood[0] + model.rows.log_weight[2, part])
    share = 1.0 / (1.0 + np.exp(alone[1] - alone[0]))
    found = carried(model, model.at(np.tile(log_scales, (4000, 1))), np.random.default_rng(1), 30, PRIOR[:3])
    assert (found.part[:, 2] == 0).mean() == pytest.approx(share, abs=4 * 0.5 / np.sqrt(4000))


def test_the_prior_of_s_site_alone_is_left_as_it_is(invent, regression):
    # with the stretches drawn from their prior and no data in use, s_site must keep its half-t prior
    model = regression(invent(sites=3), student=True)
    rng = np.random.default_rng(1)
    scale = 30.0 * np.abs(rng.standard_t(4, size=20_000))
    condition = model.at(np.log(np.column_stack([scale, scale, scale])))
    condition.stretch[:] = stats.invgamma.rvs(2.0, scale=2.0, size=condition.stretch.shape, random_state=1)
    moved = condition
    for _ in range(3):
        moved = draw_site_scale(model, moved, PRIOR[:3], rng)
    assert (moved.log_scales[:, 0] != condition.log_scales[:, 0]).mean() > 0.5
    quantiles = np.quantile(np.exp(moved.log_scales[:, 0]) / 30.0, [0.1, 0.5, 0.9])
    # half-t with 4 degrees of freedom (scipy); four standard errors of 20,000 draws
    np.testing.assert_allclose(stats.t.cdf(quantiles, 4) * 2 - 1, [0.1, 0.5, 0.9], atol=4 * 0.5 / np.sqrt(20_000))
    np.testing.assert_allclose(
        moved.log_scales[:, :1] + 0.5 * np.log(moved.stretch),
        condition.log_scales[:, :1] + 0.5 * np.log(condition.stretch),
        atol=1e-9,
    )
    assert np.isfinite(log_scale_prior(moved.log_scales, PRIOR[:3])).all()
