"""A world map of the network: where the sites are and how each sees the cycle."""

from collections.abc import Sequence

import numpy as np
from matplotlib.colors import ListedColormap
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.report.style import LAND, REFERENCE, house_style


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

    Returns
    -------
    matplotlib.figure.Figure
    """
    doubt = np.asarray(doubtful if len(doubtful) else np.zeros(len(site_ids)), dtype=bool)
    east = np.mod(np.asarray(longitude_deg, dtype=float), 360.0)
    ratio = np.abs(admittance)
    spread = max(0.02, float(np.max(np.abs(ratio - 1.0)))) if len(ratio) else 0.1
    with house_style():
        figure = Figure(figsize=(9.6, 5.0), layout="constrained")
        axes = figure.subplots()
        land = np.ma.masked_greater(np.asarray(ocean_fraction), 0.5)
        rows, columns = np.argsort(cell_latitude_deg), np.argsort(np.mod(cell_longitude_deg, 360.0))
        axes.imshow(
            land[np.ix_(rows, columns)],
            cmap=ListedColormap([LAND]),
            extent=(0, 360, -90, 90),
            origin="lower",
            interpolation="none",
        )
        for marker, chosen in (("o", ~doubt), ("s", doubt)):
            points = axes.scatter(
                east[chosen], np.asarray(latitude_deg)[chosen], c=ratio[chosen], cmap="cividis",
                vmin=1.0 - spread, vmax=1.0 + spread, marker=marker, s=46, edgecolor="black", linewidth=0.7, zorder=3,
            )  # fmt: skip
        for name, x, y in zip(site_ids, east, latitude_deg, strict=True):
            axes.annotate(name, (x, y), xytext=(5, 4), textcoords="offset points", fontsize=7.5)
        axes.set(xlim=(0, 360), ylim=(-90, 90), xticks=range(0, 361, 60), yticks=range(-90, 91, 30))
        axes.set_xlabel("longitude / degrees east")
        axes.set_ylabel("latitude / degrees north")
        axes.set_aspect("equal")
        axes.set_title("The network" + (" (squares: sites with a warning)" if doubt.any() else ""))
        figure.colorbar(points, ax=axes, shrink=0.75, label="amplitude at the site / ocean mean")
        axes.grid(color=REFERENCE, linewidth=0.2, alpha=0.5)
    return figure
