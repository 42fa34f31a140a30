"""One row a site: the daily record and its drift, what was taken off, and what remains."""

from collections.abc import Callable, Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.dates import AutoDateLocator, ConciseDateFormatter
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from massfit.report.figures.style import (
    ANSWER,
    COLUMN_WIDTH_MM,
    LAND,
    PAGE_WIDTH_MM,
    REFERENCE,
    SERIES_COLOURS,
    SITE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.words.names import fitted
from massfit.results.record_rows import RecordRow

ROWS_OF_A_PAGE = 18
"""Sites in one picture."""

_TITLES = ("daily record; drift dashed / hPa", "subtracted / hPa", "what remains; fitted cycle / hPa")
_ROW_MM = 12.5
_BAND = 0.86  # share of a row's height that its lines may fill

Height = Callable[[NDArray[np.float64]], NDArray[np.float64]]


def record_panels(rows: Sequence[RecordRow], *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw the record, corrections and reduced record of up to a page of sites.

    Parameters
    ----------
    rows : sequence of RecordRow
    width_mm : float
        Width of the figure; in a single column only what remains is drawn.

    Returns
    -------
    matplotlib.figure.Figure
        Three columns: daily record with drift; corrections; reduced record with the fitted cycle. Each row of a
        column has its own scale.

    Examples
    --------
    >>> time = np.datetime64("2016-01-01T12", "ns") + np.arange(400) * np.timedelta64(1, "D")
    >>> cycle = 0.9 * np.cos(2 * np.pi * (np.arange(400) - 275) / 365.2422)
    >>> drift = 9.0 * np.exp(-np.arange(400) / 60.0)
    >>> tides = {"long-period tides": 0.3 * np.cos(2 * np.pi * np.arange(400) / 13.66)}
    >>> figure = record_panels([RecordRow("North", [(time, cycle + drift, drift)], time, tides, time, cycle, cycle)])
    >>> len(figure.axes)
    3
    """
    drawn = (_draw_record, _draw_corrections, _draw_reduced)
    first = 0 if width_mm > COLUMN_WIDTH_MM else 2
    up, gap = _ROW_MM * len(rows), 11.0
    side = (width_mm - 4.0) / (3 - first) - gap
    with house_style():
        figure = sheet(width_mm, up + 17.0)
        panels = [placed_axes(figure, gap + k * (side + gap), 6.0, side, up) for k in range(3 - first)]
        for axes, draw, title in zip(panels, drawn[first:], _TITLES[first:], strict=True):
            for place, row in enumerate(rows):
                draw(axes, row, place)
            _frame(axes, len(rows), title)
        for place, row in enumerate(rows):
            note = f"  ({row.note})" if row.note else ""
            panels[0].text(
                0.015, place + 0.02, fitted(row.site, 26) + note, transform=panels[0].get_yaxis_transform(),
                fontsize=6.5, va="top", zorder=5, bbox={"facecolor": "white", "alpha": 0.8, "pad": 0.6, "lw": 0.0},
            )  # fmt: skip
        _share_dates(panels)
        entries = {
            label: line for axes in panels for line, label in zip(*axes.get_legend_handles_labels(), strict=True)
        }
        ordered = [label for label in SERIES_COLOURS if label in entries]
        figure.legend([entries[label] for label in ordered], ordered, loc="upper center", ncols=4, borderaxespad=0.2)
    return figure


def _draw_record(axes: Axes, row: RecordRow, place: int) -> None:
    height = _scaled(axes, [each for _, *pair in row.deployments for each in pair], place)
    for shade, (time, pressure, drift) in enumerate(row.deployments):
        axes.plot(time, height(pressure), color=(ANSWER, SITE)[shade % 2], linewidth=0.5)
        axes.plot(time, height(drift), color="black", linewidth=0.7, linestyle="--")


def _draw_corrections(axes: Axes, row: RecordRow, place: int) -> None:
    height = _scaled(axes, list(row.corrections.values()), place)
    for label, colour in SERIES_COLOURS.items():
        if label in row.corrections:
            axes.plot(row.correction_time, height(row.corrections[label]), color=colour, linewidth=0.5, label=label)


def _draw_reduced(axes: Axes, row: RecordRow, place: int) -> None:
    # a few wild days do not set the scale; they are left out of sight
    shown = row.reduced[_within(row.reduced)]
    height = _scaled(axes, [shown, row.annual], place)
    axes.plot(row.reduced_time[_within(row.reduced)], height(shown), ".", markersize=1.4, color="#8C8C8C", mew=0.0)
    axes.plot(row.reduced_time, height(row.annual), color=ANSWER, linewidth=1.0)


def _within(values: NDArray[np.float64]) -> NDArray[np.bool_]:
    if not len(values):
        return np.zeros(0, dtype=bool)
    low, high = np.quantile(values, [0.002, 0.998])
    return np.asarray((low <= values) & (values <= high))


def _scaled(axes: Axes, series: Sequence[NDArray[np.float64]], place: int) -> Height:
    """Fit a row's values into its band of the panel, write its scale, and give the map from hPa to height."""
    joined = np.concatenate([*series, np.zeros(1)])
    finite = joined[np.isfinite(joined)]
    low, high = float(finite.min()), float(finite.max())
    span = max(high - low, 0.02)
    middle = 0.5 * (low + high)

    def height(values: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.asarray(place + 0.5 - _BAND * (values - middle) / span)

    ticks = [value for value in MaxNLocator(3).tick_values(low, high) if low <= value <= high]
    edge = axes.get_yaxis_transform()
    axes.hlines(height(np.array(ticks)), 0.0, 1.0, transform=edge, color=LAND, linewidth=0.4, zorder=0)
    for value, y in zip(ticks, height(np.array(ticks)), strict=True):
        axes.text(-0.012, float(y), f"{value:g}", transform=edge, ha="right", va="center", fontsize=5.5)
    return height


def _frame(axes: Axes, count: int, title: str) -> None:
    axes.set_ylim(count, 0)
    axes.set_yticks([])
    axes.set_title(title, fontsize=7.5)
    edge = axes.get_yaxis_transform()
    axes.hlines(range(1, count), 0.0, 1.0, transform=edge, color=REFERENCE, linewidth=0.3, zorder=0)


def _share_dates(panels: Sequence[Axes]) -> None:
    """Give all panels one span of time."""
    spans = [axes.get_xlim() for axes in panels if axes.lines]
    for axes in panels:
        if spans:
            axes.set_xlim(min(low for low, _ in spans), max(high for _, high in spans))
        locator = AutoDateLocator(minticks=3, maxticks=8)  # type: ignore[no-untyped-call]
        axes.xaxis.set_major_locator(locator)
        axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, show_offset=False))  # type: ignore[no-untyped-call]
