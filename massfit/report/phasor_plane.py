"""The phasor plane: the network's answer and each site's own reading of it."""

from calendar import month_abbr
from collections.abc import Sequence
from datetime import date

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Ellipse
from numpy.typing import NDArray

from massfit.phasor import as_components, phasor_from_peak
from massfit.report.style import ANSWER, REFERENCE, SITE, house_style, zero_lines

# radius of the 50 % and 95 % ellipses of a two-dimensional normal, sqrt(-2 ln(1 - p))
RADIUS_50, RADIUS_95 = 1.17741, 2.44775


def phasor_plane(
    draws_hpa: NDArray[np.float64],
    site_ids: Sequence[str],
    site_phasors_hpa: NDArray[np.float64],
    site_covariances_hpa2: NDArray[np.float64],
    *,
    reference_year: int,
    contours: Sequence[tuple[float, Sequence[NDArray[np.float64]]]] = (),
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

    Returns
    -------
    matplotlib.figure.Figure
        The whole plane on the left, the region of the answer enlarged on the right.
    """
    with house_style():
        figure = Figure(figsize=(9.6, 5.2), layout="constrained")
        whole, near = figure.subplots(1, 2)
        reach = 1.25 * max(_reach(draws_hpa, 1.0), _reach(site_phasors_hpa, 0.85))
        for axes in (whole, near):
            _sites(axes, site_phasors_hpa, site_covariances_hpa2)
            _answer(axes, draws_hpa, contours)
            zero_lines(axes)
            axes.set_aspect("equal")
            axes.set_xlabel("in phase / hPa")
            axes.set_ylabel("quadrature / hPa")
        whole.set(xlim=(-reach, reach), ylim=(-reach, reach))
        _month_marks(whole, reach, reference_year)
        _far_sites(whole, site_ids, site_phasors_hpa, reach)
        _enlarge(near, draws_hpa)
        _site_labels(near, site_ids, site_phasors_hpa)
        whole.set_title("Network and sites")
        near.set_title("The answer enlarged: 50 and 95 % regions")
        handles, labels = whole.get_legend_handles_labels()
        figure.legend(handles, labels, loc="outside lower center", ncols=2)
    return figure


def _reach(points: NDArray[np.float64], share: float) -> float:
    """Radius that holds a share of the points."""
    return float(np.quantile(np.hypot(points[:, 0], points[:, 1]), share))


def _far_sites(axes: Axes, ids: Sequence[str], phasors: NDArray[np.float64], reach: float) -> None:
    """Mark sites beyond the frame on its edge, in their direction."""
    for name, point in zip(ids, phasors, strict=True):
        largest = float(np.max(np.abs(point)))
        if largest > reach:
            x, y = 0.985 * reach * point / largest
            axes.plot(x, y, marker="D", markersize=5, color=SITE, markeredgecolor="black", clip_on=False, zorder=6)
            side = "right" if x > 0 else "left"
            text = f"{name}: {np.hypot(*point):.1f} hPa"
            axes.annotate(text, (x, y), xytext=(0, 7), textcoords="offset points", fontsize=7.5, ha=side)


def _answer(
    axes: Axes, draws: NDArray[np.float64], contours: Sequence[tuple[float, Sequence[NDArray[np.float64]]]]
) -> None:
    for level, lines in contours:
        for line in lines:
            axes.fill(line[:, 0], line[:, 1], facecolor=ANSWER, alpha=0.28, edgecolor="none", zorder=3)
            width = 1.5 if level < 0.9 else 1.0
            axes.plot(line[:, 0], line[:, 1], color=ANSWER, linewidth=width, zorder=4)
    centre = draws.mean(axis=0)
    axes.plot(
        *centre, marker="+", markersize=9, color=ANSWER, zorder=5, linestyle="none", label="network: mean and regions"
    )


def _sites(axes: Axes, phasors: NDArray[np.float64], covariances: NDArray[np.float64]) -> None:
    for phasor, covariance in zip(phasors, covariances, strict=True):
        values, vectors = np.linalg.eigh(covariance)
        width, height = 2.0 * RADIUS_50 * np.sqrt(np.maximum(values[::-1], 0.0))
        angle = np.degrees(np.arctan2(vectors[1, 1], vectors[0, 1]))
        axes.add_patch(
            Ellipse((phasor[0], phasor[1]), width, height, angle=angle, facecolor="none", edgecolor=SITE, linewidth=0.8)
        )
    axes.plot(
        phasors[:, 0],
        phasors[:, 1],
        linestyle="none",
        marker="o",
        markersize=3.5,
        color=SITE,
        label="site / fingerprint, 50 % record error",
    )


def _site_labels(axes: Axes, ids: Sequence[str], phasors: NDArray[np.float64]) -> None:
    (left, right), (low, high) = sorted(axes.get_xlim()), sorted(axes.get_ylim())
    inside = [
        (name, point)
        for name, point in zip(ids, phasors, strict=True)
        if left < point[0] < right and low < point[1] < high
    ]
    for name, point in inside:
        axes.annotate(
            name,
            (float(point[0]), float(point[1])),
            xytext=(4, 3),
            textcoords="offset points",
            fontsize=6.5,
            color=REFERENCE,
        )


def _month_marks(axes: Axes, reach: float, year: int) -> None:
    ring = 0.93 * reach
    for month in range(1, 13):
        day = (date(year, month, 1) - date(year, 1, 1)).days
        direction = as_components(phasor_from_peak(1.0, day))
        axes.plot(*np.outer(direction, [0.97 * ring, ring]), color=REFERENCE, linewidth=0.8)
        x, y = direction * (ring * 0.91)
        axes.annotate(month_abbr[month], (float(x), float(y)), ha="center", va="center", fontsize=7.5, color=REFERENCE)
    turn = np.linspace(0.0, 2.0 * np.pi, 200)
    axes.plot(ring * np.cos(turn), ring * np.sin(turn), color=REFERENCE, linewidth=0.4)
    axes.annotate("peak on the 1st of", (0.02, 0.02), xycoords="axes fraction", fontsize=7.5, color=REFERENCE)


def _enlarge(axes: Axes, draws: NDArray[np.float64]) -> None:
    centre = draws.mean(axis=0)
    half = 4.2 * float(np.max(draws.std(axis=0)))
    axes.set(xlim=(centre[0] - half, centre[0] + half), ylim=(centre[1] - half, centre[1] + half))
