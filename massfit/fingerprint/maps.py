"""World maps of the admittance, and how the admittance of the sites settles with the degree of the solve."""

from collections.abc import Iterable, Iterator, Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.rotation import RotationalFeedback
from massfit.fingerprint.sea_level import SeaLevel, solve_sea_level
from massfit.phasor import COMPONENTS, as_components
from massfit.site import Site

MAP_LATITUDE_DEG = np.arange(-89.5, 90.0)
"""Latitudes of the cells of one degree on which maps are given, degrees north."""

MAP_LONGITUDE_DEG = np.arange(0.5, 360.0)
"""Longitudes of these cells, degrees east."""

_SMOOTHING = 4.0  # the kernel is e^-8 at the highest degree


def admittance_maps(
    operator: SeaLevelOperator,
    loads: Sequence[LoadPattern],
    *,
    water_vapour: complex = 0j,
    rotation: RotationalFeedback | None = None,
) -> xr.Dataset:
    """Complex admittance of every place under every load member: the site admittance, everywhere.

    One forward solve a member, evaluated at the centres of the cells as a sum over all harmonics. Over land it is
    the sea level that a narrow channel would have; near a load it is large and turned.

    Parameters
    ----------
    operator : SeaLevelOperator
    loads : sequence of LoadPattern
        Members of the ensemble, kg m-2.
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg.
    rotation : RotationalFeedback, optional
        Of this operator.

    Returns
    -------
    xarray.Dataset
        `map_admittance` (member, lat, lon, component) and `ocean_fraction` (lat, lon) on cells of one degree.

    Raises
    ------
    InputError
        There is no member, or one leaves the ocean mean as it is.

    Examples
    --------
    >>> from massfit.earth.love import love_numbers
    >>> from massfit.fingerprint.loads import builtin_loads
    >>> from massfit.fingerprint.ocean import OceanFunction
    >>> from massfit.fingerprint.operator import prepare_operator
    >>> operator = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20)
    >>> maps = admittance_maps(operator, builtin_loads(("nominal",)))
    >>> pacific = maps.map_admittance.sel(member="nominal", component="in_phase", lat=-11.5, lon=205.5)
    >>> 1.05 < pacific.item() < 1.2
    True
    """
    _require_members(loads)
    maps = np.stack([_map(_solve(operator, rotation, [load], water_vapour)) for load in loads])
    cells = CellGrid.from_centres(MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG)
    fraction = regrid(operator.ocean, operator.cells, cells)
    return xr.Dataset(
        {
            "map_admittance": (("member", "lat", "lon", "component"), as_components(maps), {"units": "1"}),
            "ocean_fraction": (("lat", "lon"), fraction.clip(0.0, 1.0), {"units": "1"}),
        },
        coords={"member": [load.name for load in loads], "component": list(COMPONENTS), **map_axes()},
    )


def footprint_maps(operator: SeaLevelOperator, footprints: xr.Dataset) -> xr.Dataset:
    """Footprints as means over the cells of the maps, and smooth, as an amplitude ratio, for the eye.

    Sums of load times cell area times the footprints are those over the operator's own grid exactly, for loads
    that are even within the cells. A footprint to a highest degree has ripples of that degree, which no load of
    some size sees; `footprint_ratio` is without them.

    Parameters
    ----------
    operator : SeaLevelOperator
    footprints : xarray.Dataset
        contracts.FOOTPRINTS, of the same operator; real, so without rotational feedback.

    Returns
    -------
    xarray.Dataset
        contracts.FOOTPRINTS, with `footprint_ratio` (site, lat, lon): amplitude at the site over that of the ocean
        mean if all the water came from the place, -rho_w A T_s, smoothed by the heat kernel
        exp(-n (n + 1) s^2 / 2) of s = 4 / max_degree rad (1.3 degrees at degree 180).
    """
    cells = CellGrid.from_centres(MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG)
    means = np.stack([regrid(field, operator.cells, cells) for field in footprints["footprint"].to_numpy()])
    degree = operator.grid.degree
    smooth = np.exp(-degree * (degree + 1.0) * (_SMOOTHING / operator.max_degree) ** 2 / 2.0)
    coefficients = smooth * operator.grid.analyse(footprints["footprint"].to_numpy())
    ratio = -operator.sea_water_density * operator.ocean_area_m2 * _on_cells(operator, coefficients)
    field = ("site", "lat", "lon")
    return xr.Dataset(
        {
            "footprint": (field, means, {"units": "m kg-1"}),
            "footprint_ratio": (field, ratio, {"units": "1"}),
            "constant": footprints["constant"],
        },
        coords={"site": footprints["site"], **map_axes()},
        attrs=footprints.attrs,
    )


def admittance_by_degree(
    operators: Iterable[tuple[SeaLevelOperator, RotationalFeedback | None]],
    sites: Sequence[Site],
    loads: Sequence[LoadPattern],
    *,
    water_vapour: complex = 0j,
) -> xr.DataArray:
    """Ensemble mean of the site admittances, solved to one degree after another.

    The mean over the members is the admittance of one load, the mean of the members each divided by the ocean mean
    that it causes: one solve a degree, whatever the number of members and of sites.

    Parameters
    ----------
    operators : iterable of (SeaLevelOperator, RotationalFeedback or None)
        One a degree; each is let go before the next is taken.
    sites : sequence of Site
    loads : sequence of LoadPattern
    water_vapour : complex

    Returns
    -------
    xarray.DataArray
        (degree, site, component).

    Raises
    ------
    InputError
        There is no member, or one leaves the ocean mean as it is.
    """
    _require_members(loads)
    latitude, longitude = [site.latitude_deg for site in sites], [site.longitude_deg for site in sites]
    degrees, values = [], []
    for operator, rotation in operators:
        values.append(_solve(operator, rotation, loads, water_vapour).at(latitude, longitude))
        degrees.append(operator.max_degree)
    return xr.DataArray(
        as_components(np.array(values)),
        dims=("degree", "site", "component"),
        coords={"degree": degrees, "site": [site.id for site in sites], "component": list(COMPONENTS)},
        attrs={"units": "1"},
    )


def value_on_map(
    values: NDArray[np.complex128],
    latitude_deg: Sequence[float] | NDArray[np.float64],
    longitude_deg: Sequence[float] | NDArray[np.float64],
) -> NDArray[np.complex128]:
    """Interpolate a map of one degree linearly between the centres of its cells, across the date line and the poles.

    Parameters
    ----------
    values : (180, 360) array
        On the cells of the maps.
    latitude_deg, longitude_deg : (n,) sequence of float
        Degrees north; degrees east in either convention.

    Returns
    -------
    (n,) array

    Examples
    --------
    >>> east = np.broadcast_to(np.exp(1j * np.radians(MAP_LONGITUDE_DEG)), (180, 360))
    >>> np.angle(value_on_map(east, [0.0, 0.0], [-0.25, 359.75]), deg=True).round(3)
    array([-0.25, -0.25])
    """
    turned = np.roll(values, 180, axis=1)
    # one row beyond each pole, from the other side of it, and one column on each side
    padded = np.pad(np.vstack([turned[:1], values, turned[-1:]]), ((0, 0), (1, 1)), mode="wrap")
    row = np.asarray(latitude_deg, dtype=float) + 90.5
    column = np.mod(np.asarray(longitude_deg, dtype=float), 360.0) + 0.5
    south, west = (np.floor(place).astype(int) for place in (row, column))
    up, right = row - south, column - west
    low = padded[south, west] * (1.0 - right) + padded[south, west + 1] * right
    high = padded[south + 1, west] * (1.0 - right) + padded[south + 1, west + 1] * right
    return np.asarray(low * (1.0 - up) + high * up)


def map_axes() -> dict[str, tuple[str, NDArray[np.float64], dict[str, str]]]:
    """Coordinates of the maps."""
    return {
        "lat": ("lat", MAP_LATITUDE_DEG, {"units": "degrees_north"}),
        "lon": ("lon", MAP_LONGITUDE_DEG, {"units": "degrees_east"}),
    }


def _solve(
    operator: SeaLevelOperator,
    rotation: RotationalFeedback | None,
    loads: Sequence[LoadPattern],
    water_vapour: complex,
) -> SeaLevel:
    """Sea level under the mean of the loads, each scaled so that it raises the ocean mean by 1 m."""
    total = np.zeros(operator.ocean.shape, dtype=complex)
    vapour = 0j
    for field, mean in _fields_and_means(operator, loads, water_vapour):
        total += field / (mean * len(loads))
        vapour += water_vapour / (mean * len(loads))
    return solve_sea_level(operator, load=total, water_vapour=vapour, rotation=rotation)


def _fields_and_means(
    operator: SeaLevelOperator, loads: Sequence[LoadPattern], water_vapour: complex
) -> Iterator[tuple[NDArray[np.complex128], complex]]:
    for load in loads:
        field = regrid(load.values, CellGrid.from_centres(load.latitude_deg, load.longitude_deg), operator.cells)
        mass = complex(np.sum(field * operator.cell_area_m2)) + water_vapour
        mean = -mass / (operator.sea_water_density * operator.ocean_area_m2)
        if mean == 0.0:
            raise InputError(Fault("fingerprint", load.name, "it leaves the ocean mean as it is", "Must move water"))
        yield field, mean


def _map(sea: SeaLevel) -> NDArray[np.complex128]:
    real, imaginary = _on_cells(sea.operator, sea.coefficients)
    return np.asarray(real + 1j * imaginary)


def _on_cells(operator: SeaLevelOperator, coefficients: NDArray[np.complex128]) -> NDArray[np.float64]:
    return operator.grid.synthesise_regular(coefficients, MAP_LATITUDE_DEG, MAP_LONGITUDE_DEG)


def _require_members(loads: Sequence[LoadPattern]) -> None:
    if not loads:
        raise InputError(Fault("fingerprint", "loads", "there is no member", "At least one", 'Add "builtin:all"'))
