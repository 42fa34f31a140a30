"""From a record as read to daily means free of short tides."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from massfit.records.clean import find_spikes, usable_samples
from massfit.records.hourly import HOUR_NS, Hourly, days_from_epoch, hourly_means, instants
from massfit.records.record import Action, DailyRecord, Record, TidalConstant
from massfit.records.steps import NO_STEPS, FoundSteps, find_steps
from massfit.records.tides import TideFit, fit_short_tides
from massfit.site import Interval

_DAILY_ABOVE_HOURS = 6.0
"""Coarser sampling cannot show a tide: such records pass as they are."""
_LEAST_SHARE = 0.75
"""Of the hours of a day: 18 of 24."""
_DIRECT_BELOW_HOURS = 0.5
"""Below this sampling a tide is a straight line over five samples, spikes show against the raw pressure, and an hour
that stands apart holds an event that many samples saw."""

TIDES_LEFT = "short tides not removed"
"""What is said of a record that is too coarse for its tides to be removed although that was asked for."""


def reduce_to_daily(
    record: Record,
    *,
    exclude: Sequence[Interval] = (),
    start: date | None = None,
    end: date | None = None,
    tides: Literal["remove", "already-removed"] = "remove",
) -> DailyRecord:
    """Reduce a record to daily means with the short tides removed before averaging.

    A plain mean over 24 h leaves 0.27 % of K1 and P1, and both alias to one year.
    Each hour counts once, a day needs three quarters of its hours, and a mean whose
    hours are not symmetric about noon is brought to noon along the slope of the
    neighbouring days. Drift, weather, and the annual and the semi-annual cycle pass
    unchanged: long-period lines are never fitted. Where `record.find_steps` says so
    sharp changes of level are looked for in the tide-free hours and added to the steps.

    Parameters
    ----------
    record : Record
    exclude : sequence of Interval
        Stretches not used.
    start, end : datetime.date, optional
        First and last day used, inclusive.
    tides : str
        "remove", or "already-removed".

    Returns
    -------
    DailyRecord
        Of zero length where nothing is left; its actions say why.

    Examples
    --------
    >>> time = np.datetime64("2016-01-01", "ns") + np.arange(24 * 90) * np.timedelta64(1, "h")
    >>> daily = reduce_to_daily(Record("A", "A/1", time, np.arange(24 * 90.0)))
    >>> daily.time.size, str(daily.time[0])[:13]
    (90, '2016-01-01T12')
    """
    time, pressure, actions = usable_samples(record.time, record.pressure, exclude=exclude, start=start, end=end)
    declared = np.sort(days_from_epoch(np.asarray(record.steps, dtype="datetime64[ns]")))
    if _spacing_hours(time) >= _DAILY_ABOVE_HOURS:
        reduced = _as_it_is(time, pressure, declared, tides, record.find_steps)
    else:
        reduced = _averaged(time, pressure, declared, tides, record.find_steps)
    found = reduced.steps.sizes.size
    return DailyRecord(
        site=record.site,
        deployment=record.deployment,
        time=reduced.time,
        pressure=reduced.pressure,
        start=_first_instant(record),
        drift=record.drift,
        steps=tuple(np.sort([*record.steps, *instants(reduced.steps.days)])) if found else record.steps,
        tides=reduced.tides,
        actions=(*record.actions, *actions, *(action for action in reduced.actions if action.count)),
    )


@dataclass(frozen=True)
class _Reduced:
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    steps: FoundSteps
    tides: tuple[TidalConstant, ...]
    actions: list[Action]


def _first_instant(record: Record) -> np.datetime64:
    """First sample of the deployment, used or not: the origin of its drift."""
    instants = record.time[np.isfinite(record.pressure) & ~np.isnat(record.time)].astype("datetime64[ns]")
    return np.datetime64(instants.min()) if instants.size else np.datetime64("NaT", "ns")


def _spacing_hours(time: NDArray[np.datetime64]) -> float:
    return float(np.median(np.diff(time)) / np.timedelta64(HOUR_NS, "ns")) if time.size > 1 else np.inf


def _as_it_is(
    time: NDArray[np.datetime64], pressure: NDArray[np.float64], declared: NDArray[np.float64], tides: str, search: bool
) -> _Reduced:
    spikes = find_spikes(pressure)
    actions = [_spike_action(spikes, "sample")]
    time, pressure = time[~spikes], pressure[~spikes]
    if tides == "remove" and time.size:
        detail = "too coarse to show them; plain daily means hold 0.27 % of K1 and P1, which look annual"
        actions.append(Action(TIDES_LEFT, time.size, detail))
    steps = find_steps(days_from_epoch(time), pressure, known=declared) if search else NO_STEPS
    return _Reduced(time, pressure, steps, (), [*actions, _step_action(steps)])


def _step_action(steps: FoundSteps) -> Action:
    each = (
        f"{time} {size / 100.0:+.1f} hPa"
        for time, size in zip(instants(steps.days).astype("datetime64[m]"), steps.sizes, strict=True)
    )
    detail = f"{', '.join(each)}; found where sharp and above {steps.threshold / 100.0:.1f} hPa"
    return Action("steps found", steps.sizes.size, detail)


def _spike_action(spikes: NDArray[np.bool_], what: str) -> Action:
    detail = f"single or paired {what}s more than 8 robust standard deviations from the median of five"
    return Action(f"{what} spikes rejected", int(np.count_nonzero(spikes)), detail)


def _averaged(
    time: NDArray[np.datetime64], pressure: NDArray[np.float64], declared: NDArray[np.float64], tides: str, search: bool
) -> _Reduced:
    actions = []
    spacing = _spacing_hours(time)
    if spacing < _DIRECT_BELOW_HOURS:
        spikes = find_spikes(pressure)
        time, pressure = time[~spikes], pressure[~spikes]
        actions.append(_spike_action(spikes, "sample"))
    hours = hourly_means(time, pressure)
    breaks, steps = declared, NO_STEPS
    fit = _short_tides(hours, breaks, tides)
    if search:
        tide_free = (hours.pressure - fit.tide)[~fit.spikes]
        steps = find_steps(hours.days[~fit.spikes], tide_free, known=declared)
        breaks = np.sort(np.concatenate([declared, steps.days]))
        actions.append(_step_action(steps))
    if steps.days.size:
        fit = _short_tides(hours, breaks, tides)
    actions += _tide_actions(fit)
    hours = Hourly(hours.hour, hours.days, hours.spread, hours.pressure - fit.tide)
    if spacing >= _DIRECT_BELOW_HOURS:
        hours = hours.without(fit.spikes)
        actions.append(_spike_action(fit.spikes, "hour"))
    day, mean, sparse = _daily_means(hours, breaks, max(spacing, 1.0))
    actions.append(Action("days left out", sparse, "less than three quarters of the hours on one level"))
    return _Reduced(instants(day + 0.5), mean, steps, fit.constants, actions)


def _short_tides(hours: Hourly, breaks: NDArray[np.float64], tides: str) -> TideFit:
    if tides == "remove":
        return fit_short_tides(hours.days, hours.pressure, spread=hours.spread, breaks=breaks)
    return TideFit(np.zeros(hours.days.size), find_spikes(hours.pressure), (), (), 0)


def _tide_actions(fit: TideFit) -> list[Action]:
    if not fit.segments:
        return []
    detail = f"{len(fit.constants)} lines, no long-period ones, in segments: {fit.segments}"
    merged = f"too short to part {', '.join(fit.merged)}; daily means suppress what is left"
    return [
        Action("short tides removed", fit.tide.size, detail),
        Action("tidal lines merged with larger neighbours", len(fit.merged), merged),
    ]


def _daily_means(
    hours: Hourly, breaks: NDArray[np.float64], spacing: float
) -> tuple[NDArray[np.int64], NDArray[np.float64], int]:
    """Days, their means brought to noon, and how many days were left out.

    A day that holds a step is split there and the longer part may stand for it.
    """
    day = hours.hour // 24
    level = np.searchsorted(breaks, hours.days, side="right")
    changed = (np.diff(day, prepend=day[:1] - 1) != 0) | (np.diff(level, prepend=level[:1]) != 0)
    first = np.flatnonzero(changed)
    counts = np.diff(first, append=day.size)
    enough = counts * spacing >= _LEAST_SHARE * 24
    mean = (np.add.reduceat(hours.pressure, first) / counts)[enough]
    middle = (np.add.reduceat(hours.days, first) / counts)[enough]
    day, level = day[first][enough], level[first][enough]
    sparse = np.unique(hours.hour // 24).size - day.size
    return day, mean + _slopes(middle, mean, level) * (day + 0.5 - middle), sparse


def _slopes(days: NDArray[np.float64], values: NDArray[np.float64], level: NDArray[np.int64]) -> NDArray[np.float64]:
    """Slope at each day along its neighbours on the same level; zero for a day alone."""
    slopes = np.zeros(days.size)
    for one in np.unique(level):
        here = np.flatnonzero(level == one)
        if here.size > 1:
            slopes[here] = np.gradient(values[here], days[here])
    return slopes
