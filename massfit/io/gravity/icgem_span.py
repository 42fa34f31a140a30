"""The span of time that a monthly gravity file stands for: from its header, else from its name."""

import re
from datetime import datetime, timedelta

import numpy as np

from massfit.gravity.field import Span

_DATE = r"(\d{4})-?(\d{2})-?(\d{2})"
_COVERED = [re.compile(rf"^\s*time_coverage_{which}\s*:?\s*(\S+)", re.M) for which in ("start", "end")]
"""First instant, and the instant after."""
_PERIOD = re.compile(rf"^\s*time_period_of_data\s*:?\s*{_DATE}(?:[.T]\S*)?\s*(?:-|to|\s)\s*{_DATE}", re.M)
_NAME_DAYS = re.compile(r"(?<!\d)((?:19|20)\d{2})(\d{3})[-_]((?:19|20)\d{2})(\d{3})(?!\d)")
_NAME_DATES = re.compile(r"(?<!\d)((?:19|20)\d{2})(\d{2})(\d{2})[-_]((?:19|20)\d{2})(\d{2})(\d{2})(?!\d)")
_NAME_MONTH = re.compile(r"(?<!\d)((?:19|20)\d{2})[-_]?(0[1-9]|1[0-2])(?!\d)")
_LONGEST_DAYS = 400


def span_of(header: str, name: str) -> Span | None:
    """Find the span of a monthly field.

    Parameters
    ----------
    header : str
        All text before the end of the header.
    name : str
        File name.

    Returns
    -------
    Span or None
        From `time_coverage_start` and `time_coverage_end` (the end is the instant after), else from
        `time_period_of_data` (first and last day, both inside), else from the file name: first and last day as
        year and day of year (2003001-2003031) or as dates (20030101-20030131), else a month (2003-01, 200301).
        None for a file that says nothing.

    Examples
    --------
    >>> span = span_of("", "GSM_2012061-2012091_invented.gfc")
    >>> str(span.start), str(span.end)
    ('2012-03-01T00:00:00', '2012-04-01T00:00:00')
    """
    found = (_covered(header), _period(header), _days(name), _dates(name), _month(name))
    return next((span for span in found if span is not None), None)


def _covered(header: str) -> Span | None:
    first, last = (pattern.search(header) for pattern in _COVERED)
    if first is None or last is None:
        return None
    try:
        start, end = (datetime.fromisoformat(found[1].rstrip("Z")) for found in (first, last))
    except ValueError:
        return None
    return _span(start, end)


def _period(header: str) -> Span | None:
    found = _PERIOD.search(header)
    return None if found is None else _inclusive(found.groups()[:3], found.groups()[3:])


def _dates(name: str) -> Span | None:
    found = _NAME_DATES.search(name)
    return None if found is None else _inclusive(found.groups()[:3], found.groups()[3:])


def _inclusive(first: tuple[str, ...], last: tuple[str, ...]) -> Span | None:
    try:
        start, end = (datetime(int(year), int(month), int(day)) for year, month, day in (first, last))
    except ValueError:
        return None
    return _span(start, end + timedelta(days=1))


def _days(name: str) -> Span | None:
    found = _NAME_DAYS.search(name)
    if found is None or not all(1 <= int(day) <= 366 for day in (found[2], found[4])):
        return None
    start, end = (
        datetime(int(year), 1, 1) + timedelta(days=int(day) - 1)
        for year, day in (found.groups()[:2], found.groups()[2:])
    )
    return _span(start, end + timedelta(days=1))


def _month(name: str) -> Span | None:
    found = _NAME_MONTH.search(name)
    if found is None:
        return None
    year, month = int(found[1]), int(found[2])
    return _span(datetime(year, month, 1), datetime(year + month // 12, month % 12 + 1, 1))


def _span(start: datetime, end: datetime) -> Span | None:
    if start.tzinfo is not None or end.tzinfo is not None:
        return None
    if not 0 < (end - start).total_seconds() <= _LONGEST_DAYS * 86400:
        return None
    return Span(np.datetime64(start, "s"), np.datetime64(end, "s"))
