"""Stamps as text: the common fixed form read at once, and what others say of zones and of 60th seconds."""

import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.text_time import parsed_time
from massfit.io.records.zones import require_utc, zone_hours, zone_of_stamp

_ISO = re.compile(rb"\d{4}-\d\d-\d\d([T ]\d\d:\d\d(:\d\d(\.\d{1,9})?)?Z?)?")
_DIGIT, _POINT = np.uint8(ord("0")), ord(".")
_MOST_DIGITS = 15
_PLACES = {"year": (0, 4), "month": (5, 7), "day": (8, 10), "hour": (11, 13), "minute": (14, 16), "second": (17, 19)}
"""Where the parts of a date stand in a stamp of ISO 8601."""
_BOUNDS = {
    "year": (1900, 2200), "month": (1, 12), "day": (1, 31), "hour": (0, 23), "minute": (0, 59), "second": (0, 59),
}  # fmt: skip
_SECONDS = {"hour": 3600, "minute": 60, "second": 1}
_SUFFIX = r"\s*[A-Za-z]{2,5}$"
_OFFSET = r"[T ]\d\d:?\d\d.*?([+-]\d\d(?::?\d\d)?)$"
_SIXTY = r"(:\d\d):60(?=$|\D)"


@dataclass(frozen=True)
class Stamps:
    """Times of a block of rows.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
    shifted : int
        Stamps with an offset from UTC of their own, which was taken off.
    sixties : int
        Stamps with a 60th second, read as the first second of the next minute.
    """

    time: NDArray[np.datetime64]
    shifted: int = 0
    sixties: int = 0


def fixed_iso(letters: NDArray[np.uint8]) -> NDArray[np.datetime64] | None:
    """Read ISO 8601 stamps that all have one form, "2016-01-01T00:30:00Z" or a shorter or finer one.

    Parameters
    ----------
    letters : (n, k) array of uint8
        A stamp a row.

    Returns
    -------
    (n,) array of datetime64[ns], or None
        None where one of them has another form or is no date, or the form has an offset.

    Examples
    --------
    >>> letters = np.frombuffer(b"2016-01-31T00:30Z2016-02-01T12:00Z", dtype=np.uint8).reshape(2, 17)
    >>> fixed_iso(letters).astype("datetime64[m]").tolist()[1].isoformat()
    '2016-02-01T12:00:00'
    """
    form = letters[0].tobytes() if letters.size else b""
    if not _ISO.fullmatch(form):
        return None
    digits = np.array([48 <= byte <= 57 for byte in form])
    if not ((letters == letters[0])[:, ~digits].all() and _all_digits(letters[:, digits])):
        return None
    parts = {part: _number(letters[:, a:b]) for part, (a, b) in _PLACES.items() if b <= len(form)}
    time = _instants(parts)
    decimals = len(form.rstrip(b"Z")) - 20
    if decimals > 0 and time is not None:
        size = np.timedelta64(10 ** (9 - decimals), "ns")
        time = time + _number(letters[:, 20 : 20 + decimals]) * size
    return time


def fixed_parts(columns: Mapping[str, NDArray[np.uint8]]) -> NDArray[np.datetime64] | None:
    """Read dates whose parts stand in columns of digits, each of one width.

    Parameters
    ----------
    columns : mapping of str to (n, k) array of uint8
        Letters of each part of the date.

    Returns
    -------
    (n,) array of datetime64[ns], or None
        None where one of them has another form or is no date.
    """
    parts = {}
    for part, letters in columns.items():
        if part not in _PLACES or letters.shape[1] > 4 or not _all_digits(letters):
            return None
        parts[part] = _number(letters)
    return _instants(parts)


def fixed_decimals(letters: NDArray[np.uint8]) -> NDArray[np.float64] | None:
    """Read decimal numbers without sign that all have the point at one place, or none.

    A whole number below 2**53 divided by a power of ten below 10**22 is rounded correctly, so that they are the same
    as any exact reader gives.

    Parameters
    ----------
    letters : (n, k) array of uint8
        A number a row.

    Returns
    -------
    (n,) array of float64, or None
        None where one of them has another form.

    Examples
    --------
    >>> fixed_decimals(np.frombuffer(b"05.2510.75", dtype=np.uint8).reshape(2, 5)).tolist()
    [5.25, 10.75]
    """
    point = np.flatnonzero(letters[0] == _POINT) if letters.size else np.empty(0, dtype=np.int64)
    if point.size > 1 or not 0 < letters.shape[1] <= _MOST_DIGITS:
        return None
    if not point.size:
        return _number(letters).astype(np.float64) if _all_digits(letters) else None
    whole, decimals = letters[:, : point[0]], letters[:, point[0] + 1 :]
    if not ((letters[:, point[0]] == _POINT).all() and _all_digits(whole) and _all_digits(decimals)):
        return None
    if whole.shape[1] + decimals.shape[1] == 0:
        return None
    power = 10 ** decimals.shape[1]
    return np.asarray((_number(whole) * power + _number(decimals)) / power)


def _instants(parts: Mapping[str, NDArray[np.int64]]) -> NDArray[np.datetime64] | None:
    if any(values.min() < _BOUNDS[part][0] or values.max() > _BOUNDS[part][1] for part, values in parts.items()):
        return None
    year, month, day = (parts[part] for part in ("year", "month", "day"))
    months = ((year - 1970) * 12 + month - 1).astype("datetime64[M]")
    date = months.astype("datetime64[D]") + (day - 1)
    if not ((day <= 28) | (date.astype("datetime64[M]") == months)).all():
        return None
    seconds = sum((parts[part] * size for part, size in _SECONDS.items() if part in parts), np.zeros(1, dtype=np.int64))
    return np.asarray(date.astype("datetime64[s]") + seconds).astype("datetime64[ns]")


def _number(digits: NDArray[np.uint8]) -> NDArray[np.int64]:
    value = np.zeros(digits.shape[0], dtype=np.int64)
    for place in range(digits.shape[1]):
        value *= 10
        value += digits[:, place] - _DIGIT
    return value


def _all_digits(letters: NDArray[np.uint8]) -> bool:
    # 48 to 57; a smaller one wraps round to a large number
    return bool((letters - _DIGIT < 10).all())


def stamps_of(texts: "pd.Series[str]", lines: NDArray[np.int64], entry: DeploymentFile, *, name: str) -> Stamps:
    """Read stamps of any form that the network file states.

    Parameters
    ----------
    texts : (n,) series of str
    lines : (n,) array of int
        Line numbers.
    entry : DeploymentFile
    name : str
        Column.

    Returns
    -------
    Stamps

    Raises
    ------
    InputError
        A stamp that cannot be read, or that names another zone than the network file.
    """
    time_format = entry.time_format or "iso"
    texts = _without_zones(texts, lines, entry)
    if time_format != "iso":
        return Stamps(parsed_time(texts, time_format, lines, source=entry.file, name=name))
    shifted = _shifted(texts, lines, entry)
    sixty = texts.str.contains(":60", regex=False, na=False).to_numpy(dtype=bool)
    if sixty.any():
        texts = texts.str.replace(_SIXTY, r"\1:59", regex=True)
    time = parsed_time(texts, time_format, lines, source=entry.file, name=name)
    return Stamps(time + sixty * np.timedelta64(1, "s"), shifted, int(np.count_nonzero(sixty)))


def _without_zones(texts: "pd.Series[str]", lines: NDArray[np.int64], entry: DeploymentFile) -> "pd.Series[str]":
    """Take letters that name a zone off the stamps, where the zone is UTC or the stated one."""
    if not texts.size or not zone_of_stamp(str(texts.iloc[0])):
        return texts
    zones = texts.str.extract(r"([A-Za-z]{2,5})$", expand=False)
    found = [str(zone) for zone in zones.dropna().unique() if zone_hours(str(zone)) is not None]
    first = {zone: int(lines[np.flatnonzero((zones == zone).to_numpy(dtype=bool))[0]]) for zone in found}
    require_utc(first.items(), entry)
    return texts.str.replace(_SUFFIX, "", regex=True)


def _shifted(texts: "pd.Series[str]", lines: NDArray[np.int64], entry: DeploymentFile) -> int:
    """Count stamps with an offset from UTC; it must not be taken off twice."""
    offsets = texts.str.extract(_OFFSET, expand=False)
    own = (offsets.notna() & ~offsets.fillna("").str.fullmatch(r"[+-]00:?(00)?")).to_numpy(dtype=bool)
    if own.any() and entry.utc_offset_hours:
        first = int(np.flatnonzero(own)[0])
        problem = f"the stamp {texts.iloc[first]!r} has an offset and utc_offset_hours is {entry.utc_offset_hours:g}"
        fault = Fault(entry.file, "time", problem, "Must be one of the two", "Remove the key", int(lines[first]))
        raise InputError(fault)
    return int(np.count_nonzero(own))
