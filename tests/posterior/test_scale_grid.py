from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior import scale_grid
from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, network_model, scale_priors
from massfit.posterior.scale_grid import integrate_on_grid
from massfit.settings import PosteriorSettings, Priors

SETTINGS = PosteriorSettings(site_scatter="normal")
NETWORKS = {
    "one site": ({"sites": 1}, SETTINGS),
    "three sites, one model": ({"sites": 3, "models": 1}, SETTINGS),
    "groups, years, a shared place": ({"sites": 9, "placed": True}, SETTINGS),
    "missing pairs, sites without a model": ({"sites": 8, "missing": 0.4, "bare_sites": 2}, SETTINGS),
    "many sites": ({"sites": 60, "models": 4}, SETTINGS),
    "no site scatter": ({"sites": 20, "scales": (0.1, 20.0, 12.0)}, SETTINGS),
}


def prepared(invent, name):
    shape, settings = NETWORKS[name]
    network = invent(seed=4, **shape)
    choices = Choices(settings, Priors(), 0.04)
    model = network_model(network.observations, network.admittance, choices)
    return model, scale_priors(choices.priors, model.scale_count)


def in_sd(route, reference):
    """Shift of the mean and change of the width, in standard deviations."""
    sd = np.sqrt(np.diag(reference.covariance))
    return np.abs(route.mean - reference.mean) / sd, np.abs(np.sqrt(np.diag(route.covariance)) / sd - 1.0)


@pytest.mark.parametrize("name", NETWORKS)
def test_it_gives_what_weighted_draws_give(invent, name):
    """The second route, which shares the density but no node: within three of its standard errors, and a percent."""
    model, prior = prepared(invent, name)
    (grid,) = integrate_on_grid(model, prior)
    drawn = integrate_scales(model, prior, draws=6000)
    shift, width = in_sd(grid, drawn)
    error = drawn.standard_error / np.sqrt(np.diag(drawn.covariance))
    assert (shift < 3.0 * error + 2e-3).all()
    assert (width < 0.015).all()


@pytest.mark.parametrize("name", NETWORKS)
def test_finer_nodes_change_nothing(invent, name, monkeypatch):
    model, prior = prepared(invent, name)
    (coarse,) = integrate_on_grid(model, prior)
    finer = {3: (29, 29, 33), 4: (16, 16, 20, 14)}
    monkeypatch.setattr(scale_grid, "NODES", finer)
    monkeypatch.setattr(scale_grid, "_LEAST", 1e-10)
    (fine,) = integrate_on_grid(model, prior)
    shift, width = in_sd(coarse, fine)
    assert shift.max() < 1e-3
    assert width.max() < 2e-3


def test_few_nodes_would_be_seen(invent, monkeypatch):
    # control for the test above
    model, prior = prepared(invent, "many sites")
    (fine,) = integrate_on_grid(model, prior)
    monkeypatch.setattr(scale_grid, "NODES", {3: (3, 3, 3)})
    (coarse,) = integrate_on_grid(model, prior)
    assert max(part.max() for part in in_sd(coarse, fine)) > 0.01


def test_the_members_share_the_nodes_and_not_the_weights(invent):
    network = invent(seed=2, sites=5, members=3)
    choices = Choices(SETTINGS, Priors(), 0.04)
    model = network_model(network.observations, network.admittance, choices)
    routes = integrate_on_grid(model, scale_priors(choices.priors, 3))
    assert [route.member for route in routes] == [0, 1, 2]
    alone = replace(model, design=model.design[1:2])
    (only,) = integrate_on_grid(alone, scale_priors(choices.priors, 3))
    shift, width = in_sd(only, routes[1])
    assert shift.max() < 1e-3
    assert width.max() < 1e-3
    assert np.abs(routes[0].mean - routes[1].mean).max() > 0.1
