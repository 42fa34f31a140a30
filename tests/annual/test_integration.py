"""The weighted components against brute-force quadrature over all non-linear parameters (slow independent twin).

The twin has its own columns, dense covariance matrices, a plain product grid over log amplitudes and log time
constants, and the densities written as in the papers: half-t with 4 degrees of freedom times the amplitude.
"""

from itertools import product

import numpy as np
import pytest
from scipy import stats

from massfit.annual.chains import sample_drift
from massfit.annual.components import integrate
from massfit.annual.design import build_design
from massfit.annual.evidence import DriftBasis, reduce_columns, solve_choices
from massfit.annual.families import noise_families
from massfit.annual.fit import fit_site
from massfit.annual.mode import joint_mode
from massfit.annual.parts import MOST_PARTS, merge_components
from massfit.settings import Priors

PRIORS = Priors(noise_forms=("sum",), noise_time_scales_days=(20.0,))
YEAR = 365.2422


def quadrature(records, amplitudes, times):
    """Mean and covariance of the annual phasor, and the mean of the first time constant."""
    days = np.concatenate([(r.time - np.datetime64("2016-01-01", "ns")).astype(float) / 86400e9 for r in records])
    data = np.concatenate([r.pressure for r in records])
    ages = [(r.time - r.start).astype(float) / 86400e9 for r in records]
    sizes = [len(age) for age in ages]

    def own(number, values):
        parts = [np.zeros(size) for size in sizes]
        parts[number] = values
        return np.concatenate(parts)

    angle = 2 * np.pi * days / YEAR
    flat = [np.cos(angle), np.sin(angle), np.cos(2 * angle), np.sin(2 * angle)]
    flat += [own(k, np.ones(size)) for k, size in enumerate(sizes)]
    fixed = np.column_stack(flat + [own(k, age / 365.25) for k, age in enumerate(ages)])
    precision = np.array([0.0] * len(flat) + [1000.0**-2] * len(ages) + [3000.0**-2] * len(ages))
    choices = list(product(*[range(len(grid)) for grid in times]))
    decays = [
        np.column_stack([own(k, np.exp(-age / T)) for T in grid])
        for k, (age, grid) in enumerate(zip(ages, times, strict=True))
    ]
    lags = np.abs(days[:, None] - days)
    total, moments = [], []
    for red, white in product(*amplitudes):
        inverse = np.linalg.inv(red**2 * np.exp(-lags / 20.0) + white**2 * np.eye(len(days)))
        everything = np.column_stack([fixed, *decays])
        sums, right = everything.T @ inverse @ everything, everything.T @ inverse @ data
        f = fixed.shape[1]
        firsts = f + np.cumsum([0] + [len(grid) for grid in times])[:-1]
        index = np.array([[*range(f), *(first + np.array(choice))] for first, choice in
                          zip([firsts] * len(choices), choices, strict=True)])  # fmt: skip
        normal = sums[index[:, :, None], index[:, None, :]] + np.diag(precision)
        covariance = np.linalg.inv(normal)
        mean = np.einsum("cij,cj->ci", covariance, right[index])
        q = data @ inverse @ data - np.einsum("ci,ci->c", right[index], mean)
        log = 0.5 * (np.linalg.slogdet(inverse)[1] - np.linalg.slogdet(normal)[1] - q)
        log += stats.t(4).logpdf(red / 50) + stats.t(4).logpdf(white / 20) + np.log(red * white)
        total.append(log)
        first_time = times[0][np.array([choice[0] for choice in choices])]
        moments.append((mean[:, :2], covariance[:, :2, :2], first_time))
    log = np.concatenate(total)
    weight = np.exp(log - log.max())
    weight /= weight.sum()
    mean, covariance, first_time = (np.concatenate(values) for values in zip(*moments, strict=True))
    centre = weight @ mean
    away = mean - centre
    spread = np.einsum("k,kij->ij", weight, covariance) + np.einsum("k,ki,kj->ij", weight, away, away)
    return centre, spread, weight @ first_time


def whitened_distance(found, expected, covariance):
    return float(np.sqrt((found - expected) @ np.linalg.solve(covariance, found - expected)))


def check_against_quadrature(records, amplitudes, times):
    mean, covariance, time_constant = quadrature(records, amplitudes, times)
    fit = fit_site(records, models=[], reference_year=2016, rng=np.random.default_rng(3), priors=PRIORS)
    found, spread = fit.single_gaussian()
    # an effective sample of 60 leaves about a tenth of the between-component sigma
    assert whitened_distance(found[0], mean, covariance) < 0.08
    np.testing.assert_allclose(np.sqrt(np.diag(spread)), np.sqrt(np.diag(covariance)), rtol=0.08)
    estimate = fit.drifts[0].time_constant_days
    assert abs(estimate.mean - time_constant) < 0.15 * estimate.sd


def test_one_deployment(make_record, make_red):
    rng = np.random.default_rng(4)
    ocean = make_red(rng, 420, 30.0, 20.0)[::4]
    record = make_record(rng, count=105, every=4, size=400.0, time_constant=50.0, ocean=ocean)
    amplitudes = (np.geomspace(8, 160, 22), np.geomspace(1.5, 40, 22))
    length = (record.time[-1] - record.start).astype(float) / 86400e9
    check_against_quadrature([record], amplitudes, [np.geomspace(3, length, 120)])


def test_two_deployments_whose_time_constants_meet_in_the_phasor(make_record, make_red):
    rng = np.random.default_rng(6)
    ocean = make_red(rng, 640, 30.0, 20.0)[::5]
    records = [
        make_record(rng, count=64, every=5, size=300.0, time_constant=60.0, ocean=ocean[:64]),
        make_record(rng, count=64, every=5, first=320.5, size=-400.0, time_constant=90.0, ocean=ocean[64:], label="2"),
    ]
    amplitudes = (np.geomspace(12, 90, 12), np.geomspace(2, 40, 10))
    lengths = [(record.time[-1] - record.start).astype(float) / 86400e9 for record in records]
    check_against_quadrature(records, amplitudes, [np.geomspace(3, length, 40) for length in lengths])


@pytest.fixture
def components(make_record, make_red):
    rng = np.random.default_rng(8)
    models = rng.normal(size=(3, 400)) * 5
    record = make_record(rng, count=400, size=700.0, ocean=make_red(rng, 400, 40.0, 20.0), circulation=models)
    design = build_design([record], reference_year=2016, priors=Priors())
    basis = DriftBasis(design)
    return integrate(basis, joint_mode(basis, noise_families(Priors())), rng)


def test_merging_keeps_mean_and_covariance(components):
    # invariant
    parts = merge_components(components)
    assert 1 < len(parts.weight) <= MOST_PARTS
    mean = np.einsum("k,kcm->mc", components.weight, components.annual)
    np.testing.assert_allclose(np.einsum("k,kmc->mc", parts.weight, parts.phasor), mean, rtol=1e-9)
    totals = []
    for weight, centres, within in (
        (components.weight, components.annual[:, :, 0], components.annual_covariance),
        (parts.weight, parts.phasor[:, 0], parts.covariance),
    ):
        away = centres - mean[0]
        totals.append(np.einsum("k,kij->ij", weight, within) + np.einsum("k,ki,kj->ij", weight, away, away))
    np.testing.assert_allclose(totals[1], totals[0], rtol=1e-9)


def test_merging_keeps_the_shape(components):
    parts = merge_components(components)
    mean = np.einsum("k,kc->c", components.weight, components.annual[:, :, 0])
    sigma = np.sqrt(np.einsum("k,kii->i", components.weight, components.annual_covariance))

    def distribution(weight, centres, within):
        points = mean[0] + sigma[0] * np.linspace(-4, 4, 17)
        return weight @ stats.norm.cdf((points - centres[:, :1]) / np.sqrt(within[:, :1, 0]))

    full = distribution(components.weight, components.annual[:, :, 0], components.annual_covariance)
    merged = distribution(parts.weight, parts.phasor[:, 0], parts.covariance)
    assert np.abs(full - merged).max() < 0.01


def test_components_do_not_depend_on_the_seed_beyond_their_error(make_record, make_red):
    rng = np.random.default_rng(9)
    record = make_record(rng, count=730, size=700.0, ocean=make_red(rng, 730, 40.0, 20.0))
    fits = [
        fit_site([record], models=[], reference_year=2016, rng=np.random.default_rng(seed)).single_gaussian()
        for seed in (1, 2)
    ]
    assert whitened_distance(fits[0][0][0], fits[1][0][0], fits[0][1]) < 0.08
    same = fit_site([record], models=[], reference_year=2016, rng=np.random.default_rng(1)).single_gaussian()
    np.testing.assert_array_equal(same[0], fits[0][0])


def test_gibbs_sample_is_the_product_grid(make_record):
    # slow independent twin: two exponentials, all combinations of nodes
    rng = np.random.default_rng(11)
    records = [
        make_record(rng, count=200, size=100.0),
        make_record(rng, count=200, first=200.5, size=80.0, label="2"),
    ]
    design = build_design(records, reference_year=2016, priors=PRIORS)
    basis = DriftBasis(design)
    mode = joint_mode(basis, noise_families(PRIORS))
    covariance = design.covariance(mode.noise)
    sample = sample_drift(covariance, basis, mode.grid, rng)
    reduction = reduce_columns(covariance, design, design.drift_columns(sample.grid.nodes))
    counts = [len(nodes) for nodes in sample.grid.nodes]
    choices = np.array(list(product(*map(range, counts))))
    log = solve_choices(reduction, choices + sample.grid.first_columns).log_evidence
    log += sum(np.log(nodes.prior)[own] for nodes, own in zip(sample.grid.nodes, choices.T, strict=True))
    exact = np.exp(log - log.max())
    logs = sample.grid.nodes[0].log_time
    expected = exact @ logs[choices[:, 0]] / exact.sum()
    drawn = sample.choices.reshape(-1, 2)
    found_log = solve_choices(reduction, drawn + sample.grid.first_columns).log_evidence + sample.log_ratio.ravel()
    weight = np.exp(found_log - found_log.max())
    sigma = np.sqrt(exact @ (logs[choices[:, 0]] - expected) ** 2 / exact.sum())
    assert abs(weight @ logs[drawn[:, 0]] / weight.sum() - expected) < 0.1 * sigma
    assert logs[drawn[:, 0]].std() > sigma, "the sample is meant to be wider than the posterior"
