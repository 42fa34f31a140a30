"""Error of a record and of the answer against the years of record."""

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
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

Floats = NDArray[np.float64]


def record_length_figure(
    years: Floats,
    planned_hpa: Floats,
    sites_hpa: Floats,
    answer_hpa: Floats,
    *,
    now_hpa: float,
    target_hpa: float | None = None,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the error of a component of the phasor against the length of the record.

    Parameters
    ----------
    years : (n,) array
    planned_hpa : (n,) array
        Of the planned recorder alone.
    sites_hpa : (n_site, n) array
        Of one recorder with the noise of each site; NaN where that is not known.
    answer_hpa : (n,) array
        Of the answer of the network with it.
    now_hpa : float
        Of the answer as it is.
    target_hpa : float, optional
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> years = np.array([1.0, 2.0, 4.0])
    >>> record = 0.3 / years
    >>> figure = record_length_figure(years, record, record[None], 0.16 - 0.01 * years, now_hpa=0.16)
    >>> figure.axes[0].get_xlabel()
    'years of record'
    """
    narrow = width_mm <= COLUMN_WIDTH_MM
    wide = width_mm - 20.0 if narrow else 0.5 * (width_mm - 34.0)
    with house_style():
        figure = sheet(width_mm, 118.0 if narrow else 62.0)
        left = placed_axes(figure, 14.0, 70.0 if narrow else 10.0, wide, 42.0 if narrow else 45.0)
        right = placed_axes(figure, 14.0 if narrow else 30.0 + wide, 10.0, wide, 42.0 if narrow else 45.0)
        for place, sd in enumerate(sites_hpa[np.isfinite(sites_hpa).all(axis=1)]):
            left.plot(
                years, sd, color=SITE, linewidth=0.5, alpha=0.7, label="noise of each site" if not place else None
            )
        left.plot(years, planned_hpa, color=ANSWER, linewidth=1.6, marker="o", markersize=2.5, label="planned recorder")
        left.set(xscale="log", yscale="log")
        left.yaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
        left.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
        left.set_title("A record by itself")
        right.plot(
            years, answer_hpa, color=ANSWER, linewidth=1.6, marker="o", markersize=2.5, label="with the recorder"
        )
        right.axhline(now_hpa, color=REFERENCE, linewidth=0.9, linestyle="--", label="as it is")
        right.set(xscale="log")
        right.set_title("The answer with the recorder at the best place")
        for axes in (left, right):
            _finish(axes, target_hpa)
    return figure


def _finish(axes: Axes, target_hpa: float | None) -> None:
    if target_hpa is not None:
        axes.axhline(target_hpa, color="black", linewidth=0.9, linestyle=":", label=f"target {target_hpa:g} hPa")
    axes.set_xticks([0.5, 1.0, 2.0, 3.0, 5.0, 10.0], ["0.5", "1", "2", "3", "5", "10"])
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.set_xlabel("years of record")
    axes.set_ylabel("error of a component / hPa")
    axes.legend(loc="best")
