"""From a record as read to daily means free of short tides."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from massfit.records import disturbed as disturbed_rule
from massfit.records import gain as gain_rule
from massfit.records import settling as settling_rule
from massfit.records import stuck as stuck_rule
from massfit.records.clean import find_spikes, usable_samples
from massfit.records.disturbed import find_disturbed
from massfit.records.gain import find_gain_change
from massfit.records.hourly import HOUR_NS, Hourly, days_from_epoch, hourly_means, instants
from massfit.records.interval import usual_interval_ns
from massfit.records.level_changes import (
    between_levels,
    declared_changes,
    find_level_changes,
    flattened,
    in_order,
    level_breaks,
)
from massfit.records.means import daily_means
from massfit.records.record import Action, Calibrations, DailyRecord, LevelChange, Record, Settling, TidalConstant
from massfit.records.settling import settled_after
from massfit.records.stuck import find_stuck
from massfit.records.tides import TideFit, fit_short_tides
from massfit.site import Interval

_DAILY_ABOVE_HOURS = 6.0
"""Coarser sampling cannot show a tide: such records pass as they are."""
_DIRECT_BELOW_HOURS = 0.5
"""Below this sampling a tide is a straight line over five samples, spikes show against the raw pressure, and an hour
that stands apart holds an event that many samples saw."""
_SAME_DAYS = 10.0
"""A change of level so near a change of gain is the same event."""
_DAY = np.timedelta64(1, "D")
_ACROSS = "one step is fitted across each, whatever its shape"

GAIN_CHANGE = "change of gain found"
"""What is said of a record whose tide becomes larger or smaller one day."""

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
    unchanged: long-period lines are never fitted. Values that repeat, spikes and disturbed hours
    are left out. Where `record.find_steps` says so changes of level are looked for: steps are
    added to the steps; the days of a ramp are left out and one step is fitted across them. All is listed.

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
    first = _first_instant(record)
    stuck = find_stuck(time, pressure)
    settling = _settling_samples(time, first, record.settling)
    if (stuck | settling).any():
        time, pressure = time[~(stuck | settling)], pressure[~(stuck | settling)]
    declared = declared_changes(record)
    reduce = _as_it_is if _spacing_hours(time) >= _DAILY_ABOVE_HOURS else _averaged
    reduced = reduce(time, pressure, declared, tides, record.find_steps)
    settled = _settled(reduced, first, record.settling)
    before = [
        _counted("samples that repeat one value left out", stuck, stuck_rule.RULE),
        _counted("samples of the first days left out", settling, f"settling = {record.settling}"),
    ]
    after = [Action("days of settling left out", settled, settling_rule.RULE), _gap_action(reduced.time[settled:])]
    calibrations = _since(record.calibrations, first)
    early = len(record.calibrations.time) - len(calibrations.time) if record.calibrations and calibrations else 0
    after.append(Action("calibrations before the record left out", early, "the drift begins with the record"))
    said = [action for action in (*before, *reduced.actions, *after) if action.count]
    return DailyRecord(
        site=record.site,
        deployment=record.deployment,
        time=reduced.time[settled:],
        pressure=reduced.pressure[settled:],
        start=first,
        drift=record.drift,
        steps=tuple(np.sort([change.end for change in reduced.changes])) if reduced.changes else (),
        tides=reduced.tides,
        actions=(*record.actions, *actions, *said),
        changes=reduced.changes,
        calibrations=calibrations,
    )


@dataclass(frozen=True)
class _Reduced:
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    changes: tuple[LevelChange, ...]
    tides: tuple[TidalConstant, ...]
    actions: list[Action]


def _first_instant(record: Record) -> np.datetime64:
    """First sample of the deployment, used or not: the origin of its drift."""
    valid = np.isfinite(record.pressure) & ~np.isnat(record.time)
    times = (record.time if valid.all() else record.time[valid]).astype("datetime64[ns]", copy=False)
    return np.datetime64(times.min()) if times.size else np.datetime64("NaT", "ns")


def _spacing_hours(time: NDArray[np.datetime64]) -> float:
    return usual_interval_ns(time) / HOUR_NS if time.size > 1 else np.inf


def _settling_samples(time: NDArray[np.datetime64], start: np.datetime64, settling: Settling) -> NDArray[np.bool_]:
    """Mark the samples of the first days, where the analyst said how many."""
    if isinstance(settling, str):
        return np.zeros(time.size, dtype=bool)
    return np.asarray(days_from_epoch(time) < days_from_epoch(start) + settling)


def _settled(reduced: _Reduced, start: np.datetime64, settling: Settling) -> int:
    """Daily means to be left out before the recorder has come to rest, where the analyst asked for that."""
    if settling != "trim" or not reduced.time.size:
        return 0
    days = days_from_epoch(reduced.time)
    level = flattened(days, reduced.pressure, level_breaks(reduced.changes))
    return settled_after(np.floor(days).astype(np.int64), level, float(days_from_epoch(start)))


def _since(calibrations: Calibrations | None, start: np.datetime64) -> Calibrations | None:
    if calibrations is None:
        return None
    kept = calibrations.time >= start
    return Calibrations(calibrations.time[kept], calibrations.pressure[kept], calibrations.sd[kept])


def _gap_action(time: NDArray[np.datetime64]) -> Action:
    step = np.diff(time.astype("datetime64[D]")).astype(int)
    if not step.size or step.max() < 2 or np.median(step) > 1:
        return Action("days without a mean", 0)
    longest = int(np.argmax(step))
    first, last = (str(day)[:10] for day in (time[longest] + _DAY, time[longest + 1] - _DAY))
    detail = f"gaps: {np.count_nonzero(step > 1)}, the longest from {first} to {last}"
    return Action("days without a mean", int((step - 1).sum()), detail)


def _as_it_is(
    time: NDArray[np.datetime64],
    pressure: NDArray[np.float64],
    declared: tuple[LevelChange, ...],
    tides: str,
    search: bool,
) -> _Reduced:
    """Take samples that are too coarse to show tides as they are."""
    spikes = find_spikes(pressure)
    actions = [_spike_action(spikes, "sample")]
    time, pressure = time[~spikes], pressure[~spikes]
    if tides == "remove" and time.size:
        detail = "too coarse to show them; plain daily means hold 0.27 % of K1 and P1, which look annual"
        actions.append(Action(TIDES_LEFT, time.size, detail))
    changes = declared
    if search:
        found, action = find_level_changes(days_from_epoch(time), pressure, declared, coarse=True)
        changes = in_order([*declared, *found])
        actions.append(action)
    inside = between_levels(days_from_epoch(time), changes)
    actions.append(_counted("samples on ramps left out", inside, _ACROSS))
    return _Reduced(time[~inside], pressure[~inside], changes, (), actions)


def _averaged(
    time: NDArray[np.datetime64],
    pressure: NDArray[np.float64],
    declared: tuple[LevelChange, ...],
    tides: str,
    search: bool,
) -> _Reduced:
    """Remove the tides from hourly means and average these."""
    actions = []
    spacing = _spacing_hours(time)
    if spacing < _DIRECT_BELOW_HOURS:
        spikes = find_spikes(pressure)
        if spikes.any():
            time, pressure = time[~spikes], pressure[~spikes]
        actions.append(_spike_action(spikes, "sample"))
    hours = hourly_means(time, pressure)
    inside = between_levels(hours.days, declared)
    hours, on_ramps, changes = hours.without(inside), np.count_nonzero(inside), declared
    fit = _short_tides(hours, changes, tides)
    tide_free = hours.pressure - fit.tide
    if search:
        sound = ~fit.spikes
        found, action = find_level_changes(hours.days[sound], tide_free[sound], declared, coarse=False)
        actions.append(action)
        changes = in_order([*declared, *found])
    seams: tuple[float, ...] = ()
    if search and (gain := find_gain_change(hours.days[~fit.spikes], hours.pressure[~fit.spikes], fit.constants)):
        changes, seams, action = _with_gain_change(changes, *gain)
        actions.append(action)
    left_out = between_levels(hours.days, changes)
    disturbed = np.zeros(left_out.size, dtype=bool)
    quiet = flattened(hours.days[~left_out], tide_free[~left_out], level_breaks(changes))
    disturbed[~left_out] = find_disturbed(quiet)
    if spacing >= _DIRECT_BELOW_HOURS:
        disturbed &= ~fit.spikes
    if left_out.any() or disturbed.any() or len(changes) > len(declared):
        hours = hours.without(left_out | disturbed)
        fit = _short_tides(hours, changes, tides, seams)
    actions += [
        *_tide_actions(fit),
        Action("hours on ramps left out", int(on_ramps + np.count_nonzero(left_out)), _ACROSS),
        _counted("disturbed hours left out", disturbed, disturbed_rule.RULE),
    ]
    hours = Hourly(hours.hour, hours.days, hours.spread, hours.pressure - fit.tide)
    if spacing >= _DIRECT_BELOW_HOURS:
        hours = hours.without(fit.spikes)
        actions.append(_spike_action(fit.spikes, "hour"))
    days = daily_means(hours, level_breaks(changes))
    actions.append(Action("days left out", days.left_out, "less than three quarters of the day on one level"))
    return _Reduced(instants(days.day + 0.5), days.pressure, changes, fit.constants, actions)


def _with_gain_change(
    changes: tuple[LevelChange, ...], day: float, ratio: float
) -> tuple[tuple[LevelChange, ...], tuple[float, ...], Action]:
    """Begin a new level where the gain changes, unless one begins there anyway, and a new segment of the tides."""
    near = [change for change in changes if abs(float(days_from_epoch(change.end)) - day) <= _SAME_DAYS]
    if near:
        day = float(days_from_epoch(near[0].end))
    else:
        (instant,) = instants(np.array([day]))
        changes = in_order([*changes, LevelChange(instant, instant, found=True)])
    (time,) = np.datetime_as_string(instants(np.array([day])), unit="h")
    action = Action(GAIN_CHANGE, 1, f"{time}: the tide is {ratio:.3f} times what it was before; {gain_rule.RULE}")
    return changes, (day,), action


def _counted(what: str, which: NDArray[np.bool_], detail: str) -> Action:
    return Action(what, int(np.count_nonzero(which)), detail)


def _spike_action(spikes: NDArray[np.bool_], what: str) -> Action:
    detail = f"single or paired {what}s more than 8 robust standard deviations from the median of five"
    return _counted(f"{what} spikes rejected", spikes, detail)


def _short_tides(hours: Hourly, changes: tuple[LevelChange, ...], tides: str, seams: tuple[float, ...] = ()) -> TideFit:
    if tides == "remove":
        breaks = level_breaks(changes)
        return fit_short_tides(hours.days, hours.pressure, spread=hours.spread, breaks=breaks, seams=seams)
    return TideFit(np.zeros(hours.days.size), find_spikes(hours.pressure), (), (), 0)


def _tide_actions(fit: TideFit) -> list[Action]:
    if not fit.segments:
        return []
    detail = f"{len(fit.constants)} lines, no long-period ones, in segments: {fit.segments}"
    merged = (
        f"too short to part {', '.join(fit.merged)}; the largest of them are held to their neighbours in the ratio "
        "of the equilibrium tide, and daily means suppress what is left"
    )
    return [
        Action("short tides removed", fit.tide.size, detail),
        Action("tidal lines merged with larger neighbours", len(fit.merged), merged),
    ]
