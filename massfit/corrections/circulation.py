"""Bottom pressure of ocean circulation models at the sites, with their ocean mean removed."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA, SEA_WATER_DENSITY
from massfit.contracts import FOOTPRINTS, require
from massfit.corrections.atmosphere import allows_annual_phasor, annual_phasor, ocean_mean_air_pressure, ocean_weight
from massfit.corrections.grid_field import GridField, grid_field, stencil
from massfit.corrections.series import resampled
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.transforms import SphereGrid
from massfit.network import CirculationModel, Series
from massfit.site import Site

OCEAN_MEAN_LIMIT_HPA = 0.02
"""Largest annual cycle of the ocean mean that a file may hold which claims that it is removed."""

PARTS = ("own_ocean_mean", "self_attraction", "local_air_pressure")
"""What is added to a model's pressure at the sites: less its own whole-ocean mean, where it comes with one; the answer
of the ocean to the attraction and load of its pressure field; the air pressure there less its mean over the ocean."""

WHOLE_OCEAN_SHARE = 0.9
"""Share of the ocean a model must cover for its whole-ocean mean to be judged."""


@dataclass(frozen=True, eq=False)
class CirculationAtSites:
    """Bottom pressure of one circulation model at the sites.

    Parameters
    ----------
    name : str
    sites : tuple of str
        Site ids, in the order of the columns.
    time : (n_time,) array of datetime64[ns]
        UTC, middle of each interval.
    pressure : (n_time, n_site) array of float
        Pa; NaN where the model has no value.
    distance_km : (n_site,) array of float
        Distance to the wet cell used where the site's own cells are dry, else 0;
        the distance to the nearest one where none is near enough; NaN where a table of sites lacks the site.
    notes : tuple of str
        What was noticed of the model, for the report; what concerns single sites is in `distance_km`.
    parts : mapping of str to (n_time, n_site) array
        What `pressure` holds besides the model's own pressure at the site, Pa, by the names of `PARTS`: they were
        added, each with its sign.
    partial : str
        "missing" or "cut": see :class:`massfit.network.CirculationModel`.
    """

    name: str
    sites: tuple[str, ...]
    time: NDArray[np.datetime64]
    pressure: NDArray[np.float64]
    distance_km: NDArray[np.float64]
    notes: tuple[str, ...] = ()
    parts: Mapping[str, NDArray[np.float64]] = field(default_factory=dict)
    partial: str = "missing"

    def only(self, site: str) -> "CirculationAtSites":
        """Take one site alone."""
        column = [self.sites.index(site)]
        parts = {name: values[:, column] for name, values in self.parts.items()}
        alone = {"sites": (site,), "pressure": self.pressure[:, column], "distance_km": self.distance_km[column]}
        return replace(self, **alone, parts=parts)  # type: ignore[arg-type]

    def at(self, site: str) -> NDArray[np.float64]:
        """Series of one site, (n_time,) Pa."""
        return self.pressure[:, self.sites.index(site)]


_LARGEST_SD = 1e4
"""Pa, over time at the median site; ten times what the most lively shelves have."""


def circulation_at_sites(
    model: CirculationModel,
    sites: Sequence[Site],
    *,
    ocean: OceanFunction,
    footprints: xr.Dataset | None = None,
    air_pressure: xr.DataArray | None = None,
) -> CirculationAtSites:
    """Bottom pressure of a circulation model at the sites.

    The mean over the whole ocean is not part of it: a model that comes with its own mean has it subtracted, and what
    is left in a gridded one is checked. Where the footprints are given, the answer of the ocean to the
    attraction and load of a gridded model's pressure field is added.

    Parameters
    ----------
    model : massfit.network.CirculationModel
    sites : sequence of Site
    ocean : OceanFunction
        Weighs the ocean mean.
    footprints : xarray.Dataset, optional
        contracts.FOOTPRINTS, of these sites at least.
    air_pressure : xarray.DataArray, optional
        Surface air pressure, Pa, over (time, lat, lon); needed by a model whose air pressure is "forced-excluded".

    Returns
    -------
    CirculationAtSites

    Raises
    ------
    InputError
        A field in another form or of impossible size, an ocean mean that was not removed or does not cover the
        model, or air pressure that is needed and missing.

    Examples
    --------
    >>> time = np.arange("2016-01-01T12", "2016-01-03T12", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    >>> table = xr.DataArray([[1.0, 2.0], [3.0, 4.0]], dims=("time", "site"), coords={"time": time, "site": ["A", "B"]})
    >>> model = CirculationModel("invented", table, Series("mean", time, np.array([0.5, 0.5])), "not-forced")
    >>> circulation_at_sites(model, [Site("B", 0.0, 0.0)], ocean=OceanFunction.builtin()).at("B")
    array([1.5, 3.5])
    """
    if model.air_pressure == "forced-excluded" and air_pressure is None:
        raise InputError(
            Fault(
                model.name,
                "air_pressure",
                'the model states "forced-excluded", and there is no air-pressure field',
                "The local response to air pressure must be added",
                "Give [corrections] air_pressure",
            )
        )
    tabulated = "site" in model.pressure.dims
    result = _from_table(model, sites) if tabulated else _from_grid(model, sites, ocean, footprints)
    _check_size(model, result.pressure)
    parts = dict(result.parts)
    if model.ocean_mean is not None:
        own = _own_mean(model.name, model.ocean_mean, result.time)
        parts["own_ocean_mean"] = np.repeat(-own[:, None], len(sites), axis=1)
    if model.air_pressure == "forced-excluded" and air_pressure is not None:
        parts["local_air_pressure"] = _air_anomaly(air_pressure, sites, ocean, result.time)
    added = [parts[name] for name in ("own_ocean_mean", "local_air_pressure") if name in parts]
    return replace(result, pressure=sum(added, start=result.pressure), parts=parts, partial=model.partial)


def _check_size(model: CirculationModel, pressure: NDArray[np.float64]) -> None:
    """Refuse a model in the wrong units: the weather of the deep ocean is a few hPa."""
    spreads = [float(np.std(own[np.isfinite(own)])) for own in pressure.T if np.isfinite(own).any()]
    if spreads and np.median(spreads) > _LARGEST_SD:
        problem = f"its bottom pressure varies by {np.median(spreads) / PASCAL_PER_HPA:.3g} hPa (1 sd) at the sites"
        allowed = "A deep ocean varies by a few hPa"
        raise InputError(Fault(model.name, "pressure", problem, allowed, "Correct the units in its file"))


def _from_table(model: CirculationModel, sites: Sequence[Site]) -> CirculationAtSites:
    data = model.pressure
    if set(data.dims) != {"time", "site"} or any(dim not in data.coords for dim in data.dims):
        problem = f"dimensions {tuple(data.dims)} with coordinates {tuple(data.coords)}"
        allowed = "Must be (time, site) or (time, lat, lon), with their coordinates"
        raise InputError(Fault(model.name, "pressure", problem, allowed))
    time = np.asarray(data["time"].values, dtype="datetime64[ns]")
    if time.size < 2 or not np.all(np.diff(time) > np.timedelta64(0, "ns")):
        raise InputError(Fault(model.name, "time", "the times do not increase or are fewer than two"))
    ids = [str(value) for value in data["site"].values]
    values = np.asarray(data.transpose("time", "site").values, dtype=float)
    pressure = np.full((time.size, len(sites)), np.nan)
    for column, site in enumerate(sites):
        if site.id in ids:
            pressure[:, column] = values[:, ids.index(site.id)]
    notes = []
    if model.ocean_mean is None:
        notes.append("holds sites only: that its ocean mean is removed is taken from its file and was not checked")
    distance = np.where(np.isin([site.id for site in sites], ids), 0.0, np.nan)
    return _named(model.name, sites, time, pressure, distance, notes)


def _from_grid(
    model: CirculationModel, sites: Sequence[Site], ocean: OceanFunction, footprints: xr.Dataset | None
) -> CirculationAtSites:
    field = grid_field(model.name, model.pressure)
    wet = field.first_finite()
    if not wet.any():
        raise InputError(Fault(model.name, "pressure", "the field holds no value at all", "Must hold bottom pressure"))
    whole_cells = np.where(wet, field.cells.cell_area_m2.ravel(), 0.0)
    ocean_part = np.where(wet, ocean_weight(field, ocean), 0.0)
    nearby = stencil(field, wet, sites)
    attraction = _attraction_weights(field, sites, footprints)
    weights = np.stack([whole_cells, ocean_part], axis=1)
    pressure, added = np.empty((2, field.time.size, len(sites)))
    means = np.empty((field.time.size, 2))
    for when, block in field.blocks():
        finite = np.isfinite(block)
        filled = np.where(finite, block, 0.0)
        means[when] = _quotient(filled @ weights, finite @ weights)
        pressure[when] = nearby.apply(block)
        if attraction is not None:
            # the load less its own mean: no water comes or goes
            added[when] = filled @ attraction - means[when, :1] * (finite @ attraction)
    notes = _check_mean(model, field.time, means, covered=ocean_part.sum() / ocean.area_m2)
    if attraction is None:
        notes.append("the attraction and load of its pressure field are not added: no footprints were given")
        return _named(model.name, sites, field.time, pressure, nearby.distance_km, notes)
    result = _named(model.name, sites, field.time, pressure + added, nearby.distance_km, notes)
    return replace(result, parts={"self_attraction": added})


def _quotient(above: NDArray[np.float64], below: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.divide(above, below, out=np.full_like(above, np.nan), where=below > 0.0)


def _attraction_weights(
    field: GridField, sites: Sequence[Site], footprints: xr.Dataset | None
) -> NDArray[np.float64] | None:
    """Pressure at each site per pressure in each cell by its attraction and load, (n_cell, n_site)."""
    if footprints is None:
        return None
    require(footprints, FOOTPRINTS)
    chosen = footprints["footprint"].sel(site=[site.id for site in sites])
    source = SphereGrid(int(footprints.attrs["max_degree"])).cells
    per_area = regrid(np.asarray(chosen.values, dtype=float), source, field.cells)
    density = float(footprints.attrs.get("sea_water_density_kg_m3", SEA_WATER_DENSITY))
    # load = pressure / g, and pressure at the site = density g height: g cancels
    weights = density * per_area * field.cells.cell_area_m2
    return np.asarray(weights.reshape(len(sites), -1).T)


def _check_mean(
    model: CirculationModel, time: NDArray[np.datetime64], means: NDArray[np.float64], *, covered: float
) -> list[str]:
    """Judge the ocean mean that is left, with whole cells and with their ocean part as weights, (n_time, 2) Pa."""
    if covered < WHOLE_OCEAN_SHARE:
        return [f"covers {100 * covered:.0f} % of the ocean: whether its ocean mean is removed was not checked"]
    if model.ocean_mean is not None:
        means = means - _own_mean(model.name, model.ocean_mean, time)[:, None]
    known = np.isfinite(means).all(axis=1)
    time, means = time[known], means[known]
    if not allows_annual_phasor(time):
        return ["is shorter than a year: whether its ocean mean is removed was not checked"]
    left = min(_annual_amplitude_hpa(model.name, time, mean) for mean in means.T)
    if left <= OCEAN_MEAN_LIMIT_HPA:
        return []
    if model.ocean_mean is not None:
        return [f"less the ocean mean given with it, it keeps one with an annual cycle of {left:.3f} hPa"]
    raise InputError(
        Fault(
            model.name,
            "ocean_mean",
            f'the file claims "removed", but its ocean mean has an annual cycle of {left:.3f} hPa',
            f"Must be below {OCEAN_MEAN_LIMIT_HPA} hPa",
            "Subtract the area-weighted mean over the whole ocean, or name the file of the model's own ocean mean",
        )
    )


def _annual_amplitude_hpa(name: str, time: NDArray[np.datetime64], pressure: NDArray[np.float64]) -> float:
    return abs(annual_phasor(Series(name, time, pressure), 2000)) / PASCAL_PER_HPA


def _own_mean(name: str, mean: Series, time: NDArray[np.datetime64]) -> NDArray[np.float64]:
    values = resampled(mean.time, mean.pressure, time)
    if not np.isfinite(values).any():
        span = f"{str(mean.time[0])[:10]} to {str(mean.time[-1])[:10]}"
        asked = f"{str(time[0])[:10]} to {str(time[-1])[:10]}"
        problem = f"the model's own ocean mean covers {span}, and the model {asked}"
        raise InputError(Fault(name, "ocean_mean", problem, "Must cover the model", "Give the mean of the same years"))
    return values


def _air_anomaly(
    air_pressure: xr.DataArray, sites: Sequence[Site], ocean: OceanFunction, time: NDArray[np.datetime64]
) -> NDArray[np.float64]:
    """Air pressure at the sites less its ocean mean, (n_time, n_site) Pa, at the times of a model."""
    field = grid_field("air_pressure", air_pressure)
    everywhere = stencil(field, np.ones(field.latitude_deg.size * field.longitude_deg.size, dtype=bool), sites)
    mean = ocean_mean_air_pressure(air_pressure, ocean)
    local = np.concatenate([everywhere.apply(block) for _, block in field.blocks()])
    return resampled(field.time, local - mean.pressure[:, None], time)


def _named(
    name: str,
    sites: Sequence[Site],
    time: NDArray[np.datetime64],
    pressure: NDArray[np.float64],
    distance_km: NDArray[np.float64],
    notes: list[str],
) -> CirculationAtSites:
    ids = tuple(site.id for site in sites)
    return CirculationAtSites(name, ids, time, pressure, distance_km, tuple(f"{name}: {note}" for note in notes))
