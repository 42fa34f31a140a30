"""How far the fast answer of a subset is from a refit, over random small networks of every kind."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, network_model, pooled_moments, scale_priors
from massfit.posterior.subsets import subset_posteriors, subset_tables
from massfit.settings import PosteriorSettings, Priors


def errors(invent, scatter: str, seeds: range) -> np.ndarray:
    """Error of the mean in standard deviations, and of the standard deviation, (n, 2), of the worse component."""
    found = []
    for seed in seeds:
        rng = np.random.default_rng(seed)
        sites, placed = int(rng.integers(2, 15)), bool(rng.random() < 0.6)
        network = invent(
            seed,
            sites=sites,
            models=int(rng.integers(1, 5)),
            missing=float(rng.choice([0.0, 0.3])),
            placed=placed,
            scales=tuple(rng.choice([3.0, 15.0, 40.0], 3)),
        )
        settings = PosteriorSettings(
            site_scatter=scatter,
            group_scatter=True if rng.random() < 0.7 or not placed else 3000.0,
            model_truth=str(rng.choice(["exchangeable", "centred"])),
        )
        choices = Choices(settings, Priors(), 0.04)
        kept = np.array([rng.permutation(sites) < rng.integers(1, sites + 1) for _ in range(2)])
        fast = subset_posteriors(subset_tables(network.observations, network.admittance, choices), kept)
        for i, own in enumerate(kept):
            model = network_model(network.observations.select(own), network.admittance[:, own], choices)
            prior_scales = scale_priors(choices.priors, model.scale_count)
            mean, covariance = pooled_moments([integrate_scales(model, prior_scales, draws=20_000)])
            sd = np.sqrt(np.diag(covariance))
            found.append((np.abs((fast.mean[i] - mean) / sd).max(), np.abs(fast.sd[i] / sd - 1.0).max()))
    return np.array(found)


@pytest.mark.slow
@pytest.mark.parametrize(("scatter", "mean", "sd"), [("normal", 0.01, 0.015), ("student-t", 0.02, 0.03)])
def test_nine_of_ten_random_subsets_are_that_near(invent, scatter: str, mean: float, sd: float) -> None:
    found = errors(invent, scatter, range(34))
    quantiles = np.quantile(found, [0.5, 0.9, 1.0], axis=0)
    print(
        f"{scatter}: median, 90 %, worst of the mean {quantiles[:, 0].round(4)}, of the sd {quantiles[:, 1].round(4)}"
    )
    assert quantiles[1, 0] < mean
    assert quantiles[1, 1] < sd


def test_random_networks_differ(invent) -> None:
    """Control: with the group scatter taken as a place's own the same subsets answer otherwise."""
    network = invent(1, sites=9, placed=True, scales=(40.0, 15.0, 3.0))
    shared = Choices(PosteriorSettings(site_scatter="normal"), Priors(group_scatter_hpa=0.6), 0.04)
    alone = replace(shared, settings=replace(shared.settings, group_scatter=False))
    kept = np.ones((1, 9), dtype=bool)
    answers = [
        subset_posteriors(subset_tables(network.observations, network.admittance, c), kept) for c in (shared, alone)
    ]
    assert abs(answers[0].sd[0, 0] / answers[1].sd[0, 0] - 1.0) > 0.05
