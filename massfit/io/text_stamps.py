"""Stamps as text: the common fixed form read at once, and what others say of zones and of 60th seconds."""

import re
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.deployment import DeploymentFile
from massfit.io.text_time import parsed_time
from massfit.io.zones import require_utc, zone_hours, zone_of_stamp

_ISO = re.compile(rb"\d{4}-\d\d-\d\d([T ]\d\d:\d\d(:\d\d(\.\d{1,9})?)?Z?)?")
_DIGIT = ord("0")
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


def fixed_iso(raw: NDArray[np.uint8], starts: NDArray[np.int64], length: int) -> NDArray[np.datetime64] | None:
    """Read ISO 8601 stamps that all have one form, "2016-01-01T00:30:00Z" or a shorter or finer one.

    Parameters
    ----------
    raw : (m,) array of uint8
        Text.
    starts : (n,) array of int
        Where the stamps begin.
    length : int
        Characters of each.

    Returns
    -------
    (n,) array of datetime64[ns], or None
        None where one of them has another form or is no date, or the form has an offset.

    Examples
    --------
    >>> text = np.frombuffer(b"2016-01-31T00:30Z 2016-02-01T12:00Z", dtype=np.uint8)
    >>> fixed_iso(text, np.array([0, 18]), 17).astype("datetime64[m]").tolist()[1].isoformat()
    '2016-02-01T12:00:00'
    """
    form = raw[starts[0] : starts[0] + length].tobytes() if starts.size else b""
    if not _ISO.fullmatch(form):
        return None
    fields = raw[starts[:, None] + np.arange(length)]
    digits = np.array([48 <= byte <= 57 for byte in form])
    if not ((fields[:, ~digits] == np.frombuffer(form, np.uint8)[~digits]).all() and _all_digits(fields[:, digits])):
        return None
    number = _Numbers(fields, length)
    year, month, day = number(0, 4), number(5, 7), number(8, 10)
    hour, minute, second = number(11, 13), number(14, 16), number(17, 19)
    if not (_within(year, 1900, 2200) and _within(month, 1, 12) and _within(day, 1, 31)):
        return None
    if not (_within(hour, 0, 23) and _within(minute, 0, 59) and _within(second, 0, 59)):
        return None
    months = ((year - 1970) * 12 + month - 1).astype("datetime64[M]")
    date = months.astype("datetime64[D]") + (day - 1)
    if not ((day <= 28) | (date.astype("datetime64[M]") == months)).all():
        return None
    time = date.astype("datetime64[ns]").astype(np.int64) + (hour * 3600 + minute * 60 + second) * 1_000_000_000
    decimals = len(form.rstrip(b"Z")) - 20
    if decimals > 0:
        time += number(20, 20 + decimals) * 10 ** (9 - decimals)
    return time.astype("datetime64[ns]")


class _Numbers:
    """Whole numbers in columns of digits; zero beyond the end of the form."""

    def __init__(self, fields: NDArray[np.uint8], length: int) -> None:
        self.fields, self.length = fields, length

    def __call__(self, start: int, stop: int) -> NDArray[np.int64]:
        value = np.zeros(self.fields.shape[0], dtype=np.int64)
        if stop <= self.length:
            for place in range(start, stop):
                value = value * 10 + (self.fields[:, place].astype(np.int64) - _DIGIT)
        return value


def _all_digits(fields: NDArray[np.uint8]) -> bool:
    return bool(((fields >= 48) & (fields <= 57)).all())


def _within(values: NDArray[np.int64], low: int, high: int) -> bool:
    return bool(values.min(initial=low) >= low and values.max(initial=high) <= high)


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
