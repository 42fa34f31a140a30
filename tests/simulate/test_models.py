import numpy as np
import pytest
import xarray as xr

from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import CirculationModel
from massfit.simulate.clock import make_clock
from massfit.simulate.dynamics import Circulation, daily_means, draw_circulation, ocean_bumps
from massfit.simulate.models import common_errors, draw_models
from massfit.simulate.options import SimulationOptions
from massfit.simulate.places import draw_sites

OCEAN = OceanFunction.builtin()
BUMPS = ocean_bumps(OCEAN)
CLOCK = make_clock(SimulationOptions(sampling="daily", years=3))
SITES = draw_sites(OCEAN, 6, np.random.default_rng(1))
PATTERNS = BUMPS.at(np.array([s.latitude_deg for s in SITES]), np.array([s.longitude_deg for s in SITES]))


@pytest.fixture(scope="module")
def truth() -> Circulation:
    return daily_means(draw_circulation(np.random.default_rng(2), BUMPS, CLOCK), CLOCK)


@pytest.fixture(scope="module")
def models(truth: Circulation) -> tuple[CirculationModel, ...]:
    at_sites = xr.DataArray(PATTERNS, {"site": [s.id for s in SITES]}, ("site", "pattern"))
    rng = np.random.default_rng(3)
    common = common_errors(rng, 3, error=1.0)
    return draw_models(rng, truth, CLOCK, bumps=BUMPS, at_sites=at_sites, common=common, error=1.0, missing=SITES[2].id)


def test_one_by_site_one_on_a_grid_one_with_its_own_mean(models: tuple[CirculationModel, ...]) -> None:
    assert [model.pressure.dims for model in models] == [("time", "site"), ("time", "lat", "lon"), ("time", "site")]
    assert [model.ocean_mean is None for model in models] == [True, True, False]
    assert len({model.name for model in models}) == 3


def test_the_first_misses_its_site(models: tuple[CirculationModel, ...]) -> None:
    assert SITES[2].id not in models[0].pressure["site"]
    assert models[0].pressure.sizes["site"] == 5
    assert models[2].pressure.sizes["site"] == 6


def test_the_mean_of_the_gridded_model_is_gone(models: tuple[CirculationModel, ...]) -> None:
    field = models[1].pressure
    cells = CellGrid.from_centres(field["lat"].to_numpy(), field["lon"].to_numpy())
    fraction = regrid(OCEAN.fraction, OCEAN.cells, cells)
    weight = fraction * cells.cell_area_m2 * np.isfinite(field.to_numpy()[0])
    mean = np.nansum(field.to_numpy() * weight, axis=(1, 2)) / weight.sum()
    assert np.abs(mean).max() < 0.05  # Pa; values are rounded to 0.1


@pytest.mark.parametrize("number", [0, 1, 2])
def test_every_model_follows_the_true_circulation(
    number: int, models: tuple[CirculationModel, ...], truth: Circulation
) -> None:
    model, site = models[number], SITES[0]
    true = xr.DataArray(truth.series(CLOCK.days).T @ PATTERNS[0], {"time": CLOCK.time}, "time")
    if number == 1:
        # five-day means at the nearest of coarse cells; a control site on the other side of the Earth below
        given = model.pressure.interp(lat=site.latitude_deg, lon=site.longitude_deg)
        true = true.rolling(time=5, center=True).mean()
    else:
        given = model.pressure.sel(site=site.id)
    if model.ocean_mean is not None:
        assert float(np.corrcoef(given, true)[0, 1]) < 0.9
        given = given - xr.DataArray(model.ocean_mean.pressure, {"time": model.ocean_mean.time}, "time")
    given, true = xr.align(given.dropna("time"), true.dropna("time"))
    assert float(np.corrcoef(given, true)[0, 1]) > 0.85
    assert abs(float(np.corrcoef(np.roll(given, 200), true)[0, 1])) < 0.6  # control: the same series at another time


def test_models_share_a_part_of_their_error() -> None:
    # two equal parts, one of them common: correlation one half between models
    rng = np.random.default_rng(4)
    errors = np.array([common_errors(rng, 2, error=1.0) for _ in range(4000)])
    parts = np.vstack([errors.real, errors.imag])
    # standard error of a correlation of one half over 8000 pairs: 0.008
    assert np.corrcoef(parts.T)[0, 1] == pytest.approx(0.5, abs=5 * 0.008)


def test_no_models() -> None:
    assert common_errors(np.random.default_rng(1), 0, error=1.0).size == 0
