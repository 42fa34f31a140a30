from dataclasses import replace

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.posterior.importance import integrate_scales
from massfit.posterior.network_model import Choices, network_model, pooled_moments, scale_priors
from massfit.posterior.scenario import Scenario, answer_scenario
from massfit.posterior.subsets import subset_posteriors, subset_tables
from massfit.settings import PosteriorSettings, Priors

CHOICES = Choices(PosteriorSettings(site_scatter="normal"), Priors(), 0.04)


def moments(network, scenario, choices=CHOICES):
    members = [f"pattern {k + 1}" for k in range(len(network.admittance))]
    _, posteriors = answer_scenario(network.observations, network.admittance, members, choices, scenario)
    return pooled_moments(posteriors)


def agree(found, expected, *, mean=0.02, width=0.015):
    sd, own = (np.sqrt(np.diag(covariance)) for _, covariance in (expected, found))
    np.testing.assert_allclose(found[0] / sd, expected[0] / sd, atol=mean)
    np.testing.assert_allclose(own, sd, rtol=width)


def by_draws(observations, admittance, choices):
    model = network_model(observations, admittance, choices)
    prior = scale_priors(choices.priors, model.scale_count)
    return pooled_moments([integrate_scales(model, prior, member=k, draws=4000) for k in range(len(admittance))])


@pytest.mark.parametrize(
    "gone", [("site 2",), ("site 1", "site 4", "site 5"), tuple(f"site {k}" for k in range(2, 10))]
)
def test_without_sites_it_is_the_network_that_never_had_them(invent, gone):
    """Against weighted draws of a network of the other sites, and against the sums of per-site information."""
    network = invent(seed=3, sites=9, placed=True, members=2)
    kept = np.array([site not in gone for site in network.observations.sites])
    found = moments(network, Scenario(without_sites=frozenset(gone)))
    agree(found, by_draws(network.observations.select(kept), network.admittance[:, kept], CHOICES))
    subsets = subset_posteriors(subset_tables(network.observations, network.admittance, CHOICES), kept[None])
    agree(found, (subsets.mean[0], subsets.covariance[0]))


def test_without_a_model_sites_that_have_no_other_go_too(invent):
    network = invent(seed=5, sites=8, missing=0.5)
    fewer, left = network.observations.without_model("model 1")
    assert not left.all()
    found = moments(network, Scenario(without_models=frozenset({"model 1"})))
    agree(found, by_draws(fewer, network.admittance[:, left], CHOICES))


def test_a_mean_over_models_is_not_taken_apart(invent):
    network = invent(seed=5, sites=6)
    seen = replace(network.observations, mean_only=frozenset({"site 3"}))
    model, _ = answer_scenario(
        seen, network.admittance, ["one"], CHOICES, Scenario(without_models=frozenset({"model 2"}))
    )
    assert len(np.unique(model.rows.site)) == 5


def test_r_and_the_prior_of_the_models_are_those_of_the_settings(invent):
    network = invent(seed=6)
    centred = replace(CHOICES, settings=replace(CHOICES.settings, model_truth="centred"))
    agree(moments(network, Scenario(truth=0.0)), by_draws(network.observations, network.admittance, centred))
    wide = replace(CHOICES, priors=replace(CHOICES.priors, model_common_hpa=0.6))
    agree(moments(network, Scenario(model_common_hpa=0.6)), by_draws(network.observations, network.admittance, wide))
    # control: they do not give the same
    widths = [
        np.sqrt(moments(network, each)[1][0, 0]) for each in (Scenario(truth=0.0), Scenario(model_common_hpa=0.6))
    ]
    assert widths[1] > 1.2 * widths[0]


def test_without_members_the_others_are_pooled(invent):
    network = invent(seed=7, members=3)
    found = moments(network, Scenario(without_members=frozenset({"pattern 2"})))
    agree(found, by_draws(network.observations, network.admittance[[0, 2]], CHOICES))


def test_every_name_that_is_unknown_is_a_fault(invent):
    network = invent(sites=3)
    scenario = Scenario(frozenset({"site 9"}), frozenset({"none"}), frozenset({"pattern 8"}))
    with pytest.raises(InputError) as refused:
        moments(network, scenario)
    assert [fault.name for fault in refused.value.faults] == ["without_sites", "without_models", "without_members"]


def test_nothing_left_is_a_fault(invent):
    network = invent(sites=2)
    with pytest.raises(InputError, match="no site, model or load member is left"):
        moments(network, Scenario(without_sites=frozenset({"site 1", "site 2"})))
