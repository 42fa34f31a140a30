from dataclasses import replace

import numpy as np
import pytest

from massfit.posterior.importance import ScalePosterior, integrate_scales
from massfit.posterior.likelihood import collapse
from massfit.posterior.network_model import pooled_moments
from massfit.posterior.shares import SOURCES, site_shares, variance_shares, variance_terms

PRIOR = np.array([30.0, 30.0, 15.0, 15.0])


@pytest.mark.parametrize("student", [False, True], ids=["normal", "student"])
@pytest.mark.parametrize(
    "shape", [{}, {"missing": 0.5}, {"bare_sites": 2}, {"models": 1}, {"members": 3}, {"placed": True}], ids=str
)
def test_the_terms_add_up_to_the_posterior_variance(invent, regression, shape, student):
    network = invent(**shape)
    model = regression(network, member=slice(None), student=student, group_scatter=True)
    prior = PRIOR[: model.scale_count]
    routes = [integrate_scales(model, prior, member=k, draws=500) for k in range(model.member_count)]
    terms = variance_terms(model, routes)
    _, covariance = pooled_moments(routes)
    assert sum(terms.values()) == pytest.approx(np.trace(covariance), rel=1e-8)
    assert (terms["fingerprint"] > 0) == (len(routes) > 1)
    assert (terms["group"] > 0) == (terms["year"] > 0) == ("placed" in shape)
    shares = variance_shares(terms)
    assert tuple(shares) == SOURCES
    assert sum(shares.values()) == pytest.approx(1.0, abs=1e-12)
    assert min(shares.values()) >= 0.0


def test_the_terms_add_up_where_means_alone_are_known_and_where_a_site_is_a_mixture(invent, regression, two_parts):
    network = two_parts(invent(), 1, [20.0, 5.0], weight=0.4)
    network = replace(network, observations=replace(network.observations, mean_only=frozenset({"site 1", "site 4"})))
    model = regression(network, mixed=("site 2",))
    route = integrate_scales(model, PRIOR[:3], draws=500)
    assert sum(variance_terms(model, [route]).values()) == pytest.approx(np.trace(route.covariance), rel=1e-8)


def test_each_term_is_that_of_the_dense_propagation(invent, dense_twin, regression):
    network = invent(missing=0.4, bare_sites=2, placed=True)
    scales = np.log([[25.0, 20.0, 12.0, 9.0]])
    stretch = np.array([0.3, 1.0, 40.0, 2.0, 5.0, 0.7, 3.0, 3.0])
    model = regression(network, group_scatter=True, student=True)
    node = ScalePosterior(
        scales, stretch[None, :7], np.zeros((1, 8), int), 0, np.ones(1), np.zeros((1, 2)), np.zeros((1, 2, 2)), 0.0
    )
    terms = variance_terms(model, [node])
    twin = dense_twin(network, group_scatter=True, stretch=stretch)
    gain = twin.gain(scales)[0]

    def propagated(name, factor=1.0):
        return factor * np.trace(gain @ twin.terms[name] @ gain.T)

    expected = {
        "record": propagated("record"),
        "site_scatter": propagated("site", 25.0**2),
        "group": propagated("group", 9.0**2),
        "model_local": propagated("noise") + propagated("local", 20.0**2),
        "model_spread": propagated("common", 12.0**2) + propagated("unmodelled"),
        "atmosphere": propagated("air"),
        "year": propagated("year"),
        "prior": ((gain @ twin.annual - 500.0 * np.eye(2)) ** 2).sum(),
    }
    for name, value in expected.items():
        assert terms[name] == pytest.approx(value, rel=1e-6), name


@pytest.mark.parametrize("student", [False, True], ids=["normal", "student"])
def test_shares_of_the_sites_are_what_one_more_pascal_at_each_would_move(invent, regression, student):
    """Sum to one; equal sites share equally; each is the difference of two posterior means."""
    network = invent(missing=0.3, placed=True, members=2)
    model = regression(network, member=slice(None), student=student, group_scatter=True)
    routes = [integrate_scales(model, PRIOR, member=k, draws=300) for k in range(2)]
    shares = site_shares(model, routes)
    assert shares.sum() == pytest.approx(1.0, abs=1e-12)
    moved = np.zeros(8)
    for route in routes:
        before, _ = collapse(model, route.condition).moments()
        for s in range(8):
            for axis in range(2):
                # what a cycle of 1 Pa along an axis, seen by this site alone, would add to its rows
                added = np.where(model.rows.site == s, model.design[route.member][:, -2 + axis] / 500.0, 0.0)
                other = replace(model, rows=replace(model.rows, value=model.rows.value + added))
                after, _ = collapse(other, route.condition).moments()
                moved[s] += route.weight @ (after - before)[:, axis] / 4.0
    np.testing.assert_allclose(shares, moved / moved.sum(), rtol=1e-6, atol=1e-9)
