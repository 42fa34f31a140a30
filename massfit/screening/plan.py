"""How the work on a field is cut into parts, within a stated memory."""

from dataclasses import dataclass

import numpy as np

from massfit.screening.design import FITTED, Design
from massfit.screening.field import BlockSource
from massfit.screening.times import TimeAxis

DEFAULT_MEMORY_GB = 1.5
"""Memory of one process for sums and blocks unless another is stated; Python and its libraries take 0.3 GB more."""

_MOST_PARTS = 16  # of the times: more would only be sent about
_SUMS_AT_ONCE = 3  # one that grows, one that waits to be fetched, one on its way
_BLOCKS_AT_ONCE = 3  # as read, in pascal, and what is finite
_LEAST_BLOCK, _BEST_BLOCK = 8, 64  # times that are read at once
_BEST_BLOCK_VALUES = 8_000_000
_BYTES = 8


@dataclass(frozen=True)
class Plan:
    """Parts of the work on one field.

    Parameters
    ----------
    bands : tuple of slice
        Rows that are summed together; one when the sums of the whole field fit into the memory.
    spans : tuple of slice
        Times of each part: whole calendar years, in order.
    block : int
        Times that are read at once.
    readings : int
        How often what is stored is read: more than once where stored pieces hold more rows than a band.
    memory_bytes : int
        What one process takes for a part. A cell whose gaps are its own takes `columns` times 48 bytes more.
    """

    bands: tuple[slice, ...]
    spans: tuple[slice, ...]
    block: int
    readings: int
    memory_bytes: int


def make_plan(source: BlockSource, axis: TimeAxis, design: Design, memory_gb: float = DEFAULT_MEMORY_GB) -> Plan:
    """Cut the work on a field into parts.

    The cut depends on the field and on the memory alone, never on how many processes share the work: the sums are
    the same to the last bit.

    Parameters
    ----------
    source : BlockSource
    axis : TimeAxis
    design : Design
    memory_gb : float
        Of one process.

    Returns
    -------
    Plan
    """
    stored_times, stored_rows = source.chunks
    n_row, n_lon = source.latitude_deg.size, source.longitude_deg.size
    per_cell = _BYTES * (design.columns + FITTED + 4)
    stored_times = min(stored_times, axis.time.size)
    least = max(min(_LEAST_BLOCK, axis.time.size), stored_times)
    for number in range(1, n_row + 1):
        rows = _rows_of_band(-(-n_row // number), stored_rows)
        cells = rows * n_lon
        room = (memory_gb * 1e9 - _SUMS_AT_ONCE * per_cell * cells) / (_BLOCKS_AT_ONCE * _BYTES * cells)
        if room >= least:
            break
    wanted = max(_BEST_BLOCK, _BEST_BLOCK_VALUES // cells)
    block = max(least, int(min(wanted, room)) // stored_times * stored_times)
    memory = (_SUMS_AT_ONCE * per_cell + _BLOCKS_AT_ONCE * _BYTES * block) * cells
    bands = tuple(slice(first, min(first + rows, n_row)) for first in range(0, n_row, rows))
    spans = _spans(axis, max(stored_times, 4 * design.columns))
    return Plan(bands, spans, block, -(-stored_rows // rows), int(memory))


def _rows_of_band(rows: int, stored: int) -> int:
    """Round to whole stored pieces; less than one only where the memory leaves no choice: it is then read again."""
    return rows if rows < stored else rows // stored * stored


def _spans(axis: TimeAxis, least: int) -> tuple[slice, ...]:
    """Whole calendar years, at least so many times each and at most so many parts."""
    starts = np.flatnonzero(np.diff(axis.years, prepend=axis.years[0] - 1))
    least = max(least, -(-axis.time.size // _MOST_PARTS))
    cuts = [0]
    for start in starts:
        if start - cuts[-1] >= least and axis.time.size - start >= least // 2:
            cuts.append(int(start))
    return tuple(slice(first, last) for first, last in zip(cuts, [*cuts[1:], axis.time.size], strict=True))
