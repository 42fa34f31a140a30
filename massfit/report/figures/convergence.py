"""Convergence at a glance: how the chains moved, how soon they forget, and what R-hat and effective draws say."""

from collections.abc import Mapping, Sequence

import numpy as np
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import Figure

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

_CHAINS = ((ANSWER, "-"), (SITE, "-"), ("black", "-"), ("#56B4E9", "-"))  # Okabe & Ito (2008)
_LINES = ("-", "--", ":", "-.", (0, (5, 1, 1, 1, 1, 1)), (0, (1, 3)))
_ROW_MM, _GAP_MM = 12.0, 3.5
_POINTS = 60
"""Most points of a trace; neighbouring steps are averaged where there are more: chains that differ are seen still."""
_LOW_MM = 36.0


def convergence_figure(
    chains: xr.Dataset, *, words: Mapping[str, str] | None = None, width_mm: float = PAGE_WIDTH_MM
) -> Figure:
    """Draw traces, autocorrelation, R-hat and effective sample sizes.

    Parameters
    ----------
    chains : xarray.Dataset
        As :func:`massfit.results.chains.chain_diagnostics` gives it.
    words : mapping of str to str, optional
        What quantities are called, by name.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure
        Above, a row for each quantity and a line for each chain; below, the autocorrelation of the walkers, R-hat, and
        the effective draws, the last two with their thresholds. In a column the traces are left out.

    Examples
    --------
    >>> from massfit.results.chains import chain_diagnostics
    >>> draws = np.random.default_rng(1).normal(size=(4, 300, 2))
    >>> figure = convergence_figure(
    ...     chain_diagnostics(xr.Dataset({"member_annual_phasor": (("chain", "draw", "component"), draws)}))
    ... )
    >>> len(figure.axes)
    5
    """
    names = [str(name) for name in chains["quantity"].values]
    spoken = [(words or {}).get(name, name) for name in names]
    wide = width_mm > COLUMN_WIDTH_MM
    above = len(names) * (_ROW_MM + _GAP_MM) if wide else 0.0
    below = _LOW_MM + 18.0 if wide else 3.0 * (_LOW_MM + 13.0) - 6.0
    with house_style():
        figure = sheet(width_mm, above + below + 10.0)
        if wide:
            _traces(figure, chains, spoken, below, width_mm)
        for axes, draw in zip(_lower(figure, wide, width_mm), (_forgetting, _rhat, _effective), strict=True):
            draw(axes, chains, spoken)
    return figure


def _traces(figure: Figure, chains: xr.Dataset, spoken: Sequence[str], below: float, width_mm: float) -> None:
    for row, (name, values) in enumerate(zip(reversed(spoken), chains["trace"].values[::-1], strict=True)):
        bottom = below + 7.0 + row * (_ROW_MM + _GAP_MM)
        axes = placed_axes(figure, 14.0, bottom, width_mm - 18.0, _ROW_MM)
        count, steps = values.shape[-1], np.arange(1, values.shape[-1] + 1)
        blocks = np.array_split(np.arange(count), min(count, _POINTS))
        for number, chain in enumerate(values):
            colour, line = _CHAINS[number % len(_CHAINS)]
            points = [[part[block].mean() for block in blocks] for part in (steps, chain)]
            axes.plot(*points, color=colour, linestyle=line, linewidth=0.6)
        axes.set(xlim=(1, max(count, 2)))
        axes.set_title(f"{name} / hPa", fontsize=7.0, pad=1.5)
        axes.locator_params(axis="y", nbins=3)
        axes.tick_params(labelbottom=row == 0)
        if row == 0:
            axes.set_xlabel("kept step; median over the walkers, a line for each chain")


def _lower(figure: Figure, wide: bool, width_mm: float) -> list[Axes]:
    """Three panels side by side, or one above the other in a column."""
    if not wide:
        places = [10.0 + k * (_LOW_MM + 13.0) for k in (2, 1, 0)]
        boxes = [placed_axes(figure, 27.0 if k else 14.0, y, width_mm - (31.0 if k else 18.0), _LOW_MM - 2.0)
                 for k, y in enumerate(places)]  # fmt: skip
        return boxes
    across = (width_mm - 18.0 - 54.0) / 3.0
    lefts = (14.0, 14.0 + across + 28.0, 14.0 + 2.0 * across + 54.0)
    return [placed_axes(figure, left, 10.0, across, _LOW_MM) for left in lefts]


def _forgetting(axes: Axes, chains: xr.Dataset, spoken: Sequence[str]) -> None:
    lag = chains["lag"].values
    for number, (name, values) in enumerate(zip(spoken, chains["autocorrelation"].values, strict=True)):
        axes.plot(lag, values, color=_CHAINS[number % len(_CHAINS)][0], linestyle=_LINES[number % len(_LINES)],
                  linewidth=1.0, label=name)  # fmt: skip
    axes.axhline(0.0, color=REFERENCE, linewidth=0.5, zorder=0)
    axes.set(xlim=(0, max(lag[-1], 1)), ylim=(min(-0.1, float(chains["autocorrelation"].min())), 1.0))
    axes.set_xlabel("lag / kept steps")
    axes.set_title("autocorrelation of a walker", fontsize=7.0)
    axes.legend(fontsize=6.0, loc="upper right", labelspacing=0.2, handlelength=2.4)


def _rhat(axes: Axes, chains: xr.Dataset, spoken: Sequence[str]) -> None:
    allowed, places = float(chains.attrs["rhat_allowed"]), np.arange(len(spoken))
    values = chains["rhat"].values
    _rows(axes, spoken)
    axes.axvspan(allowed, 10.0, color=LAND, linewidth=0.0, zorder=0)
    axes.plot(values, places, "o", color=ANSWER, markersize=4.0)
    axes.set(xlim=(0.999, max(allowed + 0.004, 1.0 + 1.15 * float(np.nanmax(values, initial=1.0) - 1.0))))
    axes.locator_params(axis="x", nbins=4)
    axes.set_title(f"R-hat (grey: > {allowed:g})", fontsize=7.0)


def _effective(axes: Axes, chains: xr.Dataset, spoken: Sequence[str]) -> None:
    needed, places = float(chains.attrs["ess_needed"]), np.arange(len(spoken))
    bulk, tail = chains["ess_bulk"].values, chains["ess_tail"].values
    _rows(axes, spoken)
    axes.axvspan(0.0, needed, color=LAND, linewidth=0.0, zorder=0)
    axes.plot(bulk, places, "o", color=ANSWER, markersize=4.0, label="bulk")
    axes.plot(
        tail, places, "s", color=SITE, markersize=3.5, markeredgecolor="black", markeredgewidth=0.4, label="tails"
    )
    axes.set(xlim=(0.0, 1.25 * max(needed, float(np.nanmax(np.concatenate([bulk, tail]), initial=0.0)))))
    axes.locator_params(axis="x", nbins=4)
    axes.set_title(f"effective draws (grey: < {needed:g})", fontsize=7.0)
    axes.legend(fontsize=6.0, loc="upper left", ncols=2, handletextpad=0.1, columnspacing=0.8)


def _rows(axes: Axes, spoken: Sequence[str]) -> None:
    axes.set(ylim=(len(spoken) - 0.5, -1.2))
    axes.set_yticks(range(len(spoken)), list(spoken))
    axes.tick_params(axis="y", length=0.0)
    axes.grid(axis="y", color=LAND, linewidth=0.4)
