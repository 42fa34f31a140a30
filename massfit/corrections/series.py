"""Values of a time series at other times, without attenuating the annual line.

A daily or finer series is joined by straight lines. A coarser one holds means over its intervals:
joining these by straight lines loses 3 % of the annual line (monthly means alone lose 1.1 %), so the
curve used is the smooth one whose means over the intervals equal the data: the derivative of a spline
through the running integral (the histospline of Boneva, Kendall & Stefanov 1971, here of degree 4).
"""

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import make_interp_spline

from massfit.errors import Fault, InputError
from massfit.network import Series

COARSE_STEP_DAYS = 1.5
"""Series with a longer step are means over intervals; others are joined by straight lines."""

LONGEST_BRIDGE_DAYS = 3.0
"""Longest gap of a daily or finer series that a straight line may cross."""

SPLINE_DEGREE = 5
"""Degree of the spline through the running integral; the curve has one degree less."""

_CALENDAR_TOLERANCE_DAYS = 1.6  # "the 15th" lies up to 1.5 days before the middle of a month

_HALF_DAY = np.timedelta64(12, "h")

Times = NDArray[np.datetime64]
Values = NDArray[np.float64]


def series_at(series: Series, time: Times) -> Values:
    """Pressure of a series at other times.

    Parameters
    ----------
    series : massfit.network.Series
        Values at the middle of their intervals; at least two.
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    (n,) array of float
        Pa; NaN outside the span of the series and in its gaps.

    Raises
    ------
    InputError
        The series is too short, or its time does not increase.

    Examples
    --------
    >>> noon = np.arange("2016-01-01T12", "2016-01-04T12", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    >>> series_at(Series("air", noon, np.array([0.0, 10.0, 40.0])), noon[:2] + np.timedelta64(12, "h"))
    array([ 5., 25.])
    """
    _check_time(series.name, series.time)
    return values_at(series.time, series.pressure, time)


def daily_series_at(series: Series, time: Times) -> Values:
    """Daily means of a series about other times: the counterpart of a daily mean record.

    Parameters and errors are those of :func:`series_at`.

    Returns
    -------
    (n,) array of float
        Pa: means over 24 hours where the series is finer than that, :func:`series_at` otherwise.
    """
    _check_time(series.name, series.time)
    return daily_values_at(series.time, series.pressure, time)


def values_at(time: Times, values: Values, wanted: Times) -> Values:
    """Interpolate one or several series that share their time.

    Parameters
    ----------
    time : (m,) array of datetime64
        Middle of each value's interval, strictly increasing, m >= 2.
    values : (m,) or (m, k) array of float
        NaN is missing.
    wanted : (n,) array of datetime64

    Returns
    -------
    (n,) or (n, k) array of float
        NaN outside the span, in gaps and beside missing values.
    """
    if step_days(time) > COARSE_STEP_DAYS:
        starts, ends = interval_edges(time)
        return _mean_preserving(_days(starts, time[0]), _days(ends, time[0]), values, _days(wanted, time[0]))
    return _straight(_days(time, time[0]), values, _days(wanted, time[0]))


def daily_values_at(time: Times, values: Values, wanted: Times) -> Values:
    """Like :func:`values_at`, but averaged over 24 hours where the series is finer than daily.

    A value picked once a day would alias the solar tides of a finer series into its annual cycle.
    """
    if step_days(time) > 0.75:
        return values_at(time, values, wanted)
    middles: Times = np.asarray(wanted, dtype="datetime64[ns]")
    return means_between(time, values, middles - _HALF_DAY, middles + _HALF_DAY)


def resampled(time: Times, values: Values, target: Times) -> Values:
    """Bring values to the intervals of another series, whichever is the finer of the two.

    Parameters
    ----------
    time : (m,) array of datetime64
        Middle of each value's interval, strictly increasing, m >= 2.
    values : (m,) or (m, k) array of float
    target : (n,) array of datetime64
        Middle of each wanted interval, strictly increasing, n >= 2.

    Returns
    -------
    (n,) or (n, k) array of float
        The values themselves where the two share their times; means over the intervals of `target`
        where these are longer; :func:`values_at` otherwise.
    """
    own, wanted = _days(time, time[0]), _days(target, time[0])
    nearest = np.clip(np.searchsorted(own, wanted), 1, len(own) - 1)
    nearest -= wanted - own[nearest - 1] < own[nearest] - wanted
    if np.all(np.abs(own[nearest] - wanted) < 0.1 * step_days(time)):
        return np.asarray(values[nearest], dtype=float)
    if step_days(target) > 1.5 * step_days(time):
        return means_between(time, values, *interval_edges(target))
    return values_at(time, values, target)


def means_between(time: Times, values: Values, starts: Times, ends: Times) -> Values:
    """Means of the straight-line curve over intervals.

    Parameters
    ----------
    time : (m,) array of datetime64
        Strictly increasing.
    values : (m,) or (m, k) array of float
    starts, ends : (n,) array of datetime64
        Intervals, longer than zero.

    Returns
    -------
    (n,) or (n, k) array of float
        NaN where the interval leaves the span by more than a step, or meets a missing value or a gap.
    """
    days = _days(time, time[0])
    step = step_days(time)
    lower, upper = _days(starts, time[0]), _days(ends, time[0])
    pieces = 0.5 * (values[1:] + values[:-1]).T * np.diff(days)
    broken = ~np.isfinite(pieces) | (np.diff(days) > max(LONGEST_BRIDGE_DAYS, 1.5 * step))
    integral = _running(np.where(broken, 0.0, pieces))
    faults = _running(broken.astype(float))
    # the curve is continued level by a step: a six-hourly series of instants ends at 18 h of its last day
    inside = (lower >= days[0] - 1.0001 * step) & (upper <= days[-1] + 1.0001 * step)
    total = _integral_to(days, values, integral, upper) - _integral_to(days, values, integral, lower)
    first = np.clip(np.searchsorted(days, lower, side="right") - 1, 0, len(days) - 1)
    last = np.clip(np.searchsorted(days, upper, side="left"), 0, len(days) - 1)
    whole = inside & (faults[..., last] == faults[..., first])
    return np.asarray(np.where(whole, total / (upper - lower), np.nan).T)


def interval_edges(time: Times) -> tuple[Times, Times]:
    """Start and end of the interval behind each mid-time.

    Parameters
    ----------
    time : (m,) array of datetime64
        Mid-times, strictly increasing, m >= 2.

    Returns
    -------
    starts, ends : (m,) array of datetime64[ns]
        Calendar months where every mid-time is within 1.6 days of the middle of its own month;
        otherwise the edges lie half-way between neighbours, and half a median step away at gaps.

    Examples
    --------
    >>> starts, ends = interval_edges(np.array(["2016-01-16T12", "2016-02-15T12"], dtype="datetime64[ns]"))
    >>> [str(day)[:10] for day in (*starts, ends[-1])]
    ['2016-01-01', '2016-02-01', '2016-03-01']
    """
    instants = np.asarray(time, dtype="datetime64[ns]")
    months = instants.astype("datetime64[M]")
    starts, ends = months.astype("datetime64[ns]"), (months + 1).astype("datetime64[ns]")
    from_middle = np.abs((instants - (starts + (ends - starts) / 2)) / np.timedelta64(1, "D"))
    if np.all(from_middle <= _CALENDAR_TOLERANCE_DAYS) and np.all(np.diff(months) > np.timedelta64(0, "M")):
        return starts, ends
    steps = np.diff(instants)
    median = np.timedelta64(int(np.median(steps.astype(np.int64))), "ns")
    halves = np.where(steps > 1.5 * median, median, steps) // 2
    return instants - np.concatenate([halves[:1], halves]), instants + np.concatenate([halves, halves[-1:]])


def step_days(time: Times) -> float:
    """Median step of a series of two or more times, days."""
    return float(np.median(np.diff(_days(time, time[0]))))


def _check_time(name: str, time: Times) -> None:
    if len(time) < 2 or not np.all(np.diff(time) > np.timedelta64(0, "ns")):
        problem = f"{len(time)} value(s)" if len(time) < 2 else "the times do not increase"
        raise InputError(Fault(name, "time", problem, "Must be two or more, strictly increasing", "Correct the series"))


def _days(time: Times, origin: np.datetime64) -> Values:
    elapsed = np.asarray(time, dtype="datetime64[ns]") - np.asarray(origin, dtype="datetime64[ns]")
    return np.asarray(elapsed.astype(np.int64) / 86_400e9)


def _running(pieces: Values) -> Values:
    return np.concatenate([np.zeros((*pieces.shape[:-1], 1)), np.cumsum(pieces, axis=-1)], axis=-1)


def _integral_to(days: Values, values: Values, integral: Values, wanted: Values) -> Values:
    """Integral of the straight-line curve from the first time, level beyond the ends; (..., n)."""
    left = np.clip(np.searchsorted(days, wanted, side="right") - 1, 0, len(days) - 2)
    inner = np.clip(wanted, days[0], days[-1])
    part = inner - days[left]
    slope = (values[left + 1] - values[left]).T / (days[left + 1] - days[left])
    start = values[left].T
    before, after = np.minimum(wanted - days[0], 0.0), np.maximum(wanted - days[-1], 0.0)
    # a product with NaN is NaN even where the factor is zero: keep missing values out of the sums they do not enter
    partial = np.where(part > 0.0, part * (start + 0.5 * slope * part), 0.0)
    ends = np.where(before < 0.0, before * values[0, ..., None], 0.0)
    ends = ends + np.where(after > 0.0, after * values[-1, ..., None], 0.0)
    return np.asarray(integral[..., left] + partial + ends)


def _straight(days: Values, values: Values, wanted: Values) -> Values:
    right = np.clip(np.searchsorted(days, wanted), 1, len(days) - 1)
    left = right - 1
    span = days[right] - days[left]
    weight = (wanted - days[left]) / span
    covered = (wanted >= days[0]) & (wanted <= days[-1])
    covered &= (span <= LONGEST_BRIDGE_DAYS) | (weight == 0.0) | (weight == 1.0)
    before, after = values[left].T, values[right].T
    between = (1.0 - weight) * before + weight * after
    exact = np.where(weight == 1.0, after, np.where(weight == 0.0, before, between))
    return np.asarray(np.where(covered, exact, np.nan).T)


def _mean_preserving(starts: Values, ends: Values, values: Values, wanted: Values) -> Values:
    columns = values if values.ndim == 2 else values[:, None]
    result = np.full((len(wanted), columns.shape[1]), np.nan)
    present = np.isfinite(columns)
    for pattern in np.unique(present, axis=1).T:
        alike = np.flatnonzero((present == pattern[:, None]).all(axis=0))
        for run in _runs(starts, ends, pattern):
            curve = _histospline(starts[run], ends[run], columns[run][:, alike])
            inside = np.flatnonzero((wanted >= starts[run[0]]) & (wanted <= ends[run[-1]]))
            result[np.ix_(inside, alike)] = curve(wanted[inside])
    return result if values.ndim == 2 else result[:, 0]


def _runs(starts: Values, ends: Values, present: NDArray[np.bool_]) -> list[NDArray[np.intp]]:
    """Split the intervals that are present where one does not follow the other."""
    kept = np.flatnonzero(present)
    apart = starts[kept[1:]] - ends[kept[:-1]] > 0.1 * (ends[kept[:-1]] - starts[kept[:-1]])
    return [run for run in np.split(kept, np.flatnonzero(apart) + 1) if len(run)]


def _histospline(starts: Values, ends: Values, means: Values):  # type: ignore[no-untyped-def]  # scipy has no types
    edges = np.append(starts, ends[-1])
    integral = np.concatenate([np.zeros((1, means.shape[1])), np.cumsum(means * np.diff(edges)[:, None], axis=0)])
    return make_interp_spline(edges, integral, k=min(SPLINE_DEGREE, len(means))).derivative()
