"""The phasor plane: the network's answer and each site's own reading of it."""

from calendar import month_abbr
from collections.abc import Mapping, Sequence
from datetime import date

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import PatchCollection
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.phasor import as_components, phasor_from_peak
from massfit.report.figures.ellipse import normal_ellipse
from massfit.report.figures.labels import LONGEST_NAME, place_labels
from massfit.report.figures.style import (
    ANSWER,
    COLUMN_WIDTH_MM,
    PAGE_WIDTH_MM,
    REFERENCE,
    SITE,
    house_style,
    placed_axes,
    sheet,
    zero_lines,
)
from massfit.report.words.names import fitted

# radius of the 50 % ellipse of a two-dimensional normal, sqrt(-2 ln(1 - p))
RADIUS_50 = 1.17741


def phasor_plane(
    draws_hpa: NDArray[np.float64],
    site_ids: Sequence[str],
    site_phasors_hpa: NDArray[np.float64],
    site_covariances_hpa2: NDArray[np.float64],
    *,
    reference_year: int,
    contours: Sequence[tuple[float, Sequence[NDArray[np.float64]]]] = (),
    models: Mapping[str, NDArray[np.float64]] | None = None,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the posterior's regions and each site's estimate in the plane of (in phase, quadrature).

    Parameters
    ----------
    draws_hpa : (n, 2) array
        Draws of the network phasor, hPa.
    site_ids : sequence of str
    site_phasors_hpa : (n_site, 2) array
        Each site's phasor divided by its admittance: what the site alone says of the network phasor, hPa.
    site_covariances_hpa2 : (n_site, 2, 2) array
        Record-error covariance of those, hPa2.
    reference_year : int
        Year whose months are marked.
    contours : sequence of (level, lines)
        Highest-density regions: probability and boundary lines, each (k, 2), hPa.
    models : mapping of str to (2,) array, optional
        Where the answer would move with each ocean model alone, hPa.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure
        The whole plane, and the region of the answer enlarged: side by side, or one above the other in a column.

    Examples
    --------
    >>> draws = np.random.default_rng(1).normal([0.1, -0.85], 0.05, (500, 2))
    >>> sites, covariances = np.array([[0.2, -0.8], [0.0, -0.95]]), np.stack(2 * [0.01 * np.eye(2)])
    >>> figure = phasor_plane(draws, ("North", "South"), sites, covariances, reference_year=2016)
    >>> [axes.get_title(loc="left") for axes in figure.axes]
    ['Network and sites', 'The answer enlarged']
    """
    with house_style():
        figure, whole, near = _panels(width_mm)
        reach = 1.25 * max(_reach(draws_hpa, 1.0), _reach(site_phasors_hpa, 0.85))
        for axes in (whole, near):
            _sites(axes, site_phasors_hpa, site_covariances_hpa2)
            _answer(axes, draws_hpa, contours)
            _models(axes, models or {})
            zero_lines(axes)
            axes.set_ylabel("quadrature / hPa")
            axes.set_xlabel("in phase / hPa")
        whole.set(xlim=(-reach, reach), ylim=(-reach, reach))
        whole.set_title("Network and sites")
        _month_marks(whole, reach, reference_year)
        _far_sites(whole, site_ids, site_phasors_hpa, reach)
        _enlarge(near, draws_hpa)
        names = [*site_ids, *(models or {})]
        points = np.vstack([site_phasors_hpa, *(models or {}).values()])
        missing = _site_labels(near, names, points, draws_hpa.mean(axis=0))
        near.set_title("The answer enlarged" + (f" ({missing} without a name)" if missing else ""))
        handles, labels = whole.get_legend_handles_labels()
        columns = 3 if width_mm > COLUMN_WIDTH_MM else 1
        figure.legend(handles, labels, loc="lower center", ncols=columns, borderaxespad=0.3)
    return figure


def _panels(width_mm: float) -> tuple[Figure, Axes, Axes]:
    if width_mm > COLUMN_WIDTH_MM:
        side = 0.5 * (width_mm - 33.0)
        figure = sheet(width_mm, side + 22.0)
        return figure, placed_axes(figure, 14, 16, side, side), placed_axes(figure, 30 + side, 16, side, side)
    side = width_mm - 18.0
    figure = sheet(width_mm, 2.0 * side + 48.0)
    return figure, placed_axes(figure, 15, 41 + side, side, side), placed_axes(figure, 15, 24, side, side)


def _reach(points: NDArray[np.float64], share: float) -> float:
    """Radius that holds a share of the points."""
    return float(np.quantile(np.hypot(points[:, 0], points[:, 1]), share))


def _far_sites(axes: Axes, ids: Sequence[str], phasors: NDArray[np.float64], reach: float) -> None:
    """Mark sites beyond the frame on its edge, in their direction."""
    marks, names = [], []
    for name, point in zip(ids, phasors, strict=True):
        largest = float(np.max(np.abs(point)))
        if largest > reach:
            marks.append(0.985 * reach * point / largest)
            names.append(f"{fitted(name, LONGEST_NAME - 10)}: {np.hypot(*point):.1f} hPa")
    for x, y in marks:
        axes.plot(x, y, marker="D", markersize=4, color=SITE, markeredgecolor="black", clip_on=False, zorder=6)
    place_labels(axes, names, np.array(marks).reshape(-1, 2), font_size=6.5, marker_radius=3.0)


def _answer(
    axes: Axes, draws: NDArray[np.float64], contours: Sequence[tuple[float, Sequence[NDArray[np.float64]]]]
) -> None:
    for level, lines in contours:
        for line in lines:
            axes.fill(line[:, 0], line[:, 1], facecolor=ANSWER, alpha=0.25, edgecolor="none", zorder=3)
            width = 1.3 if level < 0.9 else 0.9
            axes.plot(line[:, 0], line[:, 1], color=ANSWER, linewidth=width, zorder=4)
    label = "network: mean, 50 and 95 % regions"
    axes.plot(*draws.mean(axis=0), marker="+", markersize=8, color=ANSWER, zorder=5, linestyle="none", label=label)


def _models(axes: Axes, models: Mapping[str, NDArray[np.float64]]) -> None:
    if models:
        x, y = np.array(list(models.values())).T
        axes.plot(
            x, y, linestyle="none", marker="^", markersize=4.5, color="white", markeredgecolor="black",
            markeredgewidth=0.8, zorder=6, label="with one ocean model alone",
        )  # fmt: skip


def _sites(axes: Axes, phasors: NDArray[np.float64], covariances: NDArray[np.float64]) -> None:
    ellipses = [normal_ellipse(*pair, RADIUS_50) for pair in zip(phasors, covariances, strict=True)]
    # many sites are drawn paler, so that the answer stays the strongest mark
    alpha = float(np.clip(12.0 / max(len(ellipses), 1), 0.25, 0.8))
    axes.add_collection(PatchCollection(ellipses, facecolor="none", edgecolor=SITE, linewidth=0.6, alpha=alpha))
    axes.plot(
        phasors[:, 0], phasors[:, 1], linestyle="none", marker="o", markersize=3.0, color=SITE,
        markeredgecolor="black", markeredgewidth=0.3, zorder=5, label="site / fingerprint, 50 % record error",
    )  # fmt: skip


def _site_labels(axes: Axes, ids: Sequence[str], phasors: NDArray[np.float64], centre: NDArray[np.float64]) -> int:
    low, high = np.transpose([axes.get_xlim(), axes.get_ylim()])
    inside = ((low < phasors) & (phasors < high)).all(axis=1)
    names = [name for name, shown in zip(ids, inside, strict=True) if shown]
    return place_labels(axes, names, phasors[inside], keep_clear=centre[None])


def _month_marks(axes: Axes, reach: float, year: int) -> None:
    ring = 0.93 * reach
    for month in range(1, 13):
        day = (date(year, month, 1) - date(year, 1, 1)).days
        direction = as_components(phasor_from_peak(1.0, day))
        axes.plot(*np.outer(direction, [0.97 * ring, ring]), color=REFERENCE, linewidth=0.8)
        x, y = direction * (ring * 0.9)
        axes.annotate(month_abbr[month], (float(x), float(y)), ha="center", va="center", fontsize=6.5, color=REFERENCE,
                      bbox={"facecolor": "white", "pad": 0.4, "lw": 0.0}, zorder=1)  # fmt: skip
    turn = np.linspace(0.0, 2.0 * np.pi, 200)
    axes.plot(ring * np.cos(turn), ring * np.sin(turn), color=REFERENCE, linewidth=0.4)
    axes.annotate("peak on the 1st of", (0.01, 0.01), xycoords="axes fraction", fontsize=6.5, color=REFERENCE)


def _enlarge(axes: Axes, draws: NDArray[np.float64]) -> None:
    centre = draws.mean(axis=0)
    half = 4.2 * float(np.max(draws.std(axis=0)))
    axes.set(xlim=(centre[0] - half, centre[0] + half), ylim=(centre[1] - half, centre[1] + half))
