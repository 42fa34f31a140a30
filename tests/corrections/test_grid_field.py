"""Values of gridded fields at sites."""

import numpy as np
import pytest
import xarray as xr

from massfit.corrections import grid_field as module
from massfit.corrections.grid_field import grid_field, stencil
from massfit.errors import InputError
from massfit.site import Site

TIME = np.arange("2016-01-01", "2016-01-08", dtype="datetime64[D]").astype("datetime64[ns]")


def plane(latitude: np.ndarray, longitude: np.ndarray) -> xr.DataArray:
    """A field that is linear in latitude and in the distance from longitude 200, in degrees."""
    away = (longitude - 200.0 + 180.0) % 360.0 - 180.0
    values = np.arange(7.0)[:, None, None] + 0.5 * latitude[:, None] + 0.25 * away
    return xr.DataArray(values, dims=("time", "lat", "lon"), coords={"time": TIME, "lat": latitude, "lon": longitude})


NORTHWARD, EASTWARD = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)


@pytest.mark.parametrize("latitude", [NORTHWARD, NORTHWARD[::-1]], ids=["northward", "southward"])
@pytest.mark.parametrize(
    "longitude",
    [EASTWARD, EASTWARD - 180.0, EASTWARD[::-1], np.roll(EASTWARD, 20), np.arange(150.0, 250.0, 5.0)],
    ids=["0-360", "-180-180", "westward", "rolled", "regional"],
)
@pytest.mark.parametrize("site", [Site("A", -11.3, 203.1), Site("A", -11.3, -156.9)], ids=["east", "west"])
def test_a_plane_is_reproduced(latitude: np.ndarray, longitude: np.ndarray, site: Site) -> None:
    field = grid_field("model", plane(latitude, longitude))
    nearby = stencil(field, field.first_finite(), [site])
    values = np.concatenate([nearby.apply(block) for _, block in field.blocks()])[:, 0]
    np.testing.assert_allclose(values, np.arange(7.0) - 0.5 * 11.3 + 0.25 * 3.1, atol=1e-12)
    assert nearby.distance_km[0] == 0.0


def test_sites_beside_the_seam_use_both_of_its_sides() -> None:
    data = plane(NORTHWARD, EASTWARD) * 0.0 + xr.DataArray(np.cos(np.radians(EASTWARD)), dims="lon")
    field = grid_field("model", data)
    sites = [Site("east", 0.0, 1.0), Site("west", 0.0, -1.0), Site("seam", 0.0, 360.0)]
    values = stencil(field, field.first_finite(), sites).apply(next(field.blocks())[1])[0]
    np.testing.assert_allclose(values, np.cos(np.radians(2.5)), rtol=1e-12)


def test_blocks_do_not_change_the_values(monkeypatch: pytest.MonkeyPatch) -> None:
    field = grid_field("model", plane(NORTHWARD, EASTWARD))
    monkeypatch.setattr(module, "_BLOCK_VALUES", 3 * NORTHWARD.size * EASTWARD.size)
    pieces = [block for _, block in field.blocks()]
    assert [len(piece) for piece in pieces] == [3, 3, 1]
    np.testing.assert_array_equal(np.concatenate(pieces).reshape(field.data.shape), field.data.values)


def test_dry_corners_are_left_out_and_dry_sites_take_the_nearest_wet_cell() -> None:
    data = plane(NORTHWARD, EASTWARD)
    dry = data.where((data.lon < 200.0) | (data.lat > 0.0))
    field = grid_field("model", dry)
    sites = [
        Site("coast", -10.0, 199.9),  # between columns 197.5 (wet) and 202.5 (dry)
        Site("inland", -10.0, 203.0),  # its four cells are dry; 197.5 E is 5.5 degrees away
        Site("near", -3.5, 255.0),  # rows -2.5 and -7.5 are dry; row 2.5 is 6 degrees away
        Site("far", -40.0, 280.0),
    ]
    nearby = stencil(field, field.first_finite(), sites)
    values = nearby.apply(next(field.blocks())[1])
    np.testing.assert_allclose(values[0, 0], -5.0 - 0.25 * 2.5, atol=1e-12)  # bilinear in latitude, wet column only
    assert nearby.distance_km[0] == 0.0
    # five degrees and more from the nearest wet cell: no value
    assert np.isnan(values[:, 1:]).all()
    np.testing.assert_allclose(nearby.distance_km[2], np.hypot(6.0, 2.5) * 111.195, rtol=2e-3)


def test_nearest_wet_cell_within_300_km() -> None:
    fine = plane(np.arange(-9.5, 10.0), np.arange(190.5, 210.0))
    field = grid_field("model", fine.where(fine.lon < 200.0))
    nearby = stencil(field, field.first_finite(), [Site("A", 0.5, 202.0), Site("B", 0.5, 202.7)])
    np.testing.assert_allclose(nearby.distance_km, np.array([2.5, 3.2]) * 111.195, rtol=1e-4)
    values = nearby.apply(next(field.blocks())[1])
    assert values[0, 0] == pytest.approx(0.25 - 0.125)  # the cell at 0.5 N, 199.5 E
    assert np.isnan(values[0, 1])


def test_a_day_without_values_is_missing() -> None:
    data = plane(NORTHWARD, EASTWARD)
    data[0] = np.nan
    data[3] = np.nan
    field = grid_field("model", data)
    nearby = stencil(field, field.first_finite(), [Site("A", 0.0, 0.0)])
    missing = np.isnan(np.concatenate([nearby.apply(block) for _, block in field.blocks()])[:, 0])
    np.testing.assert_array_equal(np.flatnonzero(missing), [0, 3])


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda data: data.isel(time=0), "Must be time, lat and lon"),
        (lambda data: data.drop_vars("lat"), "Must be time, lat and lon"),
        (lambda data: data.isel(time=[1, 0]), "time: the values are out of order"),
        (lambda data: data.isel(lat=[0, 2, 1]), "lat: the values are out of order"),
        (lambda data: data.isel(lon=[0]), "lon: the values are out of order or fewer"),
        (lambda data: data.isel(lon=[*range(72), 0]), "lon: the columns span 360.0 degrees"),
    ],
)
def test_a_field_out_of_order_is_refused(change, message: str) -> None:
    with pytest.raises(InputError, match=message):
        grid_field("model", change(plane(NORTHWARD, EASTWARD)))
