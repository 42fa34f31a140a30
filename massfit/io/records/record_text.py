"""Pressure records in text: columns of numbers and a time in one column or in parts."""

from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError, collect
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.samples import Flags, Samples, in_pascal
from massfit.io.records.stated_time import stated_time
from massfit.io.records.text_blocks import Block, text_blocks
from massfit.io.records.text_layout import TextLayout, no_row_fault, text_layout
from massfit.io.records.text_rows import Rows
from massfit.io.records.text_time import line_fault, merged_faults
from massfit.io.records.units import pascal_per_unit
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
    rows = Rows(block, layout, entry)
    first, found.seen = found.seen, found.seen + block.lines.size
    found.counts["other kinds"] += block.lines.size - rows.lines.size
    with collect(found.faults):
        found.pressure.append(in_pascal(rows.numbers(layout.pressure), entry, factor))
    if layout.flag:
        with collect(found.faults):
            found.flags.append(rows.whole_numbers(layout.flag))
    if entry.start_time is not None:
        found.rows.append(first + rows.places)
        return
    with collect(found.faults):
        stamps = rows.stamps()
        found.time.append(stamps.time)
        found.counts.update({_SHIFTED: stamps.shifted, _SIXTIES: stamps.sixties})
