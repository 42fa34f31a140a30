"""Evidence, coefficients and their covariance against dense matrices (slow independent twin)."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from massfit.annual.design import build_design
from massfit.annual.evidence import (
    ChosenEvidence,
    DriftBasis,
    annual_covariance,
    conditional_log_evidence,
    fixed_variance,
    reduce_columns,
    solve_choices,
)
from massfit.annual.families import noise_families
from massfit.annual.nodes import exponential_nodes, first_nodes
from massfit.settings import Priors

PRIORS = Priors(noise_forms=("sum",))
(FAMILY,) = noise_families(PRIORS)
SCORES = np.array([-0.5, 0.2, -1.0, 0.3])
MODEL = FAMILY.model(SCORES, np.array([1.0, 1.5]))
GRIDS = (np.array([10.0, 40.0, 90.0]), np.array([30.0, 60.0]))
NODES = tuple(exponential_nodes(times) for times in GRIDS)


@pytest.fixture
def design(make_record):
    rng = np.random.default_rng(2)
    models = rng.normal(size=(2, 130))
    # the two deployments overlap by 30 days
    records = [
        make_record(rng, count=130, size=900.0, circulation=models),
        make_record(rng, count=130, first=100.5, size=-500.0, label="2", circulation=models),
    ]
    return build_design(records, reference_year=2016, priors=PRIORS)


@pytest.fixture
def reduction(design):
    noise = design.covariance(MODEL)
    return reduce_columns(noise, design, design.drift_columns(NODES))


def dense_covariance(design):
    lags = np.abs(design.days[:, None] - design.days)
    red = sum(v * np.exp(-lags / tau) for v, tau in zip(MODEL.variances, (2.0, 20.0, 200.0), strict=True))
    # white noise of each recorder, the resolution of 0.1 Pa that every daily mean has besides, and a floor
    white = MODEL.white[[0 if row in design.drifts[0].rows else 1 for row in range(len(lags))]]
    return red + np.diag(white**2 + 0.1**2 + 1e-6 * MODEL.variances.sum())


def dense_solution(design, times):
    exponentials = design.drift_columns([exponential_nodes([time]) for time in times])
    columns = np.column_stack([design.fixed, exponentials])
    precision = np.append(design.precision, np.full(2, design.exponential_sd**-2.0))
    inverse = np.linalg.inv(dense_covariance(design))
    normal = columns.T @ inverse @ columns + np.diag(precision)
    mean = np.linalg.solve(normal, columns.T @ inverse @ np.column_stack([design.data, design.contrasts]))
    return columns, normal, mean, np.linalg.inv(normal)


CHOICES = np.array([[0, 3], [2, 4], [1, 3], [1, 4]])


def test_solutions_match_dense_generalised_least_squares(design, reduction):
    solutions = solve_choices(reduction, CHOICES)
    variances, annual = fixed_variance(reduction, solutions), annual_covariance(reduction, solutions)
    fixed = design.fixed.shape[1]
    for row, (first, second) in enumerate(CHOICES):
        _, _, mean, covariance = dense_solution(design, (GRIDS[0][first], GRIDS[1][second - 3]))
        np.testing.assert_allclose(solutions.mean[row], mean[:fixed], rtol=1e-9, atol=1e-9 * np.abs(mean).max())
        np.testing.assert_allclose(solutions.size[row], mean[fixed:], rtol=1e-9, atol=1e-9)
        np.testing.assert_allclose(variances[row], np.diag(covariance)[:fixed], rtol=1e-9)
        np.testing.assert_allclose(annual[row], covariance[:2, :2], rtol=1e-9)
        np.testing.assert_allclose(solutions.size_covariance[row], covariance[fixed:, fixed:], rtol=1e-9)


def test_evidence_is_the_marginal_density_when_every_prior_is_proper(design):
    # closed form: y is normal with covariance V + X P^-1 X'
    proper = replace(design, precision=np.where(design.precision == 0, 1e-4, design.precision))
    noise = proper.covariance(MODEL)
    found = solve_choices(reduce_columns(noise, proper, proper.drift_columns(NODES)), CHOICES).log_evidence
    expected = []
    for first, second in CHOICES:
        exponentials = proper.drift_columns([NODES[0].take([first]), NODES[1].take([second - 3])])
        prior = (proper.fixed / proper.precision) @ proper.fixed.T
        prior += proper.exponential_sd**2 * exponentials @ exponentials.T
        total = stats.multivariate_normal(np.zeros(len(prior)), dense_covariance(proper) + prior)
        expected.append(total.logpdf(proper.data))
    constant = 0.5 * (np.log(proper.precision).sum() - len(proper.data) * np.log(2 * np.pi))
    np.testing.assert_allclose(found + constant, expected, rtol=1e-8)


def test_conditional_evidence_is_that_of_the_full_choice(reduction):
    conditional = conditional_log_evidence(reduction, CHOICES, 0, np.arange(3))
    for row, choice in enumerate(CHOICES):
        full = solve_choices(reduction, np.array([[node, choice[1]] for node in range(3)]))
        np.testing.assert_allclose(conditional[row], full.log_evidence, rtol=1e-11)


@pytest.mark.parametrize("drift", ["exponential+linear", "compare"])
def test_basis_gives_the_sums_of_any_nodes(make_record, drift):
    rng = np.random.default_rng(3)
    lengths, starts = (130, 90), (0.5, 100.5)
    records = [
        make_record(rng, count=count, first=first, drift=drift, label=str(first))
        for count, first in zip(lengths, starts, strict=True)
    ]
    design = build_design(records, reference_year=2016, priors=PRIORS)
    noise, basis = design.covariance(MODEL), DriftBasis(design)
    nodes = [first_nodes(term.forms, term.low, term.high, 23) for term in design.terms]
    np.testing.assert_allclose(basis.columns @ basis.combination(nodes), design.drift_columns(nodes), atol=1e-8)
    # made for a few nodes it is smaller, and holds them as well
    few = [own.take(np.arange(0, len(own), 5)) for own in nodes]
    narrow = DriftBasis(design, few)
    assert narrow.columns.shape[1] < basis.columns.shape[1]
    np.testing.assert_allclose(narrow.columns @ narrow.combination(few), design.drift_columns(few), atol=1e-8)
    first = np.cumsum([0] + [len(own) for own in nodes])[:-1]
    choices = np.array([first + 3 % np.array([len(own) for own in nodes]), first])
    full = solve_choices(reduce_columns(noise, design, design.drift_columns(nodes)), choices)
    short = solve_choices(basis.reduce(noise).combined(basis.combination(nodes)), choices)
    np.testing.assert_allclose(short.log_evidence, full.log_evidence, rtol=1e-9)
    np.testing.assert_allclose(short.mean[:, :2, 0], full.mean[:, :2, 0], rtol=1e-6)
    # and the evidence of one choice alone
    chosen = ChosenEvidence(design, design.drift_columns(nodes)[:, choices[0]])
    assert chosen(MODEL) == pytest.approx(full.log_evidence[0], rel=1e-11)


def test_without_exponentials_there_is_one_choice(design):
    noise = design.covariance(MODEL)
    reduction = reduce_columns(noise, design, np.zeros((len(design.days), 0)))
    solutions = solve_choices(reduction, np.zeros((1, 0), np.int64))
    assert solutions.log_evidence == pytest.approx([reduction.log_evidence])
    np.testing.assert_allclose(solutions.mean[0], reduction.mean)
