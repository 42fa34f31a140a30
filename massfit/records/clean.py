"""Samples that are not used, and why: gaps, repeats, excluded stretches, spikes."""

from collections.abc import Sequence
from datetime import date

import numpy as np
from numpy.typing import NDArray

from massfit.records.record import Action
from massfit.records.stretches import stretches
from massfit.site import Interval

_WINDOW = 5
"""Samples of the running median: at most two neighbours can be called a spike."""
_BLOCK = 96
"""Samples over which the running scale is taken: a day of 15-minute samples."""
_ENOUGH = 500_000
"""Samples from which the scale of a whole record is known to a few thousandths."""
_THRESHOLD = 8.0
"""Robust standard deviations; a normal error passes it once in 1e15."""
_SHARE = 0.01
"""At most this share of the samples is called spikes; beyond, they are the noise of the record."""
_SMALLEST_SCALE = 1.0
"""Pa; smaller differences are below the resolution of the instruments."""
_SD_PER_MEDIAN = 1.4826
"""Standard deviation of a normal error per median of its magnitude."""


def usable_samples(
    time: NDArray[np.datetime64],
    pressure: NDArray[np.float64],
    *,
    exclude: Sequence[Interval] = (),
    start: date | None = None,
    end: date | None = None,
) -> tuple[NDArray[np.datetime64], NDArray[np.float64], tuple[Action, ...]]:
    """Put samples in order of time, without gaps, repeats and what the analyst left out.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC, any order.
    pressure : (n,) array
        Pa; NaN is missing.
    exclude : sequence of Interval
        Both ends are left out too.
    start, end : datetime.date, optional
        First and last day used, inclusive.

    Returns
    -------
    time : (m,) array of datetime64[ns]
        Strictly increasing.
    pressure : (m,) array
        Pa; the mean where a stamp is repeated.
    actions : tuple of Action
        What was left out, and how many samples each time.

    Examples
    --------
    >>> time = np.array(["2016-01-02", "2016-01-01", "2016-01-01"], dtype="datetime64[ns]")
    >>> _, pressure, actions = usable_samples(time, np.array([3.0, 1.0, 2.0]))
    >>> pressure.tolist(), [action.what for action in actions]
    ([1.5, 3.0], ['samples put in order of time', 'repeated stamps averaged'])
    """
    time = time.astype("datetime64[ns]", copy=False)
    valid = np.isfinite(pressure) & ~np.isnat(time)
    actions = [Action("samples without a value left out", int(np.count_nonzero(~valid)))]
    for what, inside, detail in _choices(time, exclude, start, end):
        actions.append(Action(what, int(np.count_nonzero(valid & ~inside)), detail))
        valid &= inside
    if not valid.all():
        time, pressure = time[valid], pressure[valid]
    disorder = int(np.count_nonzero(time[1:] < time[:-1]))
    if disorder:
        order = np.argsort(time, kind="stable")
        time, pressure = time[order], pressure[order]
    actions.append(Action("samples put in order of time", disorder))
    time, pressure, repeats = _without_repeats(time, pressure)
    return time, pressure, tuple(action for action in (*actions, *repeats) if action.count)


def _without_repeats(
    time: NDArray[np.datetime64], pressure: NDArray[np.float64]
) -> tuple[NDArray[np.datetime64], NDArray[np.float64], tuple[Action, ...]]:
    """Leave one sample of each stamp: the one that is repeated, or the mean of those that differ."""
    new = time[1:] != time[:-1]
    if new.all():
        return time, pressure, ()
    first = np.flatnonzero(np.insert(new, 0, True))
    counts = np.diff(first, append=time.size)
    low, high = np.minimum.reduceat(pressure, first), np.maximum.reduceat(pressure, first)
    alike = (counts > 1) & (low == high)
    differ = (counts > 1) & ~alike
    apart = float((high - low)[differ].max(initial=0.0)) / 100.0
    mean = np.where(differ, np.add.reduceat(pressure, first) / counts, low)
    repeats = (
        Action("repeated samples left out", int((counts - 1)[alike].sum()), "the same stamp and the same value"),
        Action(
            "repeated stamps averaged",
            int((counts - 1)[differ].sum()),
            f"the same stamp and other values, up to {apart:.3g} hPa apart",
        ),
    )
    return time[first], mean, repeats


def _choices(
    time: NDArray[np.datetime64], exclude: Sequence[Interval], start: date | None, end: date | None
) -> list[tuple[str, NDArray[np.bool_], str]]:
    """Name, samples inside and reason of each choice of the analyst."""
    choices = []
    if start is not None or end is not None:
        inside = np.ones(time.size, dtype=bool)
        if start is not None:
            inside &= time >= np.datetime64(start)
        if end is not None:
            inside &= time < np.datetime64(end) + np.timedelta64(1, "D")
        choices.append(("samples outside the period left out", inside, f"{start or 'start'} to {end or 'end'}"))
    for interval in exclude:
        outside = (time < interval.start) | (time > interval.end)
        first, last = (np.datetime_as_string(instant, unit="s") for instant in (interval.start, interval.end))
        detail = f"{first} to {last}: {interval.reason}"
        choices.append(("samples in an excluded interval left out", outside, detail))
    return choices


def find_spikes(values: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Find one or two samples that stand apart from their neighbours.

    Each value is set against the median of the five around it, in units of the
    running median of such differences. A step, a wave that three samples follow
    and a stretch of bad data are no spikes: the median goes along with them.

    Parameters
    ----------
    values : (n,) array
        Pa, in order of time, free of tides where the sampling is coarse.

    Returns
    -------
    (n,) array of bool
        True at spikes; at most one sample in a hundred (and one at least).

    References
    ----------
    Davies, L. & Gather, U. (1993), J. Am. Stat. Assoc. 88, 782-792.

    Examples
    --------
    >>> np.flatnonzero(find_spikes(np.array([0.0, 1, 0, 1, 90, 0, 1, 0, 1]))).tolist()
    [4]
    """
    if values.size < _WINDOW:
        return np.zeros(values.size, dtype=bool)
    apart = _from_median_of_five(values)
    spikes = np.zeros(values.size, dtype=bool)
    # the scale of a block is never below that of the whole, so that few samples need to know their block's
    least = max(_SD_PER_MEDIAN * _whole_scale(apart), _SMALLEST_SCALE)
    place = np.flatnonzero(apart > (1.0 - 1e-9) * _THRESHOLD * least)
    ratio = apart[place] / np.maximum(running_scale(apart, place), _SMALLEST_SCALE)
    found = ratio > _THRESHOLD
    most = max(1, int(_SHARE * values.size))
    if np.count_nonzero(found) > most:
        found &= ratio > np.partition(ratio[found], -most - 1)[-most - 1]
    spikes[place[found]] = True
    return spikes


def _from_median_of_five(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Distance of each of five values or more from the median of the five around it, mirrored at the ends."""
    apart = np.empty(values.size)
    mirrored = np.concatenate([values[2:0:-1], values, values[-2:-4:-1]])
    for part in stretches(values.size):
        one, two, here, four, five = (mirrored[part.start + shift : part.stop + shift] for shift in range(_WINDOW))
        # the least of the lower and the greatest of the upper values of two pairs are not the median: three are left
        low = np.maximum(np.minimum(one, two), np.minimum(four, five))
        high = np.minimum(np.maximum(one, two), np.maximum(four, five))
        middle = np.maximum(np.minimum(low, high), np.minimum(np.maximum(low, high), here))
        np.abs(here - middle, out=apart[part])
    return apart


def running_scale(apart: NDArray[np.float64], at: NDArray[np.int64] | None = None) -> NDArray[np.float64]:
    """Robust scale of each block of 96 samples, never below that of the whole record.

    Parameters
    ----------
    apart : (n,) array
        Magnitudes of deviations, zeros of coarse counting among them.
    at : (m,) array of int, optional
        Samples whose scale is wanted; all by default.

    Returns
    -------
    (m,) array
        Standard deviation of normal deviations of the same median.
    """
    blocks = max(1, apart.size // _BLOCK)
    own = np.minimum((np.arange(apart.size) if at is None else at) // _BLOCK, blocks - 1)
    wanted, place = np.unique(own, return_inverse=True)
    local = _median_above_zero(apart[: blocks * _BLOCK].reshape(blocks, -1)[wanted])
    return np.asarray(_SD_PER_MEDIAN * np.maximum(local, _whole_scale(apart))[place])


def _whole_scale(apart: NDArray[np.float64]) -> float:
    return float(_median_above_zero(apart[None, :: max(1, apart.size // _ENOUGH)])[0])


def _median_above_zero(apart: NDArray[np.float64]) -> NDArray[np.float64]:
    """Median of each row without its zeros: coarse counting steps make many of them."""
    ordered = np.sort(apart, axis=1)
    zeros = np.count_nonzero(ordered == 0.0, axis=1)
    middle = np.minimum(zeros + (apart.shape[1] - zeros) // 2, apart.shape[1] - 1)
    return np.asarray(ordered[np.arange(apart.shape[0]), middle])
