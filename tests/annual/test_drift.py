"""Forms of drift and calibrations: recovery of known truth, closed forms, and facts of the trade."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.annual.design import build_design
from massfit.annual.diagnostics import diagnose_site
from massfit.annual.evidence import reduce_columns, solve_choices
from massfit.annual.fit import fit_site
from massfit.annual.nodes import EXPONENTIAL, LINE, LOGARITHM, NOTHING, exponential_nodes, first_nodes
from massfit.annual.noise import NoiseModel
from massfit.errors import InputError
from massfit.records.record import Calibrations
from massfit.settings import Priors

TRUTH = np.array([60.0, 50.0])
PRIORS = Priors(noise_forms=("exponential",))
DAY = np.timedelta64(1, "D")


def fit(records, seed=1, priors=PRIORS):
    return fit_site(records, models=[], reference_year=2016, rng=np.random.default_rng(seed), priors=priors)


def sigmas(result):
    mean, covariance = result.single_gaussian()
    away = mean[0] - TRUTH
    return float(np.sqrt(away @ np.linalg.solve(covariance, away)))


def age_of(record):
    return (record.time - record.start) / DAY


def creeping(make_record, make_red, rng, drift, change=900.0):
    """A recorder whose drift is logarithmic creep."""
    plain = make_record(rng, count=800, ocean=make_red(rng, 800, 20.0, 20.0), drift=drift, slope=0.0)
    age = age_of(plain)
    return replace(plain, pressure=plain.pressure + change * np.log1p(age / 10.0) / np.log1p(age[-1] / 10.0))


@pytest.mark.parametrize("forms", [(EXPONENTIAL,), (NOTHING, EXPONENTIAL, LOGARITHM), (NOTHING, LINE)])
def test_prior_masses_sum_to_one_and_stay_when_nodes_are_split(forms):
    # invariant
    nodes = first_nodes(forms, 3.0, 400.0)
    mass = np.where(nodes.log_time > 4.0, 1.0, 0.0)
    finer = nodes.split(mass / max(mass.sum(), 1.0))
    for each in (nodes, finer):
        for form in forms:
            assert each.prior[each.form == form].sum() == pytest.approx(1 / len(forms))
    assert len(finer) >= len(nodes)
    np.testing.assert_array_equal(finer.form[finer.nearest(nodes.form, nodes.log_time)], nodes.form)


def test_columns_are_their_formulas():
    # closed form
    elapsed, line = np.array([0.0, 10.0, 200.0]), np.array([-1.0, 0.0, 1.0])
    nodes = first_nodes([NOTHING, LINE, EXPONENTIAL, LOGARITHM], 5.0, 200.0)
    columns = nodes.columns(elapsed, 200.0, line)
    time = np.exp(nodes.log_time)
    np.testing.assert_array_equal(columns[:, nodes.form == NOTHING], 0.0)
    np.testing.assert_array_equal(columns[:, nodes.form == LINE], line[:, None])
    own = nodes.form == LOGARITHM
    np.testing.assert_allclose(columns[1, own], np.log(1 + 10 / time[own]) / np.log(1 + 200 / time[own]))
    np.testing.assert_allclose(columns[2, own], 1.0)
    np.testing.assert_allclose(columns[1, nodes.form == EXPONENTIAL], np.exp(-10 / time[nodes.form == EXPONENTIAL]))


def test_logarithmic_creep_is_recovered(make_record, make_red):
    rng = np.random.default_rng(2)
    result = fit([creeping(make_record, make_red, rng, "logarithm+linear")])
    (drift,) = result.drifts
    assert drift.form_weight == {"logarithm+linear": pytest.approx(1.0)}
    assert drift.exponential is None
    # start to end, slope included: the two share it
    total = drift.drift[-1] - drift.drift[0]
    assert total == pytest.approx(900.0 * (1 - np.log1p(0.05) / np.log1p(79.95)), abs=80.0)
    assert sigmas(result) < 3.0


def test_evidence_tells_forms_of_drift_apart(make_record, make_red):
    rng = np.random.default_rng(3)
    ocean = make_red(rng, 800, 20.0, 20.0)
    decaying = make_record(rng, count=800, size=-900.0, time_constant=40.0, slope=0.0, ocean=ocean, drift="compare")
    found = {
        "logarithm": fit([creeping(make_record, make_red, rng, "compare")]),
        "exponential": fit([decaying]),
        "": fit([make_record(rng, count=800, slope=-600.0, ocean=ocean, drift="compare")]),
    }
    for form, result in found.items():
        weights = result.drifts[0].form_weight
        assert sum(weights.values()) == pytest.approx(1.0)
        assert sum(weight for name, weight in weights.items() if name.startswith(form or "linear")) > 0.9
        assert sigmas(result) < 3.0
    slope = found[""].drifts[0].slope
    assert abs(slope.mean + 600.0) < 3.5 * slope.sd


def test_compared_evidence_is_that_of_each_form_alone(make_record):
    # closed form: with one term the weights are the evidences of separate models
    rng = np.random.default_rng(4)
    record = make_record(rng, count=300, size=60.0, slope=0.0, drift="compare")
    design = build_design([record], reference_year=2016, priors=PRIORS)
    noise = design.covariance(NoiseModel(np.array([0.05]), np.array([400.0]), np.array([10.0])))
    compared = [first_nodes(term.forms, term.low, term.high) for term in design.terms]
    reduction = reduce_columns(noise, design, design.drift_columns(compared))
    decays, line = len(compared[0]), len(compared[0]) + 1  # the slope's nodes stand behind: nothing, line
    with_slope = solve_choices(reduction, np.array([[node, line] for node in range(decays)])).log_evidence
    for form, alone_form in ((EXPONENTIAL, "exponential+linear"), (LOGARITHM, "logarithm+linear"), (NOTHING, "linear")):
        alone = build_design([replace(record, drift=alone_form)], reference_year=2016, priors=PRIORS)
        nodes = [compared[0].take(compared[0].form == form)] if form != NOTHING else []
        choices = np.arange(len(nodes[0]))[:, None] if nodes else np.zeros((1, 0), np.int64)
        separate = solve_choices(reduce_columns(noise, alone, alone.drift_columns(nodes)), choices).log_evidence
        # a slope in the fixed columns has its prior's constant left out, since it never changes
        constant = np.log(1000.0)
        np.testing.assert_allclose(with_slope[compared[0].form == form], separate - constant, atol=1e-6)


def calibrated(record, rng, every=30, sd=3.0, drift=None):
    time = record.time[::every]
    age = (time - record.start) / DAY
    truth = drift(age) + 4321.0
    readings = truth + sd * rng.normal(size=len(time))
    return replace(record, calibrations=Calibrations(time, readings, np.full(len(time), sd)))


def test_calibrations_help_the_linear_part_and_the_cycle(make_record, make_red):
    # common practice: in-situ calibrations at a known pressure show the drift
    rng = np.random.default_rng(5)
    ocean = make_red(rng, 400, 40.0, 30.0)
    plain = make_record(rng, count=400, size=-800.0, time_constant=90.0, slope=300.0, ocean=ocean)
    aided = calibrated(plain, rng, drift=lambda age: 300.0 * age / 365.25 - 800.0 * np.exp(-age / 90.0))
    alone, helped = fit([plain]), fit([aided])
    assert helped.drifts[0].slope.sd < 0.5 * alone.drifts[0].slope.sd
    assert abs(helped.drifts[0].slope.mean - 300.0) < 3.5 * helped.drifts[0].slope.sd
    spread = [np.sqrt(np.trace(each.single_gaussian()[1])) for each in (alone, helped)]
    assert spread[1] < 0.75 * spread[0]
    assert sigmas(helped) < 3.0
    # readings have no days, and their level is their own
    assert helped.days == alone.days
    raised = replace(aided, calibrations=replace(aided.calibrations, pressure=aided.calibrations.pressure + 1e5))
    np.testing.assert_allclose(fit([raised]).phasor, helped.phasor, atol=1e-5)
    judged = diagnose_site([aided], helped, reference_year=2016, rng=rng, priors=PRIORS)
    assert judged.inflation < diagnose_site([plain], alone, reference_year=2016, rng=rng, priors=PRIORS).inflation


def test_calibrations_are_rows_of_generalised_least_squares(make_record):
    # slow independent twin: dense matrices, linear drift
    rng = np.random.default_rng(6)
    record = calibrated(make_record(rng, count=200, drift="linear"), rng, drift=lambda age: 100.0 * age / 365.25)
    design = build_design([record], reference_year=2016, priors=PRIORS)
    model = NoiseModel(np.array([0.05]), np.array([400.0]), np.array([10.0]))
    found = solve_choices(
        reduce_columns(design.covariance(model), design, np.zeros((len(design.days), 0))), np.zeros((1, 0), np.int64)
    )
    days = (record.time - np.datetime64("2016-01-01", "ns")) / DAY
    angle, age = 2 * np.pi * days / 365.2422, age_of(record)
    late = (record.calibrations.time - record.start) / DAY
    cycle = [np.cos(angle), np.sin(angle), np.cos(2 * angle), np.sin(2 * angle)]
    top = np.column_stack([*cycle, np.ones(200), (age - age.mean()) / 365.25, np.zeros(200)])
    below = np.zeros((len(late), 7))
    below[:, 5], below[:, 6] = (late - age.mean()) / 365.25, 1.0
    covariance = np.zeros((200 + len(late),) * 2)
    covariance[:200, :200] = 400 * np.exp(-0.05 * np.abs(days[:, None] - days)) + (100 + 0.01 + 4e-4) * np.eye(200)
    covariance[200:, 200:] = 9.0 * np.eye(len(late))
    columns, inverse = np.vstack([top, below]), np.linalg.inv(covariance)
    data = np.append(record.pressure, record.calibrations.pressure)
    normal = columns.T @ inverse @ columns
    normal[5, 5] += 1000.0**-2
    expected = np.linalg.solve(normal, columns.T @ inverse @ data)
    np.testing.assert_allclose(found.mean[0, [0, 1, 2, 3, 5], 0], expected[[0, 1, 2, 3, 5]], rtol=1e-7)


def test_faults_of_calibrations_are_reported(make_record):
    record = make_record(np.random.default_rng(7), count=200)
    when, ones = record.time[:3], np.ones(3)
    bad = {
        "as many": Calibrations(when, ones, np.ones(2)),
        "above 0": Calibrations(when, ones, np.zeros(3)),
        "before the deployment": Calibrations(when - 10 * DAY, ones, ones),
    }
    for words, given in bad.items():
        with pytest.raises(InputError, match=words):
            fit([replace(record, calibrations=given)])


def trend_and_exponential(records):
    """Sigmas of a trend of the ocean and of the last exponential, by linear algebra at a fixed noise."""
    design = build_design(records, reference_year=2016, priors=PRIORS)
    noise = design.covariance(NoiseModel(np.array([0.05]), np.array([900.0]), np.full(len(records), 5.0)))
    terms = design.drift_columns([exponential_nodes([120.0]) for _ in records])
    white = noise.whiten(np.column_stack([design.days / 365.25, design.fixed, terms]))
    precision = np.concatenate([[0.0], design.precision, np.full(len(records), design.exponential_sd**-2)])
    return np.sqrt(np.diag(np.linalg.inv(white.T @ white + np.diag(precision))))[[0, -1]]


def test_overlap_of_a_year_helps_the_exponential_and_not_the_linear_part(make_record):
    # common practice: two-year deployments that overlap by one year. What the recorders' slopes have in common
    # cannot be told from a trend of the ocean, overlap or none
    rng = np.random.default_rng(8)
    first = make_record(rng, count=730)
    apart, overlapping = (
        trend_and_exponential([first, make_record(rng, count=730, first=start, label="2")]) for start in (730.5, 365.5)
    )
    trend, exponential = overlapping / apart
    assert exponential < 0.75
    assert trend == pytest.approx(1.0, abs=0.01)
    # two slopes of 10 hPa a year each, unknown
    assert overlapping[0] == pytest.approx(1000.0 / np.sqrt(2), rel=0.01)


def test_short_deployments_know_drift_and_cycle_badly(make_record):
    # common practice: recorders of a year or less serve shorter periods only
    rng = np.random.default_rng(9)
    inflation = {}
    for days in (280, 1100):
        record = make_record(rng, count=days, white=10.0)
        inflation[days] = diagnose_site([record], fit([record]), reference_year=2016, rng=rng, priors=PRIORS).inflation
    assert inflation[280] > 2.5
    assert 1.0 < inflation[1100] < 1.15
