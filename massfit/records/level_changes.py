"""All changes of level of a record: those the analyst declared, sharp steps, ramps, and changes across a gap."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from massfit.records.hourly import days_from_epoch, instants
from massfit.records.ramps import find_ramps
from massfit.records.record import Action, LevelChange, Record
from massfit.records.steps import find_steps

_SIDE = 12
"""Samples on either side of a change whose means give its size."""
_LEAST_OF_A_DAY = 0.5
"""Share of its usual samples from which a day has a level."""


def declared_changes(record: Record) -> tuple[LevelChange, ...]:
    """List the changes of level that the analyst declared, in order of time.

    Parameters
    ----------
    record : Record

    Returns
    -------
    tuple of LevelChange
    """
    steps = [LevelChange(step, step, found=False) for step in record.steps]
    ramps = [LevelChange(start, end, found=False) for start, end in record.ramps]
    return in_order([*steps, *ramps])


def in_order(changes: Sequence[LevelChange]) -> tuple[LevelChange, ...]:
    """Sort changes by their start."""
    return tuple(sorted(changes, key=lambda change: (change.start.astype("datetime64[ns]"), change.found)))


def level_breaks(changes: Sequence[LevelChange]) -> NDArray[np.float64]:
    """List the times at which a new level begins, days from 1 January 2000, increasing: (k,)."""
    return np.sort(days_from_epoch(np.array([change.end for change in changes], dtype="datetime64[ns]")))


def between_levels(days: NDArray[np.float64], changes: Sequence[LevelChange]) -> NDArray[np.bool_]:
    """Mark the samples that lie on a ramp.

    Parameters
    ----------
    days : (n,) array
        Days from 1 January 2000.
    changes : sequence of LevelChange

    Returns
    -------
    (n,) array of bool
    """
    inside = np.zeros(days.size, dtype=bool)
    for change in changes:
        if change.start < change.end:
            inside |= (days >= days_from_epoch(change.start)) & (days < days_from_epoch(change.end))
    return inside


def find_level_changes(
    days: NDArray[np.float64], level: NDArray[np.float64], declared: Sequence[LevelChange], *, coarse: bool
) -> tuple[tuple[LevelChange, ...], Action]:
    """Find steps, ramps and changes across gaps.

    Parameters
    ----------
    days : (n,) array
        Days from 1 January 2000, increasing.
    level : (n,) array
        Pa, free of short tides and spikes.
    declared : sequence of LevelChange
        These are not found again.
    coarse : bool
        Whether the samples are days or nearly so. Then ramps are looked for first, since a ramp over two of them
        is sharp by their measure; with hours the steps are.

    Returns
    -------
    changes : tuple of LevelChange
        What was found.
    action : Action
        The same in words, with the least sizes that would have been found; its count may be 0.
    """
    if coarse:
        ramps, least_ramp = _ramps(days, level, level_breaks(declared))
        kept = ~between_levels(days, ramps)
        steps, least_step = _steps(days[kept], level[kept], level_breaks([*declared, *ramps]))
    else:
        steps, least_step = _steps(days, level, level_breaks(declared))
        ramps, least_ramp = _ramps(days, level, level_breaks([*declared, *steps]))
    found = in_order([*steps, *ramps])
    detail = (
        f"{'; '.join(_words(change) for change in found)}; found where sharp and above {least_step / 100.0:.1f} hPa, "
        f"or within days, lasting, and above {least_ramp / 100.0:.1f} hPa; a step is fitted across each"
    )
    return found, Action("changes of level found", len(found), detail)


def flattened(
    days: NDArray[np.float64], level: NDArray[np.float64], breaks: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Take known changes out, each by the means of half a day of hours on either side.

    Parameters
    ----------
    days, level : (n,) array
    breaks : (k,) array
        Days, increasing.

    Returns
    -------
    (n,) array
    """
    out = level.copy()
    for place in np.searchsorted(days, breaks):
        if 0 < place < days.size:
            out[place:] -= out[place : place + _SIDE].mean() - out[max(0, place - _SIDE) : place].mean()
    return out


def _steps(
    days: NDArray[np.float64], level: NDArray[np.float64], known: NDArray[np.float64]
) -> tuple[list[LevelChange], float]:
    found = find_steps(days, level, known=known)
    times = instants(found.days)
    changes = [
        LevelChange(time, time, found=True, size=float(size)) for time, size in zip(times, found.sizes, strict=True)
    ]
    return changes, found.threshold


def _ramps(
    days: NDArray[np.float64], level: NDArray[np.float64], known: NDArray[np.float64]
) -> tuple[list[LevelChange], float]:
    day, place, counts = np.unique(np.floor(days).astype(np.int64), return_inverse=True, return_counts=True)
    means = np.bincount(place, flattened(days, level, known)) / counts
    enough = counts >= _LEAST_OF_A_DAY * np.median(counts) if counts.size else counts > 0
    found = find_ramps(day[enough], means[enough])
    changes = []
    for first, last, size, in_gap in zip(found.first, found.last, found.sizes, found.in_gap, strict=True):
        start, end = instants(np.array([first, max(last + 1, first)], dtype=float))
        changes.append(LevelChange(start, end, found=True, size=float(size), in_gap=bool(in_gap)))
    return changes, found.threshold


def _words(change: LevelChange) -> str:
    size = "" if change.size is None else f" {change.size / 100.0:+.1f} hPa"
    start = np.datetime_as_string(change.start, unit="m")
    if change.start == change.end:
        return f"{change.kind} {start}{size}"
    return f"{change.kind} {start} to {np.datetime_as_string(change.end, unit='m')}{size}"
