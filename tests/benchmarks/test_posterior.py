"""The network posterior: ratios within one run, on one core."""

import time
from collections.abc import Callable
from pathlib import Path

import emcee
import numpy as np
import pytest

import massfit
from massfit.posterior.explore import ENSEMBLES, STEPS, EnsembleTask, run_ensembles
from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, network_model, scale_priors
from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel
from massfit.settings import PosteriorSettings, Priors

pytestmark = pytest.mark.benchmark
DEMO = Path(__file__).parents[2] / "demo_network"
PLAIN = PosteriorSettings(site_scatter="normal", group_scatter=False)


def invented(sites: int, models: int = 3, members: int = 1) -> tuple[Observations, np.ndarray]:
    rng = np.random.default_rng(1)
    shared = np.array([10.0, 85.0]) + 30.0 * rng.standard_normal((sites, 1, 2))
    own = 20.0 * rng.standard_normal((sites, models, 2)) + 12.0 * rng.standard_normal((1, models, 2))
    observations = Observations(
        tuple(f"site {s:04d}" for s in range(sites)),
        tuple(f"model {m}" for m in range(models)),
        np.ones((sites, 1)),
        (shared + own)[:, None],
        np.tile(300.0 * np.eye(2), (sites, 1, 1, 1)),
        np.tile(30.0 * np.eye(2), (sites, 1, 1)),
    )
    return observations, 1.1 + 0.05 * rng.standard_normal((members, sites)) + 0.0j


def seconds(function: Callable[[], object], rounds: int = 3) -> float:
    """Least processor time of a few calls."""
    times = []
    for _ in range(rounds):
        start = time.process_time()
        function()
        times.append(time.process_time() - start)
    return min(times)


def site_loop(observations: Observations, admittance: np.ndarray) -> Callable[[np.ndarray], float]:
    """Log posterior of (A, a, c0, c_m, log scales) at one point, one site after the other."""
    prior = np.array([30.0, 30.0, 15.0])
    models = len(observations.models)
    shared, own = np.kron(np.ones((models, models)), np.eye(2)), np.eye(2 * models)
    fixed = [
        np.kron(np.ones((models, models)), observations.covariance[s] - observations.model_noise[s] / models)
        + np.kron(np.eye(models), observations.model_noise[s])
        for s in range(len(observations.sites))
    ]

    def log_posterior(p: np.ndarray) -> float:
        annual, air, centre = p[0] + 1j * p[1], p[2:4], p[4:6]
        common, scales = p[6:-3].reshape(models, 2), np.exp(p[-3:])
        if np.abs(p[-3:]).max() > 10.0:
            return -np.inf
        density = -2.5 * np.log1p((scales / prior) ** 2 / 4.0).sum() + p[-3:].sum()
        density -= 0.5 * ((p[:2] / 500.0) ** 2).sum() + 0.5 * ((air / 4.0) ** 2).sum()
        density -= 0.5 * (p[4:-3] ** 2).sum()
        for s, base in enumerate(fixed):
            signal = admittance[s] * annual
            mean = np.array([signal.real, signal.imag]) + air + scales[2] * (centre + common)
            total = base + scales[0] ** 2 * shared + scales[1] ** 2 * own
            residual = (observations.part_phasor[s, 0] - mean).ravel()
            density -= 0.5 * (residual @ np.linalg.solve(total, residual) + np.linalg.slogdet(total)[1])
        return float(density)

    return log_posterior


def effective_a_second(model: LinearModel, prior: np.ndarray, rounds: int = 3) -> float:
    """Effective draws of the phasor by the collapsed sampler in a second of processor time, warm-up included."""
    rates = []
    for _ in range(rounds):
        start = time.process_time()
        chains = run_ensembles(EnsembleTask(model, prior, ENSEMBLES, STEPS, np.random.default_rng(1)))
        spent = time.process_time() - start
        length = [emcee.autocorr.integrated_time(each[0], tol=0).max() for each in chains.node_mean]
        # the phasor is drawn exactly given the scales: its draws are at least as good as its conditional means
        rates.append(chains.node_mean[..., 0].size / np.mean(length) / spent)
    return max(rates)


def test_effective_draws_a_second_against_a_plain_sampler(measured, monkeypatch: pytest.MonkeyPatch) -> None:
    observations, admittance = invented(20)
    model = network_model(observations, admittance, Choices(PLAIN, Priors(), 0.04))
    prior = scale_priors(Priors(), 3)
    collapsed = effective_a_second(model, prior)
    # a run draws no more than it needs; more walkers share the cost of a step
    monkeypatch.setattr("massfit.posterior.explore.WALKERS", 400)
    wide = effective_a_second(model, prior)

    walkers, steps = 40, 2000
    plain = site_loop(observations, admittance[0])
    rng = np.random.default_rng(2)
    begin = rng.standard_normal((walkers, 15)) * np.array([15, 15, 4, 4, *[1] * 8, 0.3, 0.3, 0.3])
    begin[:, :2] += [10.0, 78.0]
    begin[:, -3:] += np.log([25.0, 20.0, 12.0])
    sampler = emcee.EnsembleSampler(walkers, 15, plain)
    start = time.process_time()
    sampler.run_mcmc(emcee.State(begin, random_state=np.random.RandomState(1).get_state()), steps)
    spent_plainly = time.process_time() - start
    time_of_plain = emcee.autocorr.integrated_time(sampler.get_chain()[:, :, :2], tol=0).max()
    plainly = walkers * steps / time_of_plain / spent_plainly

    start = time.process_time()
    route = integrate_scales(model, prior)
    nodes = route.effective_nodes / (time.process_time() - start)
    beside = "a plain sampler with a loop over the sites"
    measured("effective draws a second, linear parts integrated out", beside, collapsed / plainly, -500.0)
    measured("the same with 400 walkers an ensemble", beside, wide / plainly, None)
    measured("effective draws a second, second route", beside, nodes / plainly, None)
    print(f"effective draws a second: {collapsed:.0f}, {wide:.0f}, {nodes:.0f} and {plainly:.1f} by the plain sampler")
    # a short plain chain flatters itself: its autocorrelation time grows with its length
    assert collapsed / plainly > 500.0


@pytest.mark.parametrize("scatter", ["normal", "student-t"])
def test_the_cost_grows_no_faster_than_the_sites(scatter: str, measured) -> None:
    settings = PosteriorSettings(site_scatter=scatter, group_scatter=False)
    costs = {}
    for sites in (20, 100, 1000):
        observations, admittance = invented(sites)
        model = network_model(observations, admittance, Choices(settings, Priors(), 0.04))
        prior = scale_priors(Priors(), 3)
        run_ensembles(EnsembleTask(model, prior, ENSEMBLES, 3, np.random.default_rng(1)))
        task = EnsembleTask(model, prior, ENSEMBLES, 30, np.random.default_rng(1))
        costs[sites] = seconds(lambda task=task: run_ensembles(task))
    print(scatter, {sites: f"{cost / 40 * 1e3:.1f} ms a step" for sites, cost in costs.items()})
    measured(f"a step for 1000 sites, {scatter} scatter", "a step for 100 sites", costs[1000] / costs[100], 15.0)
    assert costs[1000] / costs[100] < 1.5 * 10.0


def test_the_whole_stage_of_the_demo(measured) -> None:
    """Both routes, summary, alternatives and predictive check, beside the site fits of the same run."""
    spans: dict[str, list[float]] = {}
    massfit.estimate(
        massfit.read_network(DEMO), progress=lambda stage, *_: spans.setdefault(stage, []).append(time.process_time())
    )
    spent = time.process_time() - spans["network posterior"][0]
    fits = spans["site phasors"][-1] - spans["site phasors"][0]
    print(f"network posterior of the demo {spent:.1f} s of one processor, its site fits {fits:.1f} s")
    measured("the whole posterior stage of the demo", "its site fits", spent / fits, 1.0)
    assert spent < fits
