"""What one more recorder promises, against the network refitted with it and against simulation."""

from dataclasses import replace

import numpy as np
import pytest
from siting.planned_networks import invented_observations, with_candidate

from massfit.posterior.likelihood import collapse, units
from massfit.posterior.network_model import Choices, inflation, network_model
from massfit.posterior.regression import Condition
from massfit.settings import PosteriorSettings, Priors
from massfit.siting.candidate_gain import _stretches, covariance_with
from massfit.siting.candidates import candidate_rows
from massfit.siting.network_error import NetworkError, at_nodes

RECORD = np.array([[130.0, 20.0], [20.0, 90.0]])
PLACE = np.array([0.1, 3.0])
FACTORS = np.array([1.12 + 0.04j, 1.02 - 0.03j])


def choices(scatter: str = "normal", group: bool | float = True) -> Choices:
    return Choices(PosteriorSettings(site_scatter=scatter, group_scatter=group), Priors(), 0.04)


def nodes_of(observations, admittance, chosen: Choices, count: int = 12) -> NetworkError:
    """A network on nodes spread about its scales, without a second route."""
    model, rng = network_model(observations, admittance, chosen), np.random.default_rng(5)
    members, n = len(admittance), count * len(admittance)
    stretch = np.exp(0.5 * rng.standard_normal((n, model.place_count))) if model.student else 1.0
    condition = Condition(
        np.log([18.0, 14.0, 11.0, 9.0][: model.scale_count]) + 0.3 * rng.standard_normal((n, model.scale_count)),
        np.broadcast_to(stretch, (n, model.place_count)).copy(),
        np.zeros((n, len(observations.sites)), dtype=np.int64),
        np.repeat(np.arange(members), count),
    )
    return at_nodes(model, condition, np.array([10.0, 80.0]), np.zeros((2, 2)))


def mixture(mean: np.ndarray, covariance: np.ndarray, members: int) -> np.ndarray:
    """Covariance over equal nodes and members, written out."""
    parts, centres = [], []
    for own, within in zip(np.split(mean, members), np.split(covariance, members), strict=True):
        parts.append(within.mean(axis=0) + np.cov(own.T, bias=True))
        centres.append(own.mean(axis=0))
    spread = np.cov(np.array(centres).T, bias=True) if members > 1 else 0.0
    return np.mean(parts, axis=0) + inflation(members) * spread


def refitted(error: NetworkError, admittance, chosen: Choices, candidate) -> np.ndarray:
    """The slow twin: the network with the candidate as one of its sites, at the reading that is expected of it."""
    wide, condition = np.column_stack([admittance, FACTORS]), error.condition
    model = network_model(candidate, wide, chosen)
    stretch = np.column_stack([condition.stretch, _stretches(error)])[:, : model.place_count]
    part = np.column_stack([condition.part, np.zeros(len(error), dtype=np.int64)])
    there = Condition(condition.log_scales, stretch, part, condition.member)
    # with a record of no worth: what the others predict of the candidate, node by node
    worthless = candidate.part_covariance.copy()
    worthless[-1] *= 1e9
    blind = network_model(replace(candidate, part_covariance=worthless), wide, chosen)
    known = units(blind, there) * collapse(blind, there).solution()
    rows = np.flatnonzero(model.rows.site[: model.rows.mean_count] == len(candidate.sites) - 1)
    predicted = np.einsum("ra,nrp,np->na", model.rows.direction[rows], model.design[there.member][:, rows], known)
    told = with_reading(candidate, predicted.mean(axis=0))
    mean, covariance = collapse(network_model(told, wide, chosen), there).moments()
    return mixture(mean, covariance, len(admittance))


def with_reading(candidate, phasor: np.ndarray):
    values = candidate.part_phasor.copy()
    values[-1] = phasor
    return replace(candidate, part_phasor=values)


@pytest.mark.parametrize(
    ("scatter", "group", "label"),
    [
        ("normal", True, "A"),
        ("normal", True, ""),
        ("student-t", True, "B"),
        ("normal", 2500.0, ""),
        ("normal", False, ""),
    ],
    ids=["in a group", "in none", "student", "distance", "no sharing"],
)
def test_it_is_the_network_with_the_candidate_in_it(scatter: str, group: bool | float, label: str) -> None:
    observations, admittance = invented_observations(1)
    chosen = choices(scatter, group)
    error = nodes_of(observations, admittance, chosen)
    rows = candidate_rows(observations, chosen, PLACE[None], FACTORS[:, None], record=RECORD, years=2.0, group=[label])
    fast = covariance_with(error, rows)[0] + mixture(error.annual_mean, error.annual_covariance, 2)
    slow = refitted(error, admittance, chosen, with_candidate(observations, PLACE, RECORD, group=label))
    np.testing.assert_allclose(fast, slow, rtol=2e-6)


@pytest.mark.parametrize("scatter", ["normal", "student-t"])
@pytest.mark.parametrize("shared", [False, True], ids=["one site there", "two sites there"])
def test_a_second_recorder_at_a_place_shares_its_scatter(scatter: str, shared: bool) -> None:
    observations, admittance = invented_observations(2)
    if shared:
        position = observations.position.copy()
        position[4] = position[2]
        observations = replace(observations, position=position)
    chosen = choices(scatter)
    error = nodes_of(observations, admittance, chosen)
    here, before = observations.position[2], mixture(error.annual_mean, error.annual_covariance, 2)
    near, far = (
        covariance_with(
            error, candidate_rows(observations, chosen, place[None], FACTORS[:, None], record=RECORD, group=["A"])
        )[0]
        + before
        for place in (here, PLACE)
    )
    slow = refitted(error, admittance, chosen, with_candidate(observations, here, RECORD, group="A"))
    np.testing.assert_allclose(near, slow, rtol=2e-6)
    assert np.trace(near) > np.trace(far)
