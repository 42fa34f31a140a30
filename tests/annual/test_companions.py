"""Series that pass through the operator of a site's fit, so that corrections and answer add up to the record."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.annual.fit import fit_site
from massfit.errors import InputError
from massfit.phasor import annual_basis, days_since


@pytest.fixture
def fitted(make_record, make_red):
    """Two overlapping deployments, two models; the last companion is the record before everything was taken off."""
    rng = np.random.default_rng(5)
    circulation = np.array([make_red(rng, 500, 30.0, 20.0) for _ in range(2)])
    records = [
        make_record(rng, count=300, size=2000.0, circulation=circulation[:, :300]),
        make_record(rng, count=250, first=250.5, size=-800.0, label="2", circulation=circulation[:, 250:]),
    ]
    whole = []
    for record in records:
        days = days_since(record.time, 2016)
        taken = [annual_basis(days) @ [20.0, -7.0], 40.0 * np.cos(days / 3.0) + 0.2 * days + 900.0]
        mean = record.circulation.mean(axis=0)
        # what is fitted is the pressure less the models; what was there before holds the series taken off as well
        whole.append(replace(record, companions=np.array([*taken, mean, record.pressure + taken[0] + taken[1]])))
    fit = fit_site(whole, models=["a", "b"], reference_year=2016, rng=np.random.default_rng(1))
    return records, fit


def test_corrections_and_answer_add_up_to_the_record(fitted):
    # invariant: the operator is linear
    _, fit = fitted
    answer = fit.single_gaussian()[0].mean(axis=0)
    cycle, wave, mean, record = fit.companions
    np.testing.assert_allclose(answer + cycle + wave + mean, record, atol=1e-6)
    assert np.hypot(*wave) > 1e-3  # none of them is trivial
    assert np.hypot(*mean) > 0.5


def test_an_annual_cycle_is_returned_unchanged(fitted):
    # invariant of the generalised least squares with flat priors on the cycle
    np.testing.assert_allclose(fitted[1].companions[0], [20.0, -7.0], atol=1e-6)


def test_companions_do_not_move_the_fit(fitted):
    records, fit = fitted
    alone = fit_site(records, models=["a", "b"], reference_year=2016, rng=np.random.default_rng(1))
    mean, covariance = alone.single_gaussian()
    sigma = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(fit.single_gaussian()[0] / sigma, mean / sigma, atol=1e-6)
    assert alone.companions is None


def test_companions_of_another_shape_are_refused(make_record):
    record = make_record(np.random.default_rng(1), count=200)
    wrong = replace(record, deployment="2", companions=np.zeros((2, 150)))
    with pytest.raises(InputError) as caught:
        fit_site([record, wrong], models=[], reference_year=2016, rng=np.random.default_rng(1))
    text = str(caught.value)
    assert "companions have shape (2, 150) for 200 times" in text
    assert "the deployments have [0, 2] companions" in text
