"""What the answer would be with fewer sites: random subsets of every size, orders of sites, and best subsets."""

from collections.abc import Mapping

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
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

_SHARES = (0.05, 0.25, 0.5, 0.75, 0.95)


def subset_fan(
    size: NDArray[np.int64],
    mean_hpa: Floats,
    width_hpa: Floats,
    *,
    whole_hpa: Floats,
    whole_width_hpa: float,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw how answers of random subsets spread, and how wide they are, against the number of sites kept.

    Parameters
    ----------
    size : (n,) array of int
        Sites in each subset.
    mean_hpa : (n, 2) array
        In phase and quadrature.
    width_hpa : (n,) array
        Error of a component.
    whole_hpa : (2,) array
        Answer of all sites.
    whole_width_hpa : float
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> size = np.repeat([1, 2, 3], 5)
    >>> mean = np.column_stack([0.1 + 0.1 / size, 0.8 + 0.1 / size])
    >>> figure = subset_fan(size, mean, 0.3 / size, whole_hpa=np.array([0.1, 0.8]), whole_width_hpa=0.1)
    >>> figure.axes[0].get_ylabel()
    'in phase / hPa'
    """
    sizes = np.unique(size)
    narrow = width_mm <= COLUMN_WIDTH_MM
    with house_style():
        figure, panels = _panels(width_mm, 3, narrow=narrow)
        drawn = ((mean_hpa[:, 0], "in phase / hPa"), (mean_hpa[:, 1], "quadrature / hPa"), (width_hpa, "error / hPa"))
        whole = (whole_hpa[0], whole_hpa[1], whole_width_hpa)
        for axes, (values, label), level in zip(panels, drawn, whole, strict=True):
            low, lower, middle, upper, high = np.array([np.quantile(values[size == k], _SHARES) for k in sizes]).T
            axes.fill_between(sizes, low, high, color=ANSWER, alpha=0.18, linewidth=0, label="90 % of the subsets")
            axes.fill_between(sizes, lower, upper, color=ANSWER, alpha=0.38, linewidth=0, label="half of them")
            axes.plot(sizes, middle, color=ANSWER, linewidth=1.2, label="median")
            axes.axhline(level, color=REFERENCE, linestyle="--", linewidth=0.8, label="all sites")
            _count_axis(axes, label)
        _legend_below(figure, panels[0], 2 if narrow else 4)
    return figure


def order_sweep(
    ordered_hpa: Floats,
    ordered_width_hpa: Floats,
    agreeable_hpa: Floats,
    agreeable_width_hpa: Floats,
    *,
    ordered_by: str,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the answer as more and more sites are kept, in an allowed order and in one that follows the phasors.

    Parameters
    ----------
    ordered_hpa : (n_site, 2) array
        Answer with the first 1, 2, ... sites of an order in which the phasors have no say.
    ordered_width_hpa : (n_site,) array
        Error of a component.
    agreeable_hpa, agreeable_width_hpa : (n_site, 2), (n_site,) array
        The same with the most agreeable sites first.
    ordered_by : str
        What the allowed order is.
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> mean, width = np.full((3, 2), 0.5), np.array([0.3, 0.2, 0.1])
    >>> figure = order_sweep(mean, width, mean, 0.5 * width, ordered_by="quietness")
    >>> len(figure.axes)
    3
    """
    count = np.arange(1, len(ordered_hpa) + 1)
    narrow = width_mm <= COLUMN_WIDTH_MM
    both = (
        (ordered_hpa, ordered_width_hpa, ANSWER, "-", f"by {ordered_by}"),
        (agreeable_hpa, agreeable_width_hpa, SITE, "--", "the agreeable first: too sure, no answer"),
    )
    with house_style():
        figure, panels = _panels(width_mm, 3, narrow=narrow)
        for mean, width, colour, line, name in both:
            for part in (0, 1):
                panels[part].plot(count, mean[:, part], line, color=colour, label=name)
                band = mean[:, part] - width, mean[:, part] + width
                panels[part].fill_between(count, *band, color=colour, alpha=0.15, linewidth=0)
            panels[2].plot(count, width, line, color=colour, label=name)
        for axes, label in zip(panels, ("in phase / hPa", "quadrature / hPa", "error / hPa"), strict=True):
            _count_axis(axes, label)
        panels[2].set_ylim(bottom=0.0)
        _legend_below(figure, panels[0], 1 if narrow else 2)
    return figure


def keep_path_figure(width_hpa: Mapping[str, Floats], random_hpa: Floats, *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw the error of the best subsets of every size beside that of random ones.

    Parameters
    ----------
    width_hpa : mapping of str to (n_site,) array
        Error of the answer with the best 1, 2, ... sites by each criterion.
    random_hpa : (n_site,) array
        Median over random subsets; NaN where there are none.
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> best = {"A": np.array([0.3, 0.2, 0.1])}
    >>> keep_path_figure(best, np.array([0.5, 0.3, 0.1])).axes[0].get_xlabel()
    'sites kept'
    """
    colours = (ANSWER, SITE)
    count = np.arange(1, len(random_hpa) + 1)
    with house_style():
        figure = sheet(width_mm, 62.0)
        axes = placed_axes(figure, 14.0, 10.0, width_mm - 18.0, 47.0)
        axes.plot(count, random_hpa, ":", color=REFERENCE, label="random sites, median")
        for (name, values), colour, line in zip(width_hpa.items(), colours, ("-", "--"), strict=False):
            axes.plot(
                count, values, line, color=colour, marker="o", markersize=2.5, label=f"best by the {name}-criterion"
            )
        _count_axis(axes, "error of a component / hPa")
        axes.set_ylim(bottom=0.0)
        axes.legend(loc="upper right")
    return figure


def _panels(width_mm: float, count: int, *, narrow: bool) -> tuple[Figure, list[Axes]]:
    high = 36.0
    if narrow:
        figure = sheet(width_mm, count * (high + 11.0) + 16.0)
        places = [(15.0, 22.0 + (count - 1 - k) * (high + 11.0), width_mm - 19.0, high) for k in range(count)]
    else:
        wide = (width_mm - 6.0) / count - 14.0
        figure = sheet(width_mm, 66.0)
        places = [(14.0 + k * (wide + 14.0), 18.0, wide, 44.0) for k in range(count)]
    return figure, [placed_axes(figure, *place) for place in places]


def _count_axis(axes: Axes, label: str) -> None:
    axes.xaxis.set_major_locator(MaxNLocator(8, integer=True, min_n_ticks=1))
    axes.set_xlabel("sites kept")
    axes.set_ylabel(label)


def _legend_below(figure: Figure, axes: Axes, columns: int) -> None:
    handles, names = axes.get_legend_handles_labels()
    figure.legend(handles, names, loc="lower center", ncols=columns, bbox_to_anchor=(0.5, 0.0), columnspacing=1.2)
