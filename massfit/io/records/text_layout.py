"""How a text file of a record is laid out: its header, and which column means what."""

from collections.abc import Iterator
from dataclasses import dataclass
from difflib import get_close_matches
from typing import TextIO

from massfit.errors import Fault, InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import NO_FLAGS
from massfit.io.records.text_time import DATE_PARTS, needed_parts
from massfit.io.records.zones import require_utc, zones_of_header

LONGEST_LINE = 100_000
"""Characters; a file without ends of lines must not fill the memory."""
KIND = "kind"
PRESSURE = "pressure"
FLAG = "flag"


@dataclass(frozen=True)
class TextLayout:
    """Which column means what.

    Parameters
    ----------
    names : tuple of str
        Every column, in order.
    pressure : str
    date : tuple of str
        Parts of the date that have a column; empty where `time` is not.
    time : tuple of str
        Columns of the time, joined by a space.
    flag : str
        Column of quality flags; empty where none is used.
    header_line : int
        Last line of the header, counted from 1; 0 where there is none.
    """

    names: tuple[str, ...]
    pressure: str
    date: tuple[str, ...]
    time: tuple[str, ...]
    flag: str
    header_line: int

    @property
    def used(self) -> list[str]:
        """Columns that are read, in order."""
        wanted = {self.pressure, *self.date, *self.time, self.flag, KIND}
        return [name for name in self.names if name in wanted]


def text_layout(file: TextIO, entry: DeploymentFile) -> TextLayout:
    """Tell from its first rows how a text file is laid out.

    Parameters
    ----------
    file : text stream
        At its beginning.
    entry : DeploymentFile

    Returns
    -------
    TextLayout

    Raises
    ------
    InputError
        With every fault of columns; or the header says that the times are not in UTC.
    """
    layout, first_row = _columns(file, entry)
    file.seek(0)
    above = zip(range(1, max(first_row, layout.header_line + 1)), file, strict=False)
    require_utc(zones_of_header(above), entry)
    return layout


def _columns(file: TextIO, entry: DeploymentFile) -> tuple[TextLayout, int]:
    """Layout, and the number of the first row of data."""
    rows = _rows(file, entry)
    number, fields = _first_row(rows, entry)
    header_line = 0
    names = entry.columns
    if names is not None:
        # a row without any number above the first that has one names columns and units, or holds no value
        while not any(_is_number(field) for field in fields):
            header_line = number
            number, fields = _first_row(rows, entry)
    else:
        if any(_is_number(field) for field in fields):
            problem = f"no header line: the first row is {fields}"
            action = 'State `columns`, for example columns = ["time", "pressure"]'
            raise InputError(Fault(entry.file, "columns", problem, action=action, line=number))
        names, header_line = tuple(fields), number
    faults = _name_faults(names, fields, number, entry)
    if faults:
        raise InputError(faults)
    stated = entry.start_time is not None
    date = () if stated or entry.time_column is not None else tuple(part for part in DATE_PARTS if part in names)
    time = () if stated or date else _time_columns(names, entry)
    flag = _flag_column(names, entry)
    pressure = entry.variable or _sole_pressure(names, (*time, flag))
    wanted = [*(("time_column", name) for name in time), ("variable", pressure)]
    wanted += [("keep_kinds", KIND)] if entry.keep_kinds is not None else []
    wanted += [("columns", part) for part in needed_parts(names) if date]
    wanted += [("flag_variable", flag)] if flag else []
    faults = [_no_column(entry.file, key, name, names) for key, name in wanted if name not in names]
    if faults:
        raise InputError(faults)
    return TextLayout(names, pressure, date, time, flag, header_line), number


def _rows(file: TextIO, entry: DeploymentFile) -> Iterator[tuple[int, list[str]]]:
    """Line numbers and fields of the rows that are no comments."""
    for number, line in enumerate(_lines(file, entry.file), start=1):
        if is_data(line, entry.comment):
            yield number, [field.strip().strip('"') for field in line.rstrip("\r\n").split(entry.delimiter)]


def _first_row(rows: Iterator[tuple[int, list[str]]], entry: DeploymentFile) -> tuple[int, list[str]]:
    for row in rows:
        return row
    raise InputError(no_row_fault(entry))


def _lines(file: TextIO, source: str) -> Iterator[str]:
    number = 0
    while line := file.readline(LONGEST_LINE):
        number += 1
        if len(line) == LONGEST_LINE and not line.endswith("\n"):
            raise InputError(long_line_fault(source, number))
        yield line


def long_line_fault(source: str, number: int) -> Fault:
    """Say that a line is too long to be a row."""
    problem = f"the line has {LONGEST_LINE} characters or more"
    return Fault(source, "", problem, "Must be rows of a few numbers", "Check the file", number)


def no_row_fault(entry: DeploymentFile) -> Fault:
    """Say that a file holds no data."""
    return Fault(entry.file, "", "the file has no row of data", action="Check the file and `comment`")


def is_data(line: str, comment: str) -> bool:
    """Whether a line is neither blank nor a comment."""
    text = line.strip()
    return bool(text) and not (comment and text.startswith(comment))


def _is_number(field: str) -> bool:
    try:
        float(field)
    except ValueError:
        return False
    return True


def _name_faults(names: tuple[str, ...], fields: list[str], line: int, entry: DeploymentFile) -> list[Fault]:
    used = [name for name in names if names.count(name) > 1 and name in (*DATE_PARTS, KIND, FLAG, PRESSURE)]
    faults = [
        Fault(entry.file, "columns", f"{name!r} stands for more than one column", "Must be unique", "Rename one")
        for name in dict.fromkeys(used)
    ]
    marks = [mark for mark in (",", ";", "\t") if mark in " ".join(fields)]
    if entry.delimiter is None and marks and len(fields) <= len(names):
        action = f"State `delimiter`, for example delimiter = {marks[0]!r}"
        problem = f"columns are split at white space, but the row holds {marks[0]!r}"
        return [*faults, Fault(entry.file, "delimiter", problem, action=action, line=line)]
    if len(fields) != len(names):
        problem = f"the row has {len(fields)} fields and `columns` names {len(names)}"
        faults.append(Fault(entry.file, "columns", problem, "Must agree", "Name every column in order", line))
    return faults


def _time_columns(names: tuple[str, ...], entry: DeploymentFile) -> tuple[str, ...]:
    """Columns of the time: one, or several whose names `time_column` lists with spaces between."""
    column = entry.time_column or "time"
    parts = tuple(column.split())
    return parts if column not in names and len(parts) > 1 else (column,)


def _flag_column(names: tuple[str, ...], entry: DeploymentFile) -> str:
    """Name the column of flags: the stated one, else the one called flag."""
    if entry.flag_variable is None:
        return FLAG if FLAG in names and entry.variable != FLAG else ""
    return "" if entry.flag_variable == NO_FLAGS else entry.flag_variable


def _sole_pressure(names: tuple[str, ...], time: tuple[str, ...]) -> str:
    """Name the column called pressure, or the only one without another meaning."""
    others = [name for name in names if name not in (*DATE_PARTS, KIND, FLAG, *time)]
    return others[0] if len(others) == 1 and PRESSURE not in names else PRESSURE


def _no_column(source: str, key: str, name: str, names: tuple[str, ...]) -> Fault:
    near = get_close_matches(name, names, n=1)
    keys = " or ".join(f"`{each}`" for each in dict.fromkeys((key, "columns")))
    action = f"Did you mean {near[0]!r}?" if near else f"State {keys}"
    return Fault(source, key, f"there is no column {name!r}", f"The columns are {', '.join(names)}", action)
