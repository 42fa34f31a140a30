"""Every recorder beside satellite gravity: amplitude and peak day, one line a site."""

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.report.figures.style import (
    COLUMN_WIDTH_MM,
    LAND,
    PAGE_WIDTH_MM,
    REFERENCE,
    SATELLITE,
    SITE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.words.names import fitted
from massfit.results.comparison_rows import Reading, SiteBeside

UNLIKELY = 0.05
"""A site whose difference has a lower probability is marked."""

_LOOKS: dict[str, dict[str, Any]] = {
    "recorder": {"color": SITE, "marker": "o", "markersize": 3.4},
    "satellites": {"color": SATELLITE, "marker": "s", "markersize": 3.4, "markerfacecolor": "white"},
}
"""Told apart in grey too."""

_ROW_MM = 4.2
_APART = 0.16  # of a row: the two readings of a site stand one above the other


def satellite_sites_figure(rows: Sequence[SiteBeside], *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw amplitude and peak day of recorder and satellites at every site, with one standard deviation.

    Parameters
    ----------
    rows : sequence of SiteBeside
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure
        Amplitude on the left, peak day on the right, the probability of the difference beside it.

    Examples
    --------
    >>> from massfit.results.comparison_rows import Reading
    >>> own, other = Reading(0.92, 0.15, 281.0, 9.0), Reading(0.80, 0.25, 274.0, 18.0)
    >>> rows = [SiteBeside("Aldessa", own, other, 0.7), SiteBeside("Brimoor", None, other, np.nan)]
    >>> figure = satellite_sites_figure(rows)
    >>> [axes.get_xlabel() for axes in figure.axes]
    ['amplitude / hPa', 'peak / day']
    """
    wide = width_mm > COLUMN_WIDTH_MM
    names, right, gap = (32.0, 13.0, 5.0) if wide else (20.0, 11.5, 3.0)
    side = 0.5 * (width_mm - names - right - gap)
    up, below, above = _ROW_MM * max(len(rows), 3), 16.0, 6.0
    with house_style():
        figure = sheet(width_mm, up + below + above)
        amplitude = placed_axes(figure, names, below, side, up)
        day = placed_axes(figure, names + side + gap, below, side, up)
        middle = _middle_day(rows)
        for axes in (amplitude, day):
            _frame(axes, len(rows))
        for line, row in enumerate(rows):
            _pair(amplitude, day, line, row, middle)
        _limits(amplitude, day, rows, middle)
        _names(amplitude, day, rows, 18 if wide else 11)
        amplitude.set_xlabel("amplitude / hPa")
        day.set_xlabel("peak / day")
        handles = [Line2D([], [], label=label, **look) for label, look in _LOOKS.items()]
        figure.legend(handles=handles, loc="lower center", ncols=2, borderaxespad=0.3)
    return figure


def _frame(axes: Axes, count: int) -> None:
    axes.set_ylim(count - 0.5, -0.5)
    axes.set_yticks([])
    axes.hlines(np.arange(1, count) - 0.5, 0.0, 1.0, transform=axes.get_yaxis_transform(), color=LAND, linewidth=0.4)


def _pair(amplitude: Axes, day: Axes, line: int, row: SiteBeside, middle: float) -> None:
    for reading, shift, look in zip((row.recorder, row.satellite), (-_APART, _APART), _LOOKS.values(), strict=True):
        if reading is None:
            continue
        for axes, value, error in (
            (amplitude, reading.amplitude_hpa, reading.amplitude_sd_hpa),
            (day, _near(reading.peak_day, middle), reading.peak_day_sd),
        ):
            axes.errorbar(value, line + shift, xerr=None if np.isnan(error) else error, elinewidth=0.9, **look)


def _near(day: float, middle: float) -> float:
    """Give the same day of the year, within half a year of the middle."""
    half = 0.5 * TROPICAL_YEAR_DAYS
    return (day - middle + half) % TROPICAL_YEAR_DAYS - half + middle


def _middle_day(rows: Sequence[SiteBeside]) -> float:
    """Mean direction of all readings, each weighing by its amplitude."""
    readings = _readings(rows)
    turns = sum(each.amplitude_hpa * np.exp(2j * np.pi * each.peak_day / TROPICAL_YEAR_DAYS) for each in readings)
    return float(np.angle(turns) / (2.0 * np.pi) % 1.0 * TROPICAL_YEAR_DAYS)


def _readings(rows: Sequence[SiteBeside]) -> list[Reading]:
    return [each for row in rows for each in (row.recorder, row.satellite) if each is not None]


def _limits(amplitude: Axes, day: Axes, rows: Sequence[SiteBeside], middle: float) -> None:
    """All marks are in sight; bars may lead out."""
    readings = _readings(rows)
    top = max(each.amplitude_hpa + np.nan_to_num(min(each.amplitude_sd_hpa, 0.3)) for each in readings)
    amplitude.set_xlim(0.0, 1.05 * top)
    far = max(
        abs(_near(each.peak_day, middle) - middle) + min(np.nan_to_num(each.peak_day_sd), 15.0) for each in readings
    )
    reach = 1.05 * max(far, 10.0)
    day.set_xlim(middle - reach, middle + reach)


def _names(amplitude: Axes, day: Axes, rows: Sequence[SiteBeside], width: int) -> None:
    amplitude.set_yticks(range(len(rows)), [fitted(row.site, width) for row in rows])
    amplitude.tick_params(axis="y", length=0.0)
    day.text(1.03, 1.0, "p", transform=day.transAxes, ha="left", va="bottom", fontsize=7.0)
    for line, (row, name) in enumerate(zip(rows, amplitude.get_yticklabels(), strict=True)):
        unlikely = row.probability < UNLIKELY
        text = "" if np.isnan(row.probability) else f"{row.probability:.2g}" if row.probability >= 0.01 else "< 0.01"
        weight, colour = ("bold", "black") if unlikely else ("normal", REFERENCE)
        day.text(
            1.03, line, text, transform=day.get_yaxis_transform(), ha="left", va="center", fontsize=6.5,
            fontweight=weight, color=colour,
        )  # fmt: skip
        name.set(fontweight=weight, color=colour)
