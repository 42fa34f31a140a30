"""The linear operator of a site, the noise of the models under it, and the shares of the years."""

import numpy as np
import pytest

from massfit.annual.design import build_design
from massfit.annual.families import noise_families
from massfit.annual.fit import fit_site
from massfit.annual.nodes import exponential_nodes
from massfit.annual.operator import model_noise, orthonormal_contrasts, phasor_operator, year_shares
from massfit.settings import Priors

SCORES = np.array([-1.0, 0.0, -1.0, 0.0])
(FAMILY,) = noise_families(Priors(noise_forms=("sum",)))
TERMS = (exponential_nodes([40.0]), exponential_nodes([80.0]))
MODEL = FAMILY.model(SCORES, np.ones(2))


@pytest.fixture
def two_deployments(make_record):
    def make(rng, circulation):
        return [
            make_record(rng, count=400, size=500.0, circulation=circulation[:, :400]),
            make_record(rng, count=400, first=350.5, label="2", circulation=circulation[:, 350:]),
        ]

    return make


def test_operator_returns_an_annual_cycle_and_ignores_level_and_semi_annual(two_deployments):
    # invariant
    design = build_design(
        two_deployments(np.random.default_rng(1), np.zeros((0, 750))), reference_year=2016, priors=Priors()
    )
    operator = phasor_operator(design.covariance(MODEL), design, TERMS)
    response = operator @ design.fixed
    np.testing.assert_allclose(response[:, :2], np.eye(2), atol=1e-8)
    flat = [2, 3, *(drift.offset for drift in design.drifts)]
    np.testing.assert_allclose(response[:, flat], 0.0, atol=1e-8)


def test_year_shares_sum_to_one_and_follow_the_days(two_deployments):
    design = build_design(
        two_deployments(np.random.default_rng(1), np.zeros((0, 750))), reference_year=2016, priors=Priors()
    )
    operator = phasor_operator(design.covariance(MODEL), design, TERMS)
    shares = year_shares(design, operator, 2016)
    assert list(shares) == [2016, 2017, 2018]
    assert sum(shares.values()) == pytest.approx(1.0, abs=1e-9)
    assert shares[2018] < 0.1 < shares[2016]


def test_model_noise_is_what_the_models_scatter(two_deployments, make_red):
    # recovery: over many networks, D_s must match the true scatter of L(q_m)
    predicted, scatter = [], []
    for seed in range(10):
        rng = np.random.default_rng(seed)
        circulation = np.array([make_red(rng, 750, 20.0, 20.0) for _ in range(4)])
        design = build_design(two_deployments(rng, circulation), reference_year=2016, priors=Priors())
        operator = phasor_operator(design.covariance(MODEL), design, TERMS)
        predicted.append(np.trace(model_noise(design, Priors(), operator)))
        # unbiased variance of one model from four
        scatter.append(np.sum((operator @ design.contrasts) ** 2) / 3)
    # 10 draws of two components with 3 degrees of freedom each: the scatter has a standard error near 26 %,
    # the prediction about half of that
    assert np.mean(predicted) == pytest.approx(np.mean(scatter), rel=0.6)


def test_fewer_than_two_models_have_no_contrasts(two_deployments):
    design = build_design(two_deployments(np.random.default_rng(1), np.ones((1, 750))), reference_year=2016,
                          priors=Priors())  # fmt: skip
    assert not model_noise(design, Priors(), np.ones((2, 800))).any()


@pytest.mark.parametrize("count", [2, 3, 5])
def test_contrasts_are_orthonormal(count):
    # closed form
    contrasts = orthonormal_contrasts(count)
    np.testing.assert_allclose(contrasts.T @ contrasts, np.eye(count - 1), atol=1e-14)
    np.testing.assert_allclose(contrasts.sum(axis=0), 0.0, atol=1e-14)


def test_one_operator_acts_on_every_subtraction(two_deployments, make_red):
    rng = np.random.default_rng(3)
    circulation = np.array([make_red(rng, 750, 20.0, 20.0) for _ in range(3)])
    # a cycle in one model alone must come back as its difference
    angle = 2 * np.pi * (np.arange(750) + 0.5) / 365.2422
    circulation[1] += 30.0 * np.cos(angle)
    records = two_deployments(np.random.default_rng(4), circulation)
    without = [*circulation]
    without[1] = circulation[1] - 30.0 * np.cos(angle)
    plain = two_deployments(np.random.default_rng(4), np.array(without))
    found = [
        fit_site(r, models=["a", "b", "c"], reference_year=2016, rng=np.random.default_rng(1)).single_gaussian()[0]
        for r in (records, plain)
    ]
    shift = found[0] - found[1]
    # the pressures are the same and the mean model shifted by 10 Pa: only model b's phasor differs
    np.testing.assert_allclose(shift, [[0, 0], [-30, 0], [0, 0]], atol=1.5)
