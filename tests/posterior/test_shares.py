from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior.network_model import pooled_moments
from massfit.posterior.quadrature import ScalePosterior, integrate_scales
from massfit.posterior.shares import SOURCES, variance_shares, variance_terms

PRIOR = np.array([30.0, 30.0, 15.0])


@pytest.mark.parametrize("shape", [{}, {"missing": 0.5}, {"bare_sites": 2}, {"models": 1}, {"members": 3}])
def test_the_terms_add_up_to_the_posterior_variance(invent, regression, shape):
    network = invent(**shape)
    models = [regression(network, member=k) for k in range(len(network.admittance))]
    routes = [integrate_scales(model, PRIOR) for model in models]
    terms = variance_terms(models, routes, network.observations)
    _, covariance = pooled_moments(routes)
    assert sum(terms.values()) == pytest.approx(np.trace(covariance), rel=1e-8)
    assert (terms["fingerprint"] > 0) == (len(models) > 1)
    shares = variance_shares(terms)
    assert tuple(shares) == SOURCES
    assert sum(shares.values()) == pytest.approx(1.0, abs=1e-12)
    assert min(shares.values()) >= 0.0


def test_the_terms_add_up_where_only_means_over_models_are_known(invent, regression):
    network = invent()
    network = replace(network, observations=replace(network.observations, mean_only=frozenset({"site 1", "site 4"})))
    model = regression(network)
    route = integrate_scales(model, PRIOR)
    terms = variance_terms([model], [route], network.observations)
    assert sum(terms.values()) == pytest.approx(np.trace(route.covariance), rel=1e-8)


def test_each_term_is_that_of_the_dense_propagation(invent, dense_twin, regression):
    network = invent(missing=0.4)
    scales = np.log([[25.0, 20.0, 12.0]])
    node = ScalePosterior(scales, np.ones(1), np.zeros((1, 2)), np.zeros((1, 2, 2)), 0.0)
    terms = variance_terms([regression(network)], [node], network.observations)
    twin = dense_twin(network)
    gain = twin.gain(scales)[0]

    def propagated(name, factor=1.0):
        return factor * np.trace(gain @ twin.terms[name] @ gain.T)

    expected = {
        "record": propagated("record"),
        "site_scatter": propagated("site", 25.0**2),
        "model_local": propagated("noise") + propagated("local", 20.0**2),
        "model_spread": propagated("common", 12.0**2),
        "atmosphere": propagated("air"),
        "prior": ((gain @ twin.annual - 500.0 * np.eye(2)) ** 2).sum(),
    }
    for name, value in expected.items():
        assert terms[name] == pytest.approx(value, rel=1e-7), name
