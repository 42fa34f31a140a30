"""The world map under every map of massfit: cut through Africa, so that every ocean stays whole."""

from collections.abc import Iterable

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import ListedColormap
from numpy.typing import NDArray

from massfit.report.figures.style import LAND, REFERENCE

WEST_EDGE_DEG = 20.0
"""The map is cut at 20 degrees east, through Africa and Europe."""

_NORTH, _SOUTH = 84.0, -80.0
_MARGIN = 3.0  # degrees of latitude between a site and the edge of the map
_FINEST = 720  # columns of a picture; more cost time and cannot be seen


def on_the_map(longitude_deg: NDArray[np.float64]) -> NDArray[np.float64]:
    """Longitudes as the map counts them, from 20 to 380 degrees east."""
    return np.asarray(np.mod(longitude_deg - WEST_EDGE_DEG, 360.0) + WEST_EDGE_DEG)


def latitude_range(latitudes_deg: Iterable[float]) -> tuple[float, float]:
    """Southern and northern edge of a map that shows all the sites, a little beyond a pole where one is there.

    Examples
    --------
    >>> latitude_range([-11.0, 40.0]), latitude_range([-89.0, 83.0])
    ((-80.0, 84.0), (-92.0, 86.0))
    """
    sites = list(latitudes_deg)
    south = min([_SOUTH, *(site - _MARGIN for site in sites)])
    north = max([_NORTH, *(site + _MARGIN for site in sites)])
    return max(south, -90.0 - _MARGIN), min(north, 90.0 + _MARGIN)


def picture(
    values: NDArray[np.float64], latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Turn a field over cells into the rows and columns of the map, from the south and from 20 degrees east.

    Parameters
    ----------
    values : (n_lat, n_lon) array
        May be masked.
    latitude_deg, longitude_deg : (n_lat,), (n_lon,) array
        Centres of the cells, in any order and convention.

    Returns
    -------
    (n_lat, n_lon) array
        Every so many rows and columns where there are more than can be seen.
    """
    rows, columns = np.argsort(latitude_deg), np.argsort(on_the_map(longitude_deg))
    step = max(1, len(columns) // _FINEST)
    return np.asanyarray(values)[np.ix_(rows[::step], columns[::step])]


def draw_picture(axes: Axes, field: NDArray[np.float64], **options: object) -> None:
    """Lay a picture over the whole world.

    Parameters
    ----------
    axes : Axes
    field : (n_lat, n_lon) array
        From `picture`.
    options
        Of matplotlib: colours and their scale.
    """
    edges = (WEST_EDGE_DEG, WEST_EDGE_DEG + 360.0, -90.0, 90.0)
    axes.imshow(field, extent=edges, origin="lower", interpolation="none", aspect="auto", **options)  # type: ignore[arg-type]


def draw_land(
    axes: Axes,
    ocean_fraction: NDArray[np.float64],
    latitude_deg: NDArray[np.float64],
    longitude_deg: NDArray[np.float64],
) -> None:
    """Draw the cells that are less than half ocean."""
    land = np.ma.masked_greater(np.asarray(ocean_fraction), 0.5)
    draw_picture(axes, picture(land, latitude_deg, longitude_deg), cmap=ListedColormap([LAND]))


def frame_map(axes: Axes, south: float, north: float, *, every_deg: int, labelled: bool = True) -> None:
    """Limits, meridians and circles of latitude of a map.

    Parameters
    ----------
    axes : Axes
    south, north : float
        Degrees north.
    every_deg : int
        Between the labels of meridians.
    labelled : bool
        Whether anything is written beside the frame.
    """
    east = [value for value in range(0, 421, every_deg) if WEST_EDGE_DEG <= value <= WEST_EDGE_DEG + 360.0]
    axes.set(xlim=(WEST_EDGE_DEG, WEST_EDGE_DEG + 360.0), ylim=(south, north), yticks=range(-60, 61, 30))
    axes.set_xticks(east, [str(value % 360) for value in east])
    axes.grid(color=REFERENCE, linewidth=0.2, alpha=0.5)
    if labelled:
        axes.set_xlabel("longitude / degrees east")
        axes.set_ylabel("latitude / degrees north")
    else:
        axes.tick_params(left=False, bottom=False, labelleft=False, labelbottom=False)
