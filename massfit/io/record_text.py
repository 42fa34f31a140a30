"""Pressure records in text: columns of numbers and a time in one column or in parts."""

from collections.abc import Iterator
from csv import QUOTE_NONE
from dataclasses import dataclass
from difflib import get_close_matches
from io import StringIO
from itertools import islice
from pathlib import Path
from typing import TextIO

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError, collect
from massfit.io.deployment import DeploymentFile
from massfit.io.samples import Samples
from massfit.io.text_time import DATE_PARTS, joined_date, line_fault, needed_parts, parsed_time
from massfit.io.units import pascal_per_unit
from massfit.records.record import Action

_CHUNK_LINES = 500_000
_LONGEST_LINE = 100_000  # characters; a file without ends of lines must not fill the memory
_KIND = "kind"
_PRESSURE = "pressure"


@dataclass(frozen=True)
class _Layout:
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
    header_line : int
        Last line of the header, counted from 1; 0 where there is none.
    """

    names: tuple[str, ...]
    pressure: str
    date: tuple[str, ...]
    time: tuple[str, ...]
    header_line: int

    @property
    def used(self) -> list[str]:
        wanted = {self.pressure, *self.date, *self.time, _KIND}
        return [name for name in self.names if name in wanted]


def read_text_record(path: Path, entry: DeploymentFile) -> Samples:
    """Read a text file of one record.

    Parameters
    ----------
    path : pathlib.Path
    entry : DeploymentFile
        `units` is required; `columns` where the file has no header line.

    Returns
    -------
    Samples
        In the order of the file, of either direction.

    Raises
    ------
    InputError
        With every fault: of the settings first, then one a kind of damaged line,
        with the first line number and how many follow.
    """
    with path.open(encoding="utf-8-sig", errors="replace") as file:
        layout, factor = _prepared(file, entry)
        file.seek(0)
        table, faults = _table(file, layout, entry)
    lines = table.index.to_numpy()
    actions: tuple[Action, ...] = ()
    if entry.keep_kinds is not None:
        kept = table[_KIND].str.strip().isin(entry.keep_kinds).to_numpy()
        table, lines = table[kept], lines[kept]
        actions = (_other_kinds(kept, entry.keep_kinds),)
    with collect(faults):
        pressure = _numbers(table[layout.pressure], entry.file)
    with collect(faults):
        time = _time(table, layout, entry)
    if faults:
        raise InputError(faults)
    pressure[np.isin(pressure, entry.missing)] = np.nan
    return Samples(time, pressure * factor, actions=actions, units=entry.units or "")


def _other_kinds(kept: NDArray[np.bool_], kinds: tuple[str, ...]) -> Action:
    return Action("rows of other kinds left out", int(np.count_nonzero(~kept)), f"kept: {', '.join(kinds)}")


def _prepared(file: TextIO, entry: DeploymentFile) -> tuple[_Layout, float]:
    faults: list[Fault] = []
    factor = np.nan
    if entry.units is None:
        action = 'State `units`, for example units = "dbar"'
        faults.append(Fault(entry.file, "units", "a text record does not say its unit", action=action))
    else:
        with collect(faults):
            factor = pascal_per_unit(entry.units, density_kg_m3=entry.density_kg_m3, source=entry.file)
    with collect(faults):
        layout = _layout(file, entry)
    if faults:
        raise InputError(faults)
    return layout, factor


def _layout(file: TextIO, entry: DeploymentFile) -> _Layout:
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
    date = tuple(part for part in DATE_PARTS if part in names) if entry.time_column is None else ()
    time = () if date else _time_columns(names, entry)
    pressure = entry.variable or _sole_pressure(names, time)
    wanted = [*(("time_column", name) for name in time), ("variable", pressure)]
    wanted += [("keep_kinds", _KIND)] if entry.keep_kinds is not None else []
    wanted += [("columns", part) for part in needed_parts(names) if date]
    faults = [_no_column(entry.file, key, name, names) for key, name in wanted if name not in names]
    if faults:
        raise InputError(faults)
    return _Layout(names, pressure, date, time, header_line)


def _rows(file: TextIO, entry: DeploymentFile) -> Iterator[tuple[int, list[str]]]:
    """Line numbers and fields of the rows that are no comments."""
    for number, line in enumerate(_lines(file, entry.file), start=1):
        if _is_data(line, entry.comment):
            yield number, [field.strip().strip('"') for field in line.rstrip("\r\n").split(entry.delimiter)]


def _first_row(rows: Iterator[tuple[int, list[str]]], entry: DeploymentFile) -> tuple[int, list[str]]:
    for row in rows:
        return row
    raise InputError(_no_row(entry))


def _lines(file: TextIO, source: str) -> Iterator[str]:
    number = 0
    while line := file.readline(_LONGEST_LINE):
        number += 1
        if len(line) == _LONGEST_LINE and not line.endswith("\n"):
            problem = f"the line has {_LONGEST_LINE} characters or more"
            raise InputError(Fault(source, "", problem, "Must be rows of a few numbers", "Check the file", number))
        yield line


def _no_row(entry: DeploymentFile) -> Fault:
    return Fault(entry.file, "", "the file has no row of data", action="Check the file and `comment`")


def _is_data(line: str, comment: str) -> bool:
    text = line.strip()
    return bool(text) and not (comment and text.startswith(comment))


def _is_number(field: str) -> bool:
    try:
        float(field)
    except ValueError:
        return False
    return True


def _name_faults(names: tuple[str, ...], fields: list[str], line: int, entry: DeploymentFile) -> list[Fault]:
    used = [name for name in names if names.count(name) > 1 and name in (*DATE_PARTS, _KIND, _PRESSURE)]
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


def _sole_pressure(names: tuple[str, ...], time: tuple[str, ...]) -> str:
    """Name the column called pressure, or the only one without another meaning."""
    others = [name for name in names if name not in (*DATE_PARTS, _KIND, *time)]
    return others[0] if len(others) == 1 and _PRESSURE not in names else _PRESSURE


def _no_column(source: str, key: str, name: str, names: tuple[str, ...]) -> Fault:
    near = get_close_matches(name, names, n=1)
    keys = " or ".join(f"`{each}`" for each in dict.fromkeys((key, "columns")))
    action = f"Did you mean {near[0]!r}?" if near else f"State {keys}"
    return Fault(source, key, f"there is no column {name!r}", f"The columns are {', '.join(names)}", action)


def _table(file: TextIO, layout: _Layout, entry: DeploymentFile) -> tuple[pd.DataFrame, list[Fault]]:
    """Columns that are used, indexed by line number, and the faults of ragged lines."""
    parts: list[pd.DataFrame] = []
    ragged: list[tuple[int, int]] = []
    for numbers, lines in _chunks(file, layout, entry):
        counts = _field_counts(lines, entry.delimiter)
        good = counts == len(layout.names)
        ragged += zip(numbers[~good].tolist(), counts[~good].tolist(), strict=True)
        fitting = lines if good.all() else [line for line, fits in zip(lines, good, strict=True) if fits]
        if fitting:
            parts.append(_parsed(fitting, numbers[good], layout, entry))
    faults = []
    if ragged:
        lines, counts = np.array(ragged).T
        bad = np.zeros(lines.size, dtype=bool)
        faults.append(line_fault(entry.file, "fields in the row", counts, bad, lines, f"Must be {len(layout.names)}"))
    if not parts:
        raise InputError([*faults, _no_row(entry)])
    return pd.concat(parts), faults


def _chunks(file: TextIO, layout: _Layout, entry: DeploymentFile) -> Iterator[tuple[NDArray[np.int64], list[str]]]:
    """Numbers and texts of the rows of data, a bounded number of lines at a time."""
    numbered = enumerate(_lines(file, entry.file), start=1)
    while block := list(islice(numbered, _CHUNK_LINES)):
        rows = [row for row in block if row[0] > layout.header_line and _is_data(row[1], entry.comment)]
        yield np.array([number for number, _ in rows], dtype=np.int64), [line for _, line in rows]


def _field_counts(lines: list[str], delimiter: str | None) -> NDArray[np.int64]:
    if delimiter is None:
        return np.fromiter((len(line.split()) for line in lines), dtype=np.int64, count=len(lines))
    return np.fromiter((line.count(delimiter) + 1 for line in lines), dtype=np.int64, count=len(lines))


def _parsed(lines: list[str], numbers: NDArray[np.int64], layout: _Layout, entry: DeploymentFile) -> pd.DataFrame:
    # names may repeat among the columns that are not used
    positions = [layout.names.index(name) for name in layout.used]
    texts = [position for position in positions if layout.names[position] in (_KIND, *layout.time)]
    # a quote that is never closed would swallow lines
    text = "".join(line if line.endswith("\n") else line + "\n" for line in lines).replace('"', "")
    try:
        table = pd.read_csv(
            StringIO(text),
            sep=r"\s+" if entry.delimiter is None else entry.delimiter,
            header=None,
            usecols=positions,
            dtype=dict.fromkeys(texts, str),
            skipinitialspace=True,
            skip_blank_lines=False,
            quoting=QUOTE_NONE,
            low_memory=False,
            engine="c",
        )
        table.columns = pd.Index(layout.used)
        return table.set_index(pd.Index(numbers))
    except ValueError as error:
        problem = f"the rows cannot be parsed ({str(error).splitlines()[0]})"
        raise InputError(Fault(entry.file, "", problem, "Must be plain text", line=int(numbers[0]))) from error


def _numbers(column: "pd.Series[float]", source: str) -> NDArray[np.float64]:
    """Turn a column into float64; an empty field is missing, a word is a fault."""
    values = pd.to_numeric(column, errors="coerce").to_numpy(dtype=np.float64, copy=True)
    good = np.isfinite(values) | column.isna().to_numpy()
    if not good.all():
        texts, lines = column.to_numpy(dtype=object), column.index.to_numpy()
        raise InputError(line_fault(source, str(column.name), texts, good, lines, "Must be a number, or empty"))
    return values


def _time(table: pd.DataFrame, layout: _Layout, entry: DeploymentFile) -> NDArray[np.datetime64]:
    lines = table.index.to_numpy()
    if layout.time:
        texts = table[layout.time[0]]
        for name in layout.time[1:]:
            texts = texts + " " + table[name]
        return parsed_time(texts, entry.time_format or "iso", lines, source=entry.file, name=" ".join(layout.time))
    faults: list[Fault] = []
    parts: dict[str, NDArray[np.float64]] = {}
    for part in layout.date:
        with collect(faults):
            parts[part] = _numbers(table[part], entry.file)
    if faults:
        raise InputError(faults)
    return joined_date(parts, lines, source=entry.file)
