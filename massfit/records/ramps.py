"""Changes of level that nobody declared and that take days, or happen while the record has a gap."""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray
from scipy.ndimage import median_filter

_LEVEL_DAYS = 3
"""Days whose mean is the level before, and the level after."""
_LEAST_DAYS = 2
"""Of these, days with data."""
_LASTING_DAYS = 7
"""The level rests at least so long before and after: a drift goes on, and a wave comes back."""
_REST_SHARE = 0.35
"""A level rests where it moves by less than this share of the change."""
_BETWEEN_DAYS = (0, 1, 2, 3, 4, 6, 8, 11, 14)
"""Days between the two levels that are tried; lengths of gaps are added."""
_LONGEST_GAP_DAYS = 60
"""Across a longer gap weather and drift are not told from a change of level."""
_THRESHOLD = 8.0
"""Robust standard deviations of the change of level."""
_SMALLEST = 300.0
"""Pa; smaller ramps are never called so."""
_BLOCK_DAYS = 60
"""The scale of restless stretches is taken over so many days to either side."""
_LEAST_CHANGES = 60
"""Changes from which a scale can be told."""
_NEARLY_ALL = 0.9
"""The shortest time that holds this share of the largest change is taken."""
_SPENT = 0.02
"""A ramp begins and ends within this share of its total of the levels, or within the noise of a day."""
_SD_PER_MEDIAN = 1.4826


@dataclass(frozen=True)
class FoundRamps:
    """Ramps of one record.

    Parameters
    ----------
    first, last : (k,) array of int
        First and last day of each change, increasing: these days are on neither level. Where `last`
        is before `first` the level changes at midnight between them.
    sizes : (k,) array
        Total change of level, Pa.
    in_gap : (k,) array of bool
        Whether the record has no day inside: it may have been a step.
    threshold : float
        Smallest change over a day that would have been found, Pa.
    """

    first: NDArray[np.int64]
    last: NDArray[np.int64]
    sizes: NDArray[np.float64]
    in_gap: NDArray[np.bool_]
    threshold: float


class _Change(NamedTuple):
    strength: float
    before: int
    after: int
    size: float


def find_ramps(day: NDArray[np.int64], level: NDArray[np.float64]) -> FoundRamps:
    """Find changes of level that are spread over days, or hidden in a gap.

    The mean of three days is set against that of three later days, with up to two weeks
    (or a gap) between. The change counts where it stands far out of what the record
    does over such times, and where the level rests for a week or the time of the change,
    whichever is longer, before it and after it. An exponential drift is no ramp: it is faster before.

    Parameters
    ----------
    day : (n,) array of int
        Days of the values, increasing, gaps allowed.
    level : (n,) array
        Pa, free of tides and of sharp steps.

    Returns
    -------
    FoundRamps

    Notes
    -----
    The comparison of means of :func:`massfit.records.steps.find_steps` with a time between
    the windows (Basseville & Nikiforov 1993, Detection of Abrupt Changes, chapter 2).

    Examples
    --------
    >>> day = np.arange(200)
    >>> noise = 5.0 * np.random.default_rng(1).standard_normal(200)
    >>> found = find_ramps(day, noise + 5000.0 * np.clip((day - 99) / 5.0, 0, 1))
    >>> found.first.tolist(), found.last.tolist(), found.sizes.round(-1).tolist()
    ([100], [105], [5000.0])
    """
    none = FoundRamps(np.empty(0, np.int64), np.empty(0, np.int64), np.empty(0), np.empty(0, bool), np.inf)
    if day.size < 2 * _LASTING_DAYS:
        return none
    values = np.full(day[-1] - day[0] + 1, np.nan)
    values[day - day[0]] = level
    before, after = _levels(values)
    candidates, thresholds = [], [np.inf]
    for between in _times_between(values):
        changes, threshold = _changes(values, before, after, between)
        candidates += changes
        thresholds.append(threshold)
    noise = _SD_PER_MEDIAN * float(np.nanmedian(np.abs(np.diff(level)))) if day.size > 1 else 0.0
    chosen = [_edges(change, values, noise) for change in _strongest(candidates)]
    chosen.sort()
    if not chosen:
        return FoundRamps(none.first, none.last, none.sizes, none.in_gap, min(thresholds))
    first, last, sizes = (np.array(column) for column in zip(*chosen, strict=True))
    empty = [bool(np.isnan(values[one : other + 1]).all()) for one, other in zip(first, last, strict=True)]
    return FoundRamps(first + day[0], last + day[0], sizes, np.array(empty) & (last >= first), min(thresholds))


def _levels(values: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean of the three days up to each day, and of the three from it; NaN where the day itself has no value."""
    known = np.isfinite(values)
    pad = np.zeros(_LEVEL_DAYS - 1)
    sums, counts = (
        sliding_window_view(np.concatenate([pad, each, pad]), _LEVEL_DAYS).sum(axis=1)
        for each in (np.where(known, values, 0.0), known.astype(float))
    )
    with np.errstate(invalid="ignore", divide="ignore"):
        means = np.where(counts >= _LEAST_DAYS, sums / counts, np.nan)
    return np.where(known, means[: values.size], np.nan), np.where(known, means[_LEVEL_DAYS - 1 :], np.nan)


def _times_between(values: NDArray[np.float64]) -> list[int]:
    edges = np.flatnonzero(np.diff(np.isfinite(values).astype(int), prepend=1, append=1))
    gaps = np.diff(edges)[::2]
    return sorted({*_BETWEEN_DAYS, *gaps[(gaps > _BETWEEN_DAYS[-1]) & (gaps <= _LONGEST_GAP_DAYS)].tolist()})


def _changes(
    values: NDArray[np.float64], before: NDArray[np.float64], after: NDArray[np.float64], between: int
) -> tuple[list[_Change], float]:
    """Find changes over one time that stand out and whose levels rest, and the least one that would."""
    step = between + 1
    if before.size <= step:
        return [], np.inf
    change = np.full(before.size, np.nan)
    change[:-step] = after[step:] - before[:-step]
    known = np.isfinite(change)
    if np.count_nonzero(known) < _LEAST_CHANGES:
        return [], np.inf
    needed = np.maximum(_THRESHOLD * _scale(change, known), _SMALLEST)
    outside = np.flatnonzero(known & (np.abs(change) > needed))
    found = [_Change(abs(change[i]) / needed[i], int(i), int(i + step), float(change[i])) for i in outside]
    return [each for each in found if _rests(each, values, before, after)], float(np.nanmin(needed))


def _scale(change: NDArray[np.float64], known: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Robust scale of four months about each change, never below that of the whole record; NaN where none is known."""
    size = np.abs(change[known])
    local = median_filter(size, size=min(2 * _BLOCK_DAYS + 1, size.size), mode="mirror")
    scale = np.full(change.size, np.nan)
    scale[known] = _SD_PER_MEDIAN * np.maximum(local, np.median(size))
    return scale


def _rests(
    change: _Change, values: NDArray[np.float64], before: NDArray[np.float64], after: NDArray[np.float64]
) -> bool:
    """Whether both levels are what they were, and will be, through a week and at its far end."""
    rest = max(change.after - change.before, _LASTING_DAYS)
    if change.before < rest or change.after + rest >= values.size:
        return False
    early = values[change.before - rest : change.before][::-1] - before[change.before]
    late = values[change.after + 1 : change.after + rest + 1] - after[change.after]
    for moved in (early, late):
        thirds = [part[np.isfinite(part)] for part in np.array_split(moved, 3)]
        far = np.concatenate(thirds[1:])
        if not far.size or any(abs(part.mean()) > _REST_SHARE * abs(change.size) for part in thirds if part.size):
            return False
    return True


def _strongest(candidates: list[_Change]) -> Iterator[_Change]:
    """Of changes that overlap the shortest that holds nearly all of the largest."""
    left = sorted(candidates, reverse=True)
    while left:
        near = [each for each in left if _overlap(each, left[0], 0) and each.size * left[0].size > 0]
        largest = max(abs(each.size) for each in near)
        whole = [each for each in near if abs(each.size) >= _NEARLY_ALL * largest]
        chosen = min(whole, key=lambda each: (each.after - each.before, -abs(each.size)))
        yield chosen
        left = [each for each in left if not _overlap(each, chosen, _LASTING_DAYS) and not _overlap(each, left[0], 0)]


def _overlap(one: _Change, other: _Change, margin: int) -> bool:
    return one.before <= other.after + margin and other.before <= one.after + margin


def _edges(change: _Change, values: NDArray[np.float64], noise: float) -> tuple[int, int, float]:
    """First and last day on neither level, and the total change."""
    window = slice(max(0, change.before - _LEVEL_DAYS + 1), change.after + _LEVEL_DAYS)
    shown = values[window]
    early = float(np.nanmean(shown[:_LEVEL_DAYS]))
    late = early + change.size
    near = min(max(_SPENT * abs(change.size), 2.0 * noise), 0.25 * abs(change.size))
    left = np.flatnonzero(np.abs(shown - early) > near)
    arrived = np.flatnonzero(np.abs(shown - late) > near)
    first, last = window.start + int(left[0]), window.start + int(arrived[-1])
    known = np.flatnonzero(np.isfinite(values))
    # days without a value between the two levels belong to the change
    first, last = known[known < first][-1] + 1, known[known > last][0] - 1
    level_before, level_after = known[known < first][-_LEVEL_DAYS:], known[known > last][:_LEVEL_DAYS]
    return int(first), int(last), float(values[level_after].mean() - values[level_before].mean())
