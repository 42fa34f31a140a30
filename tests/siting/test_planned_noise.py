"""Errors of planned records by a map of quietness that a screening made."""

import numpy as np
import pytest
import xarray as xr
from screening.invented_ocean import daily

from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField
from massfit.settings import Priors
from massfit.siting.planned_noise import default_noise, map_record_covariance, record_covariance

YEARS = 2.0


@pytest.fixture(scope="module")
def quietness() -> xr.Dataset:
    """A map of a part of the ocean, three cells of it by three, livelier to the east."""
    time = daily("2011-01-01", "2016-01-01")
    noise = np.random.default_rng(1).normal(size=(time.size, 3, 3)) * [50.0, 100.0, 400.0]
    coords = {"time": time, "lat": [-15.0, -5.0, 5.0], "lon": [-175.0, -165.0, -155.0]}
    pressure = xr.DataArray(noise, coords, ("time", "lat", "lon"))
    return screen_sea_floor([ModelField("invented", pressure, "removed")], record_years=[1.0, YEARS])


def test_a_place_has_the_error_of_its_cell(quietness: xr.Dataset) -> None:
    at = map_record_covariance(quietness, default_noise(), YEARS, Priors())
    covariance, apart = at(np.array([-5.0, -1.0]), np.array([185.0, -154.0]))
    expected = quietness["expected_annual_sd"].sel(record_years=YEARS).values[1, [0, 2]] ** 2
    drift, none = (
        record_covariance(default_noise().model, YEARS, Priors(), drift=d) for d in ("exponential+linear", "none")
    )
    # drift makes every error larger by the same factor, and the instrument adds the same
    added = covariance[:, 0, 0] - expected * drift[0, 0] / none[0, 0]
    assert np.all(added >= 0.0)
    assert added[0] == pytest.approx(added[1], rel=1e-9, abs=1e-9)
    assert np.isnan(apart).all()  # of a single model nothing is known


def test_a_place_beyond_the_edge_has_none(quietness: xr.Dataset) -> None:
    at = map_record_covariance(quietness, default_noise(), YEARS, Priors())
    covariance, _ = at(np.array([40.0, -5.0, 9.9]), np.array([185.0, 30.0, -150.1]))
    assert np.isnan(covariance[:2]).all()
    assert np.isfinite(covariance[2]).all()
