"""Names beside points, none over another: each takes the nearest free place, and the rest are counted."""

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from massfit.report.figures.style import REFERENCE
from massfit.report.words.names import fitted

LONGEST_NAME = 22
"""Columns of a name in a figure; a longer one is shortened in its middle."""

_DISTANCES = (4.0, 9.0, 15.0, 22.0, 31.0)  # points from the marker to the nearest corner of the name
_DIRECTIONS = np.radians([30, 150, -30, -150, 90, -90, 0, 180, 60, 120, -60, -120])
_GAP = 1.2  # points between names
_LEADER_FROM = 8.0  # points beyond which a line ties the name to its marker


def place_labels(
    axes: Axes,
    names: Sequence[str],
    points: NDArray[np.float64],
    *,
    font_size: float = 6.0,
    marker_radius: float = 2.5,
    keep_clear: NDArray[np.float64] | None = None,
) -> int:
    """Write names beside points without overlap.

    Parameters
    ----------
    axes : Axes
        With its final limits and place.
    names : sequence of str
    points : (n, 2) array
        Data coordinates.
    font_size : float
        Points.
    marker_radius : float
        Points; names keep off all markers.
    keep_clear : (m, 2) array, optional
        Further points that names keep off, data coordinates.

    Returns
    -------
    int
        Number of names that found no room.
    """
    if not len(names):
        return 0
    scale = axes.figure.dpi / 72.0  # pixels a point
    spots = axes.transData.transform(points)
    others = axes.transData.transform(keep_clear) if keep_clear is not None else np.empty((0, 2))
    radius = marker_radius * scale
    taken = [np.concatenate([spot - radius, spot + radius]) for spot in np.concatenate([spots, others])]
    frame = np.array(axes.bbox.extents)
    missing = 0
    for index in _crowded_first(spots):
        text = axes.annotate(
            fitted(names[index], LONGEST_NAME), points[index], xytext=(0, 0), textcoords="offset points",
            fontsize=font_size, color=REFERENCE, va="bottom", ha="left", zorder=7, annotation_clip=False,
        )  # fmt: skip
        extent = text.get_window_extent()
        size = np.array([extent.width, extent.height])
        found = _free_place(spots[index], size, scale, frame, np.array(taken))
        if found is None:
            text.remove()
            missing += 1
            continue
        corner, distance = found
        text.xyann = tuple((corner - spots[index]) / scale)
        box = np.concatenate([corner, corner + size])
        taken.append(box + _GAP * scale * np.array([-1.0, 0.0, 1.0, 0.0]))
        if distance > _LEADER_FROM:
            _leader(axes, spots[index], box)
    return missing


def _crowded_first(spots: NDArray[np.float64]) -> list[int]:
    distance = np.hypot(*(spots[:, None] - spots[None]).transpose(2, 0, 1))
    np.fill_diagonal(distance, np.inf)
    return [int(index) for index in np.argsort(distance.min(axis=1), kind="stable")]


def _free_place(
    spot: NDArray[np.float64],
    size: NDArray[np.float64],
    scale: float,
    frame: NDArray[np.float64],
    taken: NDArray[np.float64],
) -> tuple[NDArray[np.float64], float] | None:
    """Lower left corner of the first free place, pixels, and its distance, points."""
    for distance in _DISTANCES:
        for angle in _DIRECTIONS:
            toward = np.array([np.cos(angle), np.sin(angle)])
            # the side of the name that faces the marker touches the circle of that distance
            corner = spot + distance * scale * toward + size * (np.round(toward, 6).clip(-0.5, 0.5) - 0.5)
            box = np.concatenate([corner, corner + size])
            inside = (box[:2] >= frame[:2]).all() and (box[2:] <= frame[2:]).all()
            if inside and not ((box[:2] < taken[:, 2:]).all(axis=1) & (taken[:, :2] < box[2:]).all(axis=1)).any():
                return corner, distance
    return None


def _leader(axes: Axes, spot: NDArray[np.float64], box: NDArray[np.float64]) -> None:
    nearest = np.clip(spot, box[:2], box[2:])
    line = axes.transData.inverted().transform(np.stack([spot, nearest]))
    axes.plot(line[:, 0], line[:, 1], color=REFERENCE, linewidth=0.4, zorder=6)
