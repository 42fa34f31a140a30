"""How the admittance of the sites settles with the degree of the solve."""

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter
from numpy.typing import NDArray

from massfit.report.figures.style import (
    ANSWER,
    COLUMN_WIDTH_MM,
    PAGE_WIDTH_MM,
    REFERENCE,
    SITE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.words.names import fitted

_NAMED = 3
_HIGHLIGHTS = ((ANSWER, "o", "-"), (SITE, "s", "--"), ("#009E73", "^", "-."))
_LEAST = 1e-6  # changes below it are drawn there


def degree_panels(
    degrees: NDArray[np.int64],
    site_ids: Sequence[str],
    ratio_change: NDArray[np.float64],
    delay_change_days: NDArray[np.float64],
    *,
    own_degree: int,
    ratio_spread: float | None = None,
    delay_spread_days: float | None = None,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the size of the change from each degree to the finest, one line a site.

    Parameters
    ----------
    degrees : (n_degree,) array of int
        Ascending; the last is the finest.
    site_ids : sequence of str
    ratio_change, delay_change_days : (n_degree, n_site) array
        Less the finest.
    own_degree : int
        Degree of the settings, marked by a line.
    ratio_spread, delay_spread_days : float, optional
        Median over the sites of the spread over the load members, for comparison.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure
        The sites that move most at the degree of the settings are named.
    """
    narrow = width_mm <= COLUMN_WIDTH_MM
    side = width_mm - 20.0 if narrow else 0.5 * (width_mm - 39.0)
    high, below = 42.0, 12.0 + 3.6 * (5 if narrow else 1)
    own = int(np.flatnonzero(degrees == own_degree)[0])
    shown = min(own, len(degrees) - 2)  # the finest itself has no change
    worst = np.argsort(-np.abs(ratio_change[shown]), kind="stable")[:_NAMED]
    places = [(17.0, below + (high + 12.0 if narrow else 0.0)), (17.0 if narrow else 36.0 + side, below)]
    panels = (
        ("change of amplitude ratio", ratio_change, ratio_spread),
        ("change of delay / days", delay_change_days, delay_spread_days),
    )
    with house_style():
        figure = sheet(width_mm, below + high + (high + 12.0 if narrow else 0.0) + 4.0)
        for (left, bottom), (label, change, spread) in zip(places, panels, strict=True):
            axes = placed_axes(figure, left, bottom, side, high)
            _lines(axes, degrees[:-1], np.abs(change[:-1]).clip(_LEAST), site_ids, worst)
            if spread is not None and spread > _LEAST:
                label_of_spread = "median spread of the members"
                axes.axhline(spread, color=REFERENCE, linewidth=0.8, linestyle=":", label=label_of_spread)
            if own_degree < degrees[-1]:
                axes.axvline(own_degree, color=REFERENCE, linewidth=0.6, label="degree of the settings")
            axes.set(xscale="log", yscale="log", ylabel=label, xlabel=f"degree, against degree {degrees[-1]}")
            axes.set_xticks(degrees[:-1], [str(degree) for degree in degrees[:-1]])
            axes.set_ylim(*_decades(np.abs(change[:-1]).clip(_LEAST), spread))
            axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
            axes.minorticks_off()
        handles, labels = figure.axes[0].get_legend_handles_labels()
        columns = 1 if narrow else 5
        figure.legend(handles, labels, loc="lower center", ncols=columns, borderaxespad=0.3, columnspacing=1.2)
    return figure


def _decades(change: NDArray[np.float64], spread: float | None) -> tuple[float, float]:
    """Whole decades that hold every value."""
    shown = np.append(change.ravel(), [spread] if spread is not None and spread > _LEAST else [])
    low, high = np.floor(np.log10(shown.min())), np.ceil(np.log10(shown.max()))
    return float(10.0**low), float(10.0 ** max(high, low + 1.0))


def _lines(
    axes: Axes,
    degrees: NDArray[np.int64],
    change: NDArray[np.float64],
    site_ids: Sequence[str],
    worst: NDArray[np.intp],
) -> None:
    for index in range(change.shape[1]):
        if index not in worst:
            axes.plot(degrees, change[:, index], color="#A6A6A6", linewidth=0.6, marker=".", markersize=2.5, zorder=1)
    for index, (colour, marker, line) in zip(worst, _HIGHLIGHTS, strict=False):
        axes.plot(degrees, change[:, index], color=colour, marker=marker, markersize=3, linestyle=line, zorder=3,
                  label=fitted(site_ids[index], 18))  # fmt: skip
