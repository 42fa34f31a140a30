"""One row a site: the daily record and its drift, what was taken off, and what remains."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.dates import AutoDateLocator, ConciseDateFormatter
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from massfit.report.style import ANSWER, LAND, SITE, house_style

# drawn in this order: the fast tides lie behind the rest
CORRECTIONS = {
    "long-period tides": "#C8C8C8",
    "circulation (model mean)": "#0072B2",
    "ocean-mean air pressure": "#E69F00",
    "pole tide": "#000000",
}


@dataclass(frozen=True)
class RecordRow:
    """What one row of the figure shows.

    Parameters
    ----------
    site : str
    deployments : sequence of (time, pressure, drift)
        Daily pressure and fitted drift with steps, each about its own mean, hPa; one entry a deployment.
    correction_time : (n,) array of datetime64
    corrections : mapping of str to (n,) array
        Series that were subtracted, hPa, by the names of `CORRECTIONS`.
    reduced_time : (m,) array of datetime64
    reduced : (m,) array
        Record less corrections, drift and steps, hPa.
    annual : (m,) array
        Fitted annual cycle on `reduced_time`, hPa.
    note : str
        Printed in the title when the site carries a warning.
    """

    site: str
    deployments: Sequence[tuple[NDArray[np.datetime64], NDArray[np.float64], NDArray[np.float64]]]
    correction_time: NDArray[np.datetime64]
    corrections: Mapping[str, NDArray[np.float64]]
    reduced_time: NDArray[np.datetime64]
    reduced: NDArray[np.float64]
    annual: NDArray[np.float64]
    note: str = ""


def record_panels(rows: Sequence[RecordRow]) -> Figure:
    """Draw every site's record, corrections and reduced record.

    Parameters
    ----------
    rows : sequence of RecordRow

    Returns
    -------
    matplotlib.figure.Figure
        Three columns: daily record with drift; corrections; reduced record with the fitted cycle.
    """
    with house_style():
        height = 1.25 * len(rows) + 1.0
        figure = Figure(figsize=(11.0, height))
        grid = figure.subplots(len(rows), 3, squeeze=False)
        figure.subplots_adjust(
            left=0.06, right=0.995, top=1.0 - 0.62 / height, bottom=0.45 / height, hspace=0.42, wspace=0.13
        )
        for row, (record, correction, reduced) in zip(rows, grid, strict=True):
            _draw_record(record, row)
            _draw_corrections(correction, row)
            _draw_reduced(reduced, row)
        _headings(grid)
        _share_dates(grid)
    return figure


def _draw_record(axes: Axes, row: RecordRow) -> None:
    for shade, (time, pressure, drift) in enumerate(row.deployments):
        colour = (ANSWER, SITE)[shade % 2]
        axes.plot(time, pressure, color=colour, linewidth=0.6)
        axes.plot(time, drift, color="black", linewidth=0.9, linestyle="--")
    axes.set_title(f"{row.site}{'  (' + row.note + ')' if row.note else ''}", fontsize=8.5, pad=2.0)
    axes.set_ylabel("hPa", fontsize=8, labelpad=1.0)


def _draw_corrections(axes: Axes, row: RecordRow) -> None:
    for label, colour in CORRECTIONS.items():
        if label in row.corrections:
            axes.plot(row.correction_time, row.corrections[label], color=colour, linewidth=0.7, label=label)


def _draw_reduced(axes: Axes, row: RecordRow) -> None:
    axes.plot(row.reduced_time, row.reduced, ".", markersize=2.0, color="#8C8C8C", markeredgecolor="none")
    axes.plot(row.reduced_time, row.annual, color=ANSWER, linewidth=1.2)
    low, high = np.quantile(row.reduced, [0.002, 0.998]) if len(row.reduced) else (-1.0, 1.0)
    margin = 0.15 * max(float(high - low), 0.1)
    axes.set_ylim(float(low) - margin, float(high) + margin)


def _headings(grid: NDArray[np.object_]) -> None:
    titles = (
        "daily record, deployments alternate; drift dashed",
        "subtracted series",
        "reduced record and fitted annual cycle",
    )
    for axes, title in zip(grid[0], titles, strict=True):
        axes.annotate(
            title,
            (0.5, 1.0),
            xytext=(0, 17),
            xycoords="axes fraction",
            textcoords="offset points",
            ha="center",
            fontsize=9.5,
        )
    entries = {
        label: line for axes in grid[:, 1] for line, label in zip(*axes.get_legend_handles_labels(), strict=True)
    }
    grid[0, 1].legend(
        entries.values(),
        entries.keys(),
        loc="lower center",
        bbox_to_anchor=(0.5, 0.97),
        ncols=4,
        fontsize=6.5,
        handlelength=1.2,
        columnspacing=0.9,
    )
    for axes in grid.ravel():
        axes.tick_params(labelsize=7.0)
        axes.yaxis.set_major_locator(MaxNLocator(4))
        axes.grid(axis="y", color=LAND, linewidth=0.5)


def _share_dates(grid: NDArray[np.object_]) -> None:
    """Give all panels one span of time and only the lowest a date axis; ticks are what drawing costs."""
    spans = [axes.get_xlim() for axes in grid.ravel()]
    for axes in grid.ravel():
        axes.set_xlim(min(low for low, _ in spans), max(high for _, high in spans))
    for axes in grid[:-1].ravel():
        axes.xaxis.set_visible(False)
    for axes in grid[-1]:
        locator = AutoDateLocator(minticks=3, maxticks=8)  # type: ignore[no-untyped-call]
        axes.xaxis.set_major_locator(locator)
        axes.xaxis.set_major_formatter(ConciseDateFormatter(locator))  # type: ignore[no-untyped-call]
