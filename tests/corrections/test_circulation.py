"""Circulation models at the sites."""

import tracemalloc
from functools import cache

import numpy as np
import pytest
import xarray as xr

from massfit.constants import STANDARD_GRAVITY
from massfit.corrections.circulation import circulation_at_sites
from massfit.earth.love import love_numbers
from massfit.errors import InputError
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.network import CirculationModel, Series
from massfit.site import Site

RATE = 2.0 * np.pi / 365.2422
TIME = np.arange("2015-01-01T12", "2017-01-01", 24 * 5, dtype="datetime64[h]").astype("datetime64[ns]")
ANGLE = RATE * ((TIME - np.datetime64("2016-01-01", "ns")) / np.timedelta64(1, "D"))
LATITUDE, LONGITUDE = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
CELLS = CellGrid.from_centres(LATITUDE, LONGITUDE)
SITES = [Site("A", -11.25, 205.5), Site("B", 7.5, -152.5), Site("C", -40.0, 10.0)]
OCEAN = OceanFunction.builtin()


@cache
def wet() -> np.ndarray:
    return regrid(OCEAN.fraction, OCEAN.cells, CELLS) > 0.5


def on_grid(values: np.ndarray, time: np.ndarray = TIME) -> xr.DataArray:
    return xr.DataArray(values, dims=("time", "lat", "lon"), coords={"time": time, "lat": LATITUDE, "lon": LONGITUDE})


@cache
def gyre() -> xr.DataArray:
    """Annual and random pressure on wet cells, its area-weighted mean removed at every time, Pa."""
    rng = np.random.default_rng(5)
    pattern = np.sin(np.radians(3 * LATITUDE))[:, None] * np.cos(np.radians(2 * LONGITUDE))
    values = 200.0 * np.cos(ANGLE)[:, None, None] * pattern + 50.0 * rng.normal(size=(TIME.size, 36, 72))
    area = np.where(wet(), CELLS.cell_area_m2, 0.0)
    values -= (values * area).sum(axis=(1, 2), keepdims=True) / area.sum()
    return on_grid(np.where(wet(), values, np.nan))


def model(pressure: xr.DataArray, mean: Series | None = None, air_pressure: str = "not-forced") -> CirculationModel:
    return CirculationModel("invented", pressure, mean, air_pressure)


@cache
def operator() -> SeaLevelOperator:
    return prepare_operator(OCEAN, love_numbers(max_degree=60), max_degree=60)


@cache
def footprints() -> xr.Dataset:
    return site_footprints(operator(), SITES)


def own_mean(amplitude: float, time: np.ndarray = TIME) -> Series:
    days = (time - np.datetime64("2016-01-01", "ns")) / np.timedelta64(1, "D")
    return Series("invented mean", time, amplitude * np.sin(RATE * days))


def test_a_table_is_read_by_id_and_absent_sites_are_missing() -> None:
    values = np.stack([np.arange(TIME.size), 10.0 * np.arange(TIME.size)], axis=1)
    table = xr.DataArray(values, dims=("time", "site"), coords={"time": TIME, "site": ["C", "A"]})
    result = circulation_at_sites(model(table.transpose("site", "time")), SITES, ocean=OCEAN)
    np.testing.assert_array_equal(result.at("A"), 10.0 * np.arange(TIME.size))
    np.testing.assert_array_equal(result.at("C"), np.arange(TIME.size))
    assert np.isnan(result.at("B")).all()
    np.testing.assert_array_equal(result.distance_km, [0.0, np.nan, 0.0])
    assert any("was not checked" in note for note in result.notes)


ARRANGEMENTS = [
    lambda data: data,
    lambda data: data.isel(lat=slice(None, None, -1)),
    lambda data: data.roll(lon=36, roll_coords=True),
]


@pytest.mark.parametrize("arrange", ARRANGEMENTS, ids=["as is", "southward", "rolled"])
def test_values_on_cell_centres_are_the_cells(arrange) -> None:
    result = circulation_at_sites(model(arrange(gyre())), [SITES[1]], ocean=OCEAN)
    np.testing.assert_allclose(result.at("B"), gyre().sel(lat=7.5, lon=207.5).values, rtol=1e-12)


def test_ocean_mean_that_was_not_removed_is_refused_with_its_size_and_the_remedy() -> None:
    with pytest.raises(InputError) as caught:
        circulation_at_sites(model(gyre() + on_grid(50.0 * np.cos(ANGLE)[:, None, None] * wet())), SITES, ocean=OCEAN)
    message = str(caught.value)
    assert 'claims "removed"' in message
    assert "0.50" in message
    assert "name the file of the model's own ocean mean" in message


@pytest.mark.parametrize(("hpa", "refused"), [(0.018, False), (0.022, True)])
def test_the_limit_is_two_hundredths_of_a_hectopascal(hpa: float, refused: bool) -> None:
    # the attenuation of five-day means is below 0.1 %
    claimed = gyre() + 100.0 * hpa * xr.DataArray(np.cos(ANGLE), dims="time", coords={"time": TIME})
    if refused:
        with pytest.raises(InputError, match=r"annual cycle of 0\.02"):
            circulation_at_sites(model(claimed), SITES, ocean=OCEAN)
    else:
        circulation_at_sites(model(claimed), SITES, ocean=OCEAN)


def test_own_mean_is_subtracted() -> None:
    shift = xr.DataArray(own_mean(80.0).pressure, dims="time", coords={"time": TIME})
    plain = circulation_at_sites(model(gyre()), SITES, ocean=OCEAN)
    shifted = circulation_at_sites(model(gyre() + shift, own_mean(80.0)), SITES, ocean=OCEAN)
    np.testing.assert_allclose(shifted.pressure, plain.pressure, atol=1e-9)
    # daily values of the mean are brought to the model's five days
    days = np.arange("2014-12-01T12", "2017-02-01", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    finer = circulation_at_sites(model(gyre() + shift, own_mean(80.0, days)), SITES, ocean=OCEAN)
    np.testing.assert_allclose(finer.pressure, plain.pressure, atol=0.08)


def test_an_own_mean_that_is_not_the_mean_of_the_field_is_noted() -> None:
    shift = xr.DataArray(own_mean(80.0).pressure, dims="time", coords={"time": TIME})
    right = circulation_at_sites(model(gyre() + shift, own_mean(80.0)), SITES, ocean=OCEAN)
    wrong = circulation_at_sites(model(gyre() + shift, own_mean(70.0)), SITES, ocean=OCEAN)
    assert not any("keeps one" in note for note in right.notes)
    assert any("keeps one with an annual cycle of 0.1" in note for note in wrong.notes)


def test_days_without_values_and_ice_do_not_disturb_the_mean_that_is_judged() -> None:
    broken = gyre().copy(deep=True)
    broken[::9] = np.nan
    broken[1:30, 20:, 0] = np.nan  # a cell that comes and goes moves the mean by its own share only
    result = circulation_at_sites(model(broken), SITES, ocean=OCEAN, footprints=footprints())
    np.testing.assert_array_equal(
        np.isnan(result.pressure), np.broadcast_to((np.arange(147) % 9 == 0)[:, None], (147, 3))
    )


def test_less_than_a_year_is_not_judged() -> None:
    short = gyre().isel(time=slice(0, 60)) + 500.0
    result = circulation_at_sites(model(short), SITES, ocean=OCEAN)
    assert any("shorter than a year" in note for note in result.notes)


def test_own_mean_of_other_years_is_refused() -> None:
    days = np.arange("2010-01-01T12", "2012-01-01", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    with pytest.raises(InputError, match="covers 2010-01-01 to 2011-12-31, and the model 2015-01-01 to"):
        circulation_at_sites(model(gyre(), own_mean(80.0, days)), SITES, ocean=OCEAN)


def test_attraction_equals_a_forward_solve() -> None:
    with_it = circulation_at_sites(model(gyre()), SITES, ocean=OCEAN, footprints=footprints())
    without = circulation_at_sites(model(gyre()), SITES, ocean=OCEAN)
    added = with_it.pressure - without.pressure
    step = 17
    load = regrid(np.nan_to_num(gyre().values[step]) / STANDARD_GRAVITY, CELLS, operator().cells)
    sea = solve_sea_level(operator(), load=load)
    height = sea.at([site.latitude_deg for site in SITES], [site.longitude_deg for site in SITES])
    expected = 1025.0 * STANDARD_GRAVITY * np.asarray(height)
    np.testing.assert_allclose(added[step], expected, atol=1e-6 * abs(added).max())
    # closed form: no degree answers a load of 200 Pa by more than degree 1 on a rigid Earth, rho_w / rho_e of it
    assert 0.02 < np.abs(added).max() / 200.0 < 1.3 * 1025.0 / 5514.0


def test_what_was_added_to_a_model_is_kept_apart() -> None:
    mean = own_mean(80.0)
    everything = circulation_at_sites(
        model(gyre(), mean, "forced-excluded"), SITES, ocean=OCEAN, footprints=footprints(), air_pressure=air_field()
    )
    assert set(everything.parts) == {"own_ocean_mean", "self_attraction", "local_air_pressure"}
    plain = circulation_at_sites(model(gyre()), SITES, ocean=OCEAN)
    np.testing.assert_allclose(everything.pressure - sum(everything.parts.values()), plain.pressure, atol=1e-9)
    np.testing.assert_allclose(everything.parts["own_ocean_mean"], -np.repeat(mean.pressure[:, None], 3, axis=1))
    assert not plain.parts


def test_one_site_alone() -> None:
    whole = circulation_at_sites(model(gyre(), own_mean(80.0)), SITES, ocean=OCEAN, footprints=footprints())
    alone = whole.only("B")
    assert alone.sites == ("B",)
    np.testing.assert_array_equal(alone.at("B"), whole.at("B"))
    for name, part in alone.parts.items():
        np.testing.assert_array_equal(part[:, 0], whole.parts[name][:, 1])


def test_a_uniform_rise_has_no_attraction() -> None:
    # its mean is removed before: nothing is left to attract
    mean = Series("mean", TIME, np.full(TIME.size, 70.0))
    rise = on_grid(np.where(wet(), 70.0, np.nan) * np.ones((TIME.size, 1, 1)))
    result = circulation_at_sites(model(rise, mean), SITES, ocean=OCEAN, footprints=footprints())
    np.testing.assert_allclose(result.pressure, 0.0, atol=1e-9)


def air_field() -> xr.DataArray:
    """Air pressure that is the sine of longitude times a yearly cycle, above a mean that changes too."""
    values = 1e5 + 300.0 * np.sin(ANGLE)[:, None, None] * np.sin(np.radians(LONGITUDE)) * np.ones((36, 1))
    return on_grid(values + 60.0 * np.cos(ANGLE)[:, None, None])


def test_air_pressure_is_added_where_the_model_left_it_out() -> None:
    plain = circulation_at_sites(model(gyre()), [SITES[1]], ocean=OCEAN).pressure[:, 0]
    forced = circulation_at_sites(
        model(gyre(), air_pressure="forced-excluded"), [SITES[1]], ocean=OCEAN, air_pressure=air_field()
    ).pressure[:, 0]
    share = regrid(OCEAN.fraction, OCEAN.cells, CELLS) * CELLS.cell_area_m2
    mean_sine = float((share * np.sin(np.radians(LONGITUDE))).sum() / share.sum())
    expected = 300.0 * np.sin(ANGLE) * (np.sin(np.radians(207.5)) - mean_sine)
    np.testing.assert_allclose(forced - plain, expected, atol=1e-9)


@pytest.mark.parametrize("choice", ["not-forced", "forced-included"])
def test_air_pressure_is_not_added_otherwise(choice: str) -> None:
    result = circulation_at_sites(model(gyre(), air_pressure=choice), SITES, ocean=OCEAN, air_pressure=air_field())
    np.testing.assert_array_equal(result.pressure, circulation_at_sites(model(gyre()), SITES, ocean=OCEAN).pressure)


def test_air_pressure_that_is_needed_and_missing_is_an_error() -> None:
    with pytest.raises(InputError, match=r"Give \[corrections\] air_pressure"):
        circulation_at_sites(model(gyre(), air_pressure="forced-excluded"), SITES, ocean=OCEAN)


def test_a_regional_model_is_noted_and_sites_outside_it_are_missing() -> None:
    result = circulation_at_sites(model(gyre().sel(lon=slice(150, 250))), SITES, ocean=OCEAN)
    assert np.isfinite(result.at("A")).all()
    assert np.isnan(result.at("C")).all()
    assert result.distance_km[2] > 300.0
    assert any("% of the ocean" in note for note in result.notes)


def test_an_empty_or_odd_field_is_refused() -> None:
    with pytest.raises(InputError, match="no value at all"):
        circulation_at_sites(model(gyre() * np.nan), SITES, ocean=OCEAN)
    with pytest.raises(InputError, match="Must be time, lat and lon"):
        circulation_at_sites(model(gyre().rename(lat="y")), SITES, ocean=OCEAN)


def test_a_lazy_file_is_read_in_blocks(tmp_path, monkeypatch: pytest.MonkeyPatch) -> None:
    gyre().to_dataset(name="pressure").to_netcdf(tmp_path / "model.nc", engine="h5netcdf")
    monkeypatch.setattr("massfit.corrections.grid_field._BLOCK_VALUES", 10 * 36 * 72)
    with xr.open_dataset(tmp_path / "model.nc", engine="h5netcdf") as data:
        lazy = circulation_at_sites(model(data["pressure"]), SITES, ocean=OCEAN)
        assert not data["pressure"].variable._in_memory  # the whole field was never loaded
    np.testing.assert_allclose(lazy.pressure, circulation_at_sites(model(gyre()), SITES, ocean=OCEAN).pressure)


def test_a_big_field_never_stands_in_memory_as_a_whole(tmp_path, monkeypatch: pytest.MonkeyPatch) -> None:
    # a daily field of two years, 25 MB as numbers; read in blocks of a fiftieth of it
    time = np.arange("2015-01-01T12", "2017-01-01", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    rng = np.random.default_rng(2)
    latitude, longitude = np.arange(-88.0, 90.0, 4.0), np.arange(2.0, 360.0, 4.0)
    values = rng.normal(0.0, 100.0, (time.size, latitude.size, longitude.size))
    coordinates = {"time": time, "lat": latitude, "lon": longitude}
    field = xr.DataArray(values, dims=("time", "lat", "lon"), coords=coordinates, name="pressure")
    field.to_netcdf(tmp_path / "big.nc", engine="h5netcdf", encoding={"pressure": {"chunksizes": (10, 45, 90)}})
    size, block = values.nbytes, values.nbytes // 50
    monkeypatch.setattr("massfit.corrections.grid_field._BLOCK_VALUES", block // 8)
    weights = footprints()
    with xr.open_dataset(tmp_path / "big.nc", engine="h5netcdf", cache=False) as data:
        tracemalloc.start()
        circulation_at_sites(model(data["pressure"]), SITES, ocean=OCEAN, footprints=weights)
        peak = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
    # the quarter-degree ocean and the footprints are regridded in any case: 1440 x 720 numbers and their partial sums
    regridding = 3 * 8 * 1440 * 720
    assert peak < regridding + 8 * block < size + regridding


@pytest.mark.parametrize(("sd_pa", "refused"), [(500.0, False), (5e6, True)])
def test_a_model_in_the_wrong_units_is_refused(sd_pa: float, refused: bool) -> None:
    # an absolute level of 5000 dbar is no matter; only what varies is judged
    values = 5e7 + sd_pa * np.random.default_rng(1).standard_normal((TIME.size, 1))
    table = xr.DataArray(values, dims=("time", "site"), coords={"time": TIME, "site": ["A"]})
    model = CirculationModel("invented", table, None, "not-forced")
    if refused:
        with pytest.raises(InputError, match="Correct the units"):
            circulation_at_sites(model, SITES, ocean=OCEAN)
    else:
        assert np.isfinite(circulation_at_sites(model, SITES, ocean=OCEAN).at("A")).all()
