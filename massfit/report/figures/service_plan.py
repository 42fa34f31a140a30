"""What becomes of the answer if a recorder ends or is redeployed in a month to come: one small panel a site."""

from collections.abc import Sequence

import numpy as np
from matplotlib.figure import Figure
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

PANELS = {True: (2, 4), False: (4, 3)}
"""Columns and rows of panels, in a column of text and over the page."""

_LONGEST_NAME = 20

Floats = NDArray[np.float64]


def service_plan_figure(
    site_ids: Sequence[str],
    months: Floats,
    ended_hpa: Floats,
    redeployed_hpa: Floats,
    lost_hpa: Floats,
    *,
    on_hpa: float,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the error of the answer for the sites that matter most, against the month in which they are served.

    Parameters
    ----------
    site_ids : sequence of str
    months : (n,) array
    ended_hpa, redeployed_hpa : (n_site, n) array
        Error of a component of the answer if the recorder ends in the month, or is replaced then; NaN where it cannot.
    lost_hpa : (n_site,) array
        If it is lost with its record.
    on_hpa : float
        If every recorder runs on.
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> months = np.array([0.0, 12.0, 24.0])
    >>> ended = np.array([[0.2, 0.18, 0.16]])
    >>> figure = service_plan_figure(["North"], months, ended, ended - 0.01, np.array([0.22]), on_hpa=0.16)
    >>> figure.axes[0].get_title(loc="left")
    'North'
    """
    narrow = width_mm <= COLUMN_WIDTH_MM
    columns, rows = PANELS[narrow]
    reach = np.nanmax(np.column_stack([ended_hpa, redeployed_hpa, lost_hpa]), axis=1)
    shown = np.argsort(-reach, kind="stable")[: columns * rows]
    rows = -(-len(shown) // columns)
    more = [100.0 * (values[shown] / on_hpa - 1.0) for values in (ended_hpa, redeployed_hpa, lost_hpa)]
    top = max(0.1, 1.1 * float(np.nanmax(np.column_stack(more))))
    low = min(-0.05 * top, 1.1 * float(np.nanmin(np.column_stack(more))))
    wide, high = (width_mm - 18.0) / columns - 4.0, 25.0
    with house_style():
        some = len(shown) < len(site_ids)
        height = (22.0 if some else 18.0) + rows * (high + 8.0)
        figure = sheet(width_mm, height)
        for place, site in enumerate(shown):
            row, column = divmod(place, columns)
            bottom = 18.0 + (rows - 1 - row) * (high + 8.0)
            axes = placed_axes(figure, 14.0 + column * (wide + 4.0), bottom, wide, high)
            axes.axhline(0.0, color=REFERENCE, linewidth=0.5)
            axes.plot(months, more[0][place], color=SITE, marker="s", markersize=2.0, linestyle="--", label="ends")
            axes.plot(months, more[1][place], color=ANSWER, marker="o", markersize=2.0, label="is redeployed")
            axes.plot([0.0], [more[2][place]], "xk", markersize=4.0, label="is lost, with its record")
            axes.set(xlim=(-1.0, float(months[-1]) + 1.0), ylim=(low, top), xticks=np.arange(0, months[-1] + 1, 6))
            axes.set_title(fitted(site_ids[site], _LONGEST_NAME), fontsize=7.0)
            last = place + columns >= len(shown)
            axes.tick_params(labelleft=column == 0, labelbottom=last)
            if last:
                axes.set_xlabel("month")
        handles, names = axes.get_legend_handles_labels()
        figure.legend(handles, names, loc="lower center", ncols=3, bbox_to_anchor=(0.5, 0.0), columnspacing=1.2)
        figure.text(0.004, 0.55, "error of the answer, more / %", rotation=90, va="center", ha="left", fontsize=7.5)
        if some:
            text = f"the {len(shown)} of {len(site_ids)} sites that matter most"
            figure.text(14.0 / width_mm, 1.0 - 0.5 / height, text, va="top", fontsize=7.0, color=REFERENCE)
    return figure
