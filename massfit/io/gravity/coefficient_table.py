"""Tables of degree one, C20 and C30 as the processing centres print them, told apart by their columns."""

import re
from collections.abc import Callable, Iterable
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np

from massfit.errors import Fault, InputError
from massfit.gravity.field import Span, TideSystem
from massfit.gravity.tables import CoefficientTable, TableRow

_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([EeDd][+-]?\d+)?\Z")
_MOST_BYTES = 2**24
NO_LAYOUT = "of no known layout"
"""What a file is told that is no such table."""
_MJD_EPOCH = np.datetime64("1858-11-17T00:00:00", "s")
_FLATTENING = (-4.85e-4, -4.83e-4)
"""What a normalised C20 of the Earth lies in, whatever the tide system."""
_PEAR = (9.4e-7, 9.7e-7)
_SMALL = 1e-7
"""No degree-one coefficient of a month is as large: a tenth of a micro-radius, 0.6 m of geocentre."""

_Values = list[float]
_Entry = tuple[Span, dict[tuple[str, int, int], float]]


def read_coefficient_table(path: Path, *, source: str) -> CoefficientTable:
    """Read a table of low-degree coefficients.

    Parameters
    ----------
    path : pathlib.Path
        Text. Rows may be: first and last modified Julian date in columns 1 and 9, C20 and C30 in columns 3 and 6 (ten
        columns); decimal year, C20, its departure, error and the mean of the dealiasing model (1e-10), first day and
        day after as yyyymmdd (seven columns); or month, degree, order, C, S, two errors, first day and day after
        (nine columns, or a word first). Everything else is header.
    source : str
        As the analyst wrote it.

    Returns
    -------
    CoefficientTable
        In time order. Where the header says that the dealiasing model was restored, its mean is taken off again.

    Raises
    ------
    InputError
        Rows of no known layout, and values that no Earth has, with lines.
    """
    if path.stat().st_size > _MOST_BYTES:
        problem = f"the file has {path.stat().st_size} bytes"
        raise InputError(Fault(source, "", problem, f"Must be at most {_MOST_BYTES}", "Check the path"))
    text = path.read_bytes().decode("latin-1")
    rows, header = _rows(text)
    layout = _layout([words for _, words in rows])
    if layout is None:
        problem = f"{len(rows)} rows of numbers, {NO_LAYOUT}"
        allowed = "Must be a table of degree one, of C20, or of C20 and C30 as the centres print them"
        raise InputError(Fault(source, "", problem, allowed, "Check the file"))
    notes: list[str] = []
    restored = layout is _of_flattening and re.search(r"de-?alias\w*.{0,200}restored", header, re.I | re.S) is not None
    if restored:
        notes.append("the mean of the dealiasing model that the table holds was taken off again")
    faults: list[Fault] = []
    entries: list[_Entry] = []
    for number, words in rows:
        try:
            entries += layout([_value(word) for word in words], restored)
        except ValueError as error:
            faults.append(
                Fault(source, "row", str(error), "As the layout of the other rows", "Mend or remove it", number)
            )
    if faults:
        raise InputError(faults[:20])
    return CoefficientTable(_joined(entries), _tide_system(header), tuple(notes), source)


def _rows(text: str) -> tuple[list[tuple[int, list[str]]], str]:
    """Rows of at least seven numbers with their lines, and everything else as header."""
    rows, header = [], []
    for number, line in enumerate(text.splitlines(), 1):
        words = line.split()
        numbers = words[1:] if words and re.fullmatch(r"[A-Z][A-Z0-9]{3,7}", words[0]) else words
        if len(numbers) >= 7 and all(_NUMBER.match(word) or word.lower() == "nan" for word in numbers):
            rows.append((number, numbers))
        else:
            header.append(line)
    return rows, "\n".join(header)


def _value(word: str) -> float:
    return float(word.replace("D", "E").replace("d", "e")) if word.lower() != "nan" else np.nan


_Layout = Callable[[_Values, bool], Iterable[_Entry]]


def _layout(rows: list[list[str]]) -> _Layout | None:
    if not rows:
        return None
    width = {len(words) for words in rows}
    first = [_value(word) for word in rows[0]]
    if width == {10} and 3e4 < first[0] < 9e4:
        return _of_two
    if width == {7} and 1900 < first[0] < 2200:
        return _of_flattening
    if width <= {8, 9} and first[-9 + 1 if len(first) == 9 else 0] == 1.0:
        return _of_degree_one
    return None


def _of_two(values: _Values, _: bool) -> Iterable[_Entry]:
    """MJD, year, C20, departure, error, C30, departure, error, MJD, year."""
    if len(values) != 10:
        raise ValueError(f"the row has {len(values)} columns")
    found: dict[tuple[str, int, int], float] = {}
    for name, value, limits in ((("C", 2, 0), values[2], _FLATTENING), (("C", 3, 0), values[5], _PEAR)):
        if not np.isnan(value):
            found[name] = _within(name, value, limits)
    yield _span(_from_mjd(values[0]), _from_mjd(values[8])), found


def _of_flattening(values: _Values, restored: bool) -> Iterable[_Entry]:
    """Year, C20, departure, error, mean of the dealiasing model, first day, day after."""
    if len(values) != 7:
        raise ValueError(f"the row has {len(values)} columns")
    value = _within(("C", 2, 0), values[1], _FLATTENING) - (1e-10 * values[4] if restored else 0.0)
    yield _span(_from_date(values[5]), _from_date(values[6])), {("C", 2, 0): value}


def _of_degree_one(values: _Values, _: bool) -> Iterable[_Entry]:
    """Month (where there is one), degree, order, C, S, two errors, first day, day after."""
    degree, order, cosine, sine, _sd, _sd2, first, last = values[-8:]
    if degree != 1 or order not in (0, 1):
        raise ValueError(f"degree and order are {degree:g} and {order:g}")
    for value in (cosine, sine):
        if not abs(value) < _SMALL:
            raise ValueError(f"the coefficient is {value:g}")
    found = {("C", 1, int(order)): cosine} | ({("S", 1, 1): sine} if order == 1 else {})
    yield _span(_from_date(first), _from_date(last)), found


def _within(name: tuple[str, int, int], value: float, limits: tuple[float, float]) -> float:
    if not limits[0] < value < limits[1]:
        raise ValueError(
            f"{name[0]}{name[1]}{name[2]} is {value:g}; that of the Earth is within {limits[0]:g} and {limits[1]:g}"
        )
    return value


def _from_mjd(day: float) -> np.datetime64:
    if not 3e4 < day < 9e4:
        raise ValueError(f"the modified Julian date is {day:g}")
    return _MJD_EPOCH + np.timedelta64(round(day * 86400.0), "s")


def _from_date(value: float) -> np.datetime64:
    try:
        return np.datetime64(datetime.strptime(f"{int(value):08d}", "%Y%m%d"), "s")
    except (ValueError, OverflowError):
        raise ValueError(f"the date is {value:g}") from None


def _span(start: np.datetime64, end: np.datetime64) -> Span:
    if not start < end:
        raise ValueError(f"the span runs from {start} to {end}")
    return Span(start, end)


def _joined(entries: list[_Entry]) -> tuple[TableRow, ...]:
    """Rows of one span put together, in order of time."""
    together: dict[tuple[np.datetime64, np.datetime64], dict[Any, float]] = {}
    for span, values in entries:
        together.setdefault((span.start, span.end), {}).update(values)
    return tuple(TableRow(Span(*span), values) for span, values in sorted(together.items()))


def _tide_system(header: str) -> TideSystem:
    if re.search(r"zero[- ]tide", header, re.I):
        return "zero_tide"
    return "tide_free" if re.search(r"tide[- ]free", header, re.I) else "unknown"
