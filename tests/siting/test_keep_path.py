from itertools import combinations

import numpy as np
import pytest
from siting.planned_networks import invented_observations
from siting.selection_networks import PAIR, planted, tables_of

from massfit.posterior.likelihood import collapse
from massfit.posterior.network_model import network_model
from massfit.posterior.subsets import full_scales
from massfit.siting.keep_path import CRITERIA, best_subsets, planned_cost


def least_of_all(cost, site_count):
    """Least cost of every size among all subsets."""
    rows = [
        np.array([np.isin(np.arange(site_count), own) for own in combinations(range(site_count), size)])
        for size in range(1, site_count + 1)
    ]
    return np.array([min(cost(part).min() for part in np.array_split(kept, 1 + len(kept) // 500)) for kept in rows])


@pytest.mark.parametrize("criterion", CRITERIA)
@pytest.mark.parametrize(("seed", "sites"), [(1, 10), (2, 10), (3, 14)])
def test_the_path_finds_the_optimum_of_all_subsets(criterion, seed, sites):
    tables = tables_of(*invented_observations(seed, sites=sites, members=1))
    network = tables.sharing
    cost = planned_cost(network, full_scales(network), criterion)
    _, value = best_subsets(cost, sites)
    np.testing.assert_allclose(value, least_of_all(cost, sites), rtol=1e-9)


def test_the_worst_subsets_are_far_worse():
    """Control: the criterion tells subsets apart."""
    tables = tables_of(*invented_observations(1, sites=10, members=1))
    cost = planned_cost(tables.sharing, full_scales(tables.sharing), "A")
    _, best = best_subsets(cost, 10)
    worst = -least_of_all(lambda kept: -cost(kept), 10)
    assert (worst[:6] > 1.02 * best[:6]).all()


def test_the_criterion_is_the_error_at_fixed_scales():
    observations, admittance = planted()
    tables = tables_of(observations, admittance, "normal")
    scales = full_scales(tables.alone)
    kept = np.arange(9) < 6
    model = network_model(observations.select(kept), admittance[:, kept], tables.choices)
    _, covariance = collapse(model, model.at(scales[None, : model.scale_count])).moments()
    found = {name: planned_cost(tables.alone, scales, name)(kept[None])[0] for name in CRITERIA}
    assert found["A"] == pytest.approx(np.sqrt(0.5 * np.trace(covariance[0])), rel=1e-6)
    assert found["D"] == pytest.approx(np.linalg.det(covariance[0]) ** 0.25, rel=1e-6)


def test_the_phasors_have_no_say():
    """The path is the same whatever the sites read, at the same scales."""
    observations, admittance = planted()
    tables, other = tables_of(observations, admittance), tables_of(*planted(offset_pa=500.0))
    scales = full_scales(tables.alone)
    kept = [best_subsets(planned_cost(each.alone, scales, "A"), 9)[0] for each in (tables, other)]
    np.testing.assert_array_equal(*kept)


def test_one_of_the_redundant_pair_goes_first():
    tables = tables_of(*planted())
    kept, _ = best_subsets(planned_cost(tables.alone, full_scales(tables.alone), "A"), 9)
    assert np.flatnonzero(~kept[7])[0] in PAIR
    assert not kept[:8, list(PAIR)].all(axis=1).any()  # no smaller network holds both
