"""The corner figure: how the answer and the scales of the model hang together."""

from collections.abc import Mapping

import corner
import numpy as np
from matplotlib import pyplot as plt
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from massfit.report.figures.style import ANSWER, PAGE_WIDTH_MM, house_style, sheet


def corner_figure(quantities: Mapping[str, NDArray[np.float64]], *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw one- and two-dimensional marginals of the posterior.

    Parameters
    ----------
    quantities : mapping of str to (n,) array
        Draws by label, unit in the label.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure
        Contours enclose 50 and 95 %.

    Examples
    --------
    >>> draws = np.random.default_rng(1).normal(size=(2, 2000))
    >>> figure = corner_figure({"amplitude / hPa": 0.85 + 0.05 * draws[0], "peak / day": 275.0 + 4.0 * draws[1]})
    >>> len(figure.axes)
    4
    """
    labels = list(quantities)
    draws = np.column_stack([quantities[label] for label in labels])
    with house_style():
        figure = sheet(width_mm, width_mm)
        corner.corner(
            draws, labels=labels, levels=(0.5, 0.95), fig=figure, color=ANSWER, bins=30, smooth=1.3,
            plot_datapoints=False, fill_contours=True, quantiles=(0.025, 0.5, 0.975), max_n_ticks=3,
            range=[_shown(column) for column in draws.T], label_kwargs={"fontsize": 7.0}, labelpad=-0.06,
        )  # fmt: skip
        _tidy(figure, len(labels), width_mm)
    plt.close(figure)
    return figure


def _tidy(figure: Figure, count: int, width_mm: float) -> None:
    """Set margins, a few upright tick labels that keep off the corners, and titles of axes at one distance."""
    margin, gap = 12.5 / width_mm, 0.08
    figure.subplots_adjust(left=margin, bottom=margin, right=0.99, top=0.99, wspace=gap, hspace=gap)
    panel_mm = (0.99 - margin) * width_mm / (count + gap * (count - 1))
    for axes in figure.axes:
        axes.tick_params(labelrotation=0, labelsize=6.5)
        axes.xaxis.set_label_coords(0.5, -6.0 / panel_mm)
        axes.yaxis.set_label_coords(-9.5 / panel_mm, 0.5)
        for axis, (low, high) in ((axes.xaxis, axes.get_xlim()), (axes.yaxis, axes.get_ylim())):
            if len(axis.get_majorticklocs()):
                edge = 0.08 * (high - low)
                ticks = MaxNLocator(4).tick_values(low, high)
                axis.set_ticks([tick for tick in ticks if low + edge <= tick <= high - edge])


def _shown(values: NDArray[np.float64]) -> tuple[float, float]:
    """Range of an axis; what cannot be negative does not go below zero."""
    low, high = np.quantile(values, [0.002, 0.998])
    margin = max(high - low, 1e-9) * 0.05
    least = 0.0 if values.min() >= 0.0 else -np.inf
    return float(max(low - margin, least)), float(high + margin)
