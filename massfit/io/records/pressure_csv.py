"""Pressure over time as CSV: a header, a comment that states the unit, one row a time."""

import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.netcdf.variables import middle_of_intervals, pascal_of_field, require_order
from massfit.io.records.text_time import parsed_time

_NOTE = re.compile(r"#\s*(units|stamp)\s*:\s*(.*?)\s*$")
_STAMPS = ("middle", "start")
_MOST_BYTES = 2**26  # two years of minutes


def read_pressure_csv(
    path: Path, headers: Sequence[tuple[str, ...]], *, source: str
) -> tuple[NDArray[np.datetime64], NDArray[np.float64]]:
    """Read the time and the pressures of a CSV file.

    Parameters
    ----------
    path : pathlib.Path
        With a comment ``# units: hPa`` and optionally ``# stamp: start``.
    headers : sequence of tuple of str
        Headers it may have; the first column of each is the time, all others are pressures.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    time : (n,) array of datetime64[ns]
        Middle of each interval.
    values : (columns, n) array
        Pa; NaN where a cell is empty.

    Raises
    ------
    InputError
        Every fault of the file, with lines.
    """
    if path.stat().st_size > _MOST_BYTES:
        problem, allowed = f"the file has {path.stat().st_size} bytes", f"Must be at most {_MOST_BYTES} as text"
        raise InputError(Fault(source, "", problem, allowed, "Check the path, or write NetCDF"))
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except UnicodeDecodeError as error:
        problem = "the file is neither NetCDF nor UTF-8 text"
        raise InputError(
            Fault(source, "", problem, "Must be one of them", "Check the path, or save it as UTF-8")
        ) from error
    notes = {match[1]: match[2] for match in map(_NOTE.match, lines) if match}
    rows = [(number, line) for number, line in enumerate(lines, 1) if line.strip() and not line.startswith("#")]
    factor = _factor(notes, source)
    header = tuple(column.strip() for column in rows[0][1].split(",")) if rows else ()
    if header not in headers:
        problem = f"the header is {','.join(header)!r}"
        allowed = f"Must be {' or '.join(','.join(each) for each in headers)}"
        raise InputError(Fault(source, "", problem, allowed, "Name the columns", rows[0][0] if rows else 1))
    numbers = np.array([number for number, _ in rows[1:]], dtype=np.int64)
    time, values = _columns([line for _, line in rows[1:]], numbers, header, source)
    if notes.get("stamp") == "start":
        time = middle_of_intervals(time)
    return time, values * factor


def _factor(notes: dict[str, str], source: str) -> float:
    if "units" not in notes:
        action = 'Add the line "# units: hPa" at the top'
        raise InputError(Fault(source, "units", "no units are stated", "Must be a pressure such as Pa or hPa", action))
    if notes.get("stamp", "middle") not in _STAMPS:
        raise InputError(
            Fault(source, "stamp", f"the stamp is {notes['stamp']!r}", 'Must be "middle" or "start"', "Correct it")
        )
    return pascal_of_field(notes["units"], source=source, name="units")


def _columns(
    rows: list[str], numbers: NDArray[np.int64], header: tuple[str, ...], source: str
) -> tuple[NDArray[np.datetime64], NDArray[np.float64]]:
    cells = [row.split(",") for row in rows]
    wrong = [number for number, row in zip(numbers, cells, strict=True) if len(row) != len(header)]
    if wrong:
        problem = f"{len(wrong)} rows do not have {'two' if len(header) == 2 else len(header)} columns"
        allowed = f"Must be {','.join(header)}"
        raise InputError(Fault(source, "", problem, allowed, "Correct the first of them", int(wrong[0])))
    if not cells:
        return np.empty(0, dtype="datetime64[ns]"), np.empty((len(header) - 1, 0))
    faults: list[Fault] = []
    values = np.array([
        _numbers([row[place].strip() for row in cells], numbers, name, source, faults)
        for place, name in enumerate(header[1:], 1)
    ])  # fmt: skip
    try:
        time = parsed_time(pd.Series([row[0].strip() for row in cells]), "iso", numbers, source=source, name="time")
    except InputError as error:
        faults.extend(error.faults)
    if faults:
        raise InputError(faults)
    _require_order(time, numbers, source)
    return time, values


def _numbers(
    texts: list[str], numbers: NDArray[np.int64], name: str, source: str, faults: list[Fault]
) -> NDArray[np.float64]:
    values = pd.to_numeric(pd.Series(texts, dtype=object), errors="coerce").to_numpy(dtype=float)
    empty = np.array([text.casefold() in ("", "nan") for text in texts])
    wrong = np.flatnonzero(np.isnan(values) & ~empty)
    if wrong.size:
        more = f" (and {wrong.size - 1} more lines)" if wrong.size > 1 else ""
        problem = f"the value is {texts[wrong[0]]!r}{more}"
        faults.append(Fault(source, name, problem, "Must be a number, or empty", "Correct it", int(numbers[wrong[0]])))
    return values


def _require_order(time: NDArray[np.datetime64], numbers: NDArray[np.int64], source: str) -> None:
    try:
        require_order(time, source=source)
    except InputError as error:
        (fault,) = error.faults
        wrong = np.flatnonzero(np.diff(time) <= np.timedelta64(0))
        line = int(numbers[wrong[0] + 1]) if wrong.size else None
        raise InputError(Fault(source, "time", fault.problem, fault.allowed, fault.action, line)) from error
