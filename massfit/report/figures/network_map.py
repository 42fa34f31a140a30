"""A world map of the network: where the sites are and how each sees the cycle."""

from collections.abc import Sequence

import numpy as np
from matplotlib.cm import ScalarMappable
from matplotlib.colors import Normalize
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.report.figures.labels import place_labels
from massfit.report.figures.style import COLUMN_WIDTH_MM, PAGE_WIDTH_MM, house_style, placed_axes, sheet
from massfit.report.figures.world import draw_land, frame_map, latitude_range, on_the_map


def network_map(
    ocean_fraction: NDArray[np.float64],
    cell_latitude_deg: NDArray[np.float64],
    cell_longitude_deg: NDArray[np.float64],
    site_ids: Sequence[str],
    latitude_deg: NDArray[np.float64],
    longitude_deg: NDArray[np.float64],
    admittance: NDArray[np.complex128],
    *,
    doubtful: Sequence[bool] = (),
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw the sites on a world map, coloured by the amplitude of their fingerprint.

    Parameters
    ----------
    ocean_fraction : (n_lat, n_lon) array
        Ocean fraction of cells.
    cell_latitude_deg : (n_lat,) array
    cell_longitude_deg : (n_lon,) array
        Centres of the cells, degrees, in any order.
    site_ids : sequence of str
    latitude_deg, longitude_deg : (n_site,) array
        Degrees; longitude in either convention.
    admittance : (n_site,) array of complex
        Mean site admittance.
    doubtful : sequence of bool
        Sites that carry a warning get a square instead of a circle.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> ocean = np.ones((18, 36))
    >>> latitude, longitude = np.arange(-85.0, 90.0, 10.0), np.arange(5.0, 360.0, 10.0)
    >>> place = np.array([-11.0, 8.0]), np.array([205.5, 184.0])
    >>> figure = network_map(ocean, latitude, longitude, ("North", "South"), *place, np.array([1.1, 0.95 + 0.02j]))
    >>> figure.axes[0].get_title(loc="left")
    'The network'
    """
    doubt = np.asarray(doubtful if len(doubtful) else np.zeros(len(site_ids)), dtype=bool)
    east = on_the_map(np.asarray(longitude_deg, dtype=float))
    ratio = np.abs(admittance)
    spread = max(0.02, float(np.max(np.abs(ratio - 1.0)))) if len(ratio) else 0.1
    shades = Normalize(1.0 - spread, 1.0 + spread)
    across = width_mm - 15.0
    south, north = latitude_range(np.asarray(latitude_deg, dtype=float))
    up = across * (north - south) / 360.0
    with house_style():
        figure = sheet(width_mm, up + 30.0)
        axes = placed_axes(figure, 12.0, 23.0, across, up)
        draw_land(axes, ocean_fraction, cell_latitude_deg, cell_longitude_deg)
        frame_map(axes, south, north, every_deg=60 if width_mm > COLUMN_WIDTH_MM else 90)
        for marker, chosen in (("o", ~doubt), ("s", doubt)):
            axes.scatter(
                east[chosen], np.asarray(latitude_deg)[chosen], c=ratio[chosen], cmap="cividis", norm=shades,
                marker=marker, s=20, edgecolor="black", linewidth=0.6, zorder=5,
            )  # fmt: skip
        points = np.column_stack([east, np.asarray(latitude_deg, dtype=float)])
        missing = place_labels(axes, site_ids, points, font_size=6.0, marker_radius=2.6)
        axes.set_title(_title(bool(doubt.any()), missing, narrow=width_mm <= COLUMN_WIDTH_MM))
        figure.colorbar(
            ScalarMappable(shades, "cividis"),
            cax=placed_axes(figure, 12.0 + 0.2 * across, 9.0, 0.6 * across, 2.2),
            orientation="horizontal",
            label="amplitude at the site / ocean mean",
        )
    return figure


def _title(doubtful: bool, missing: int, *, narrow: bool) -> str:
    notes = ["squares: with a warning"] if doubtful else []
    notes += [f"{missing} without a name"] if missing else []
    if not notes:
        return "The network"
    return "; ".join(notes).capitalize() if narrow else "The network; " + "; ".join(notes)
