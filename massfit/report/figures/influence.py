"""Which sites carry the answer: what each adds, and how far the answer moves without it."""

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
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

SHOWN = 30
"""Sites drawn: those that carry most."""

_LONGEST_NAME = 16
_ROW_MM = 3.6
_DOUBTFUL = 0.5  # probability of being wrong from which a site is marked

Floats = NDArray[np.float64]


def influence_figure(
    site_ids: Sequence[str],
    information: Floats,
    shift_sd: Floats,
    outlier_probability: Floats,
    *,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw a row for each site, the one that carries most on top.

    Parameters
    ----------
    site_ids : sequence of str
    information : (n_site, 2) array
        Part of the precision of each component of the answer that is lost without the site.
    shift_sd : (n_site, 2) array
        Shift of each component of the answer without it, in standard deviations.
    outlier_probability : (n_site,) array
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> figure = influence_figure(["A", "B"], np.full((2, 2), 0.2), np.zeros((2, 2)), np.array([0.0, 0.9]))
    >>> [text.get_text() for text in figure.axes[0].get_yticklabels()]
    ['A', 'B']
    """
    weight = np.asarray(information).mean(axis=1)
    shown = np.argsort(-weight, kind="stable")[:SHOWN]
    rows = np.arange(len(shown))
    up = max(_ROW_MM * len(shown), 12.0)
    narrow = width_mm <= COLUMN_WIDTH_MM
    names_mm = 24.0 if narrow else 30.0
    wide = (width_mm - names_mm - (6.0 if narrow else 10.0)) / 2.0
    with house_style():
        figure = sheet(width_mm, up + 25.0)
        left = placed_axes(figure, names_mm, 15.0, wide, up)
        right = placed_axes(figure, names_mm + wide + (4.0 if narrow else 7.0), 15.0, wide, up)
        left.barh(rows, 100.0 * weight[shown], color=ANSWER, height=0.65)
        left.set_xlabel("precision lost / %" if narrow else "precision of the answer lost without the site / %")
        for part, marker, colour, name in ((0, "o", ANSWER, "in phase"), (1, "s", SITE, "quadrature")):
            right.plot(shift_sd[shown, part], rows, marker, color=colour, markersize=3.0, label=name, clip_on=False)
        right.axvline(0.0, color=REFERENCE, linewidth=0.6, zorder=0)
        reach = max(0.2, 1.15 * float(np.abs(shift_sd[shown]).max()))
        right.set_xlim(-reach, reach)
        right.set_xlabel("shift without it / sd" if narrow else "shift of the answer without the site / sd")
        for axes in (left, right):
            _rows(axes, len(shown))
        left.set_yticks(rows, [fitted(site_ids[s], _LONGEST_NAME) for s in shown], fontsize=6.5)
        right.tick_params(labelleft=False)
        _mark_doubtful(left, np.asarray(outlier_probability)[shown])
        handles, names = right.get_legend_handles_labels()
        figure.legend(handles, names, loc="lower center", ncols=2, bbox_to_anchor=(0.6, 0.0))
        bold = bool(np.any(np.asarray(outlier_probability)[shown] > _DOUBTFUL))
        left.set_title(_title(len(shown), len(site_ids), bold=bold, narrow=narrow), fontsize=7.0)
    return figure


def _rows(axes: Axes, count: int) -> None:
    axes.set_ylim(count - 0.4, -0.6)
    axes.tick_params(axis="y", length=0)
    axes.grid(axis="x", color=REFERENCE, linewidth=0.2, alpha=0.5)


def _mark_doubtful(axes: Axes, probability: Floats) -> None:
    for label, value in zip(axes.get_yticklabels(), probability, strict=True):
        if value > _DOUBTFUL:
            label.set_fontweight("bold")


def _title(shown: int, total: int, *, bold: bool, narrow: bool) -> str:
    some = [f"{shown} of {total} sites" if narrow else f"the {shown} of {total} sites that carry most"]
    some = some if shown < total else []
    words = ["bold: probably wrong" if narrow else "bold: more probably wrong than not"] if bold else []
    return "; ".join(some + words).capitalize()
