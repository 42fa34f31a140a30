"""Small lines inside a table: what remains of each record, all on one time axis and one scale."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from markupsafe import Markup
from numpy.typing import NDArray

from massfit.report.pages.page_tables import Table

Weeks = tuple[NDArray[np.int64], NDArray[np.float64]]

_WIDTH, _HEIGHT, _REACH_HPA = 110, 26, 4.0


def with_sparklines(table: Table, sites: Sequence[Mapping[str, Any]], weeks: int, means: Mapping[str, Weeks]) -> Table:
    """Add the line of each site's record to its row.

    Parameters
    ----------
    table : Table
        One row a site.
    sites : sequence of mapping
        From `estimate.json`, in the order of the rows.
    weeks : int
        Of the time axis.
    means : mapping of str to (weeks, hPa)
        By site; one that is missing has an empty cell.

    Returns
    -------
    Table
        As given where there is no record at all.
    """
    if not means:
        return table
    cells = [_line(weeks, *means[site["id"]]) if site["id"] in means else "" for site in sites]
    head = (table.head[0], f"reduced record, \u00b1{_REACH_HPA:g} hPa", *table.head[1:])
    rows = [(row[0], cell, *row[1:]) for row, cell in zip(table.rows, cells, strict=True)]
    return replace(table, head=head, rows=rows)


def _line(count: int, weeks: NDArray[np.int64], means: NDArray[np.float64]) -> Markup:
    """Draw weekly means, broken where a week is missing; what is out of reach runs along the edge."""
    x = np.rint(10.0 * _WIDTH * (weeks + 0.5) / count).astype(int)
    y = np.rint(5.0 * _HEIGHT * (1.0 - np.clip(means / _REACH_HPA, -1.0, 1.0))).astype(int)
    starts = np.diff(weeks, prepend=-2) > 1
    path = "".join(f"{'M' if start else 'L'}{a} {b}" for start, a, b in zip(starts, x, y, strict=True))
    size = f'width="{_WIDTH}" height="{_HEIGHT}" viewBox="0 0 {10 * _WIDTH} {10 * _HEIGHT}"'
    words = f"weekly means from {means.min():.1f} to {means.max():.1f} hPa"
    zero = f"M0 {5 * _HEIGHT}H{10 * _WIDTH}"
    lines = f'<path class="zero" d="{zero}"/><path d="{path}"/>'
    return Markup(f'<svg class="spark" {size} role="img" aria-label="{words}">{lines}</svg>')
