"""Pressure records in text: columns of numbers and a time in one column or in parts."""

from collections import Counter
from csv import QUOTE_NONE
from dataclasses import dataclass, field
from io import BytesIO
from pathlib import Path
from typing import TypeVar

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from massfit.errors import Fault, InputError, collect
from massfit.io.deployment import DeploymentFile
from massfit.io.samples import Flags, Samples, in_pascal
from massfit.io.stated_time import stated_time
from massfit.io.text_blocks import Block, text_blocks
from massfit.io.text_layout import KIND, TextLayout, no_row_fault, text_layout
from massfit.io.text_stamps import Stamps, fixed_iso, stamps_of
from massfit.io.text_time import joined_date, line_fault, merged_faults
from massfit.io.units import pascal_per_unit
from massfit.records.record import Action

_T = TypeVar("_T", bound=np.generic)

_SIXTIES = "seconds of 60 read as the next minute"
_SHIFTED = "times with an offset from UTC brought to UTC"


@dataclass
class _Found:
    """What the blocks of a file gave so far.

    Parameters
    ----------
    time, pressure, flags, rows : list of array
        One array a block; rows is counted from the first row of data.
    faults : list of Fault
    counts : Counter of str
        Rows concerned, by action.
    seen : int
        Rows of the right number of fields.
    """

    time: list[NDArray[np.datetime64]] = field(default_factory=list)
    pressure: list[NDArray[np.float64]] = field(default_factory=list)
    flags: list[NDArray[np.float64]] = field(default_factory=list)
    rows: list[NDArray[np.int64]] = field(default_factory=list)
    faults: list[Fault] = field(default_factory=list)
    counts: Counter[str] = field(default_factory=Counter)
    seen: int = 0


def read_text_record(path: Path, entry: DeploymentFile) -> Samples:
    """Read a text file of one record.

    The file is read block by block, so that a long one takes little more memory than its numbers.

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
    layout, factor = _prepared(path, entry)
    found = _Found()
    blocks = text_blocks(
        path, width=len(layout.names), delimiter=entry.delimiter, comment=entry.comment,
        header_line=layout.header_line, source=entry.file,
    )  # fmt: skip
    for block in blocks:
        _take(found, block, layout, entry, factor)
    if found.faults or not found.seen:
        raise InputError(merged_faults([*found.faults, *([] if found.seen else [no_row_fault(entry)])]))
    pressure = _joined(found.pressure, np.dtype(np.float64))
    flags = (Flags(layout.flag, _joined(found.flags, np.dtype(np.float64))),) if layout.flag else ()
    if entry.start_time is not None:
        time = stated_time(found.seen, entry)
        rows = _joined(found.rows, np.dtype(np.int64))
        time = time if rows.size == found.seen else time[rows]
    else:
        time = _joined(found.time, np.dtype("datetime64[ns]"))
    return Samples(time, pressure, actions=_actions(found, entry), units=entry.units or "", flags=flags)


def _prepared(path: Path, entry: DeploymentFile) -> tuple[TextLayout, float]:
    faults: list[Fault] = []
    factor = np.nan
    if entry.units is None:
        action = 'State `units`, for example units = "dbar"'
        faults.append(Fault(entry.file, "units", "a text record does not say its unit", action=action))
    else:
        with collect(faults):
            factor = pascal_per_unit(entry.units, density_kg_m3=entry.density_kg_m3, source=entry.file)
    with collect(faults), path.open(encoding="utf-8-sig", errors="replace") as file:
        layout = text_layout(file, entry)
    if faults:
        raise InputError(faults)
    return layout, factor


def _actions(found: _Found, entry: DeploymentFile) -> tuple[Action, ...]:
    details = {_SIXTIES: "a leap second, or rounding", _SHIFTED: "as each of them says"}
    actions = [Action(what, count, details[what]) for what, count in found.counts.items() if what in details and count]
    if entry.keep_kinds is not None:
        kept = f"kept: {', '.join(entry.keep_kinds)}"
        actions.insert(0, Action("rows of other kinds left out", found.counts["other kinds"], kept))
    return tuple(actions)


def _joined(parts: list[NDArray[_T]], dtype: "np.dtype[_T]") -> NDArray[_T]:
    """Join arrays and let go of them."""
    whole = np.concatenate(parts) if parts else np.empty(0, dtype=dtype)
    parts.clear()
    return whole


def _take(found: _Found, block: Block, layout: TextLayout, entry: DeploymentFile, factor: float) -> None:
    """Add what a block of rows holds."""
    if block.ragged.size:
        bad = np.zeros(block.ragged.size, dtype=bool)
        allowed = f"Must be {len(layout.names)}"
        found.faults.append(line_fault(entry.file, "fields in the row", block.counts, bad, block.ragged, allowed))
    if not block.lines.size:
        return
    time = _fixed_times(block, layout, entry)
    table = _parsed(block, [name for name in layout.used if time is None or name not in layout.time], layout, entry)
    rows, found.seen = np.arange(found.seen, found.seen + block.lines.size), found.seen + block.lines.size
    if entry.keep_kinds is not None:
        kept = _of_kinds(table[KIND], entry.keep_kinds)
        found.counts["other kinds"] += int(np.count_nonzero(~kept))
        table, rows, time = table[kept], rows[kept], None if time is None else time[kept]
    with collect(found.faults):
        found.pressure.append(in_pascal(_numbers(table[layout.pressure], entry.file), entry, factor))
    if layout.flag:
        with collect(found.faults):
            found.flags.append(_whole_numbers(table[layout.flag], entry.file))
    if entry.start_time is not None:
        found.rows.append(rows)
        return
    with collect(found.faults):
        stamps = Stamps(time) if time is not None else _time(table, layout, entry)
        found.time.append(stamps.time)
        found.counts.update({_SHIFTED: stamps.shifted, _SIXTIES: stamps.sixties})


def _fixed_times(block: Block, layout: TextLayout, entry: DeploymentFile) -> NDArray[np.datetime64] | None:
    """Read times in one column of one plain form without making text of each; None where it takes more than that."""
    if block.starts is None or block.ends is None or len(layout.time) != 1 or entry.time_format not in (None, "iso"):
        return None
    column = layout.names.index(layout.time[0])
    starts, lengths = block.starts[:, column], (block.ends - block.starts)[:, column]
    if lengths.min() != lengths.max():
        return None
    return fixed_iso(np.frombuffer(block.text, dtype=np.uint8), starts, int(lengths[0]))


def _parsed(block: Block, used: list[str], layout: TextLayout, entry: DeploymentFile) -> pd.DataFrame:
    # names may repeat among the columns that are not used
    positions = [layout.names.index(name) for name in used]
    texts = [position for position in positions if layout.names[position] in layout.time]
    kinds = [position for position in positions if layout.names[position] == KIND]
    types: dict[int, str] = dict.fromkeys(texts, "str") | dict.fromkeys(kinds, "category")
    try:
        table: pd.DataFrame = pd.read_csv(
            BytesIO(block.text),
            sep=r"\s+" if entry.delimiter is None else entry.delimiter,
            header=None,
            usecols=positions,
            dtype=types,
            skipinitialspace=True,
            skip_blank_lines=False,
            quoting=QUOTE_NONE,
            low_memory=False,
            engine="c",
        )
        table.columns = pd.Index([layout.names[position] for position in sorted(positions)])
        return table.set_index(pd.Index(block.lines))
    except ValueError as error:
        problem = f"the rows cannot be parsed ({str(error).splitlines()[0]})"
        raise InputError(Fault(entry.file, "", problem, "Must be plain text", line=int(block.lines[0]))) from error


def _of_kinds(kinds: "pd.Series[str]", kept: tuple[str, ...]) -> NDArray[np.bool_]:
    wanted = [str(kind).strip() in kept for kind in kinds.cat.categories]
    codes = kinds.cat.codes.to_numpy()
    return np.asarray(np.append(wanted, False)[codes])  # -1, a kind that is missing, is the last


def _numbers(column: "pd.Series[float]", source: str) -> NDArray[np.float64]:
    """Turn a column into float64; an empty field is missing, a word is a fault."""
    values = pd.to_numeric(column, errors="coerce").to_numpy(dtype=np.float64, copy=True)
    good = np.isfinite(values) | column.isna().to_numpy()
    if not good.all():
        texts, lines = column.to_numpy(dtype=object), column.index.to_numpy()
        raise InputError(line_fault(source, str(column.name), texts, good, lines, "Must be a number, or empty"))
    return values


def _whole_numbers(column: "pd.Series[float]", source: str) -> NDArray[np.float64]:
    """Turn a column of flags into float64: whole numbers, or empty."""
    values = _numbers(column, source)
    good = np.isnan(values) | (values == np.floor(values))
    if not good.all():
        lines = column.index.to_numpy()
        raise InputError(line_fault(source, str(column.name), values, good, lines, "Must be a whole number, or empty"))
    return values


def _time(table: pd.DataFrame, layout: TextLayout, entry: DeploymentFile) -> Stamps:
    lines = table.index.to_numpy()
    if layout.time:
        texts = table[layout.time[0]]
        for name in layout.time[1:]:
            texts = texts + " " + table[name]
        return stamps_of(texts, lines, entry, name=" ".join(layout.time))
    faults: list[Fault] = []
    parts: dict[str, NDArray[np.float64]] = {}
    for part in layout.date:
        with collect(faults):
            parts[part] = _numbers(table[part], entry.file)
    if faults:
        raise InputError(faults)
    sixties = int(np.count_nonzero(parts["second"] >= 60.0)) if "second" in parts else 0
    return Stamps(joined_date(parts, lines, source=entry.file), sixties=sixties)
