from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior.importance import integrate_scales
from massfit.posterior.likelihood import collapse
from massfit.posterior.network_model import Choices, network_model, pooled_moments, scale_priors
from massfit.posterior.node_integral import node_weights
from massfit.posterior.node_terms import node_table, node_values
from massfit.posterior.subsets import subset_posteriors, subset_tables
from massfit.settings import PosteriorSettings, Priors

SETTINGS = PosteriorSettings(site_scatter="normal")
NETWORKS = {
    "groups, years, a shared place": ({"sites": 9, "placed": True}, SETTINGS),
    "scatter falls with distance": ({"sites": 6, "placed": True}, replace(SETTINGS, group_scatter=4000.0)),
    "missing pairs, several loads": ({"missing": 0.4, "members": 3}, SETTINGS),
    "one model, centred": ({"sites": 5, "models": 1}, replace(SETTINGS, model_truth="centred")),
    "sites without a model": ({"sites": 6, "bare_sites": 2, "placed": True}, SETTINGS),
    "no site scatter": ({"sites": 20, "scales": (0.1, 20.0, 12.0)}, SETTINGS),
}


def some_subsets(count):
    rng = np.random.default_rng(5)
    subsets = [rng.permutation(count) < size for size in (1, 2, 3, count - 1)]
    return np.array([*subsets, np.ones(count, dtype=bool)])


def refit(network, kept, choices):
    """The network that never had the other sites, by importance-weighted nodes of its own."""
    seen = network.observations.select(kept)
    admittance = network.admittance[:, kept]
    model = network_model(seen, admittance, choices)
    prior = scale_priors(choices.priors, model.scale_count)
    routes = [integrate_scales(model, prior, member=k, draws=4000) for k in range(model.member_count)]
    return (*pooled_moments(routes), np.mean([route.log_evidence for route in routes]))


@pytest.mark.parametrize("name", NETWORKS)
def test_every_subset_is_the_network_without_the_others(invent, name):
    shape, settings = NETWORKS[name]
    network = invent(seed=3, **shape)
    choices = Choices(settings, Priors(), 0.04)
    kept = some_subsets(len(network.observations.sites))
    found = subset_posteriors(subset_tables(network.observations, network.admittance, choices), kept)
    for i, subset in enumerate(kept):
        mean, covariance, evidence = refit(network, subset, choices)
        sd = np.sqrt(np.diag(covariance))
        np.testing.assert_allclose(found.mean[i] / sd, mean / sd, atol=0.02)
        np.testing.assert_allclose(found.sd[i], sd, rtol=0.015)
        assert found.log_evidence[i] == pytest.approx(evidence, abs=0.2)


def test_frozen_scales_do_not_give_the_same(invent):
    """Control: one site of nine is 3 hPa off; without it the scatter of the whole network is far too large."""
    network = invent(seed=3, sites=9)
    phasor = network.observations.part_phasor.copy()
    phasor[4] += 300.0
    network = replace(network, observations=replace(network.observations, part_phasor=phasor))
    choices = Choices(SETTINGS, Priors(), 0.04)
    kept = np.array([np.arange(9) != 4, np.ones(9, dtype=bool)])
    found = subset_posteriors(subset_tables(network.observations, network.admittance, choices), kept)
    model = network_model(network.observations.select(kept[0]), network.admittance[:, kept[0]], choices)
    _, covariance = collapse(model, model.at(found.log_scales[1:])).moments()
    assert np.sqrt(covariance[0, 0, 0]) > 1.3 * found.sd[0, 0]


def test_the_knots_hold_the_exact_density_and_moments(invent, dense_twin):
    """Against the covariance of all phasors, term by term, on every eleventh knot."""
    network = invent(seed=4, sites=6, missing=0.3, placed=True)
    choices = Choices(SETTINGS, Priors(), 0.04)
    model = network_model(network.observations, network.admittance, choices)
    table = node_table(model, scale_priors(choices.priors, model.scale_count))
    values = node_values(table, np.ones((1, 6), dtype=bool))
    twin = dense_twin(network, group_scatter=True)
    nodes = np.stack(np.meshgrid(*(rule.knot for rule in table.rules), indexing="ij"), axis=-1).reshape(-1, 4)
    chosen = np.flatnonzero(nodes.max(axis=1) < np.log(300.0))[::97]
    mean, covariance = twin.moments(nodes[chosen])
    np.testing.assert_allclose(values.log_likelihood.ravel()[chosen], twin.log_likelihood(nodes[chosen]), atol=1e-6)
    np.testing.assert_allclose(values.mean.reshape(2, -1).T[chosen], mean, atol=1e-6 * 500)
    upper = covariance[:, [0, 0, 1], [0, 1, 1]]
    np.testing.assert_allclose(values.covariance.reshape(3, -1).T[chosen], upper, atol=1e-6 * 500**2)


def test_without_any_site_there_is_the_prior(invent):
    network = invent(sites=4)
    tables = subset_tables(network.observations, network.admittance, Choices(SETTINGS, Priors(), 0.04))
    nothing = subset_posteriors(tables, np.zeros((1, 4), dtype=bool))
    np.testing.assert_allclose(nothing.mean, 0.0, atol=1e-9)
    np.testing.assert_allclose(nothing.sd, 500.0, rtol=1e-9)
    assert nothing.log_evidence[0] == pytest.approx(0.0, abs=1e-9)


def test_the_weights_of_the_nodes_sum_to_one(invent):
    network = invent(sites=5, placed=True)
    choices = Choices(SETTINGS, Priors(), 0.04)
    model = network_model(network.observations, network.admittance, choices)
    table = node_table(model, scale_priors(choices.priors, 4))
    weight, _ = node_weights(table, node_values(table, some_subsets(5)).log_likelihood)
    np.testing.assert_allclose(weight.sum(axis=(0, 1, 2, 3)), 1.0, rtol=1e-12)


def test_a_mixture_is_refused(invent, two_parts):
    network = two_parts(invent(sites=3), 0, (40.0, 0.0))
    model = network_model(network.observations, network.admittance, Choices(SETTINGS, Priors(), 0.04), mixed=["site 1"])
    with pytest.raises(ValueError, match="one Gaussian a site"):
        node_table(model, scale_priors(Priors(), 3))
