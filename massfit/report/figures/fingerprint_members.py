"""How each site sees the cycle under each member of the load ensemble."""

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.phasor import delay_days
from massfit.report.figures.style import (
    ANSWER,
    COLUMN_WIDTH_MM,
    LAND,
    PAGE_WIDTH_MM,
    REFERENCE,
    SITE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.words.names import fitted

_MARKERS = "os^Dv<>"
_COLOURS = (ANSWER, SITE, "#009E73", "#CC79A7", "#56B4E9", "#D55E00", "#000000")


def fingerprint_members(
    site_ids: Sequence[str],
    members: Sequence[str],
    admittance: NDArray[np.complex128],
    *,
    compared: NDArray[np.complex128] | None = None,
    compared_name: str = "",
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw amplitude ratio and delay of every site under every load member.

    Parameters
    ----------
    site_ids : sequence of str
    members : sequence of str
    admittance : (n_member, n_site) array of complex
    compared : (n_site,) array of complex, optional
        A reference case drawn as a cross.
    compared_name : str
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure
        Ratio on the left, delay on the right, one line a site.

    Examples
    --------
    >>> admittance = np.array([[1.10 + 0.01j, 0.92 - 0.03j], [1.14, 0.90]])
    >>> figure = fingerprint_members(("North", "South"), ("wet", "dry"), admittance)
    >>> len(figure.axes)
    2
    """
    names = 32.0 if width_mm > COLUMN_WIDTH_MM else 22.0
    side = 0.5 * (width_mm - names - 7.0)
    up = 4.0 * max(len(site_ids), 3)
    keys = (len(members) if len(members) <= len(_MARKERS) else 1) + (compared is not None)
    legend_columns = 6 if width_mm > COLUMN_WIDTH_MM else 3
    below = 12.0 + 3.6 * -(-keys // legend_columns)
    with house_style():
        figure = sheet(width_mm, up + below + 3.0)
        ratio = placed_axes(figure, names, below, side, up)
        delay = placed_axes(figure, names + side + 4.0, below, side, up)
        for axes, neutral, values in ((ratio, 1.0, np.abs), (delay, 0.0, delay_days)):
            _frame(axes, len(site_ids), neutral)
            _dots(axes, members, values(admittance))
            if compared is not None:
                line = np.arange(len(site_ids))
                axes.plot(values(compared), line, "x", color=REFERENCE, markersize=3.5, label=compared_name, zorder=2)
        width = 18 if width_mm > COLUMN_WIDTH_MM else 12
        ratio.set_yticks(range(len(site_ids)), [fitted(name, width) for name in site_ids])
        ratio.set_xlabel("amplitude / ocean mean")
        delay.set_xlabel("delay / days")
        handles, labels = ratio.get_legend_handles_labels()
        short = [fitted(label, 20) for label in labels]
        figure.legend(handles, short, loc="lower center", ncols=legend_columns, borderaxespad=0.3, columnspacing=1.0,
                      handletextpad=0.2)  # fmt: skip
    return figure


def _frame(axes: Axes, count: int, neutral: float) -> None:
    axes.set_ylim(count - 0.5, -0.5)
    axes.set_yticks([])
    axes.hlines(range(count), 0.0, 1.0, transform=axes.get_yaxis_transform(), color=LAND, linewidth=0.4, zorder=0)
    axes.axvline(neutral, color=REFERENCE, linewidth=0.6, zorder=1)
    axes.margins(x=0.06)


def _dots(axes: Axes, members: Sequence[str], values: NDArray[np.float64]) -> None:
    """Each member its own mark while there are few of them, one mark for all where there are many."""
    lines = np.arange(values.shape[1])
    if len(members) <= len(_MARKERS):
        for member, row, marker, colour in zip(members, values, _MARKERS, _COLOURS, strict=False):
            axes.plot(row, lines, marker, color=colour, markersize=3.2, label=member, zorder=3, alpha=0.85)
    else:
        axes.plot(
            values.ravel(), np.tile(lines, len(members)), "o", color=ANSWER, markersize=2.4, alpha=0.5, zorder=3,
            label=f"{len(members)} load members",
        )  # fmt: skip
