from dataclasses import replace

import numpy as np
import pytest
from scipy import integrate, stats

from massfit.posterior.importance import integrate_scales
from massfit.posterior.likelihood import collapse
from massfit.posterior.network_model import Choices, network_model, pooled_moments, scale_priors
from massfit.posterior.node_terms import node_table
from massfit.posterior.robust_terms import Points, stretch_nodes, subset_factors
from massfit.posterior.subsets import subset_posteriors, subset_tables
from massfit.settings import PosteriorSettings, Priors

CHOICES = Choices(PosteriorSettings(), Priors(), 0.04)
NETWORKS = {
    "one site far off": {"sites": 9},
    "groups, years, a shared place": {"sites": 12, "placed": True},
    "missing pairs, several loads": {"sites": 10, "missing": 0.3, "members": 3},
}


def with_bad_site(network, site, offset):
    phasor = network.observations.part_phasor.copy()
    phasor[site] += offset
    return replace(network, observations=replace(network.observations, part_phasor=phasor))


def refit(network, kept, choices, mixed=()):
    """The network that never had the other sites, by importance-weighted nodes of its own."""
    seen = network.observations.select(kept)
    model = network_model(seen, network.admittance[:, kept], choices, mixed=[s for s in mixed if s in seen.sites])
    prior = scale_priors(choices.priors, model.scale_count)
    return pooled_moments([integrate_scales(model, prior, member=k, draws=6000) for k in range(model.member_count)])


def agree(found, i, expected):
    mean, covariance = expected
    sd = np.sqrt(np.diag(covariance))
    # the error of the refit by importance is up to 0.01 standard deviations and 1 %
    np.testing.assert_allclose(found.mean[i] / sd, mean / sd, atol=0.03)
    np.testing.assert_allclose(found.sd[i], sd, rtol=0.03)


@pytest.mark.parametrize("name", NETWORKS)
def test_subsets_with_student_scatter_are_the_network_without_the_others(invent, name):
    network = with_bad_site(invent(seed=2, **NETWORKS[name]), 1, (120.0, -60.0))
    count = len(network.observations.sites)
    kept = np.array([np.arange(count) != 0, np.arange(count) != 1, np.arange(count) < 4, np.ones(count, dtype=bool)])
    found = subset_posteriors(subset_tables(network.observations, network.admittance, CHOICES), kept)
    for i, subset in enumerate(kept):
        agree(found, i, refit(network, subset, CHOICES))


@pytest.mark.parametrize("scatter", ["normal", "student-t"])
def test_a_site_enters_by_its_mixture(invent, two_parts, scatter):
    network = two_parts(invent(seed=6, sites=8), 2, (70.0, 20.0), weight=0.7, narrow=0.5)
    choices = replace(CHOICES, settings=replace(CHOICES.settings, site_scatter=scatter))
    kept = np.array([np.ones(8, dtype=bool), np.arange(8) > 1])
    tables = subset_tables(network.observations, network.admittance, choices, mixed=("site 3",))
    found = subset_posteriors(tables, kept)
    for i, subset in enumerate(kept):
        agree(found, i, refit(network, subset, choices, ("site 3",)))
    # control: the single Gaussian of the same mean and covariance answers otherwise
    plain = subset_posteriors(subset_tables(network.observations, network.admittance, choices), kept)
    assert np.abs((plain.mean - found.mean) / found.sd).max() > 0.05


def test_a_bad_site_pulls_less_than_under_normal_scatter(invent):
    """Control: normal scatter, told the same, is moved several times as far."""
    network = invent(seed=2, sites=12)
    away = with_bad_site(network, 1, (300.0, 0.0))
    everything = np.ones((1, 12), dtype=bool)
    moved = {}
    for scatter in ("normal", "student-t"):
        choices = replace(CHOICES, settings=replace(CHOICES.settings, site_scatter=scatter))
        answers = [
            subset_posteriors(subset_tables(each.observations, each.admittance, choices), everything).mean[0, 0]
            for each in (network, away)
        ]
        moved[scatter] = answers[1] - answers[0]
    assert moved["normal"] > 3.0 * abs(moved["student-t"])


def test_one_site_and_one_unknown_against_quadrature():
    """One Student factor beside a normal prediction: its evidence and moments, integrated numerically."""
    nodes, log_mass = stretch_nodes(True)
    scale, spread, centre = 20.0, 15.0, 50.0
    weight = np.exp(log_mass)
    evidence = weight @ stats.norm.pdf(centre, 0.0, np.sqrt(spread**2 + scale**2 * np.exp(nodes)))
    exact, _ = integrate.quad(
        lambda x: stats.norm.pdf(x, 0.0, spread) * stats.t.pdf((centre - x) / scale, 4) / scale, -400.0, 400.0
    )
    assert evidence == pytest.approx(exact, rel=1e-4)


def test_normal_factors_give_the_answer_of_the_regression(invent):
    network = invent(seed=5, sites=6, placed=True)
    choices = replace(CHOICES, settings=replace(CHOICES.settings, site_scatter="normal"))
    model = network_model(network.observations, network.admittance, choices)
    table = node_table(model, scale_priors(choices.priors, 4))
    log_scales = np.log([[20.0, 15.0, 10.0, 8.0], [3.0, 30.0, 5.0, 20.0]])
    points = Points(table, subset_factors(table, network.observations, ()), np.ones((2, 6)), log_scales)
    found = points.answers(*points.normal_factors(), normal=True)
    fitted = points.answers(*points.fitted_factors()[:2], normal=False)
    mean, covariance = collapse(model, model.at(log_scales)).moments()
    for answers in (found, fitted):  # the factors of normal densities are these themselves
        np.testing.assert_allclose(answers.mean, mean, rtol=1e-6)
        np.testing.assert_allclose(answers.covariance, covariance, rtol=1e-6, atol=1e-6)
    np.testing.assert_allclose(np.diff(found.log_evidence), np.diff(fitted.log_evidence), atol=1e-6)
