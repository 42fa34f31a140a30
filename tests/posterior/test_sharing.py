"""What sites share: places, groups, distances, years, and the circulation where no model was subtracted."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.posterior.network_model import Choices, second_routes
from massfit.posterior.sharing import distances_km, find_sharing
from massfit.settings import PosteriorSettings, Priors


def placed(invent, **shape):
    network = invent(placed=True, **shape)
    return network, network.observations


def test_distances_are_those_of_the_law_of_cosines():
    position = np.radians([[10.0, 200.0], [-35.0, 20.0], [12.0, 201.0]])
    latitude, longitude = position.T
    cosine = np.sin(latitude[:, None]) * np.sin(latitude)
    cosine += np.cos(latitude[:, None]) * np.cos(latitude) * np.cos(longitude[:, None] - longitude)
    # the law of cosines loses half its digits at short distances: 1 m
    np.testing.assert_allclose(distances_km(position), 6371.0 * np.arccos(np.clip(cosine, -1, 1)), atol=1e-3)


def test_neighbours_in_a_chain_are_one_place(invent):
    _, seen = placed(invent, sites=5)
    step = 8.0 / 6371.0
    position = np.array([[0.0, 0.0], [0.5, 1.0], [0.0, step], [0.0, 2 * step], [0.5, 2.0]])
    found = find_sharing(replace(seen, position=position), True)
    np.testing.assert_array_equal(found.place, [0, 1, 0, 0, 2])


def test_a_group_is_shared_by_two_places_at_least(invent):
    _, seen = placed(invent, sites=6)
    labels = ("A", "A", "B", "", "C", "C")  # the last two lie at one place
    found = find_sharing(replace(seen, group=labels), True)
    np.testing.assert_array_equal(found.group[:, 0], [1, 1, 0, 0, 0, 0])
    np.testing.assert_array_equal(found.alone, [False, False, True, True, True, True])
    for alone in (find_sharing(replace(seen, group=("A", "B", "C", "", "D", "E")), True), find_sharing(seen, False)):
        assert not alone.has_group
        assert not alone.alone.any()


def test_correlations_fall_off_with_the_distance(invent):
    _, seen = placed(invent, sites=6)
    found = find_sharing(seen, 1500.0)
    covariance = found.group @ found.group.T
    np.testing.assert_allclose(covariance, np.exp(-distances_km(seen.position) / 1500.0), atol=1e-7)
    with pytest.raises(InputError, match="the sites have no positions"):
        find_sharing(replace(seen, position=None), 1500.0)


def test_years_are_told_against_the_period(invent):
    _, seen = placed(invent)
    found = find_sharing(seen, True)
    np.testing.assert_allclose(found.year, seen.year_share - [0.3, 0.3, 0.3, 0.1])
    np.testing.assert_allclose(found.year.sum(axis=1), 0.0, atol=1e-12)
    one = replace(seen, years=(2016,), year_share=np.ones((8, 1)), period_share=np.ones(1))
    assert find_sharing(one, True).year.shape == (8, 0)


def width(network, **settings):
    choices = Choices(PosteriorSettings(**settings), Priors(), 0.04)
    (route,) = second_routes(network.observations, network.admittance, choices, draws=1500)
    return route.mean, np.sqrt(np.diag(route.covariance))


def test_clustered_sites_do_not_count_as_many(invent):
    """Twenty sites in two clusters whose scatter is one: taken as independent they say four times too much."""
    network = invent(5, sites=20, models=3, scales=(3.0, 10.0, 3.0))
    rng = np.random.default_rng(1)
    cluster = np.arange(20) % 2
    phasor = network.observations.part_phasor + 40.0 * rng.standard_normal((2, 1, 1, 2))[cluster]
    seen = replace(network.observations, part_phasor=phasor, group=tuple("AB"[c] for c in cluster))
    network = replace(network, observations=seen)
    _, shared = width(network, group_scatter=True)
    _, independent = width(network, group_scatter=False)
    assert np.all(shared > 1.3 * independent)


def test_without_any_model_the_answer_owns_up_to_the_circulation(invent):
    network = replace(invent(5, sites=4, models=1, bare_sites=4, placed=True), admittance=np.ones((1, 4), complex))
    near = np.array([0.8, 2.0]) + 0.01 * np.random.default_rng(1).standard_normal((4, 2))
    together = replace(network, observations=replace(network.observations, position=near))
    far = np.array([[0.9, 0.0], [-0.9, 1.5], [0.0, 3.0], [0.1, 4.5]])
    apart = replace(network, observations=replace(network.observations, position=far))
    _, of_cluster = width(together)
    _, of_globe = width(apart)
    # 1 hPa of circulation that a cluster does not average away, and four places hardly share
    assert np.all(of_cluster > 95.0)
    assert np.all(of_globe < 0.8 * of_cluster)
    # with a model the same sites say much more
    _, with_model = width(invent(5, sites=4, models=2, placed=True))
    assert np.all(with_model < 0.6 * of_cluster)
