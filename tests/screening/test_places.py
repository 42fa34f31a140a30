"""Places on the map: nearest cell with numbers, and shares of area against the closed form."""

import numpy as np
import pytest
import xarray as xr

from massfit.screening.places import area_quantiles, map_areas, places_on_map
from massfit.site import Site


def striped(step: float = 5.0) -> xr.Dataset:
    """A map whose standard deviation grows with latitude, Pa; land east of 180."""
    lat, lon = np.arange(-90.0 + step / 2, 90.0, step), np.arange(step / 2, 360.0, step)
    sd = np.where(lon < 180.0, 100.0 + lat[:, None], np.nan)
    return xr.Dataset(
        {
            "sd": (("lat", "lon"), sd),
            "annual_mean_sd": (("lat", "lon"), sd),
            "annual_sd": (("record_years", "lat", "lon"), np.stack([sd, 200.0 - sd])),
            "expected_annual_sd": (("record_years", "lat", "lon"), np.stack([sd, sd])),
        },
        coords={"lat": lat, "lon": lon, "record_years": [1.0, 4.0]},
    )


def test_the_share_that_is_quieter_is_an_area() -> None:
    # a zone south of latitude x has the share (1 + sin x) / 2 of the sphere (closed form)
    site = Site("A", 31.0, 20.0)
    ((found,), beyond) = places_on_map(striped(), [site])
    assert beyond == []
    assert found.quieter_share == pytest.approx((1.0 + np.sin(np.radians(30.0))) / 2.0, abs=1e-12)
    assert found.quieter_share_annual == pytest.approx((1.0 - np.sin(np.radians(35.0))) / 2.0, abs=1e-12)
    assert found.sd == 132.5


def test_a_place_on_dry_cells_takes_the_nearest_wet_one_within_reach() -> None:
    near, far = Site("near", 2.5, -179.0), Site("far", 2.5, -160.0)
    found, beyond = places_on_map(striped(), [near, far])
    assert [place.site for place in found] == ["near"]
    assert found[0].distance_km == pytest.approx(3.5 * 111.19 * np.cos(np.radians(2.5)), rel=1e-3)
    assert beyond == [far]


def test_a_place_within_a_large_cell_is_on_the_map() -> None:
    found, beyond = places_on_map(striped(15.0), [Site("corner", 14.9, 29.9)])
    assert found[0].distance_km > 1000.0
    assert beyond == []


def test_quantiles_weigh_areas() -> None:
    dataset = striped(1.0)
    values = area_quantiles(dataset["sd"].values, map_areas(dataset), [0.25, 0.5, 0.75])
    assert np.abs(values - (100.0 + np.degrees(np.arcsin([-0.5, 0.0, 0.5])))).max() <= 1.0
