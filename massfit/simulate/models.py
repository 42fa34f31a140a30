"""What the invented ocean models deliver: by site, on a grid, or with their own ocean mean left in."""

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import CirculationModel, Series
from massfit.phasor import phasor_from_peak
from massfit.simulate.clock import Clock
from massfit.simulate.dynamics import Bumps, Circulation, complex_normal, imitate, phasor_series
from massfit.simulate.names import model_names
from massfit.simulate.noise import ornstein_uhlenbeck

_COMMON_ERROR_SD = 8.0  # Pa per component: the error that all models share, and again each its own
_LOCAL_ERROR_SD = 12.0  # Pa per component: a model's annual error at one site beside the regional one
_GRID_DEG = 5.0
_BLOCK_DAYS = 5


def common_errors(rng: np.random.Generator, count: int, *, error: float) -> NDArray[np.complex128]:
    """Draw the annual error of each model in the exchange of low with high latitudes.

    Parameters
    ----------
    rng : numpy.random.Generator
    count : int
        Number of models.
    error : float
        Factor on the errors.

    Returns
    -------
    (count,) array of complex
        Pa; a part is the same for all models.
    """
    shared = complex_normal(rng, _COMMON_ERROR_SD * error, 1)
    return np.asarray(shared + complex_normal(rng, _COMMON_ERROR_SD * error, count))


def draw_models(
    rng: np.random.Generator,
    truth: Circulation,
    clock: Clock,
    *,
    bumps: Bumps,
    at_sites: xr.DataArray,
    common: NDArray[np.complex128],
    error: float,
    missing: str | None,
) -> tuple[CirculationModel, ...]:
    """Draw the models given to the analyst.

    In turn by site, on a grid, and by site with the model's own ocean mean.

    Parameters
    ----------
    rng : numpy.random.Generator
    truth : Circulation
        True circulation, daily means.
    clock : Clock
        Daily.
    bumps : Bumps
    at_sites : xarray.DataArray
        Patterns at the sites (site, pattern), self-attraction included.
    common : (n_model,) array of complex
        From :func:`common_errors`.
    error : float
        Factor on the regional and local errors.
    missing : str, optional
        Site that the first of several models does not have.
    """
    models = []
    for number, name in enumerate(model_names(len(common))):
        model = imitate(rng, truth, common_error=complex(common[number]), error=error)
        if number % 3 == 1:
            models.append(_on_grid(name, bumps, model, clock))
            continue
        left_out = [missing] if number == 0 and len(common) > 1 and missing is not None else []
        patterns = at_sites.drop_sel(site=left_out)
        local = complex_normal(rng, _LOCAL_ERROR_SD * error, at_sites.sizes["site"])[: patterns.sizes["site"]]
        by_site = _by_site(name, patterns, model, local, clock)
        models.append(_with_ocean_mean(rng, by_site, clock) if number % 3 == 2 else by_site)
    return tuple(models)


def _by_site(
    name: str, patterns: xr.DataArray, model: Circulation, local: NDArray[np.complex128], clock: Clock
) -> CirculationModel:
    """Daily means at sites, self-attraction included, ocean mean removed."""
    pressure = patterns.to_numpy() @ model.series(clock.days) + phasor_series(local, clock.days)
    data = _field(pressure.T, {"time": clock.time, "site": patterns["site"].to_numpy()})
    return CirculationModel(name, data, None, "not-forced")


def _with_ocean_mean(rng: np.random.Generator, model: CirculationModel, clock: Clock) -> CirculationModel:
    """Put an ocean mean of the model's own into its pressure, and tell it beside.

    It holds fresh water as the model knows it, at an amplitude and time of its own, and a trend from
    volume that is not conserved.
    """
    days = clock.days
    season = np.array([phasor_from_peak(rng.uniform(40.0, 110.0), rng.uniform(230.0, 330.0))])
    weather = 25.0 * ornstein_uhlenbeck(rng, (days.size,), step_days=1.0, time_scale_days=15.0)
    mean = _tenths(phasor_series(season, days)[0] + weather + rng.normal(0.0, 0.3) * days)
    sites = model.pressure["site"].to_numpy()
    pressure = _field(model.pressure.to_numpy() + mean[:, None], {"time": clock.time, "site": sites})
    return CirculationModel(
        model.name, pressure, Series(f"{model.name} ocean mean", clock.time, mean), model.air_pressure
    )


def _on_grid(name: str, bumps: Bumps, model: Circulation, clock: Clock) -> CirculationModel:
    """Five-day means on a five-degree grid, ocean mean removed, without self-attraction."""
    ocean = OceanFunction.builtin()
    lat = np.arange(-90.0 + _GRID_DEG / 2, 90.0, _GRID_DEG)
    lon = np.arange(_GRID_DEG / 2, 360.0, _GRID_DEG)
    cells = CellGrid.from_centres(lat, lon)
    fraction = regrid(ocean.fraction, ocean.cells, cells)
    points = np.meshgrid(lat, lon, indexing="ij")
    blocks = clock.n_days // _BLOCK_DAYS
    series = model.series(clock.days)[:, : blocks * _BLOCK_DAYS].reshape(-1, blocks, _BLOCK_DAYS)
    field = bumps.at(points[0].ravel(), points[1].ravel()) @ series.mean(axis=2)
    field = field.T.reshape(blocks, *cells.shape)
    wet = fraction >= 0.5
    weight = np.where(wet, fraction * cells.cell_area_m2, 0.0)
    field -= np.tensordot(field, weight / weight.sum(), 2)[:, None, None]
    times = clock.time[: blocks * _BLOCK_DAYS].reshape(blocks, _BLOCK_DAYS)[:, _BLOCK_DAYS // 2]
    data = _field(np.where(wet, field, np.nan), {"time": times, "lat": lat, "lon": lon})
    return CirculationModel(name, data, None, "not-forced")


def _field(pressure: NDArray[np.float64], coordinates: dict[str, NDArray[np.generic]]) -> xr.DataArray:
    return xr.DataArray(_tenths(pressure), coordinates, tuple(coordinates), attrs={"units": "Pa"})


def _tenths(pressure: NDArray[np.float64]) -> NDArray[np.float64]:
    """Round to tenths of a pascal, as the files hold them."""
    return np.round(pressure * 10.0) / 10.0
