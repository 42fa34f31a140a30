"""The coverage calendar: which months of which sites the answer rests on."""

from typing import Any

import numpy as np
import xarray as xr
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.dates import DateFormatter, YearLocator, date2num
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from numpy.typing import NDArray

from massfit.report.figures.style import (
    ANSWER,
    COLUMN_WIDTH_MM,
    PAGE_WIDTH_MM,
    REFERENCE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.words.names import fitted

_STEPS = ((0.001, "#F2F2F2", "none of its days"), (0.5, "#B7D3E6", "under half"), (0.9, "#5FA2CE", "half and more"),
          (1.01, ANSWER, "90 % and more"))  # fmt: skip
"""Upper edge of a step of the share of days, its colour (darker for more), and its words."""

_BEGINS: dict[str, Any] = {"marker": ">", "markersize": 2.6, "color": "black", "markeredgewidth": 0.0}

_LEAST_ROW_MM, _MOST_ROW_MM = 2.2, 4.0
_COUNT_MM = 14.0
_MOST_MM = 230.0  # of a page


def coverage_calendar(coverage: xr.Dataset, *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw a row for each site and a cell for each month, and above them how many sites were at work.

    Parameters
    ----------
    coverage : xarray.Dataset
        `share` (site, month), 0 to 1, NaN where there are no data; `deployed` (deployment,) with the coordinate
        `site_of_deployment`, optional. `month` holds the first day of months that follow each other.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure
        A darker cell is a fuller month; a small triangle marks the first day of a recorder.

    Examples
    --------
    >>> months = np.arange("2015-01", "2017-01", dtype="datetime64[M]").astype("datetime64[ns]")
    >>> share = np.array([[1.0] * 20 + [0.4] * 4, [np.nan] * 6 + [0.95] * 18])
    >>> coverage = xr.Dataset({"share": (("site", "month"), share)}, {"site": ["North", "South"], "month": months})
    >>> figure = coverage_calendar(coverage)
    >>> len(figure.axes)
    2
    """
    names = [str(site) for site in coverage["site"].values]
    wide = width_mm > COLUMN_WIDTH_MM
    row_mm = float(np.clip(_MOST_MM / max(len(names), 1), _LEAST_ROW_MM, _MOST_ROW_MM))
    letters = min(max((len(name) for name in names), default=0), 24 if wide else 14)
    left, up = 6.0 + 1.3 * max(letters, 2), row_mm * max(len(names), 1)
    across, legend = width_mm - left - 4.0, 6.0 if wide else 13.0
    with house_style():
        figure = sheet(width_mm, up + _COUNT_MM + legend + 12.5)
        calendar = placed_axes(figure, left, legend + 5.0, across, up)
        count = placed_axes(figure, left, legend + up + 7.0, across, _COUNT_MM)
        if coverage.sizes["month"]:
            edges = _edges(coverage["month"].values)
            _cells(calendar, coverage, edges, across)
            _sites_at_work(count, coverage["share"].values, edges)
            _dates(calendar, count, edges)
        calendar.set(ylim=(max(len(names), 1), 0))
        calendar.set_yticks(np.arange(len(names)) + 0.5, [fitted(name, letters) for name in names])
        calendar.tick_params(axis="y", length=0.0, labelsize=min(7.0, 2.2 * row_mm))
        keys: list[Artist] = [
            Patch(facecolor=colour, edgecolor=REFERENCE, linewidth=0.4, label=words) for _, colour, words in _STEPS
        ]
        if "deployed" in coverage:
            keys.append(Line2D([], [], linestyle="none", label="a recorder begins", **_BEGINS))
        figure.legend(handles=keys, loc="lower center", ncols=5 if wide else 2, borderaxespad=0.3)
    return figure


def _edges(months: NDArray[np.datetime64]) -> NDArray[np.float64]:
    first = months.astype("datetime64[M]")
    return np.asarray(date2num(np.append(first, first[-1] + 1).astype("datetime64[D]")))  # type: ignore[no-untyped-call]


def _cells(axes: Axes, coverage: xr.Dataset, edges: NDArray[np.float64], across_mm: float) -> None:
    share = coverage["share"].values
    gap = min(0.4, 0.25 * across_mm / len(edges))  # points between cells: they vanish where months are narrow
    scale = BoundaryNorm([-0.001, *(top for top, _, _ in _STEPS)], len(_STEPS))
    axes.pcolormesh(
        edges, np.arange(len(share) + 1), np.ma.masked_invalid(share), norm=scale, edgecolor="white", linewidth=gap,
        cmap=ListedColormap([colour for _, colour, _ in _STEPS]),
    )  # fmt: skip
    if "deployed" in coverage:
        rows = {str(site): row for row, site in enumerate(coverage["site"].values)}
        places = [rows[str(site)] + 0.5 for site in coverage["site_of_deployment"].values]
        days = date2num(coverage["deployed"].values)  # type: ignore[no-untyped-call]
        axes.plot(days, places, linestyle="none", clip_on=False, zorder=4, **_BEGINS)


def _sites_at_work(axes: Axes, share: NDArray[np.float64], edges: NDArray[np.float64]) -> None:
    working = np.nansum(np.nan_to_num(share) >= 0.5, axis=0)
    axes.stairs(working, edges, fill=True, color="#B7D3E6")
    axes.stairs(working, edges, color=REFERENCE, linewidth=0.7)
    axes.set(ylim=(0, max(1, 1.1 * working.max())))
    axes.locator_params(axis="y", integer=True, nbins=3)
    axes.set_title("sites with half of the month or more", fontsize=7.0)


def _dates(calendar: Axes, count: Axes, edges: NDArray[np.float64]) -> None:
    every = max(1, int(np.ceil((edges[-1] - edges[0]) / 365.25 / 12)))
    for axes in (calendar, count):
        axes.set_xlim(edges[0], edges[-1])
        axes.xaxis.set_major_locator(YearLocator(every))  # type: ignore[no-untyped-call]
        axes.xaxis.set_major_formatter(DateFormatter("%Y"))  # type: ignore[no-untyped-call]
        axes.grid(axis="x", color=REFERENCE, linewidth=0.3, alpha=0.6)
    count.tick_params(labelbottom=False)
