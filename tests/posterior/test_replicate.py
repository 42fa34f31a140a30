"""Replicated site phasors have the covariance that the equation of the model gives, written out term by term."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.phasor import admittance_matrix
from massfit.posterior.network_model import Choices
from massfit.posterior.replicate import draw_errors, replicate_phasors
from massfit.settings import PosteriorSettings, Priors

SCALES = {"s_site": 25.0, "s_local": 20.0, "s_common": 12.0, "s_group": 15.0}
PLAIN = PosteriorSettings(site_scatter="normal", group_scatter=False)


def replicates(network, settings: PosteriorSettings, *, count: int) -> np.ndarray:
    rng = np.random.default_rng(7)
    scales = {name: np.full(count, value) for name, value in SCALES.items()}
    errors = draw_errors(network.observations, scales, Choices(settings, Priors(), 0.04), rng)
    admittance = np.repeat(network.admittance[:1], count, axis=0)
    return replicate_phasors(network.observations, admittance, np.tile(network.truth, (count, 1)), errors, rng)


def worst_entry(drawn: np.ndarray, expected: np.ndarray) -> float:
    """Largest difference between sample and expected covariance, in standard errors of that of normals."""
    error = np.sqrt((expected**2 + np.outer(np.diag(expected), np.diag(expected))) / len(drawn))
    return float(np.max(np.abs(np.cov(drawn.T) - expected) / error))


@pytest.mark.parametrize(("truth", "r"), [("exchangeable", 1.0), ("centred", 0.0)])
def test_covariance_is_that_of_the_equation(invent, dense_twin, truth: str, r: float) -> None:
    network = invent(3, sites=4, models=3, missing=0.3)
    count = 60_000
    twin = dense_twin(network, truth=r)
    drawn = replicates(network, replace(PLAIN, model_truth=truth), count=count)
    pairs = np.stack([drawn[:, s, m] for s, m in twin.pairs], axis=1).reshape(count, -1)
    assert np.isfinite(pairs).all()
    assert np.isnan(drawn).sum() == count * 2 * (~network.observations.present).sum()
    expected = twin.noise(np.log([[25.0, 20.0, 12.0]]))[0]
    # five standard errors over some 200 entries
    assert worst_entry(pairs, expected) < 5.0
    mean = twin.annual @ network.truth / twin.annual_sd
    assert np.max(np.abs(pairs.mean(axis=0) - mean) / np.sqrt(np.diag(expected) / count)) < 5.0


def test_groups_places_and_years_are_shared_as_the_equation_says(invent) -> None:
    network = invent(3, sites=5, models=1)
    share = np.array([[1.0, 0.0], [1.0, 0.0], [0.5, 0.5], [0.0, 1.0], [0.25, 0.75]])
    period = np.array([0.4, 0.6])
    seen = replace(
        network.observations,
        group=("east", "east", "", "west", "east"),  # a group of one shares with nobody
        position=np.radians([[0.0, 200.0], [20.0, 210.0], [-20.0, 220.0], [5.0, 190.0], [5.0, 190.01]]),
        years=(2014, 2015),
        year_share=share,
        period_share=period,
    )
    count = 60_000
    drawn = replicates(replace(network, observations=seen), replace(PLAIN, group_scatter=True), count=count)[:, :, 0]
    identity, through = np.eye(2), admittance_matrix(network.admittance[0])
    away = share - period
    same_place = np.eye(5)
    same_place[3, 4] = same_place[4, 3] = 1.0  # a kilometre apart
    same_group = np.zeros((5, 5))
    same_group[np.ix_([0, 1, 4], [0, 1, 4])] = 1.0
    same_group[2, 2] = same_group[3, 3] = 1.0
    shared = 25.0**2 * same_place + 15.0**2 * same_group + 2 * 12.0**2 + 4.0**2 + 20.0**2 * np.eye(5)
    expected = np.einsum("st,ij->sitj", shared, identity)
    expected += 5.0**2 * np.einsum("st,sik,tjk->sitj", away @ away.T, through, through)
    for s in range(5):
        expected[s, :, s] += seen.covariance[s]
    assert worst_entry(drawn.reshape(count, -1), expected.reshape(10, 10)) < 5.0


def test_student_scatter_has_one_size_for_both_components_of_a_site(invent) -> None:
    network = invent(3, sites=2, models=1)
    count = 200_000
    scales = {"s_site": np.full(count, 25.0), "s_local": np.zeros(count), "s_common": np.zeros(count)}
    choices = Choices(replace(PLAIN, site_scatter="student-t"), Priors(), 0.0)
    drawn = draw_errors(network.observations, scales, choices, np.random.default_rng(1)).site / 25.0
    # t with 4 degrees of freedom: half of it lies within 0.7407 (published tables); 5 binomial errors
    assert abs(np.mean(np.abs(drawn) < 0.7407) - 0.5) < 5.0 * 0.5 / np.sqrt(4 * count)
    # the length of a site's vector: squared and halved it is F(2, 4), whose median is 0.8284 = 2 (sqrt(2) - 1)
    halved = 0.5 * (drawn**2).sum(axis=2)
    assert abs(np.mean(halved < 2.0 * (np.sqrt(2.0) - 1.0)) - 0.5) < 5.0 * 0.5 / np.sqrt(2 * count)
