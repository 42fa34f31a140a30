"""Interpolation that keeps means, and averages that keep tides out."""

import numpy as np
import pytest

from massfit.corrections.series import (
    daily_series_at,
    daily_values_at,
    interval_edges,
    means_between,
    resampled,
    series_at,
    values_at,
)
from massfit.errors import InputError
from massfit.network import Series

RATE = 2.0 * np.pi / 365.2422
ORIGIN = np.datetime64("2014-01-01T00:00", "ns")


def clock(start: str, end: str, step_hours: float) -> np.ndarray:
    step = np.timedelta64(round(step_hours * 3600), "s")
    return np.arange(np.datetime64(start, "s"), np.datetime64(end, "s"), step).astype("datetime64[ns]")


def in_days(time: np.ndarray) -> np.ndarray:
    return (time - ORIGIN) / np.timedelta64(1, "D")


NOONS = clock("2014-01-01T12:00", "2018-01-01", 24)
MONTHS = np.arange("2014-01", "2018-02", dtype="datetime64[M]").astype("datetime64[ns]")
MIDDLES = MONTHS[:-1] + (MONTHS[1:] - MONTHS[:-1]) / 2


def monthly_means(phase: float) -> np.ndarray:
    """Exact means of cos(RATE t + phase) over calendar months."""
    return np.diff(np.sin(RATE * in_days(MONTHS) + phase) / RATE) / np.diff(in_days(MONTHS))


def fitted(values: np.ndarray) -> complex:
    """Annual phasor of a daily series by least squares, independent of the package."""
    angle = RATE * in_days(NOONS)
    design = np.column_stack([np.ones_like(angle), np.cos(angle), np.sin(angle)])
    _, a, b = np.linalg.lstsq(design, values, rcond=None)[0]
    return complex(a, b)


@pytest.mark.parametrize("phase", [0.0, 1.0, 2.0, 3.0])
def test_annual_line_comes_back_from_monthly_means(phase: float) -> None:
    curve = values_at(MIDDLES, monthly_means(phase), NOONS)
    truth = np.cos(RATE * in_days(NOONS) + phase)
    assert abs(fitted(curve) - np.exp(-1j * phase)) < 5e-5
    inner = slice(60, -60)
    assert np.abs(curve - truth)[inner].max() < 1e-3
    assert np.abs(curve - truth).max() < 5e-3  # one-sided at the ends


def test_straight_lines_through_monthly_means_would_lose_three_percent() -> None:
    # closed form: sinc(1/12) = 0.98862 for the means and sinc(1/12)^2 more for the lines
    naive = np.interp(in_days(NOONS), in_days(MIDDLES), monthly_means(0.0))
    assert abs(fitted(naive)) == pytest.approx(np.sinc(1 / 12) ** 3, abs=1e-3)


def test_interval_means_are_the_data() -> None:
    rng = np.random.default_rng(1)
    data = rng.normal(size=len(MIDDLES))
    fine = clock("2014-01-01T00:10", "2018-01-01", 1.0 / 3.0)  # mid-points of 20 minutes
    curve = values_at(MIDDLES, data, fine)
    month = np.searchsorted(in_days(MONTHS), in_days(fine)) - 1
    np.testing.assert_allclose(np.bincount(month, curve) / np.bincount(month), data, atol=2e-5)


def test_calendar_months_are_recognised_by_the_fifteenth() -> None:
    fifteenths = MONTHS[:-1] + np.timedelta64(14, "D")
    starts, ends = interval_edges(fifteenths)
    np.testing.assert_array_equal(starts, MONTHS[:-1])
    np.testing.assert_array_equal(ends, MONTHS[1:])


def test_ten_day_means_have_edges_half_way() -> None:
    time = clock("2014-01-06", "2014-03-01", 240)
    starts, ends = interval_edges(time)
    np.testing.assert_array_equal(starts[1:], ends[:-1])
    assert starts[0] == np.datetime64("2014-01-01")


def test_a_missing_month_is_a_gap_and_the_rest_keeps_its_means() -> None:
    kept = np.delete(np.arange(len(MIDDLES)), 20)
    curve = values_at(MIDDLES[kept], monthly_means(0.0)[kept], NOONS)
    inside = NOONS.astype("datetime64[M]") == MONTHS[20].astype("datetime64[M]")
    np.testing.assert_array_equal(np.isnan(curve), inside)
    assert np.abs(curve - np.cos(RATE * in_days(NOONS)))[~inside].max() < 5e-3


def test_coarse_columns_with_their_own_gaps() -> None:
    table = np.stack([monthly_means(0.0), monthly_means(1.0), np.full(len(MIDDLES), np.nan)], axis=1)
    table[30, 1] = np.nan
    curve = values_at(MIDDLES, table, NOONS)
    np.testing.assert_array_equal(curve[:, 0], values_at(MIDDLES, table[:, 0], NOONS))
    np.testing.assert_array_equal(curve[:, 1], values_at(MIDDLES, table[:, 1], NOONS))
    assert np.isnan(curve[:, 1]).sum() == 31  # July 2016
    assert np.isnan(curve[:, 2]).all()


def test_two_coarse_values_keep_their_means() -> None:
    time = clock("2014-01-06", "2014-01-20", 240)
    fine = clock("2014-01-01T01:00", "2014-01-21", 2)
    curve = values_at(time, np.array([1.0, 3.0]), fine)
    np.testing.assert_allclose([curve[:120].mean(), curve[120:].mean()], [1.0, 3.0], atol=1e-9)


def test_daily_series_is_linear_and_nan_outside() -> None:
    series = Series("air", NOONS[:3], np.array([0.0, 10.0, 40.0]))
    asked = np.array(
        ["2014-01-01T11:59", "2014-01-01T12:00", "2014-01-02T00:00", "2014-01-03T12:00", "2014-01-03T12:01"]
    )
    np.testing.assert_array_equal(series_at(series, asked.astype("datetime64[ns]")), [np.nan, 0.0, 5.0, 40.0, np.nan])


def test_missing_days_spoil_their_neighbourhood_only() -> None:
    values = np.array([[0.0, 0.0], [1.0, np.nan], [2.0, 2.0], [3.0, 3.0]])
    halves = NOONS[:3] + np.timedelta64(12, "h")
    np.testing.assert_array_equal(values_at(NOONS[:4], values, halves), [[0.5, np.nan], [1.5, np.nan], [2.5, 2.5]])
    # a value that is there is returned even beside one that is missing
    np.testing.assert_array_equal(values_at(NOONS[:4], values, NOONS[:4]), values)


def test_long_gaps_are_not_bridged() -> None:
    time = NOONS[[0, 1, 2, 4, 5, 12, 13]]
    curve = values_at(time, np.arange(7.0), NOONS[:14])
    np.testing.assert_array_equal(np.flatnonzero(np.isnan(curve)), np.arange(6, 12))


def slow_mean(time: np.ndarray, values: np.ndarray, start: np.datetime64, end: np.datetime64) -> float:
    """Mean of the straight-line curve by brute force, level beyond the ends."""
    fine = np.linspace(in_days(np.array([start]))[0], in_days(np.array([end]))[0], 20001)
    middles = 0.5 * (fine[1:] + fine[:-1])
    return float(np.interp(middles, in_days(time), values).mean())


def test_means_between_against_brute_force() -> None:
    rng = np.random.default_rng(2)
    time = clock("2014-01-01T00:30", "2014-01-11", 1)
    time = np.delete(time, [50, 51, 120])  # short gaps are bridged
    values = rng.normal(size=(len(time), 2))
    starts = clock("2014-01-01T00:00", "2014-01-10", 17.3)
    ends = starts + np.timedelta64(31, "h")
    expected = [[slow_mean(time, column, *edges) for column in values.T] for edges in zip(starts, ends, strict=True)]
    np.testing.assert_allclose(means_between(time, values, starts, ends), expected, atol=2e-4)


def test_means_between_are_missing_where_a_value_is() -> None:
    time = clock("2014-01-01T00:30", "2014-01-06", 1)
    values = np.ones((len(time), 2))
    values[60, 1] = np.nan  # 3 January 12:30
    days = clock("2013-12-31T12:00", "2014-01-08", 24)
    expected = [[np.nan] * 2, [1, 1], [1, 1], [1, np.nan], [1, 1], [1, 1], [np.nan] * 2, [np.nan] * 2]
    np.testing.assert_array_equal(daily_values_at(time, values, days), expected)


def test_daily_means_of_a_six_hourly_series_keep_the_solar_tides_out() -> None:
    # S2 modulated through the year: noon values alias it into the annual line, daily means do not
    time = clock("2013-12-31", "2018-01-03", 6)
    days = in_days(time)
    tide = (1.0 + np.cos(RATE * days)) * np.cos(4.0 * np.pi * days)
    averaged = daily_series_at(Series("air", time, tide), NOONS)
    assert abs(fitted(averaged)) < 1e-3
    # control
    assert abs(fitted(series_at(Series("air", time, tide), NOONS))) > 0.9


def test_resampled_takes_the_values_where_the_times_agree() -> None:
    data = np.random.default_rng(3).normal(size=len(MIDDLES))
    fifteenths = MONTHS[:-1] + np.timedelta64(14, "D")
    np.testing.assert_array_equal(resampled(MIDDLES, data, fifteenths), data)


def test_resampled_averages_to_a_coarser_clock_and_interpolates_to_a_finer() -> None:
    daily = np.cos(RATE * in_days(NOONS))
    np.testing.assert_allclose(resampled(NOONS, daily, MIDDLES), monthly_means(0.0), atol=1e-4)
    np.testing.assert_array_equal(
        resampled(MIDDLES, daily[: len(MIDDLES)], NOONS), values_at(MIDDLES, daily[: len(MIDDLES)], NOONS)
    )


def test_resampled_averages_coarse_values_to_still_coarser_ones() -> None:
    tens = clock("2013-12-02", "2018-02-01", 240)
    ours = resampled(tens, np.cos(RATE * in_days(tens)), MIDDLES)
    # closed form: chords of ten days sag by (10 RATE)^2 / 12 of the curve on average
    np.testing.assert_allclose(ours, monthly_means(0.0), atol=(10.0 * RATE) ** 2 / 12.0)


def test_instants_at_six_hours_serve_their_last_day() -> None:
    time = clock("2014-01-01", "2014-01-11", 6)  # ends at 18 h on 10 January
    days = clock("2014-01-01T12:00", "2014-01-12", 24)
    means = daily_values_at(time, np.ones(len(time)), days)
    np.testing.assert_array_equal(means, [1.0] * 10 + [np.nan])


@pytest.mark.parametrize("time", [NOONS[:1], NOONS[[1, 0]], NOONS[[0, 0]]])
def test_a_series_out_of_order_is_refused(time: np.ndarray) -> None:
    with pytest.raises(InputError, match="two or more, strictly increasing"):
        series_at(Series("air", time, np.zeros(len(time))), NOONS)
