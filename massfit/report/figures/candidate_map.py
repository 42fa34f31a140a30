"""World map of what one recorder more would do, with the network, the best places and those asked about."""

from collections.abc import Sequence

import numpy as np
from matplotlib.cm import ScalarMappable
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.figure import Figure
from matplotlib.patheffects import withStroke
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from massfit.report.figures.labels import place_labels
from massfit.report.figures.style import (
    COLUMN_WIDTH_MM,
    PAGE_WIDTH_MM,
    REFERENCE,
    SITE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.figures.world import draw_land, draw_picture, frame_map, latitude_range, on_the_map, picture

_COLOURS = "cividis_r"  # the more a place would help the darker, in grey too
_PLACES = (("b", "D", 17.0, "white"), ("a", "s", 17.0, "white"))
_SMALL_FROM = 60  # sites from which their markers are smaller

Floats = NDArray[np.float64]


def candidate_map(
    gain_percent: Floats,
    ocean_fraction: Floats,
    cell_latitude_deg: Floats,
    cell_longitude_deg: Floats,
    sites_deg: Floats,
    best_deg: Floats,
    asked: Sequence[str] = (),
    asked_deg: Floats | None = None,
    *,
    compared: NDArray[np.bool_] | None = None,
    label: str = "the error of the answer falls by / %",
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw a field over the ocean with places on it.

    Parameters
    ----------
    gain_percent, ocean_fraction : (n_lat, n_lon) array
        NaN where nothing is known.
    cell_latitude_deg, cell_longitude_deg : (n_lat,), (n_lon,) array
        Centres of the cells.
    sites_deg : (n_site, 2) array
        Latitude and longitude of the network.
    best_deg : (n, 2) array
        Of the best places, best first: they are numbered.
    asked : sequence of str
        Names of places asked about.
    asked_deg : (m, 2) array, optional
    compared : (n_lat, n_lon) array of bool, optional
        Cells that the scale of colours is made for; all others are pale and may run into its ends.
    label : str
        Of the scale of colours.
    width_mm : float

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> latitude, longitude = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
    >>> gain = np.abs(np.outer(np.sin(np.radians(latitude)), np.ones(72)))
    >>> places = np.array([[10.0, 200.0]]), np.array([[60.0, 180.0]])
    >>> figure = candidate_map(gain, np.ones((36, 72)), latitude, longitude, *places)
    >>> figure.axes[1].get_xlabel()
    'the error of the answer falls by / %'
    """
    told = np.empty((0, 2)) if asked_deg is None else np.asarray(asked_deg, dtype=float)
    everywhere = np.concatenate([sites_deg, best_deg, told])
    south, north = latitude_range(everywhere[:, 0])
    across = width_mm - 15.0
    up = across * (north - south) / 360.0
    known = np.ma.masked_invalid(gain_percent)
    # 1 % on either side run into the end colours: a strait or two would spoil the scale
    inside = gain_percent[np.isfinite(gain_percent) & (True if compared is None else compared)]
    low, high = np.quantile(inside, [0.01, 0.99]) if inside.size else (0.0, 1.0)
    edges = MaxNLocator(9, steps=[1, 2, 2.5, 5, 10]).tick_values(low, max(high, low + 0.1))
    scale = BoundaryNorm(edges, 256, extend="both")
    narrow = width_mm <= COLUMN_WIDTH_MM
    with house_style():
        figure = sheet(width_mm, up + 27.0)
        axes = placed_axes(figure, 12.0, 21.0, across, up)
        field = picture(known, cell_latitude_deg, cell_longitude_deg)
        draw_picture(axes, field, cmap=_COLOURS, norm=scale)
        if compared is not None:
            pale = np.ma.masked_where(compared | ~np.isfinite(gain_percent), np.ones(gain_percent.shape))
            veil = ListedColormap([(1.0, 1.0, 1.0, 0.62)])
            draw_picture(axes, picture(pale, cell_latitude_deg, cell_longitude_deg), cmap=veil)
        draw_land(axes, ocean_fraction, cell_latitude_deg, cell_longitude_deg)
        frame_map(axes, south, north, every_deg=90 if narrow else 60)
        points = {name: _on_map(places) for name, places in (("s", sites_deg), ("b", best_deg), ("a", told))}
        small = len(sites_deg) > _SMALL_FROM
        for kind, marker, size, colour in (("s", "o", 5.0 if small else 14.0, SITE), *_PLACES):
            axes.scatter(
                points[kind][:, 0], points[kind][:, 1], size, colour, marker=marker, zorder=5,
                edgecolors="black", linewidths=0.8,
            )  # fmt: skip
        names = [*(str(place + 1) for place in range(len(best_deg))), *asked]
        missing = place_labels(
            axes, names, np.concatenate([points["b"], points["a"]]),
            font_size=6.5, marker_radius=2.6, keep_clear=None if small else points["s"],
        )  # fmt: skip
        for text in axes.texts:
            text.set_color("black")
            text.set_path_effects([withStroke(linewidth=1.6, foreground="white")])
        axes.set_title(_title(len(told), missing, veiled=compared is not None, narrow=narrow), fontsize=7.0)
        bar = figure.colorbar(
            ScalarMappable(scale, _COLOURS),
            cax=placed_axes(figure, 12.0 + 0.1 * across, 8.5, 0.8 * across, 2.2),
            orientation="horizontal",
            label=label,
        )
        bar.ax.tick_params(colors=REFERENCE, labelsize=6.5)
    return figure


def _on_map(places: Floats) -> Floats:
    return np.column_stack([on_the_map(places[:, 1]), places[:, 0]]) if len(places) else np.empty((0, 2))


def _title(asked: int, missing: int, *, veiled: bool, narrow: bool) -> str:
    words = ["dots: sites", "diamonds: best places" if narrow else "numbered diamonds: the best places, best first"]
    words += ["squares: asked about"] if asked else []
    words += ["pale: not listed"] if veiled and not narrow else []
    words += [f"{missing} without a name"] if missing else []
    return "; ".join(words).capitalize()
