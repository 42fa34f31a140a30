"""World maps of the fingerprint with the sites on them, and the footprints of the sites as small maps."""

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.colors import BoundaryNorm
from matplotlib.figure import Figure
from matplotlib.patheffects import withStroke
from numpy.typing import NDArray

from massfit.report.figures.labels import place_labels
from massfit.report.figures.style import (
    COLUMN_WIDTH_MM,
    LAND,
    PAGE_WIDTH_MM,
    REFERENCE,
    SITE,
    house_style,
    placed_axes,
    sheet,
)
from massfit.report.figures.world import (
    draw_land,
    draw_picture,
    frame_map,
    latitude_range,
    on_the_map,
    picture,
)
from massfit.report.words.names import fitted

MAPS_OF_A_PAGE = 20
"""Most footprints in one figure."""

_NAMES_IN_A_COLUMN = 24  # more would hide the map

_COLOURS = "cividis"  # darker to lighter throughout: the same order in grey
_BANDS = 15  # at most so many steps of colour
_ROUND = np.outer(10.0 ** np.arange(-5, 5), [1.0, 2.0, 5.0]).ravel()


def world_map(
    values: NDArray[np.float64],
    ocean_fraction: NDArray[np.float64],
    latitude_deg: NDArray[np.float64],
    longitude_deg: NDArray[np.float64],
    site_ids: Sequence[str],
    site_latitude_deg: NDArray[np.float64],
    site_longitude_deg: NDArray[np.float64],
    *,
    label: str,
    bands: NDArray[np.float64],
    at_sites: NDArray[np.float64] | None = None,
    neutral: float | None = None,
    contoured: bool = True,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw a field over the ocean in bands of colour, with contours, and the sites in the colour of their own value.

    Parameters
    ----------
    values, ocean_fraction : (n_lat, n_lon) array
        Cells that are less than half ocean are land; values may be masked.
    latitude_deg, longitude_deg : (n_lat,), (n_lon,) array
        Centres of the cells, over the whole Earth.
    site_ids : sequence of str
    site_latitude_deg, site_longitude_deg : (n_site,) array
        Degrees; longitude in either convention.
    label : str
        Of the scale of colours.
    bands : (n,) array
        Edges of the colours, ascending.
    at_sites : (n_site,) array, optional
        Value of each site by itself; its marker has that colour.
    neutral : float, optional
        Value whose contour is drawn heavier.
    contoured : bool
        Lines between the bands; for a field that is smooth from cell to cell.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> latitude, longitude = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
    >>> ratio = 1.0 + 0.1 * np.outer(np.cos(np.radians(latitude)), np.sin(np.radians(longitude)))
    >>> place = np.array([-11.0]), np.array([205.5])
    >>> bands = np.linspace(0.9, 1.1, 11)
    >>> figure = world_map(ratio, np.ones((36, 72)), latitude, longitude, ["A"], *place, label="ratio", bands=bands)
    >>> figure.axes[1].get_xlabel()
    'ratio'
    """
    ocean = ocean_fraction >= 0.5
    known = np.ma.compressed(np.ma.masked_invalid(values[ocean]))
    inside = known if at_sites is None else np.concatenate([known, at_sites])
    scale = BoundaryNorm(bands, 256, extend="both")
    south, north = latitude_range(site_latitude_deg)
    across = width_mm - 15.0
    up = across * (north - south) / 360.0
    with house_style():
        figure = sheet(width_mm, up + 27.0)
        axes = placed_axes(figure, 12.0, 22.0, across, up)
        field = picture(np.ma.array(values, mask=~ocean), latitude_deg, longitude_deg)
        draw_picture(axes, field, cmap=_COLOURS, norm=scale)
        draw_land(axes, ocean_fraction, latitude_deg, longitude_deg)
        if contoured:
            _contours(axes, field, latitude_deg, longitude_deg, bands, neutral)
        frame_map(axes, south, north, every_deg=60 if width_mm > COLUMN_WIDTH_MM else 90)
        east = on_the_map(np.asarray(site_longitude_deg, dtype=float))
        colour = {"color": "white"} if at_sites is None else {"c": at_sites, "cmap": _COLOURS, "norm": scale}
        axes.scatter(east, site_latitude_deg, s=16, edgecolor="white", linewidth=1.6, zorder=4, **colour)
        axes.scatter(east, site_latitude_deg, s=16, edgecolor="black", linewidth=0.6, zorder=5, **colour)
        missing = len(site_ids)
        if width_mm > COLUMN_WIDTH_MM or missing <= _NAMES_IN_A_COLUMN:
            missing = place_labels(axes, site_ids, np.column_stack([east, site_latitude_deg]), marker_radius=2.6)
            _set_off(axes)
        notes = [f"heavy line: {neutral:g}"] if neutral is not None and bands[0] < neutral < bands[-1] else []
        axes.set_title("; ".join([*notes, *([f"{missing} without a name"] if missing else [])]), fontsize=7.0)
        _colour_scale(figure, scale, label, inside, (12.0 + 0.1 * across, 8.5, 0.8 * across, 2.2))
    return figure


def footprint_panels(
    ratios: NDArray[np.float64],
    ocean_fraction: NDArray[np.float64],
    latitude_deg: NDArray[np.float64],
    longitude_deg: NDArray[np.float64],
    site_ids: Sequence[str],
    site_latitude_deg: NDArray[np.float64],
    site_longitude_deg: NDArray[np.float64],
    *,
    bands: NDArray[np.float64],
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw for each site what it would see if all the water came from one place, over the land.

    Parameters
    ----------
    ratios : (n_site, n_lat, n_lon) array
        Amplitude at the site over that of the ocean mean, for water from the cell alone.
    ocean_fraction : (n_lat, n_lon) array
    latitude_deg, longitude_deg : (n_lat,), (n_lon,) array
        Centres of the cells.
    site_ids : sequence of str
    site_latitude_deg, site_longitude_deg : (n_site,) array
    bands : (n,) array
        Edges of the colours, the same on every page.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure

    Examples
    --------
    >>> latitude, longitude = np.arange(-85.0, 90.0, 10.0), np.arange(5.0, 360.0, 10.0)
    >>> ocean = np.broadcast_to(np.cos(np.radians(longitude)) > 0, (18, 36)).astype(float)
    >>> place = np.array([-11.0]), np.array([205.5])
    >>> bands = np.linspace(0.0, 2.0, 9)
    >>> figure = footprint_panels(np.ones((1, 18, 36)), ocean, latitude, longitude, ["A"], *place, bands=bands)
    >>> figure.axes[0].get_title(loc="left")
    'A'
    """
    across = (4 if width_mm > COLUMN_WIDTH_MM else 2) if len(site_ids) > 1 else 1
    down = -(-len(site_ids) // across)
    south, north = latitude_range(site_latitude_deg)
    gap = 2.0
    wide = (width_mm - 4.0 - gap * (across - 1)) / across
    high = wide * (north - south) / 360.0
    land = ocean_fraction < 0.5
    scale = BoundaryNorm(bands, 256, extend="both")
    east = on_the_map(np.asarray(site_longitude_deg, dtype=float))
    with house_style():
        figure = sheet(width_mm, 15.0 + down * (high + 5.0) + 1.0)
        for index, (site, ratio) in enumerate(zip(site_ids, ratios, strict=True)):
            row, column = divmod(index, across)
            axes = placed_axes(figure, 2.0 + column * (wide + gap), 15.0 + (down - row - 1) * (high + 5.0), wide, high)
            field = picture(np.ma.array(ratio, mask=~land), latitude_deg, longitude_deg)
            draw_picture(axes, field, cmap=_COLOURS, norm=scale)
            frame_map(axes, south, north, every_deg=60, labelled=False)
            axes.plot(east[index], site_latitude_deg[index], "o", color=SITE, markersize=4, markeredgecolor="black",
                      markeredgewidth=0.6)  # fmt: skip
            axes.set_title(fitted(site, int(wide / 1.5)), fontsize=7.0, pad=2.0)
            for side in axes.spines.values():
                side.set(visible=True, linewidth=0.4, color=LAND)
        label = "amplitude / ocean mean, for water from there alone"
        _colour_scale(figure, scale, label, ratios[:, land], (2.0 + 0.1 * width_mm, 8.5, 0.8 * width_mm, 2.2))
    return figure


def even_bands(
    values: NDArray[np.float64], weight: NDArray[np.float64], *, keep: NDArray[np.float64] | None = None
) -> NDArray[np.float64]:
    """Round edges of at most 15 equal bands over the middle 94 % of the values.

    Parameters
    ----------
    values, weight : (n,) array
    keep : (m,) array, optional
        Values that must lie within.

    Returns
    -------
    (n_edge,) array
        Multiples of 1, 2 or 5 times a power of ten.

    Examples
    --------
    >>> even_bands(np.linspace(0.0, 1.0, 101), np.ones(101)).round(3).tolist()
    [0.0, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0]
    """
    low, high = _middle(values, weight, keep)
    step = float(_ROUND[min(int(np.searchsorted(_ROUND, (high - low) / _BANDS)), _ROUND.size - 1)])
    first, last = np.floor(low / step + 1e-9), np.ceil(high / step - 1e-9)
    return np.asarray(step * np.arange(first, max(last, first + 2.0) + 1.0))


def signed_bands(
    values: NDArray[np.float64], weight: NDArray[np.float64], *, keep: NDArray[np.float64] | None = None
) -> NDArray[np.float64]:
    """Edges at zero and at 1, 2 and 5 times powers of ten to both sides: fine where most values are, and far enough.

    Parameters
    ----------
    values, weight : (n,) array
    keep : (m,) array, optional
        Values that must lie within.

    Returns
    -------
    (n_edge,) array

    Examples
    --------
    >>> signed_bands(np.linspace(-1.5, 8.0, 200), np.ones(200)).tolist()
    [-2.0, -1.0, -0.5, 0.0, 0.5, 1.0, 2.0, 5.0, 10.0]
    """
    low, high = _middle(values, weight, keep)
    largest = max(-low, high, 10.0 * float(_ROUND[0]))
    top = int(np.searchsorted(_ROUND, largest * (1.0 - 1e-9)))
    sizes = _ROUND[max(top - 4, 0) : top + 1]
    edges = np.concatenate([-sizes[::-1], [0.0], sizes])
    # no band beyond the one that holds the last value
    first = max(int(np.searchsorted(edges, low, side="right")) - 1, 0)
    last = min(int(np.searchsorted(edges, high)), edges.size - 1)
    return np.asarray(edges[first : max(last, first + 2) + 1])


def _middle(
    values: NDArray[np.float64], weight: NDArray[np.float64], keep: NDArray[np.float64] | None
) -> tuple[float, float]:
    order = np.argsort(values)
    share = np.cumsum(weight[order]) / np.sum(weight)
    low, high = (values[order[min(int(place), order.size - 1)]] for place in np.searchsorted(share, [0.03, 0.97]))
    kept = np.array([low, high]) if keep is None else np.array([low, high, *keep])
    return float(kept.min()), float(kept.max())


def _contours(
    axes: Axes,
    field: NDArray[np.float64],
    latitude_deg: NDArray[np.float64],
    longitude_deg: NDArray[np.float64],
    bands: NDArray[np.float64],
    neutral: float | None,
) -> None:
    """Lines between the bands; the neutral one is heavier."""
    place = np.sort(on_the_map(longitude_deg)), np.sort(latitude_deg)
    axes.contour(*place, field, levels=bands[1:-1], colors="white", linewidths=0.35, linestyles="solid")
    if neutral is not None and bands[0] < neutral < bands[-1]:
        for colour, width in (("white", 1.8), ("black", 0.9)):
            axes.contour(*place, field, levels=[neutral], colors=colour, linewidths=width)


def _set_off(axes: Axes) -> None:
    """Give names a white edge, to be read on any colour."""
    for text in axes.texts:
        text.set_path_effects([withStroke(linewidth=1.6, foreground="white")])


def _colour_scale(
    figure: Figure,
    scale: BoundaryNorm,
    label: str,
    values: NDArray[np.float64],
    place: tuple[float, float, float, float],
) -> None:
    """Bands of colour; an end is open where values lie beyond it."""
    low, high = float(np.min(values)) < scale.boundaries[0], float(np.max(values)) > scale.boundaries[-1]
    extend = {(False, False): "neither", (True, False): "min", (False, True): "max", (True, True): "both"}[low, high]
    bar = figure.colorbar(
        ScalarMappable(scale, _COLOURS), cax=placed_axes(figure, *place), orientation="horizontal", label=label,
        extend=extend,
    )  # fmt: skip
    labels = min(12, int(place[2] / 9.0))  # 9 mm hold the longest
    every = max(1, -(-len(scale.boundaries) // labels))
    bar.set_ticks(list(scale.boundaries[::every]), labels=[f"{round(edge, 6):g}" for edge in scale.boundaries[::every]])
    bar.ax.tick_params(color=REFERENCE)
