"""UTC times from text columns: a date in parts, a format, ISO 8601, or counts since a date."""

import re
from collections.abc import Collection, Iterable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError

DATE_PARTS = ("year", "month", "day", "hour", "minute", "second", "day_of_year")
"""Column names of a date in parts."""

DATENUM = "datenum"
"""MATLAB's count of days; the number of 1 January 1970 is 719529 (MATLAB documentation of datenum)."""

_DATENUM_1970 = 719_529.0
_YEARS = (1900, 2200)
_CLOCK = {"hour": (0, 23), "minute": (0, 59), "second": (0, 60)}
_BOUNDS = {"year": _YEARS, "month": (1, 12), "day": (1, 31), "day_of_year": (1, 367), **_CLOCK}
_MAY_HAVE_DECIMALS = ("second", "day_of_year")
_UNIT_MS = {"seconds": 1e3, "minutes": 60e3, "hours": 3600e3, "days": 86_400e3}
_SINCE = re.compile(r"(seconds|minutes|hours|days) since (\d{4}-\d{2}-\d{2}(?:[T ]\d{2}:\d{2}(?::\d{2})?)?)")


def needed_parts(names: Collection[str]) -> tuple[str, ...]:
    """Name the parts that a date needs: year, month and day, or year and day of the year.

    Examples
    --------
    >>> needed_parts(["year", "day_of_year", "pressure"])
    ('year', 'day_of_year')
    """
    return ("year", "day_of_year") if "day_of_year" in names else DATE_PARTS[:3]


@dataclass(frozen=True)
class LineFault(Fault):
    """One fault for all bad values of a column: the first, its line, and how many follow.

    Parameters
    ----------
    value : str
        The first, as it is shown.
    count : int
        How many there are.
    """

    value: str = ""
    count: int = 1

    def and_more(self, count: int) -> "LineFault":
        """Tell the same of more lines."""
        count += self.count
        return replace(self, count=count, problem=f"the value is {self.value} (and {count - 1} more lines)")


def line_fault(
    source: str,
    name: str,
    values: NDArray[Any],
    good: NDArray[np.bool_],
    lines: NDArray[np.int64],
    allowed: str,
    action: str = "Correct it",
) -> LineFault:
    """One fault for all bad values of a column.

    Parameters
    ----------
    source, name : str
        File and column.
    values : (n,) array
    good : (n,) array of bool
        False at the bad values, of which there is at least one.
    lines : (n,) array of int
        Line numbers.
    allowed, action : str
        What is allowed and what to do.

    Returns
    -------
    LineFault
    """
    bad = np.flatnonzero(~good)
    value = values[bad[0]]
    shown = repr(value) if isinstance(value, str) else f"{value:g}"
    fault = LineFault(source, name, f"the value is {shown}", allowed, action, int(lines[bad[0]]), shown)
    return fault.and_more(bad.size - 1) if bad.size > 1 else fault


def merged_faults(faults: Iterable[Fault]) -> list[Fault]:
    """Join the faults of one kind that were found in several blocks of lines.

    Parameters
    ----------
    faults : iterable of Fault
        In the order of the file.

    Returns
    -------
    list of Fault
    """
    kinds: dict[tuple[str, str, str], Fault] = {}
    for fault in faults:
        kind = (fault.name, fault.allowed, fault.action)
        first = kinds.get(kind)
        if isinstance(first, LineFault) and isinstance(fault, LineFault):
            kinds[kind] = first.and_more(fault.count)
        else:
            kinds.setdefault(kind, fault)
    return list(kinds.values())


def joined_date(
    parts: dict[str, NDArray[np.float64]], lines: NDArray[np.int64], *, source: str
) -> NDArray[np.datetime64]:
    """UTC times from columns of year, month, day (or day of the year) and any of hour, minute, second.

    Parameters
    ----------
    parts : dict of str to (n,) array
        By the names of `DATE_PARTS`; seconds may have decimals, and so may the day of the year, which is 1 at the
        first instant of 1 January and is rounded to the millisecond.
    lines : (n,) array of int
        Line numbers, for the faults.
    source : str
        File.

    Returns
    -------
    (n,) array of datetime64[ns]

    Raises
    ------
    InputError
        One fault a column that leaves its range, two-digit years among them,
        and one for days that the month does not have.

    Examples
    --------
    >>> parts = {"year": np.array([2011.0]), "month": np.array([3.0]), "day": np.array([11.0])}
    >>> joined_date(parts, np.array([1]), source="a.txt").astype("datetime64[D]")
    array(['2011-03-11'], dtype='datetime64[D]')
    """
    faults = []
    for part, values in parts.items():
        low, high = _BOUNDS[part]
        whole = part in _MAY_HAVE_DECIMALS or values == np.floor(values)
        good = (values >= low) & ((values < high) if part == "day_of_year" else (values <= high)) & whole
        if not good.all():
            action = "Write years with four digits" if part == "year" else "Correct it"
            faults.append(line_fault(source, part, values, good, lines, f"Must be within [{low}, {high}]", action))
    if faults:
        raise InputError(faults)
    year = (parts["year"] - 1970).astype("datetime64[Y]")
    if "day_of_year" in parts:
        day, unit, name = parts["day_of_year"], year, "day_of_year"
    else:
        day, unit, name = parts["day"], year.astype("datetime64[M]") + (parts["month"] - 1).astype(int), "day"
    date = unit.astype("datetime64[D]") + (np.floor(day) - 1).astype("timedelta64[D]")
    good = date.astype(unit.dtype) == unit
    if not good.all():
        allowed = f"Must be a day of its {'year' if unit is year else 'month'}"
        raise InputError(line_fault(source, name, day, good, lines, allowed))
    zero = np.zeros(date.size)
    seconds = parts.get("hour", zero) * 3600 + parts.get("minute", zero) * 60 + parts.get("second", zero)
    seconds = seconds + np.round((day - np.floor(day)) * 86_400, 3)
    return np.asarray(date.astype("datetime64[ns]") + np.round(seconds * 1e9).astype("timedelta64[ns]"))


def parsed_time(
    texts: "pd.Series[str]", time_format: str, lines: NDArray[np.int64], *, source: str, name: str
) -> NDArray[np.datetime64]:
    """UTC times from one column of text.

    Parameters
    ----------
    texts : (n,) series of str
    time_format : str
        "iso" for ISO 8601 (an offset from UTC is taken off), a strptime format, or
        a count such as "days since 1950-01-01", rounded to the millisecond.
    lines : (n,) array of int
        Line numbers, for the faults.
    source, name : str
        File and column.

    Returns
    -------
    (n,) array of datetime64[ns]

    Raises
    ------
    InputError
        With the first text that cannot be read, its line, and how many follow.
    """
    if is_count(time_format):
        time = counted_time(pd.to_numeric(texts, errors="coerce").to_numpy(dtype=float), time_format, source=source)
        allowed = f"Must be a number of {time_format}"
    else:
        if time_format != "iso" and "%Y" not in time_format and "%y" not in time_format:
            problem = f"{time_format!r} is not a time format"
            allowed = "Must be 'iso', a strptime format with a year, or like 'days since 1950-01-01'"
            raise InputError(Fault(source, "time_format", problem, allowed))
        pandas_format = "ISO8601" if time_format == "iso" else time_format
        try:
            parsed = pd.to_datetime(texts, format=pandas_format, errors="coerce", utc=True)
        except ValueError as error:
            problem = f"{time_format!r} is not a time format ({error})"
            raise InputError(Fault(source, "time_format", problem, action="Use the directives of strptime")) from error
        in_range = parsed.dt.year.between(*_YEARS)
        time = parsed.where(in_range).dt.tz_localize(None).to_numpy(dtype="datetime64[ns]")
        allowed = "Must be ISO 8601, UTC" if time_format == "iso" else f"Must be of the form {time_format!r}"
    good = ~np.isnat(time)
    if not good.all():
        values = texts.to_numpy(dtype=object)
        raise InputError(line_fault(source, name, values, good, lines, allowed, "Correct it or state `time_format`"))
    return time


def is_count(time_format: str) -> bool:
    """Whether a format is a count of time, such as "days since 1950-01-01".

    Examples
    --------
    >>> is_count("hours since 2000-01-01 00:00"), is_count("datenum"), is_count("iso")
    (True, True, False)
    """
    return time_format == DATENUM or _SINCE.fullmatch(time_format) is not None


def counted_time(count: NDArray[np.float64], time_format: str, *, source: str) -> NDArray[np.datetime64]:
    """UTC times from counts of time, rounded to the millisecond.

    Parameters
    ----------
    count : (n,) array
    time_format : str
        Like "days since 1950-01-01"; or "datenum", MATLAB's count of days, in which 719529 is 1 January 1970.
    source : str
        File, for the fault.

    Returns
    -------
    (n,) array of datetime64[ns]
        NaT outside the years that are read, 1900 to 2200.

    Raises
    ------
    InputError
        The format counts from no date.

    Examples
    --------
    >>> str(counted_time(np.array([719529.5]), "datenum", source="a.mat")[0])[:13]
    '1970-01-01T12'
    """
    if time_format == DATENUM:
        return _counted(count - _DATENUM_1970, "days", "1970-01-01")
    since = _SINCE.fullmatch(time_format)
    try:
        if since is None:
            raise ValueError(f'"{time_format}" names no unit and date')
        np.datetime64(since[2], "ms")
    except ValueError as error:
        problem = f"{time_format!r} counts from no date ({error})"
        raise InputError(Fault(source, "time_format", problem, "Must be like 'days since 1950-01-01'")) from error
    return _counted(count, since[1], since[2])


def _counted(count: NDArray[np.float64], unit: str, origin: str) -> NDArray[np.datetime64]:
    """Origin plus a count of units; in milliseconds, because 292 years of ns overflow. NaT outside the years read."""
    first, end = (np.datetime64(f"{year}-01-01", "ms") for year in (_YEARS[0], _YEARS[1] + 1))
    since = (np.array([first, end]) - np.datetime64(origin, "ms")).astype(float)
    elapsed = np.round(count * _UNIT_MS[unit])
    known = (elapsed >= since[0]) & (elapsed < since[1])
    time = np.datetime64(origin, "ms") + np.where(known, elapsed, since[0]).astype("timedelta64[ms]")
    return np.where(known, time.astype("datetime64[ns]"), np.datetime64("NaT"))
