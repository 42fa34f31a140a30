"""Any subset of a network against fitting it anew: ratios within one run, on one core."""

import time

import numpy as np
import pytest

from massfit.pipeline.executor import local_processes
from massfit.pipeline.rank_sites import shared_answer
from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, network_model, scale_priors
from massfit.posterior.observations import Observations
from massfit.posterior.subsets import subset_posteriors, subset_tables
from massfit.settings import PosteriorSettings, Priors

pytestmark = pytest.mark.benchmark


def invented(sites: int = 20, models: int = 3, members: int = 5) -> tuple[Observations, np.ndarray]:
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


def seconds_each(scatter: str, count: int) -> tuple[float, float]:
    """Processor time of one subset: by sums, and by nodes of its own for every load member."""
    observations, admittance = invented()
    choices = Choices(PosteriorSettings(site_scatter=scatter, group_scatter=False), Priors(), 0.04)
    tables = subset_tables(observations, admittance, choices)
    kept = np.random.default_rng(2).random((count, 20)) < 0.6
    subset_posteriors(tables, kept[:64])
    start = time.process_time()
    subset_posteriors(tables, kept)
    fast = (time.process_time() - start) / count
    start = time.process_time()
    for own in kept[:3]:
        model = network_model(observations.select(own), admittance[:, own], choices)
        for member in range(len(admittance)):
            integrate_scales(model, scale_priors(choices.priors, model.scale_count), member=member)
    return fast, (time.process_time() - start) / 3


def test_a_hundred_thousand_subsets_on_two_cores() -> None:
    observations, admittance = invented()
    tables = subset_tables(
        observations, admittance, Choices(PosteriorSettings(site_scatter="normal", group_scatter=False), Priors(), 0.04)
    )
    kept = np.random.default_rng(3).random((100_000, 20)) < 0.6
    with local_processes(2) as two:
        list(two.results(abs, [-1, -2]))  # both have started
        start = time.perf_counter()
        moments = shared_answer(two, tables, kept)
        seconds = time.perf_counter() - start
    print(f"100,000 subsets in {seconds:.1f} s")
    assert np.isfinite(moments.width).all()
    assert seconds < 15.0


@pytest.mark.parametrize(("scatter", "least"), [("normal", 100.0), ("student-t", 50.0)])
def test_subsets_are_far_cheaper_than_refits(scatter: str, least: float) -> None:
    fast, refit = seconds_each(scatter, 2000 if scatter == "normal" else 400)
    print(f"{scatter}: {1e3 * fast:.2f} ms a subset, {1e3 * refit:.0f} ms a refit, ratio {refit / fast:.0f}")
    assert refit / fast > least
