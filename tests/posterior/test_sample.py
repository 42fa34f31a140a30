import hashlib
import pickle
from dataclasses import replace
from multiprocessing import get_context

import emcee
import numpy as np
import pytest
from scipy import stats

from massfit.errors import InputError
from massfit.posterior import convergence, sample
from massfit.posterior.importance import integrate_scales
from massfit.posterior.sample import pool_members, sample_posterior
from massfit.settings import PosteriorSettings, Priors

PLAIN = PosteriorSettings(seed=5, site_scatter="normal", group_scatter=False)


def run(network, **changes):
    choices = {"settings": PLAIN, "priors": Priors(), **changes}
    return sample_posterior(*network.datasets(), **choices)


@pytest.fixture(scope="module")
def posterior(invent):
    return run(invent(members=2))


@pytest.fixture
def short_runs(monkeypatch):
    """Runs too short to converge, for tests that do not look at the draws' distribution."""
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 40)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 40)


def test_the_draws_are_those_of_the_quadrature(posterior):
    for draws, route in zip(posterior.member_annual.reshape(2, -1, 2), posterior.second_route, strict=True):
        sd = np.sqrt(np.diag(route.covariance))
        # 4000 draws, nearly independent, and 1000 nodes: four standard errors of a mean
        np.testing.assert_allclose(draws.mean(axis=0) / sd, route.mean / sd, atol=4 / np.sqrt(4000))
        levels = np.array([0.025, 0.25, 0.5, 0.75, 0.975])
        found = np.array([(draws < q).mean(axis=0) for q in route.quantiles(levels)])
        error = np.sqrt(levels * (1 - levels) / 2500)
        assert np.all(np.abs(found - levels[:, None]) < 4 * error[:, None])


def test_the_scales_are_those_of_the_quadrature(posterior):
    for scales, route in zip(posterior.scales.reshape(2, -1, 3), posterior.second_route, strict=True):
        for i in range(3):
            order = np.argsort(route.log_scales[:, i])
            cumulative = np.cumsum(route.weight[order])
            median = np.interp(0.5, cumulative, route.log_scales[order, i])
            assert np.log(np.median(scales[:, i])) == pytest.approx(median, abs=0.1)


@pytest.mark.usefixtures("short_runs")
def test_two_runs_agree_bit_for_bit_and_two_seeds_do_not(invent):
    first, again = run(invent(members=2)), run(invent(members=2))
    np.testing.assert_array_equal(again.annual, first.annual)
    np.testing.assert_array_equal(again.scales, first.scales)
    other = run(invent(members=2), settings=replace(PLAIN, seed=6))
    assert not np.isclose(other.annual, first.annual).any()


def test_a_run_converges_and_says_so(posterior):
    assert posterior.converged
    assert posterior.convergence.rhat_max <= 1.01
    assert min(posterior.convergence.ess_bulk_min, posterior.convergence.ess_tail_min) >= 400
    assert posterior.convergence.length_min >= 50
    assert not [text for text in posterior.warnings if "Not converged" in text]


def test_a_run_that_is_too_short_is_extended(invent, monkeypatch):
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 100)  # of some 4 autocorrelation steps each
    extended = run(invent())
    assert extended.converged
    assert extended.convergence.length_min >= 50.0


def test_a_run_that_reaches_the_cap_is_not_called_converged(invent, monkeypatch):
    monkeypatch.setattr(convergence, "LENGTH_MIN", 1e6)
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 100)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 100)
    stopped = run(invent())
    assert not stopped.converged
    assert [text for text in stopped.warnings if text.startswith("Not converged: the run lasts")]


def test_members_are_pooled_with_their_spread_inflated():
    rng = np.random.default_rng(1)
    means = np.array([[0.0, 1.0], [3.0, -2.0], [6.0, 4.0]])
    noise = rng.standard_normal((3, 4, 500, 2))
    noise -= noise.mean(axis=(1, 2), keepdims=True)
    annual, member = pool_members(means[:, None, None] + noise)
    pooled_means = np.array([annual[:, member == k].mean(axis=(0, 1)) for k in range(3)])
    np.testing.assert_allclose(pooled_means.mean(axis=0), means.mean(axis=0), atol=1e-12)
    # (K + 1) / (K - 1) = 2 in variance for three members
    np.testing.assert_allclose(pooled_means.var(axis=0), 2.0 * means.var(axis=0), rtol=1e-12)
    np.testing.assert_allclose(annual[:, member == 1] - pooled_means[1], noise[1], atol=1e-12)


def test_the_inflated_spread_predicts_one_more_member():
    # the mean square distance of one more member from the mean of K is the inflated spread [closed form]
    rng = np.random.default_rng(2)
    k = 4
    members = rng.standard_normal((40_000, k + 1))
    seen, more = members[:, :k], members[:, k]
    inflated = (k + 1) / (k - 1) * seen.var(axis=1)
    assert inflated.mean() == pytest.approx(((more - seen.mean(axis=1)) ** 2).mean(), rel=0.03)


@pytest.mark.usefixtures("short_runs")
def test_one_member_has_no_spread_and_a_warning(invent):
    single = run(invent())
    np.testing.assert_array_equal(single.annual, single.member_annual[0])
    assert [text for text in single.warnings if text.startswith("One load member")]


@pytest.mark.usefixtures("short_runs")
@pytest.mark.parametrize(
    ("shape", "warning"),
    [
        ({"models": 1}, "One ocean model"),
        ({"models": 1, "sites": 3, "bare_sites": 3}, "No ocean model: "),
        ({"sites": 1}, "One site"),
        ({"bare_sites": 2}, "No ocean model was subtracted at: site 1, site 2"),
    ],
)
def test_thin_networks_are_allowed_and_warned_about(invent, shape, warning):
    posterior = run(invent(**shape))
    assert np.isfinite(posterior.annual).all()
    assert [text for text in posterior.warnings if text.startswith(warning)]


@pytest.mark.usefixtures("short_runs")
def test_sites_at_one_place_and_shared_scatter_are_said(invent):
    posterior = run(invent(placed=True), settings=PosteriorSettings(seed=5))
    assert [text for text in posterior.warnings if text.startswith("site 7 and site 8 lie within 10 km")]
    assert "Student site scatter (4 degrees of freedom), scatter shared within groups, cycles of 4 years" in (
        posterior.method
    )
    assert posterior.scales.shape[-1] == 4
    far = run(invent(placed=True), settings=PosteriorSettings(seed=5, group_scatter=800.0))
    assert "scatter shared over 800 km" in far.method[0]
    with pytest.raises(InputError, match="the sites have no positions"):
        run(invent(), settings=PosteriorSettings(seed=5, group_scatter=800.0))


@pytest.mark.usefixtures("short_runs")
@pytest.mark.parametrize("scatter", ["normal", "student-t"])
def test_the_order_of_sites_and_models_changes_no_bit(invent, scatter):
    network = invent(members=2, missing=0.3, placed=True)
    phasors, fingerprints = network.datasets()
    settings = PosteriorSettings(seed=5, site_scatter=scatter)
    first = sample_posterior(phasors, fingerprints, settings=settings, priors=Priors())
    turned = phasors.isel(site=[5, 2, 7, 0, 1, 3, 6, 4], model=[2, 0, 1]), fingerprints.isel(site=slice(None, None, -1))
    again = sample_posterior(*turned, settings=settings, priors=Priors())
    np.testing.assert_array_equal(again.annual, first.annual)
    np.testing.assert_array_equal(again.second_route[1].node_mean, first.second_route[1].node_mean)


def of_every_kind(invent, two_parts, seed):
    """A random network: missing pairs, groups or distances, a place of two sites, years, a site by its mixture."""
    rng = np.random.default_rng([seed, 8])
    network = invent(seed, sites=int(rng.integers(5, 12)), models=3, members=2, missing=0.3, placed=True)
    site = int(rng.integers(len(network.observations.sites)))
    network = two_parts(network, site, 80.0 * np.array([1.0, -0.5]), weight=0.3, narrow=0.2)
    group_scatter = [True, 900.0][seed % 2]
    return network.datasets(), PosteriorSettings(seed=seed, site_scatter="student-t", group_scatter=group_scatter)


def bits(posterior):
    """Everything that is drawn, as bytes."""
    route = posterior.second_route[-1]
    drawn = (posterior.annual, posterior.scales, posterior.year_annual, route.node_mean, route.stretch, route.part)
    return [np.ascontiguousarray(each).tobytes() for each in drawn]


@pytest.mark.usefixtures("short_runs")
@pytest.mark.parametrize("seed", [0, 1, *(pytest.param(seed, marks=pytest.mark.slow) for seed in range(2, 12))])
def test_no_order_changes_a_bit_in_networks_of_every_kind(invent, two_parts, seed):
    (phasors, fingerprints), settings = of_every_kind(invent, two_parts, seed)
    rng = np.random.default_rng(seed)
    first = sample_posterior(phasors, fingerprints, settings=settings, priors=Priors())
    assert first.mixed
    turned = phasors.isel(site=rng.permutation(phasors.sizes["site"]), model=rng.permutation(3))
    again = sample_posterior(
        turned,
        fingerprints.isel(site=rng.permutation(phasors.sizes["site"])),
        settings=settings,
        priors=Priors(),
        # the parts travel to other processes and may be computed last first
        mapped=lambda function, parts: [function(pickle.loads(pickle.dumps(part))) for part in parts[::-1]][::-1],
    )
    assert again.mixed == first.mixed
    assert bits(again) == bits(first)


@pytest.mark.usefixtures("short_runs")
def test_another_process_gives_the_same_bits(invent, two_parts):
    data, settings = of_every_kind(invent, two_parts, 1)
    mine = hashlib.sha256(b"".join(bits(sample_posterior(*data, settings=settings, priors=Priors())))).hexdigest()
    context = get_context("spawn")
    with context.Pool(1) as pool:
        assert pool.apply(elsewhere, (data, settings)) == mine


def elsewhere(data, settings):
    sample.STEPS = sample.MAX_STEPS = 40
    return hashlib.sha256(b"".join(bits(sample_posterior(*data, settings=settings, priors=Priors())))).hexdigest()


def test_the_dataset_holds_everything(posterior):
    data = posterior.to_dataset()
    assert data["annual_phasor"].dims == ("chain", "draw", "component")
    assert data["scale"].dims == ("member", "chain", "member_draw", "scale_name")
    assert all(variable.attrs["units"] in {"Pa", "1"} for variable in data.data_vars.values())
    np.testing.assert_array_equal(data["annual_phasor"].values, posterior.annual)
    assert data.attrs["seed"] == 5


@pytest.mark.usefixtures("short_runs")
def test_progress_is_told(invent):
    told = []
    run(invent(members=2), progress=lambda done, total: told.append((done, total)))
    # the ensembles, and the nodes of two load members
    assert told == [(1, 3), (2, 3), (3, 3)]


@pytest.mark.slow
def test_full_parameter_sampling_agrees(invent, regression):
    """Sample A, a, every c_m (per s_common) and the scales with plain emcee, sites independent given them."""
    network = invent(sites=6, models=2)
    seen, factor = network.observations, network.admittance[0]
    prior = np.array([30.0, 30.0, 15.0])
    site_terms = []
    for s in range(6):
        record = seen.part_covariance[s, 0] - seen.model_noise[s] / 2.0
        fixed = np.kron(np.ones((2, 2)), record) + np.kron(np.eye(2), seen.model_noise[s])
        site_terms.append((seen.part_phasor[s, 0].ravel(), fixed))
    shared, own = np.kron(np.ones((2, 2)), np.eye(2)), np.eye(4)

    def log_posterior(p):
        inside = np.abs(p[:, 10:]).max(axis=1) < 10.0  # beyond, the dense solve loses its digits
        return np.where(inside, log_density(np.where(inside[:, None], p, 0.0)), -np.inf)

    def log_density(p):
        annual, air, log_scales = p[:, :2], p[:, 2:4], p[:, 10:]
        scales = np.exp(log_scales)
        centre, common = scales[:, 2:] * p[:, 4:6], scales[:, 2:] * p[:, 6:10]
        value = np.log(stats.t.pdf(scales / prior, 4)).sum(axis=1) + log_scales.sum(axis=1)
        value += stats.norm.logpdf(annual, scale=500).sum(axis=1) + stats.norm.logpdf(air, scale=4).sum(axis=1)
        value += stats.norm.logpdf(p[:, 4:10]).sum(axis=1)
        for s, (z, fixed) in enumerate(site_terms):
            a = factor[s] * (annual[:, 0] + 1j * annual[:, 1])
            mean = np.tile(np.stack([a.real, a.imag], axis=1) + air + centre, 2) + common
            total = fixed + scales[:, 0, None, None] ** 2 * shared + scales[:, 1, None, None] ** 2 * own
            residual = (z - mean)[..., None]
            quadratic = (residual * np.linalg.solve(total, residual)).sum(axis=(1, 2))
            value -= 0.5 * (quadratic + np.linalg.slogdet(total)[1])
        return value

    rng = np.random.default_rng(1)
    start = rng.standard_normal((80, 13)) * np.array([20, 20, 4, 4, 1, 1, 1, 1, 1, 1, 0.3, 0.3, 0.3])
    start[:, :2] += network.truth
    start[:, 10:] += np.log(prior)
    moves = [(emcee.moves.DEMove(), 0.9), (emcee.moves.DEMove(gamma0=1.0), 0.1)]
    sampler = emcee.EnsembleSampler(80, 13, log_posterior, moves=moves, vectorize=True)
    state = emcee.State(start, random_state=np.random.RandomState(1).get_state())
    sampler.run_mcmc(state, 30_000)
    chain = sampler.get_chain(discard=5_000)[..., :2]
    effective = chain.shape[0] * 80 / emcee.autocorr.integrated_time(chain, tol=0).max()
    draws = chain.reshape(-1, 2)
    route = integrate_scales(regression(network), prior)
    sd = np.sqrt(np.diag(route.covariance))
    assert effective > 5_000
    np.testing.assert_allclose(draws.mean(axis=0) / sd, route.mean / sd, atol=4 / np.sqrt(effective))
    levels = np.array([0.05, 0.25, 0.5, 0.75, 0.95])
    found = np.array([(draws < q).mean(axis=0) for q in route.quantiles(levels)])
    np.testing.assert_allclose(found, np.repeat(levels[:, None], 2, axis=1), atol=4 * 0.5 / np.sqrt(effective))
