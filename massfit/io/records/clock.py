"""The recorder's clock: zone, offset and drift are taken off, and what the stamps betray of it is said."""

import numpy as np
from numpy.typing import NDArray

from massfit.io.records.deployment import DeploymentFile
from massfit.records.interval import usual_interval_ns
from massfit.records.record import Action

SET_BACK = "the clock goes back"
"""What is said of a record whose stamps go back by whole hours, as daylight saving time does."""
LEAP_SECONDS = tuple(
    np.datetime64(day, "ns")
    for day in (
        "1972-07-01", "1973-01-01", "1974-01-01", "1975-01-01", "1976-01-01", "1977-01-01", "1978-01-01", "1979-01-01",
        "1980-01-01", "1981-07-01", "1982-07-01", "1983-07-01", "1985-07-01", "1988-01-01", "1990-01-01", "1991-01-01",
        "1992-07-01", "1993-07-01", "1994-07-01", "1996-01-01", "1997-07-01", "1999-01-01", "2006-01-01", "2009-01-01",
        "2012-07-01", "2015-07-01", "2017-01-01",
    )
)  # fmt: skip
"""First instants after a leap second (IERS Bulletin C)."""
_SECOND_NS = 1_000_000_000
_HOUR_NS = 3600 * _SECOND_NS
_MOST_HOURS = 14  # beyond, it is no time zone
_MOST_TIMES = 60  # one turn of the clock a year, for longer than any record lasts
_BESIDE = 50  # samples on either side of a leap second
_STEADY_NS = 50_000_000


def corrected_clock(
    time: NDArray[np.datetime64], entry: DeploymentFile
) -> tuple[NDArray[np.datetime64], tuple[Action, ...]]:
    """Turn stamps of a recorder's clock into UTC.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        Any order.
    entry : DeploymentFile
        Its `utc_offset_hours`, `clock_offset_s` and `clock_offset_end_s`.

    Returns
    -------
    time : (n,) array of datetime64[ns]
    actions : tuple of Action

    Examples
    --------
    A clock that was right when it was set and 60 s fast when it was recovered:

    >>> days = np.datetime64("2016-01-01", "ns") + np.array([0, 5, 10]) * np.timedelta64(1, "D")
    >>> corrected, _ = corrected_clock(days, DeploymentFile("a.nc", clock_offset_end_s=60.0))
    >>> (days - corrected).astype("timedelta64[s]").tolist()
    [datetime.timedelta(0), datetime.timedelta(seconds=30), datetime.timedelta(seconds=60)]
    """
    actions: list[Action] = []
    if entry.utc_offset_hours:
        time = time - np.timedelta64(round(entry.utc_offset_hours * _HOUR_NS), "ns")
        actions.append(Action("times brought to UTC", time.size, f"the zone is {entry.utc_offset_hours:+g} h from UTC"))
    first, last = entry.clock_offset_s, entry.clock_offset_end_s
    last = first if last is None else last
    if time.size and (first or last):
        since = time - time.min()
        span = max(int(since.max().astype(np.int64)), 1)
        # ns fit a double for 104 days, and no offset is known to that
        ahead = first + since.astype(np.float64) * ((last - first) / span)
        time = time - np.round(ahead * _SECOND_NS).astype("timedelta64[ns]")
        steady = first == last
        detail = f"{first:+g} s from UTC" + ("" if steady else f" at the first sample, {last:+g} s at the last")
        actions.append(Action("clock corrected", time.size, detail))
    return time, tuple(actions)


def clock_notes(time: NDArray[np.datetime64], pressure: NDArray[np.float64]) -> tuple[Action, ...]:
    """Say what the stamps betray of a clock that was turned, or that did not follow a leap second.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        In the order of the file, rising or falling.
    pressure : (n,) array

    Returns
    -------
    tuple of Action

    Examples
    --------
    A clock on daylight saving time gives the hour from one to two twice in autumn:

    >>> halves = np.datetime64("2016-10-30", "ns") + np.array([0, 1, 2, 3, 2, 3, 4, 5]) * np.timedelta64(30, "m")
    >>> clock_notes(halves, np.arange(8.0))[0].detail
    'by 1 h at 2016-10-30T01:30:00'
    """
    if time.size < 3:
        return ()
    if usual_interval_ns(time) < 0.0:
        return clock_notes(time[::-1], pressure[::-1])
    return (*_turned_back(time, pressure), *_leap_steps(time))


def _turned_back(time: NDArray[np.datetime64], pressure: NDArray[np.float64]) -> list[Action]:
    """Whole hours back, to stamps that were there already with other values: files put together repeat values."""
    if (time[1:] > time[:-1]).all():
        return []
    step = np.diff(time).astype(np.int64)
    usual = usual_interval_ns(time)
    # of hourly stamps the turned one only stands twice, as a stray row does: the turn forward tells
    back = np.flatnonzero(step <= 0)
    if not 0 < back.size <= _MOST_TIMES:
        return []
    if not (np.abs(step - usual - _HOUR_NS) < 0.1 * usual).any():
        back = back[step[back] < 0]
    hours = np.round((usual - step[back]) / _HOUR_NS)
    whole = np.abs(usual - step[back] - hours * _HOUR_NS) < 0.1 * usual
    turned = [
        (place, hour)
        for place, hour in zip(back[whole].tolist(), hours[whole].tolist(), strict=True)
        if 1 <= hour <= _MOST_HOURS and _other_values(time, pressure, place, hour)
    ]
    if not turned:
        return []
    shown = ", ".join(f"by {hour:g} h at {np.datetime_as_string(time[place], unit='s')}" for place, hour in turned[:3])
    more = f" and {len(turned) - 3} times more" if len(turned) > 3 else ""
    return [Action(SET_BACK, len(turned), f"{shown}{more}")]


def _other_values(time: NDArray[np.datetime64], pressure: NDArray[np.float64], place: int, hours: float) -> bool:
    """Whether the samples after a turn repeat stamps from before it with values of their own."""
    reach = np.timedelta64(round(hours * _HOUR_NS), "ns")
    before = np.flatnonzero(time[max(place - 20_000, 0) : place + 1] > time[place] - reach) + max(place - 20_000, 0)
    after = np.arange(place + 1, min(place + 1 + before.size, time.size))
    before = before[: after.size]
    both = np.isfinite(pressure[before]) & np.isfinite(pressure[after])
    return bool(both.any() and (pressure[before] != pressure[after])[both].mean() > 0.5)


def _leap_steps(time: NDArray[np.datetime64]) -> list[Action]:
    """Leap seconds at which stamps that keep to a raster leave it by one second."""
    usual = int(usual_interval_ns(time))
    if usual <= 2 * _SECOND_NS:
        return []
    notes = []
    for leap in LEAP_SECONDS:
        place = int(np.searchsorted(time, leap)) if time[0] < leap < time[-1] else 0
        if not _BESIDE <= place <= time.size - _BESIDE:
            continue
        since = (time[place - _BESIDE : place + _BESIDE] - leap).astype(np.int64)
        phase = (since - since[0] + usual // 2) % usual - usual // 2
        before, after = phase[: _BESIDE - 1], phase[_BESIDE + 1 :]  # the sample at the leap may stand on either side
        steady = max(np.ptp(before), np.ptp(after)) < _STEADY_NS
        if steady and abs(abs(np.median(after) - np.median(before)) - _SECOND_NS) < _STEADY_NS:
            notes.append(str(leap.astype("datetime64[D]")))
    detail = f"the stamps step by 1 s there: {', '.join(notes)}; of no weight for daily means"
    return [Action("leap seconds in the clock", len(notes), detail)] if notes else []
