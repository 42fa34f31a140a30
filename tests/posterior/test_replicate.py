"""Replicated site phasors have the covariance that the equation of the model gives, written out term by term."""

from dataclasses import replace

import numpy as np

from massfit.posterior.replicate import draw_errors, replicate_phasors

SCALES = {"s_site": 25.0, "s_local": 20.0, "s_common": 12.0}


def replicates(network, *, count: int, truth: float = 1.0, student: bool = False) -> np.ndarray:
    rng = np.random.default_rng(7)
    scales = {name: np.full(count, value) for name, value in SCALES.items()}
    errors = draw_errors(network.observations, scales, atmosphere_sd=4.0, truth=truth, student=student, rng=rng)
    admittance = np.repeat(network.admittance[:1], count, axis=0)
    return replicate_phasors(network.observations, admittance, np.tile(network.truth, (count, 1)), errors, rng)


def test_covariance_is_that_of_the_equation(invent, dense_twin) -> None:
    network = invent(3, sites=4, models=3, missing=0.3, bare_sites=1)
    count = 60_000
    for truth in (1.0, 0.0):
        twin = dense_twin(network, truth=truth, unmodelled_sd=0.0)
        drawn = replicates(network, count=count, truth=truth)
        pairs = np.stack([drawn[:, s, m] for s, m in twin.pairs], axis=1).reshape(count, -1)
        assert np.isfinite(pairs).all()
        assert np.isnan(drawn).sum() == count * 2 * (~network.observations.present).sum()
        expected = twin.noise(np.log([list(SCALES.values())]))[0]
        # standard error of a sample covariance of normals; five of it over some 200 entries
        error = np.sqrt((expected**2 + np.outer(np.diag(expected), np.diag(expected))) / count)
        assert np.max(np.abs(np.cov(pairs.T) - expected) / error) < 5.0
        mean = twin.annual @ network.truth / twin.annual_sd
        assert np.max(np.abs(pairs.mean(axis=0) - mean) / np.sqrt(np.diag(expected) / count)) < 5.0


def test_student_scatter_has_one_size_for_both_components_of_a_site(invent) -> None:
    network = invent(3, sites=2, models=1)
    quiet = replace(network.observations, part_covariance=np.full((2, 1, 2, 2), 0.0) + 1e-6 * np.eye(2))
    quiet = replace(quiet, model_noise=np.zeros((2, 2, 2)))
    count = 200_000
    scales = {"s_site": np.full(count, 25.0), "s_local": np.zeros(count), "s_common": np.zeros(count)}
    rng = np.random.default_rng(1)
    drawn = draw_errors(quiet, scales, atmosphere_sd=0.0, truth=1.0, student=True, rng=rng).site / 25.0
    # t with 4 degrees of freedom: half of it lies within 0.7407 (published tables); 5 binomial errors
    assert abs(np.mean(np.abs(drawn) < 0.7407) - 0.5) < 5.0 * 0.5 / np.sqrt(4 * count)
    # the length of a site's vector: squared and halved it is F(2, 4), whose median is 0.8284 = 2 (sqrt(2) - 1)
    halved = 0.5 * (drawn**2).sum(axis=2)
    assert abs(np.mean(halved < 2.0 * (np.sqrt(2.0) - 1.0)) - 0.5) < 5.0 * 0.5 / np.sqrt(2 * count)
