"""The annual fit of monthly means, against closed forms and known truth."""

import numpy as np
import pytest

from massfit.constants import ANNUAL_RATE, TROPICAL_YEAR_DAYS
from massfit.errors import InputError
from massfit.gravity.annual import alias_leakage, fit_monthly
from massfit.gravity.field import Span

MONTH = TROPICAL_YEAR_DAYS / 12.0


def spans(edges: np.ndarray, year: int = 2015) -> list[Span]:
    origin = np.datetime64(f"{year}-01-01", "s")
    times = origin + np.round(np.asarray(edges) * 86400.0).astype("timedelta64[s]")
    return [Span(start, end) for start, end in times]


def months(count: int, first: float = 0.0) -> np.ndarray:
    edges = first + MONTH * np.arange(count + 1)
    return np.column_stack([edges[:-1], edges[1:]])


def mean_over(edges: np.ndarray, rate: float, phasor: complex) -> np.ndarray:
    """Mean of Re[Z exp(-i rate t)] over each interval: the integral written out."""
    start, end = edges.T
    wave = (np.exp(-1j * rate * end) - np.exp(-1j * rate * start)) / (-1j * rate * (end - start))
    return np.asarray((phasor * wave).real)


def test_a_clean_cycle_comes_back_whole_from_uneven_months_and_gaps() -> None:
    edges = np.delete(months(90, -400.0), [3, 4, 17, *range(40, 51)], axis=0)
    edges[10, 1] -= 14.0  # half a month
    truth = 6.0 - 4.0j
    values = mean_over(edges, ANNUAL_RATE, truth) + mean_over(edges, 2 * ANNUAL_RATE, 1.5j) + 3.0 + 0.01 * edges.mean(1)
    found = fit_monthly(spans(edges), values, reference_year=2015)
    assert found.phasor == pytest.approx(truth, abs=1e-6)
    assert found.months == 76


def test_a_month_takes_off_what_the_closed_form_says() -> None:
    # sin(x) / x at x = pi / 12
    assert abs(mean_over(months(1), ANNUAL_RATE, 1.0 + 0j)[0] / np.cos(np.pi / 12)) == pytest.approx(0.98862, abs=5e-6)
    edges = months(120)
    values = mean_over(edges, ANNUAL_RATE, 10.0 + 0j)
    instants = np.column_stack([edges.mean(1) - 1e-3, edges.mean(1) + 1e-3])
    naive = fit_monthly(spans(instants), values, reference_year=2015)
    assert abs(naive.phasor) == pytest.approx(9.8862, abs=1e-3)
    assert abs(fit_monthly(spans(edges), values, reference_year=2015).phasor) == pytest.approx(10.0, abs=1e-5)


@pytest.mark.parametrize(("years", "share"), [(2, 0.18), (5, 0.064), (15, 0.002)])
def test_an_alias_line_leaks_into_the_annual_cycle(years: int, share: float) -> None:
    # values computed beforehand by a brute search over phases of a line at 161.0 days
    found = alias_leakage(spans(months(12 * years)), 161.0)
    assert found == pytest.approx(share, rel=0.06)
    edges = months(12 * years)
    columns = [mean_over(edges, k * ANNUAL_RATE, z) for k in (1, 2) for z in (1.0, 1.0j)]
    design = np.column_stack([*columns, np.ones(len(edges)), edges.mean(1)])
    brute = max(
        np.hypot(*np.linalg.lstsq(design, mean_over(edges, 2 * np.pi / 161.0, np.exp(1j * phase)), rcond=None)[0][:2])
        for phase in np.linspace(0.0, np.pi, 90, endpoint=False)
    )
    assert found == pytest.approx(brute, rel=2e-3)


def test_alias_lines_are_fitted_when_the_series_is_long_enough() -> None:
    assert "161 d" not in fit_monthly(spans(months(40)), np.arange(40.0) % 7, reference_year=2015).lines
    assert "161 d" in fit_monthly(spans(months(48)), np.arange(48.0) % 7, reference_year=2015).lines
    # 322.1 days part from the year after 1 / (1/322.1 - 1/365.2422) days, 7.5 years
    assert "322.1 d" not in fit_monthly(spans(months(88)), np.arange(88.0) % 7, reference_year=2015).lines
    edges = months(92)
    values = mean_over(edges, ANNUAL_RATE, 5.0j) + mean_over(edges, 2 * np.pi / 322.1, 3.0 + 0j)
    found = fit_monthly(spans(edges), values, reference_year=2015)
    assert "322.1 d" in found.lines
    assert found.phasor == pytest.approx(5.0j, abs=1e-5)


@pytest.mark.parametrize("memory", [None, 90.0], ids=["white", "red"])
def test_the_error_is_honest(memory: float | None) -> None:
    rng = np.random.default_rng(5)
    edges = np.delete(months(110), [20, 21, 55], axis=0)
    days = edges.mean(1)
    correlation = np.eye(len(days)) if memory is None else np.exp(-np.abs(days[:, None] - days) / memory)
    root = np.linalg.cholesky(correlation)
    truth, squares, naive = 8.0 - 3.0j, [], []
    columns = [mean_over(edges, k * ANNUAL_RATE, z) for k in (1, 2) for z in (1.0, 1.0j)]
    design = np.column_stack([*columns, np.ones(len(edges)), days])
    inverse = np.linalg.inv(design.T @ design)
    for _ in range(120):
        values = mean_over(edges, ANNUAL_RATE, truth) + 2.0 * root @ rng.standard_normal(len(days))
        found = fit_monthly(spans(edges), values, reference_year=2015, alias_days=())
        squares.append(squared_error(found.phasor - truth, found.covariance))
        solution, residual = np.linalg.lstsq(design, values, rcond=None)[:2]
        variance = residual[0] / (len(values) - design.shape[1])
        naive.append(squared_error(complex(*solution[:2]) - truth, variance * inverse[:2, :2]))
    # chi-square with 2 degrees of freedom: mean 2, and the sd of this mean is 0.18
    assert 1.4 < np.mean(squares) < 2.6
    # least squares, which takes the noise for white, is the control
    assert np.mean(naive) < 2.6 if memory is None else np.mean(naive) > 4.0


def squared_error(step: complex, covariance: np.ndarray) -> float:
    parts = np.array([step.real, step.imag])
    return float(parts @ np.linalg.solve(covariance, parts))


@pytest.mark.parametrize(
    ("count", "value", "message"),
    [
        (9, 1.0, "9 months over 0.7 years"),
        (40, np.nan, "some values are not finite"),
    ],
)
def test_series_that_cannot_be_fitted_are_refused(count: int, value: float, message: str) -> None:
    with pytest.raises(InputError, match=message):
        fit_monthly(spans(months(count)), np.full(count, value), reference_year=2015)
