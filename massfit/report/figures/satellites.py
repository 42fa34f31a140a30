"""Network and satellites: their phasors in one plane, and the months the satellites' cycle was fitted to."""

from collections.abc import Sequence

import matplotlib.dates as mdates
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from massfit.report.figures.ellipse import normal_ellipse
from massfit.report.figures.style import (
    ANSWER,
    COLUMN_WIDTH_MM,
    PAGE_WIDTH_MM,
    REFERENCE,
    SATELLITE,
    SITE,
    house_style,
    placed_axes,
    sheet,
    zero_lines,
)
from massfit.report.words.names import fitted
from massfit.results.comparison_rows import Months, Placed

# radius of the 95 % ellipse of a two-dimensional normal, sqrt(-2 ln(1 - p))
RADIUS_95 = 2.44775

_MARKS = {"network": "o", "satellite": "s", "joint": "+"}
_OTHERS = "D^vPX<>*"


def satellite_figure(placed: Sequence[Placed], months: Sequence[Months], *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw determinations with their 95 % ellipses, and the monthly series with the fitted cycles.

    Parameters
    ----------
    placed : sequence of Placed
    months : sequence of Months
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure
        Side by side, or one above the other in a column.

    Examples
    --------
    >>> placed = [
    ...     Placed("network", np.array([0.1, -0.9]), 0.02 * np.eye(2), "network"),
    ...     Placed("satellites", np.array([0.0, -0.85]), 0.01 * np.eye(2), "satellite"),
    ... ]
    >>> time = np.arange("2014-01", "2016-01", dtype="datetime64[M]").astype("datetime64[ns]")
    >>> cycle = 8.7 * np.sin(2 * np.pi * np.arange(24) / 12)
    >>> figure = satellite_figure(placed, [Months("one solution", time, cycle, time, cycle)])
    >>> len(figure.axes)
    2
    """
    with house_style():
        wide = width_mm > COLUMN_WIDTH_MM
        side = 0.42 * width_mm if wide else width_mm - 20.0
        rows = (len(placed) + 1) // 2 if wide else len(placed)
        legend = 5.0 + 4.2 * rows
        if wide:
            figure = sheet(width_mm, side + legend + 18.0)
            plane = placed_axes(figure, 15, legend + 10, side, side)
            series = placed_axes(figure, side + 31, legend + 10, width_mm - side - 35, side)
        else:
            figure = sheet(width_mm, 1.7 * side + legend + 38.0)
            plane = placed_axes(figure, 15, legend + 10, side, side)
            series = placed_axes(figure, 15, legend + 28 + side, side, 0.7 * side)
        _plane(plane, placed)
        _series(series, months)
        handles, labels = plane.get_legend_handles_labels()
        figure.legend(handles, labels, loc="lower center", ncols=2 if wide else 1, borderaxespad=0.3)
    return figure


def _plane(axes: Axes, placed: Sequence[Placed]) -> None:
    zero_lines(axes)
    colours = {"network": ANSWER, "satellite": SATELLITE, "joint": "black", "other": REFERENCE}
    reach = np.zeros((0, 2))
    others = 0
    for each in placed:
        mark = _MARKS.get(each.role) or _OTHERS[others % len(_OTHERS)]
        others += each.role == "other"
        colour = colours[each.role]
        style = "-" if each.role in ("network", "satellite") else "--"
        look = {"facecolor": "none", "edgecolor": colour, "linestyle": style}
        if each.error_stated:
            axes.add_patch(normal_ellipse(each.phasor_hpa, each.covariance_hpa2, RADIUS_95, **look))
        axes.plot(
            *each.phasor_hpa, linestyle="none", marker=mark, markersize=8 if mark == "+" else 4.5, color=colour,
            label=fitted(each.label, 60) + ("" if each.error_stated else ", no error stated"),
        )  # fmt: skip
        half = RADIUS_95 * np.sqrt(np.diag(each.covariance_hpa2)) * each.error_stated
        reach = np.vstack([reach, each.phasor_hpa - half, each.phasor_hpa + half])
    low, high = reach.min(axis=0), reach.max(axis=0)
    middle, half_side = 0.5 * (low + high), 0.56 * float((high - low).max())
    axes.set(
        xlim=(middle[0] - half_side, middle[0] + half_side),
        ylim=(middle[1] - half_side, middle[1] + half_side),
        xlabel="in phase / hPa",
        ylabel="quadrature / hPa",
        title="95 % regions",
    )


def _series(axes: Axes, months: Sequence[Months]) -> None:
    colours = (SATELLITE, SITE, ANSWER, REFERENCE)
    span = max((float(np.ptp([*each.water_mm, *each.annual_mm])) for each in months), default=1.0)
    for index, each in enumerate(months):
        colour, shift = colours[index % len(colours)], -1.15 * span * index
        axes.plot(each.time, each.water_mm + shift, linestyle="none", marker=".", markersize=3.0, color=colour)
        axes.plot(each.fine_time, each.annual_mm + shift, color=colour, linewidth=0.8)
        top = max([*each.water_mm, *each.annual_mm]) + shift
        axes.annotate(
            fitted(each.name, 40), (0.01, top), xycoords=("axes fraction", "data"),
            xytext=(0, 3), textcoords="offset points", color=colour, fontsize=6.5,
        )  # fmt: skip
    if len(months) > 1:
        axes.set_yticks([])
        axes.set_ylabel(f"ocean mean; bar: {span / 2:.0f} mm of water")
        axes.plot([0.99, 0.99], [0.0, span / 2], transform=axes.get_yaxis_transform(), color="black", linewidth=1.2)
    else:
        axes.set_ylabel("ocean mean / mm of water")
    locator = mdates.AutoDateLocator(minticks=3, maxticks=7)  # type: ignore[no-untyped-call]
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(mdates.ConciseDateFormatter(locator))  # type: ignore[no-untyped-call]
    axes.margins(y=0.12)
    axes.set_title("Months and fitted annual cycle")
