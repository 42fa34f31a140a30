"""A map of any field on latitude and longitude, with the land of the ocean function and the sites on it."""

from collections.abc import Mapping

import numpy as np
import xarray as xr
from matplotlib.figure import Figure
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.report.figures.fingerprint_maps import even_bands, signed_bands, world_map
from massfit.report.figures.style import PAGE_WIDTH_MM

_DIMS = ("lat", "lon")
_FINEST_DEG = 0.25  # finer cells cannot be seen


def field_map(
    field: xr.DataArray,
    sites: Mapping[str, tuple[float, float]] | None = None,
    *,
    ocean: OceanFunction | None = None,
    label: str | None = None,
    at_sites: NDArray[np.float64] | None = None,
    neutral: float | None = None,
    signed: bool = False,
    bands: NDArray[np.float64] | None = None,
    contoured: bool = True,
    width_mm: float = PAGE_WIDTH_MM,
) -> Figure:
    """Draw a field over the ocean, land in grey, and sites in the colour of their own value where it is given.

    Parameters
    ----------
    field : xarray.DataArray
        Over (lat, lon), centres of cells in degrees, in any order and convention; NaN where it is not known.
    sites : mapping of str to (float, float), optional
        Latitude and longitude of each site, degrees.
    ocean : OceanFunction, optional
        Gives the land; the built-in one by default.
    label : str, optional
        Of the scale of colours; the name and unit of the field by default.
    at_sites : (n_site,) array, optional
        Value of each site by itself.
    neutral : float, optional
        Value whose contour is drawn heavier.
    signed : bool
        Colours with edges at zero and at 1, 2 and 5 times powers of ten, for a field that is mostly small.
    bands : (n_edge,) array, optional
        Edges of the colours, ascending; round and equal steps over the middle of the values by default.
    contoured : bool
        Lines between the bands; for a field that is smooth from cell to cell.
    width_mm : float
        Width of the figure.

    Returns
    -------
    matplotlib.figure.Figure

    Raises
    ------
    InputError
        The field is not over (lat, lon), or holds no finite value on the ocean.

    Examples
    --------
    >>> latitude, longitude = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
    >>> depth = np.cos(np.radians(latitude))[:, None] * np.ones(longitude.size)
    >>> field = xr.DataArray(depth, {"lat": latitude, "lon": longitude}, ("lat", "lon"), "an invented field")
    >>> figure = field_map(field, {"Amphora": (-11.25, 205.5)}, at_sites=np.array([0.98]))
    >>> figure.axes[1].get_xlabel()
    'an invented field'
    """
    if field.dims != _DIMS:
        raise InputError(Fault("field", "dims", f"dimensions are {field.dims}", f"Must be {_DIMS}"))
    latitude, longitude, values = _on_the_globe(field)
    fraction = _ocean_fraction(ocean or OceanFunction.builtin(), latitude, longitude)
    shown = (fraction >= 0.5) & np.isfinite(values)
    if not shown.any():
        raise InputError(Fault("field", "values", "no value on the ocean is finite", "", "Give the field of an ocean"))
    weight = np.broadcast_to(np.cos(np.radians(latitude))[:, None], values.shape)[shown]
    places = np.array(list((sites or {}).values()), dtype=float).reshape(-1, 2)
    if bands is None:
        bands = (signed_bands if signed else even_bands)(values[shown], weight, keep=at_sites)
    return world_map(
        np.ma.masked_invalid(np.where(shown, values, np.nan)), fraction, latitude, longitude, list(sites or {}),
        places[:, 0], places[:, 1], label=label or _named(field), bands=bands, at_sites=at_sites, neutral=neutral,
        contoured=contoured, width_mm=width_mm,
    )  # fmt: skip


def _on_the_globe(field: xr.DataArray) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Put a field on cells of its own size over the whole Earth, each with the nearest value; NaN beyond its edge."""
    own = [np.asarray(field[name].values, dtype=float) for name in _DIMS]
    steps = [float(np.clip(np.median(np.abs(np.diff(np.sort(centres)))), _FINEST_DEG, 10.0)) for centres in own]
    rows, columns = (round(span / step) for span, step in zip((180.0, 360.0), steps, strict=True))
    latitude = (np.arange(rows) + 0.5) * 180.0 / rows - 90.0
    longitude = (np.arange(columns) + 0.5) * 360.0 / columns
    away = [
        np.abs(latitude[:, None] - own[0]),
        np.abs(np.mod(longitude[:, None] - own[1] + 180.0, 360.0) - 180.0),
    ]
    values = np.asarray(field.values, dtype=float)[np.ix_(*(gap.argmin(axis=1) for gap in away))]
    inside = [gap.min(axis=1) <= 0.501 * step for gap, step in zip(away, steps, strict=True)]
    return latitude, longitude, np.where(np.outer(*inside), values, np.nan)


def _ocean_fraction(
    ocean: OceanFunction, latitude: NDArray[np.float64], longitude: NDArray[np.float64]
) -> NDArray[np.float64]:
    return regrid(ocean.fraction, ocean.cells, CellGrid.from_centres(latitude, longitude))


def _named(field: xr.DataArray) -> str:
    name = str(field.attrs.get("long_name", "" if field.name is None else field.name))
    units = str(field.attrs.get("units", "1"))
    return name if units == "1" else f"{name} / {units}"
