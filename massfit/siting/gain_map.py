"""The map of candidates, the best places on it, and the places that the user asks about, as Datasets."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.fingerprint.maps import value_on_map
from massfit.fingerprint.ocean import land_fault
from massfit.phasor import as_complex
from massfit.posterior.network_model import Choices
from massfit.posterior.observations import Observations
from massfit.siting.candidate_gain import covariance_with
from massfit.siting.candidates import candidate_rows, nearest_site, reduction, spread_apart, widths
from massfit.siting.network_error import NetworkError

Floats = NDArray[np.float64]

CELL_DEG, COARSE_DEG = 2, 4
"""Size of the cells of the map; the second where every cell shares scatter with the sites in its own way."""

LISTED, APART_KM = 10, 1500.0
"""Best places listed, and the least distance between them: less than half the width of an ocean basin."""

OPEN_SEA = 0.99
"""Ocean fraction of a cell and of those around it for the cell to be listed: shelves and straits are for the user to
ask about."""

LISTED_RATIO = (0.8, 1.25)
"""Amplitude there over that of the ocean mean for a cell to be listed. Beyond, a recorder gains mostly by telling the
errors that the models share from the cycle, which trusts the network model in having them the same everywhere, and the
fingerprint hangs on the pattern of the load near by."""

LEAST_DEPTH_M = 1000.0
"""Depth of the sea floor for a place to be listed, where depths are given: above, the season of the surface layer
reaches the bottom (common practice)."""


@dataclass(frozen=True)
class Plan:
    """A network about to be given one recorder more.

    Parameters
    ----------
    error : NetworkError
    observations : Observations
        With positions.
    choices : Choices
    years : float
        Length of the planned record.
    record : callable
        From latitudes and longitudes (c,), degrees, to covariances (c, 2, 2) of records of that length, Pa2, and to the
        disagreement (c,) of the models there, Pa; NaN where nothing is known.
    depth : callable
        From latitudes and longitudes to depths (c,), m; NaN where it is not known.
    """

    error: NetworkError
    observations: Observations
    choices: Choices
    years: float
    record: Callable[[Floats, Floats], tuple[Floats, Floats]]
    depth: Callable[[Floats, Floats], Floats]


@dataclass(frozen=True)
class Candidate:
    """A place that the user asks about.

    Parameters
    ----------
    name : str
    latitude_deg, longitude_deg : float
    depth_m : float
        NaN where it is not known.
    noise_sd : float
        Of a daily mean, Pa; NaN for that of the plan.
    """

    name: str
    latitude_deg: float
    longitude_deg: float
    depth_m: float = np.nan
    noise_sd: float = np.nan


def unknown_depth(latitude_deg: Floats, longitude_deg: Floats) -> Floats:
    """Depth of every place: not known. The ocean function of the package says how much of a cell is ocean, no more."""
    return np.full(np.broadcast(latitude_deg, longitude_deg).shape, np.nan)


def unrest(observations: Observations, error: NetworkError, disagreement: Floats) -> Floats:
    """Factor on the standard deviations of the dynamics at places where the models differ more than at the sites.

    What no model has is taken to grow with what they differ by; places where they differ less than at the sites of the
    network get no credit for it, for models are too quiet where the ocean is quiet (Liu et al. 2025).

    Parameters
    ----------
    observations : Observations
    error : NetworkError
    disagreement : (c,) array
        Standard deviation over the models of a component of their annual phasors, Pa; NaN counts as that of the sites.

    Returns
    -------
    (c,) array
        1 or more.
    """
    noise = np.trace(observations.model_noise, axis1=1, axis2=2).mean() / 2.0
    own = np.sqrt(np.mean(np.exp(2.0 * error.condition.log_scales[:, 1])) + noise)
    return np.asarray(np.maximum(np.nan_to_num(disagreement / own, nan=1.0), 1.0))


def places_dataset(
    plan: Plan,
    latitude_deg: Floats,
    longitude_deg: Floats,
    admittance: NDArray[np.complex128],
    record: Floats | None = None,
    depth: Floats | None = None,
) -> xr.Dataset:
    """Give what one recorder at each place would do.

    Parameters
    ----------
    plan : Plan
    latitude_deg, longitude_deg : (c,) array
    admittance : (n_member, c) array of complex
    record : (c, 2, 2) array, optional
        Covariances of the records, Pa2, instead of those of the plan; NaN leaves them.
    depth : (c,) array, optional
        Likewise, m.

    Returns
    -------
    xarray.Dataset
        Over (place): `latitude`, `longitude`, `depth`, `nearest_distance` and `nearest_site`, `record_sd`,
        `error_ratio` and `error_ratio_d` (error with over error without, by trace and by determinant), `component_sd`,
        `amplitude_sd`, `peak_day_sd`, `amplitude_ratio`, `unrest`, `group`.
    """
    position = np.radians(np.column_stack([latitude_deg, longitude_deg]))
    own_record, disagreement = plan.record(latitude_deg, longitude_deg)
    if record is not None:
        own_record = np.where(np.isfinite(record), record, own_record)
    own_depth = plan.depth(latitude_deg, longitude_deg)
    if depth is not None:
        own_depth = np.where(np.isfinite(depth), depth, own_depth)
    factor = unrest(plan.observations, plan.error, disagreement)
    rows = candidate_rows(
        plan.observations, plan.choices, position, admittance, record=own_record, unrest=factor, years=plan.years
    )
    known = np.flatnonzero(np.isfinite(own_record).all(axis=(1, 2)))
    after = np.full((len(position), 2, 2), np.nan)
    after[known] = covariance_with(plan.error, rows.take(known))
    before, phasor = plan.error.pooled_covariance, plan.error.pooled_mean
    by_trace, by_determinant = reduction(before, after)
    found = widths(phasor, after)
    near, distance = nearest_site(plan.observations, position)
    return xr.Dataset(
        {
            "latitude": _of_place(latitude_deg, "degrees_north", "latitude"),
            "longitude": _of_place(longitude_deg, "degrees_east", "longitude"),
            "depth": _of_place(own_depth, "m", "depth of the sea floor, as given"),
            "nearest_distance": _of_place(1000.0 * distance, "m", "distance of the nearest site of the network"),
            "record_sd": _of_place(
                np.sqrt(0.5 * np.trace(own_record, axis1=1, axis2=2)), "Pa", "error of a component of its own phasor"
            ),
            "error_ratio": _of_place(
                by_trace, "1", "error of the answer with this recorder over that without, by trace"
            ),
            "error_ratio_d": _of_place(by_determinant, "1", "the same by determinant"),
            "component_sd": _of_place(found.component_sd, "Pa", "error of a component of the answer"),
            "amplitude_sd": _of_place(found.amplitude_sd, "Pa", "error of the amplitude of the answer"),
            "peak_day_sd": _of_place(found.day_sd, "d", "error of the peak day of the answer"),
            "amplitude_ratio": _of_place(np.abs(admittance.mean(axis=0)), "1", "amplitude there over the ocean mean"),
            "unrest": _of_place(factor, "1", "factor on the dynamics that models miss or differ by"),
        },
        coords={"nearest_site": ("place", np.array(plan.observations.sites, dtype=object)[near])},
        attrs=_now(plan),
    )


def _of_place(values: Floats, units: str, text: str) -> tuple[str, Floats, dict[str, str]]:
    return "place", np.asarray(values, dtype=float), {"units": units, "long_name": text}


def _now(plan: Plan) -> dict[str, float]:
    now = widths(plan.error.pooled_mean, plan.error.pooled_covariance)
    return {
        "record_years": plan.years,
        "component_sd_now_pa": float(now.component_sd),
        "amplitude_sd_now_pa": float(now.amplitude_sd),
        "peak_day_sd_now_d": float(now.day_sd),
    }


def candidate_map(plan: Plan, maps: xr.Dataset) -> xr.Dataset:
    """Give what one recorder more would do at every place of the ocean.

    Parameters
    ----------
    plan : Plan
    maps : xarray.Dataset
        From :func:`massfit.fingerprint.maps.admittance_maps`.

    Returns
    -------
    xarray.Dataset
        The variables of :func:`places_dataset` over (lat, lon), NaN on land and where no error of a record is known;
        `ocean_fraction`, and `listable`, 1 in the open sea where the fingerprint is near that of the ocean mean.
    """
    by_label = isinstance(plan.choices.settings.group_scatter, bool)
    cell = CELL_DEG if by_label else COARSE_DEG
    lat, lon = np.arange(-90.0 + cell / 2.0, 90.0, cell), np.arange(cell / 2.0, 360.0, cell)
    north, east = (grid.ravel() for grid in np.meshgrid(lat, lon, indexing="ij"))
    fraction = _means(maps["ocean_fraction"].values, cell)
    wet = np.flatnonzero(fraction.ravel() >= 0.5)
    places = places_dataset(plan, north[wet], east[wet], admittance_at(maps, north[wet], east[wet]))
    open_sea = _open_sea(fraction)
    cells = {}
    for name, variable in places.data_vars.items():
        if name not in ("latitude", "longitude"):
            field = np.full(len(north), np.nan)
            field[wet] = variable.values
            cells[name] = (("lat", "lon"), field.reshape(fraction.shape), variable.attrs)
    shallow = cells["depth"][1] < LEAST_DEPTH_M  # False where no depth is known
    ratio = cells["amplitude_ratio"][1]
    fair = (ratio >= LISTED_RATIO[0]) & (ratio <= LISTED_RATIO[1])
    listable = open_sea & fair & ~shallow & np.isfinite(cells["error_ratio"][1])
    return xr.Dataset(
        {
            **cells,
            "ocean_fraction": (("lat", "lon"), fraction, {"units": "1", "long_name": "part of the cell that is ocean"}),
            "listable": (
                ("lat", "lon"),
                listable.astype(np.int8),
                {"units": "1", "long_name": "1 where a place may be listed"},
            ),
        },
        coords={
            "lat": ("lat", lat, {"units": "degrees_north"}),
            "lon": ("lon", lon, {"units": "degrees_east"}),
        },
        attrs=places.attrs,
    )


def admittance_at(
    maps: xr.Dataset, latitude_deg: Floats | float, longitude_deg: Floats | float
) -> NDArray[np.complex128]:
    """Admittances (n_member, c) of the maps at places, interpolated."""
    north, east = np.atleast_1d(latitude_deg), np.atleast_1d(longitude_deg)
    return np.array([value_on_map(field, north, east) for field in as_complex(maps["map_admittance"].values)])


def _means(values: Floats, cell: int) -> Floats:
    """From cells of one degree to larger ones."""
    rows, columns = values.shape
    return np.asarray(values.reshape(rows // cell, cell, columns // cell, cell).mean(axis=(1, 3)))


def _open_sea(fraction: Floats) -> NDArray[np.bool_]:
    """Cells that are ocean with all cells around them; none next to a pole."""
    inside = fraction >= OPEN_SEA
    for turned in (np.roll(inside, 1, axis=1), np.roll(inside, -1, axis=1)):
        inside = inside & turned
    up, down = np.zeros_like(inside), np.zeros_like(inside)
    up[1:], down[:-1] = inside[:-1], inside[1:]
    return np.asarray(inside & up & down)


def best_places(plan: Plan, cells: xr.Dataset, maps: xr.Dataset, *, count: int = LISTED) -> xr.Dataset:
    """Give the best places of a map, far apart, best first.

    Parameters
    ----------
    plan : Plan
    cells : xarray.Dataset
        From :func:`candidate_map`.
    maps : xarray.Dataset
        That it was made with.
    count : int

    Returns
    -------
    xarray.Dataset
        As :func:`places_dataset`; each is what one recorder more would do, not all of them together.
    """
    score = np.where(cells["listable"].values == 1, cells["error_ratio"].values, np.nan).ravel()
    north, east = (grid.ravel() for grid in np.meshgrid(cells["lat"].values, cells["lon"].values, indexing="ij"))
    chosen = spread_apart(score, np.radians(np.column_stack([north, east])), count=count, apart_km=APART_KM)
    places = places_dataset(plan, north[chosen], east[chosen], admittance_at(maps, north[chosen], east[chosen]))
    return places.assign_coords(place=[f"{place + 1}" for place in range(len(chosen))])


def asked_places(
    plan: Plan,
    candidates: Sequence[Candidate],
    admittance: NDArray[np.complex128],
    record_of: Callable[[float], Floats],
) -> xr.Dataset:
    """Give what one recorder more would do at each of the places that the user asks about.

    Parameters
    ----------
    plan : Plan
    candidates : sequence of Candidate
    admittance : (n_member, c) array of complex
    record_of : callable
        From the standard deviation of a daily mean, Pa, to the covariance (2, 2) of the record, Pa2.

    Returns
    -------
    xarray.Dataset
        As :func:`places_dataset`.
    """
    nothing = np.full((2, 2), np.nan)
    places = places_dataset(
        plan,
        np.array([each.latitude_deg for each in candidates]),
        np.array([each.longitude_deg for each in candidates]),
        admittance,
        np.array([record_of(each.noise_sd) if np.isfinite(each.noise_sd) else nothing for each in candidates]),
        np.array([each.depth_m for each in candidates]),
    )
    return places.assign_coords(place=[each.name for each in candidates])


def check_candidates(candidates: Sequence[Candidate], *, source: str) -> None:
    """Refuse candidates on land, and names that are given twice.

    Parameters
    ----------
    candidates : sequence of Candidate
    source : str
        Named in the faults.

    Raises
    ------
    InputError
        One fault for everything that is wrong.
    """
    names = [each.name for each in candidates]
    faults = [
        Fault(source, name, f"{names.count(name)} candidates have this name", "Names must differ")
        for name in dict.fromkeys(names)
        if names.count(name) > 1
    ]
    found = [land_fault(source, each.name, each.latitude_deg, each.longitude_deg) for each in candidates]
    # a candidate is no site yet
    faults += [replace(fault, problem=fault.problem.replace("the site", "the candidate")) for fault in found if fault]
    if faults:
        raise InputError(faults)
