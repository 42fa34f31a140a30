from dataclasses import replace

import numpy as np
import pytest
from siting.selection_networks import BAD, PAIR, planted, tables_of

from massfit.posterior.likelihood import collapse, estimator
from massfit.posterior.subsets import full_scales, moved_tables, subset_posteriors
from massfit.siting.influence import _first_crossing, leave_out, site_pull, site_weights

COUNT = 9
WITHOUT_EACH = ~np.eye(COUNT, dtype=bool)


@pytest.fixture(scope="module", params=["normal", "student-t"])
def network(request):
    tables = tables_of(*planted(), request.param)
    return tables, subset_posteriors(tables, np.ones((1, COUNT), dtype=bool)), request.param


def test_leaving_out_finds_the_bad_site(network):
    tables, whole, scatter = network
    left = leave_out(tables, WITHOUT_EACH, whole)
    shift = np.linalg.norm(left.moments.mean - whole.mean, axis=1)
    if scatter == "normal":
        assert shift.argmax() == BAD
        assert left.sd_ratio[BAD].max() < 0.8  # the scatter that the bad site made is gone
    # the others are as far apart without it: leaving one of them out widens the answer
    assert (np.delete(left.sd_ratio, BAD, axis=0) > 0.95).all()


def test_one_of_a_redundant_pair_is_missed_least(network):
    tables, _, _ = network
    information, _ = site_weights(tables.alone, full_scales(tables.alone))
    rank = information.mean(axis=1).argsort().tolist()
    others = [s for s in rank if s != BAD]  # Student scatter has taken its say away already
    assert set(others[:2]) == set(PAIR)


def test_weights_are_those_of_the_regression():
    """Leverage by the linear map of the likelihood; its sum by what the prior leaves."""
    tables = tables_of(*planted(), "normal")
    scales = full_scales(tables.alone)
    information, leverage = site_weights(tables.alone, scales)
    model = tables.alone.table.model
    linear = estimator(model, model.at(scales[None]))[0]
    annual = model.design[0][:, -2:] / model.annual_sd
    for s in range(COUNT):
        own = model.rows.site == s
        np.testing.assert_allclose(leverage[s], np.diag(linear[:, own] @ annual[own]), atol=1e-9)
    variance = np.diag(collapse(model, model.at(scales[None])).moments()[1][0])
    assert (information > 0).all()
    assert leverage.sum(axis=0) == pytest.approx(1.0 - variance / model.annual_sd**2, abs=1e-9)


def test_a_far_site_pulls_under_normal_scatter_and_not_under_student():
    farthest = {}
    for scatter in ("normal", "student-t"):
        tables = tables_of(*planted(offset_pa=0.0), scatter)
        whole = subset_posteriors(tables, np.ones((1, COUNT), dtype=bool))
        pull = site_pull(tables, whole, offsets=(100.0, 600.0))
        assert (pull.shift_sd[:, pull.offset == 0.0] == 0.0).all()
        alone = np.delete(np.arange(COUNT), PAIR)
        farthest[scatter] = np.abs(pull.shift_sd[alone][:, [0, -1]]).mean()
    assert farthest["student-t"] < 0.3 * farthest["normal"]


def test_a_moved_site_is_answered_as_a_network_that_reads_so():
    observations, admittance = planted(members=2)
    tables = tables_of(observations, admittance, "normal")
    moved = moved_tables(tables, np.array([2]), np.array([[30.0, -50.0]]))
    kept = np.append(np.arange(COUNT) != 2, True)[None]
    phasor = observations.part_phasor.copy()
    phasor[2] += np.array([30.0, -50.0])
    direct = tables_of(replace(observations, part_phasor=phasor), admittance, "normal")
    expected = subset_posteriors(direct, np.ones((1, COUNT), dtype=bool))
    found = subset_posteriors(moved, kept)
    # knots and cells follow the number of rows, so they differ a little
    np.testing.assert_allclose(found.mean / expected.sd, expected.mean / expected.sd, atol=0.01)
    np.testing.assert_allclose(found.sd, expected.sd, rtol=0.01)


def test_the_nearest_crossing_is_found():
    offset = np.array([-2.0, -1.0, 0.0, 1.0, 2.0])
    assert _first_crossing(offset, np.array([-3.0, -2.0, 0.0, 0.5, 1.5])) == pytest.approx(-0.5)
    assert np.isnan(_first_crossing(offset, np.array([0.2, 0.1, 0.0, 0.5, 0.9])))
