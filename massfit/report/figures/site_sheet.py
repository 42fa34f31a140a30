"""One site at a glance: record, corrections, remainder, spectrum, whiteness, years, and what each correction did."""

import textwrap
from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.dates import AutoDateLocator, ConciseDateFormatter, date2num
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, MaxNLocator, NullLocator
from numpy.typing import NDArray

from massfit.report.figures.ellipse import normal_ellipse
from massfit.report.figures.labels import place_labels
from massfit.report.figures.render import png
from massfit.report.figures.style import (
    ANSWER,
    LAND,
    PAGE_WIDTH_MM,
    REFERENCE,
    SERIES_COLOURS,
    SITE,
    house_style,
    placed_axes,
    sheet,
    zero_lines,
)
from massfit.report.words.names import fitted
from massfit.results.site_sheet import SiteSheet

Floats = NDArray[np.float64]

DOTS_PER_INCH = 150

_LEFT, _RIGHT = 14.0, 4.0
_BANDS = ((38.0, "daily record; fitted drift dashed, its 95 % band / hPa"), (28.0, "subtracted / hPa"),
          (33.0, "what remains; fitted annual cycle / hPa"))  # fmt: skip
_SQUARE, _GAP, _DATES, _HEAD = 46.0, 7.0, 5.0, 15.5
_LINE, _NAMES, _LETTER = 3.1, 21.0, 1.42  # of the text below: height, room for the names, width of a letter
_ELLIPSE_95 = np.sqrt(5.991)  # chi-square with two degrees of freedom


def sheet_png(content: SiteSheet) -> bytes:
    """Draw the sheet of one site as a PNG with a palette.

    Parameters
    ----------
    content : SiteSheet

    Returns
    -------
    bytes
    """
    return png(site_sheet(content), dots_per_inch=DOTS_PER_INCH, colours=72)  # lines, their edges, and a few shades


def site_sheet(content: SiteSheet, *, width_mm: float = PAGE_WIDTH_MM) -> Figure:
    """Draw one site.

    Parameters
    ----------
    content : SiteSheet
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure
    """
    lines = _wrapped_facts(content, columns=int((width_mm - _LEFT - _NAMES - _RIGHT) / _LETTER))
    text_mm = _LINE * len(lines) + 3.0
    bands = sum(height + _GAP for height, _ in _BANDS) + _DATES
    height_mm = _HEAD + bands + _SQUARE + text_mm
    with house_style():
        figure = sheet(width_mm, height_mm)
        name, place = fitted(content.site, int(width_mm / 3.2)), fitted(content.place, int(width_mm / 1.8))
        figure.text(_LEFT / width_mm, 1.0 - 3.5 / height_mm, name, va="center", fontsize=11.0, weight="bold")
        figure.text(_LEFT / width_mm, 1.0 - 8.5 / height_mm, place, va="center", fontsize=8.0, color=REFERENCE)
        top = height_mm - _HEAD
        panels = []
        for (height, title), draw in zip(_BANDS, (_draw_record, _draw_corrections, _draw_reduced), strict=True):
            axes = placed_axes(figure, _LEFT, top - height, width_mm - _LEFT - _RIGHT, height)
            draw(axes, content)
            axes.set_title(title, fontsize=7.5)
            panels.append(axes)
            top -= height + _GAP
        _share_dates(panels)
        _draw_squares(figure, content, text_mm, width_mm)
        _write_facts(figure, lines, text_mm, width_mm, height_mm)
    return figure


def _draw_record(axes: Axes, content: SiteSheet) -> None:
    for shade, curve in enumerate(content.deployments):
        time, pressure, drift, sd = _with_gaps(curve.time, curve.pressure, curve.drift, curve.drift_sd)
        axes.plot(time, pressure, color=(ANSWER, SITE)[shade % 2], linewidth=0.5)
        axes.plot(time, drift, color="black", linewidth=0.8, linestyle="--")
        axes.fill_between(
            time, drift - 1.96 * sd, drift + 1.96 * sd, color="black", alpha=0.25, linewidth=0.0, zorder=3
        )
        axes.text(
            curve.time[0], 0.98, f" {curve.label.rpartition('/')[2]}", transform=axes.get_xaxis_transform(),
            fontsize=6.0, color=REFERENCE, va="top", clip_on=True,
        )  # fmt: skip
    everything = np.concatenate([part for curve in content.deployments for part in (curve.pressure, curve.drift)])
    _limits(axes, everything)
    for step in content.steps:
        axes.axvline(_number(step), color="#D55E00", linewidth=0.8, linestyle=":", zorder=2)
    for start, end in content.excluded:
        axes.axvspan(_number(start), _number(end), color=LAND, linewidth=0.0, zorder=0)
    if len(content.missing):
        # a rug along the lower edge: days that gave nothing to the fit
        axes.vlines(
            content.missing, 0.0, 0.05, transform=axes.get_xaxis_transform(), color=REFERENCE, linewidth=0.6, zorder=2
        )
    marks = [
        (len(content.steps) > 0, "dotted: step fitted"),
        (len(content.excluded) > 0, "grey: excluded"),
        (len(content.missing) > 0, f"ticks below: {len(content.missing)} days not used"),
    ]
    words = "; ".join(text for applies, text in marks if applies)
    axes.text(1.0, 1.03, words, transform=axes.transAxes, fontsize=6.5, color=REFERENCE, ha="right", va="bottom")


def _draw_corrections(axes: Axes, content: SiteSheet) -> None:
    if content.models is not None:
        time, low, high = _with_gaps(content.correction_time, *content.models)
        colour = SERIES_COLOURS["circulation (model mean)"]
        axes.fill_between(time, low, high, color=colour, alpha=0.25, linewidth=0.0, zorder=0)
    for words, colour in SERIES_COLOURS.items():
        if words in content.corrections:
            time, values = _with_gaps(content.correction_time, content.corrections[words])
            axes.plot(time, values, color=colour, linewidth=0.6, label=words)
    if content.corrections:
        axes.legend(
            loc="lower right", bbox_to_anchor=(1.0, 0.99), ncols=4, fontsize=6.5, handlelength=1.4, columnspacing=1.2,
            borderaxespad=0.0,
        )  # fmt: skip
        models = () if content.models is None else tuple(content.models)
        _limits(axes, np.concatenate([*content.corrections.values(), *models]))
    else:
        axes.text(0.5, 0.5, "nothing was subtracted", transform=axes.transAxes, ha="center", color=REFERENCE)


def _draw_reduced(axes: Axes, content: SiteSheet) -> None:
    axes.plot(content.reduced_time, content.reduced, ".", markersize=1.6, color="#9A9A9A", mew=0.0)
    time, annual = _with_gaps(content.reduced_time, content.annual)
    axes.plot(time, annual, color=ANSWER, linewidth=1.2)
    axes.axhline(0.0, color=REFERENCE, linewidth=0.4, zorder=0)
    # a few wild days do not set the scale
    shown = np.quantile(content.reduced, [0.002, 0.998]) if len(content.reduced) else np.zeros(2)
    _limits(axes, np.concatenate([shown, content.annual]))


def _limits(axes: Axes, values: Floats) -> None:
    finite = values[np.isfinite(values)]
    low, high = (float(finite.min()), float(finite.max())) if len(finite) else (-1.0, 1.0)
    margin = 0.06 * max(high - low, 0.1)
    axes.set_ylim(low - margin, high + margin)


def _number(moment: np.datetime64) -> float:
    return float(date2num(moment))  # type: ignore[no-untyped-call]


def _with_gaps(time: NDArray[np.datetime64], *series: Floats) -> list[Any]:
    """Put a NaN into every gap, so that no line crosses it."""
    days = np.diff(time) / np.timedelta64(1, "D")
    gaps = np.flatnonzero(days > 3.0 * np.median(days)) + 1 if len(days) else np.array([], int)
    filled = [np.insert(time, gaps, time[gaps])]
    return [*filled, *(np.insert(np.asarray(values, float), gaps, np.nan) for values in series)]


def _share_dates(panels: Sequence[Axes]) -> None:
    spans = [axes.get_xlim() for axes in panels if axes.lines]
    for axes in panels:
        axes.set_xlim(min(low for low, _ in spans), max(high for _, high in spans))
        axes.tick_params(labelbottom=axes is panels[-1])
        locator = AutoDateLocator(minticks=4, maxticks=12)  # type: ignore[no-untyped-call]
        axes.xaxis.set_major_locator(locator)
        axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, show_offset=False))  # type: ignore[no-untyped-call]


def _draw_squares(figure: Figure, content: SiteSheet, bottom: float, width_mm: float) -> None:
    judged = content.spectrum is not None
    count = 4 if judged else 2
    between = 11.5
    side = (width_mm - _LEFT - _RIGHT - (count - 1) * between) / count
    side = min(side, _SQUARE)
    places = [_LEFT + k * (side + between) for k in range(count)]
    boxes = [placed_axes(figure, left, bottom + 10.0, side, _SQUARE - 14.0) for left in places]
    if judged:
        _draw_spectrum(boxes[0], content)
        _draw_whiteness(boxes[1], content)
    _draw_years(boxes[-2], content)
    _draw_walk(boxes[-1], content)
    for axes in boxes[-2:]:
        axes.set_xlabel("in phase / hPa", fontsize=6.5)
        axes.set_ylabel("quadrature / hPa", fontsize=6.5, labelpad=0.5)
    for axes in boxes:
        axes.tick_params(labelsize=6.0)


def _draw_spectrum(axes: Axes, content: SiteSheet) -> None:
    spectrum = content.spectrum
    assert spectrum is not None
    axes.fill_between(spectrum.cycles_per_year, spectrum.low, spectrum.high, color=LAND, linewidth=0.0, zorder=0)
    axes.plot(spectrum.cycles_per_year, spectrum.noise, color=REFERENCE, linewidth=0.7, linestyle=":")
    axes.plot(spectrum.cycles_per_year, spectrum.expected, color="black", linewidth=0.8)
    axes.plot(spectrum.cycles_per_year, spectrum.density, "o-", color=ANSWER, markersize=2.0, linewidth=0.6)
    axes.set_xscale("log")
    axes.set_yscale("log")
    for axis in (axes.xaxis, axes.yaxis):
        axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
        axis.set_minor_locator(NullLocator())
    axes.axvline(1.0, color="#D55E00", linewidth=0.7, linestyle="--", zorder=1)
    # what the fit takes out of the residuals would stretch the axis beyond sight
    low = min(float(spectrum.density.min()), float(np.quantile(spectrum.low, 0.2)))
    axes.set_ylim(0.5 * low, 2.0 * max(float(spectrum.high.max()), float(spectrum.density.max())))
    axes.set_title("residuals / hPa² d", fontsize=7.0)
    axes.set_xlabel("cycles a year", fontsize=6.5)


def _draw_whiteness(axes: Axes, content: SiteSheet) -> None:
    lags = np.arange(1, len(content.autocorrelation) + 1)
    limit = content.autocorrelation_limit
    axes.axhspan(-limit, limit, color=LAND, linewidth=0.0, zorder=0)
    axes.axhline(0.0, color=REFERENCE, linewidth=0.5)
    axes.vlines(lags, 0.0, content.autocorrelation, color=ANSWER, linewidth=1.2)
    largest = max(1.6 * limit, 1.15 * float(np.abs(content.autocorrelation).max(initial=0.0)))
    axes.set_ylim(-largest, largest)
    axes.yaxis.set_major_locator(MaxNLocator(5))
    axes.set_title("whitened residuals", fontsize=7.0)
    axes.set_xlabel("lag / days", fontsize=6.5)
    axes.set_ylabel("correlation", fontsize=6.5, labelpad=0.5)


def _draw_years(axes: Axes, content: SiteSheet) -> None:
    axes.add_patch(
        normal_ellipse(content.phasor, content.covariance, _ELLIPSE_95, facecolor=ANSWER, alpha=0.25, zorder=2)
    )
    axes.plot(*content.phasor, "o", color=ANSWER, markersize=4.0, zorder=4)
    points = [content.phasor]
    for _, phasor, covariance in content.years:
        axes.add_patch(
            normal_ellipse(phasor, covariance, 1.0, facecolor="none", edgecolor=SITE, linewidth=0.6, zorder=2)
        )
        axes.plot(*phasor, "s", color=SITE, markersize=2.5, zorder=3)
        points.append(phasor)
    reach = [_ELLIPSE_95 * np.sqrt(np.diag(content.covariance))]
    reach += [np.minimum(np.sqrt(np.diag(covariance)), 3.0) for _, _, covariance in content.years]
    _square_limits(axes, np.array(points), np.array(reach))
    zero_lines(axes)
    axes.set_title("year by year; all (95 %)", fontsize=7.0)
    names = [f"{year}" for year, _, _ in content.years]
    place_labels(axes, names, np.array([phasor for _, phasor, _ in content.years]).reshape(-1, 2), font_size=5.5)


def _draw_walk(axes: Axes, content: SiteSheet) -> None:
    points = np.array([phasor for _, phasor in content.walk]).reshape(-1, 2)
    for (words, _), start, end in zip(content.walk[1:], points[:-1], points[1:], strict=True):
        axes.annotate(
            "", xy=end, xytext=start, zorder=3,
            arrowprops={"arrowstyle": "-|>", "color": _walk_colour(words), "lw": 1.1, "shrinkA": 0, "shrinkB": 0,
                        "mutation_scale": 6.0},
        )  # fmt: skip
    axes.plot(*points[0], "o", color="white", markeredgecolor="black", markersize=4.0, zorder=4, mew=0.8)
    axes.plot(*points[-1], "o", color=ANSWER, markersize=4.0, zorder=4)
    _square_limits(axes, np.vstack([points, np.zeros((1, 2))]), np.zeros((len(points) + 1, 2)))
    zero_lines(axes)
    axes.set_title("record to site", fontsize=7.0)
    place_labels(axes, ["record", "site"], points[[0, -1]], font_size=6.0, keep_clear=0.5 * (points[1:] + points[:-1]))


def _walk_colour(words: str) -> str:
    long = next((name for name in SERIES_COLOURS if name.startswith(words)), words)
    colour = SERIES_COLOURS.get(long, "#D55E00")
    return "#8C8C8C" if colour == "#C8C8C8" else colour


def _square_limits(axes: Axes, points: Floats, reach: Floats) -> None:
    """Give both axes the same scale, with all points and their reach inside."""
    low, high = (points - reach).min(axis=0), (points + reach).max(axis=0)
    box = axes.get_window_extent()
    shape = np.array([box.width, box.height])
    scale = 1.16 * max(np.max((high - low) / shape), 0.2 / shape.min())
    middle = 0.5 * (low + high)
    axes.set_xlim(middle[0] - 0.5 * scale * shape[0], middle[0] + 0.5 * scale * shape[0])
    axes.set_ylim(middle[1] - 0.5 * scale * shape[1], middle[1] + 0.5 * scale * shape[1])


def _wrapped_facts(content: SiteSheet, *, columns: int) -> list[tuple[str, str]]:
    """Break the facts and doubts into lines: a name, or none where a line goes on, and a text."""
    lines: list[tuple[str, str]] = []
    for name, text in [*content.facts, *(("! warning", text) for text in content.doubts)]:
        first, *rest = textwrap.wrap(text, columns) or [""]
        lines += [(fitted(name, 16), first), *(("!" if name.startswith("!") else "", more) for more in rest)]
    return lines


def _write_facts(
    figure: Figure, lines: Sequence[tuple[str, str]], text_mm: float, width_mm: float, height_mm: float
) -> None:
    for number, (name, text) in enumerate(lines):
        y = (text_mm - 1.0 - _LINE * number) / height_mm
        colour = "#B34700" if name.startswith("!") else "black"
        figure.text(_LEFT / width_mm, y, name.lstrip("! "), fontsize=6.5, va="top", color=REFERENCE)
        figure.text((_LEFT + _NAMES) / width_mm, y, text, fontsize=6.5, va="top", color=colour)
