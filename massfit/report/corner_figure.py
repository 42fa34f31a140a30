"""The corner figure: how the answer and the scales of the model hang together."""

from collections.abc import Mapping

import corner
import numpy as np
from matplotlib import pyplot as plt
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.report.style import ANSWER, house_style


def corner_figure(quantities: Mapping[str, NDArray[np.float64]]) -> Figure:
    """Draw one- and two-dimensional marginals of the posterior.

    Parameters
    ----------
    quantities : mapping of str to (n,) array
        Draws by label, unit in the label.

    Returns
    -------
    matplotlib.figure.Figure
        Contours enclose 50 and 95 %.
    """
    labels = list(quantities)
    draws = np.column_stack([quantities[label] for label in labels])
    with house_style():
        figure = Figure(figsize=(1.75 * len(labels) + 0.8, 1.75 * len(labels) + 0.8))
        corner.corner(
            draws, labels=labels, levels=(0.5, 0.95), fig=figure, color=ANSWER, bins=30, smooth=1.0,
            plot_datapoints=False, fill_contours=True, quantiles=(0.025, 0.5, 0.975), max_n_ticks=4,
            range=[_shown(column) for column in draws.T], label_kwargs={"fontsize": 9},
        )  # fmt: skip
    plt.close(figure)
    return figure


def _shown(values: NDArray[np.float64]) -> tuple[float, float]:
    low, high = np.quantile(values, [0.002, 0.998])
    margin = max(high - low, 1e-9) * 0.05
    return float(low - margin), float(high + margin)
