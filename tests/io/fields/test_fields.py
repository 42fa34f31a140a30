"""Load patterns: the phasor of monthly means, the part of a cell that a load counts for, and grids."""

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.constants import ANNUAL_RATE
from massfit.errors import InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.io.fields.field_file import month_phasor, read_air_pressure, read_atmosphere_load, read_loads

LATITUDE, LONGITUDE = np.arange(-85.0, 90.0, 10.0), np.arange(5.0, 360.0, 10.0)
TRUTH = 30.0 * np.exp(1.3j)
MASS = {"units": "kg m-2"}


def inland(latitude: np.ndarray, longitude: np.ndarray) -> np.ndarray:
    """1 in the dry middle of Asia, NaN elsewhere."""
    inside = (np.abs(latitude[:, None] - 50.0) < 13.0) & (np.abs(np.mod(longitude, 360.0) - 85.0) < 16.0)
    return np.where(inside, 1.0, np.nan)


def monthly_means(year: int, phasor: complex, semi_annual: complex, offset: float) -> np.ndarray:
    """Averages over calendar months by brute force, 1000 points a day."""
    origin = np.datetime64(f"{year}-01-01")
    means = []
    for month in range(1, 13):
        edges = [np.datetime64(f"{year}-{month:02d}") + np.timedelta64(k, "M") for k in (0, 1)]
        first, last = ((edge.astype("datetime64[D]") - origin).astype(int) for edge in edges)
        days = first + (np.arange((last - first) * 1000) + 0.5) / 1000
        wave = phasor * np.exp(-1j * ANNUAL_RATE * days) + semi_annual * np.exp(-2j * ANNUAL_RATE * days)
        means.append(offset + wave.real.mean())
    return np.array(means)


@pytest.mark.parametrize("year", [2015, 2016])
def test_the_phasor_of_monthly_means(year: int) -> None:
    means = monthly_means(year, TRUTH, 9.0 - 4.0j, 50.0)
    # closed form inverted against brute-force averages; the rest is their midpoint-rule error
    assert complex(month_phasor(xr.DataArray(means, dims="month"), year)) == pytest.approx(TRUTH, rel=1e-7)


def test_the_control_naive_fit_is_attenuated() -> None:
    # an annual line loses sinc(1/12) = 0.98862 in means over a twelfth of a year: closed form;
    # unequal months add a part that turns with the phase, which the mean over two phases removes
    lengths = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
    middles = np.cumsum(lengths) - lengths / 2.0
    kernel = (2.0 / 12.0) * np.exp(1j * ANNUAL_RATE * middles)
    naive = [kernel @ monthly_means(2015, turn * TRUTH, 0.0, 0.0) / (turn * TRUTH) for turn in (1.0, 1.0j)]
    assert np.mean(naive).real == pytest.approx(0.98862, abs=1e-4)


def phasor_file(path: Path, **changes: object) -> None:
    values = 2.0 * inland(LATITUDE, LONGITUDE)
    values[13, 8] = np.nan
    options = {"lat": LATITUDE, "lon": LONGITUDE, "attributes": MASS, "file": {}, "values": values} | changes
    data = (("latitude", "longitude"), options["values"], options["attributes"])
    dataset = xr.Dataset(
        {"load_in_phase": data, "load_quadrature": data},
        {"latitude": options["lat"], "longitude": options["lon"]},
        options["file"],
    )
    dataset.to_netcdf(path, engine="h5netcdf")


def test_missing_values_are_no_load(tmp_path: Path) -> None:
    phasor_file(tmp_path / "wet.nc", file={"references": "invented"})
    (pattern,) = read_loads(tmp_path / "wet.nc", reference_year=2016, source="wet.nc")
    assert (pattern.name, pattern.reference) == ("wet", "invented")
    assert pattern.values[13, 8] == 0.0
    assert pattern.values[13, 9] == 2.0 + 2.0j
    assert pattern.values[3, 5] == 0.0


def test_a_load_of_land_parts_counts_for_the_land(tmp_path: Path) -> None:
    values = np.ones((LATITUDE.size, LONGITUDE.size))
    phasor_file(tmp_path / "land.nc", file={"load_area": "land"}, values=values)
    (pattern,) = read_loads(tmp_path / "land.nc", reference_year=2016, source="land.nc")
    ocean = OceanFunction.builtin()
    width = np.radians(10.0)
    edges = np.radians(np.arange(-90.0, 91.0, 10.0))
    areas = 6_371_000.0**2 * np.diff(np.sin(edges))[:, None] * width * np.ones(LONGITUDE.size)
    # the integral is the land area itself, whatever the grid
    land_area = 4.0 * np.pi * 6_371_000.0**2 - ocean.area_m2
    assert np.sum(areas * pattern.values.real) == pytest.approx(land_area, rel=1e-9)


def test_a_climatology_with_members_from_north_to_south(tmp_path: Path) -> None:
    means = monthly_means(2016, TRUTH, 0.0, 10.0)
    scale = np.array([1.0, -2.0])[:, None, None, None]
    north_first, west_first = LATITUDE[::-1], LONGITUDE - 180.0
    shape = np.cos(np.radians(north_first))[:, None] * inland(north_first, west_first)
    data = scale * means[None, :, None, None] * shape
    order = np.roll(np.arange(12), 5)  # months may stand in any order when they are numbered
    dataset = xr.Dataset(
        {"load": (("member", "month", "lat", "lon"), data[:, order], MASS)},
        {"member": ["one", "two"], "month": order + 1, "lat": north_first, "lon": west_first},
    )
    dataset.to_netcdf(tmp_path / "loads.nc", engine="h5netcdf")
    first, second = read_loads(tmp_path / "loads.nc", reference_year=2016, source="loads.nc")
    np.testing.assert_allclose(first.values, TRUTH * np.nan_to_num(shape), rtol=1e-6)
    np.testing.assert_allclose(second.values, -2.0 * first.values, rtol=1e-12)
    assert (second.name, first.latitude_deg[0], first.longitude_deg[0]) == ("two", 85.0, -175.0)


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"attributes": {"units": "cm"}},
         "w.nc: load_in_phase: the unit is 'cm'. Must be 'kg m-2'. Convert the values."),
        ({"attributes": MASS | {"load_area": "sea"}}, "w.nc: load_area: the value is 'sea'. Must be 'cell' or 'land'. "
         "Correct the attribute."),
        ({"lat": np.sort(LATITUDE**3 / 7225.0)}, "w.nc: lat: the cells are not equally spaced. "
         "Must be a regular grid of cells that covers 180 degrees once. Interpolate onto a regular grid."),
        ({"lon": LONGITUDE * 0.5}, "w.nc: lon: 36 cells of 5 degrees cover 180 degrees. "
         "Must be a regular grid of cells that covers 360 degrees once. Pad the grid with NaN."),
        ({"lon": np.linspace(0.0, 360.0, 36)}, "w.nc: lon: 36 cells of 10.2857 degrees cover 370.286 degrees. "
         "Must be a regular grid of cells that covers 360 degrees once. Drop a repeated meridian."),
        ({"values": np.full((18, 36), np.inf)}, "w.nc: load_in_phase: some values are infinite. "
         "Must be finite, or NaN for no load. Correct them."),
    ],
)  # fmt: skip
def test_faults(tmp_path: Path, changes: dict[str, object], message: str) -> None:
    phasor_file(tmp_path / "w.nc", **changes)
    with pytest.raises(InputError) as raised:
        read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc")
    assert str(raised.value).splitlines()[0] == message


def test_rows_from_pole_to_pole_are_read(tmp_path: Path) -> None:
    latitude = np.linspace(-90.0, 90.0, 19)
    phasor_file(tmp_path / "w.nc", lat=latitude, values=inland(latitude, LONGITUDE))
    (pattern,) = read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc")
    assert pattern.values.shape == (19, 36)


def test_a_land_air_load_is_in_pascal(tmp_path: Path) -> None:
    data = (("lat", "lon"), np.full((LATITUDE.size, LONGITUDE.size), 3.0), {"units": "hPa"})
    dataset = xr.Dataset({"pressure_in_phase": data, "pressure_quadrature": data}, {"lat": LATITUDE, "lon": LONGITUDE})
    dataset.to_netcdf(tmp_path / "air.nc", engine="h5netcdf")
    pattern = read_atmosphere_load(tmp_path / "air.nc", source="air.nc")
    assert pattern.values[0, 0] == 300.0 + 300.0j


def test_air_pressure_is_packed_and_in_another_order(tmp_path: Path) -> None:
    time = np.arange("2015-01-01", "2015-01-05", dtype="datetime64[D]").astype("datetime64[ns]")
    truth = 1010.0 + np.arange(4.0)[:, None, None] + 0.01 * LATITUDE[:, None] * np.ones(LONGITUDE.size)
    field = xr.DataArray(truth, {"time": time, "lat": LATITUDE, "lon": LONGITUDE}, ["time", "lat", "lon"])
    field = field.transpose("lat", "lon", "time").assign_attrs(units="mbar").rename("air")
    packing = {"dtype": "int16", "scale_factor": 0.01, "add_offset": 1000.0, "_FillValue": -32768}
    field.to_netcdf(tmp_path / "air.nc", engine="h5netcdf", encoding={"air": packing})
    read = read_air_pressure(tmp_path / "air.nc", source="air.nc")
    assert read.dims == ("time", "lat", "lon")
    np.testing.assert_allclose(read, 100.0 * truth, atol=0.51)  # half a packing step, Pa


@pytest.mark.parametrize("value", [0.0, np.nan])
def test_a_load_without_any_value_is_refused(tmp_path: Path, value: float) -> None:
    phasor_file(tmp_path / "nothing.nc", values=np.full((LATITUDE.size, LONGITUDE.size), value))
    with pytest.raises(InputError, match="every value is zero or missing"):
        read_loads(tmp_path / "nothing.nc", reference_year=2016, source="nothing.nc")


# any order of the longitudes, and a budget that closes


def test_longitudes_may_jump_from_180_to_minus_180(tmp_path: Path) -> None:
    jumping = np.where(LONGITUDE < 180.0, LONGITUDE, LONGITUDE - 360.0)
    for name, longitude in {"even": LONGITUDE, "jumping": jumping}.items():
        phasor_file(tmp_path / f"{name}.nc", lon=longitude)
    (even,), (turned,) = (
        read_loads(tmp_path / f"{name}.nc", reference_year=2016, source=name) for name in ("even", "jumping")
    )
    assert (turned.longitude_deg[0], turned.longitude_deg[-1]) == (-175.0, 175.0)
    np.testing.assert_array_equal(np.roll(turned.values, 18, axis=1), even.values)


def world(vapour: float, error: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    """Water on land at 2 degrees, and all water: an even sea takes up what land and air give, but for an error."""
    latitude, longitude = np.arange(-89.0, 90.0, 2.0), np.arange(1.0, 360.0, 2.0)
    ocean = OceanFunction.builtin()
    cells = CellGrid.from_centres(latitude, longitude)
    fraction = regrid(ocean.fraction, ocean.cells, cells)
    land = (1.0 - fraction) * 40.0 * np.cos(np.radians(latitude - 40.0))[:, None] ** 8
    taken = -(np.sum(land * cells.cell_area_m2) + vapour) * (1.0 + error) / ocean.area_m2
    return land, land + fraction * taken


def test_a_closed_budget_gives_its_land(tmp_path: Path) -> None:
    vapour = 4e14
    land, whole = world(vapour)
    places = {"lat": np.arange(-89.0, 90.0, 2.0), "lon": np.arange(1.0, 360.0, 2.0)}
    phasor_file(tmp_path / "w.nc", values=whole, **places)
    (read,) = read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc", water_vapour=vapour * (1 + 1j))
    # the sea of this file is even (10 kg m-2), so coast cells lose their ocean part; cells with up to a thousandth of
    # land count as open ocean, and the mean over them errs by as much
    np.testing.assert_allclose(read.values, land * (1 + 1j) * (np.abs(read.values) > 0), atol=2e-2)
    cells = CellGrid.from_centres(places["lat"], places["lon"])
    assert np.sum(read.values.real * cells.cell_area_m2) == pytest.approx(np.sum(land * cells.cell_area_m2), rel=1e-3)


def test_a_budget_that_does_not_close_says_by_how_much(tmp_path: Path) -> None:
    _, whole = world(4e14, error=0.2)
    places = {"lat": np.arange(-89.0, 90.0, 2.0), "lon": np.arange(1.0, 360.0, 2.0)}
    phasor_file(tmp_path / "w.nc", values=whole, **places)
    with pytest.raises(InputError) as raised:
        read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc", water_vapour=4e14 * (1 + 1j))
    total = np.sum(whole * CellGrid.from_centres(places["lat"], places["lon"]).cell_area_m2) / 1e12
    text = str(raised.value)
    assert f"global integral is ({total:.0f}, {total:.0f}) Gt" in text
    assert "where minus the water vapour is (-400, -400) Gt" in text
    assert f"{np.hypot(total + 400, total + 400):.0f} Gt are left over" in text
    # without a stated vapour even a closed file leaves it over
    phasor_file(tmp_path / "v.nc", values=world(4e14)[1], **places)
    with pytest.raises(InputError, match="566 Gt are left over"):
        read_loads(tmp_path / "v.nc", reference_year=2016, source="v.nc")


def test_a_little_on_the_ocean_is_another_land_mask(tmp_path: Path) -> None:
    values = 2.0 * np.nan_to_num(inland(LATITUDE, LONGITUDE))
    values[8, 20] = 0.2  # an island that only the file knows
    phasor_file(tmp_path / "w.nc", values=values)
    (pattern,) = read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc")
    assert pattern.values[8, 20] == 0.2 + 0.2j


def test_millimetres_that_are_called_metres_are_refused(tmp_path: Path) -> None:
    phasor_file(tmp_path / "w.nc", values=6e4 * inland(LATITUDE, LONGITUDE))
    message = "w.nc: w: the load reaches 8.49e\\+04 kg m-2, 84.9 m of water. Must be at most 5000. Check units and"
    with pytest.raises(InputError, match=message):
        read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc")


# other grids and calendars


@pytest.mark.parametrize("step", [1, -1])
def test_a_gaussian_grid_keeps_its_mass(step: int, tmp_path: Path) -> None:
    nodes, weights = np.polynomial.legendre.leggauss(64)
    latitude, longitude = np.degrees(np.arcsin(nodes))[::step].round(2), np.arange(0.0, 360.0, 2.8125)
    phasor_file(tmp_path / "w.nc", lat=latitude, lon=longitude, values=inland(latitude, longitude))
    (pattern,) = read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc")
    row_area = weights[::step] * 2.0 * np.pi / 128 * 6_371_000.0**2
    mass = np.nansum(inland(latitude, longitude) * row_area[:, None])
    cells = CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)
    assert np.sum(pattern.values.real * cells.cell_area_m2) == pytest.approx(mass, rel=1e-9)
    assert np.ptp(np.diff(pattern.latitude_deg)) < 1e-9
    assert pattern.values[int(np.argmin(np.abs(pattern.latitude_deg - 50.0))), 30] == pytest.approx(1.0 + 1.0j)


def test_a_climatology_may_be_over_twelve_times(tmp_path: Path) -> None:
    means = monthly_means(2016, TRUTH, 0.0, 10.0)
    data = means[:, None, None] * inland(LATITUDE, LONGITUDE)
    time = np.array([f"2001-{month:02d}-15" for month in range(1, 13)], dtype="datetime64[ns]")
    places = {"lat": LATITUDE, "lon": LONGITUDE}
    for name, start in {"year": 0, "water_year": 9}.items():
        turned = np.roll(np.arange(12), -start)
        days = time[turned].astype("datetime64[D]") + np.where(turned < start, 365, 0)
        dataset = xr.Dataset(
            {"load": (("time", "lat", "lon"), data[turned], MASS)}, {"time": days.astype("datetime64[ns]"), **places}
        )
        dataset.to_netcdf(tmp_path / f"{name}.nc", engine="h5netcdf")
        (pattern,) = read_loads(tmp_path / f"{name}.nc", reference_year=2016, source=name)
        np.testing.assert_allclose(pattern.values, TRUTH * np.nan_to_num(inland(LATITUDE, LONGITUDE)), rtol=1e-6)
    twice = xr.concat([dataset, dataset.assign_coords(time=dataset["time"] + np.timedelta64(365, "D"))], "time")
    twice.to_netcdf(tmp_path / "two.nc", engine="h5netcdf")
    with pytest.raises(InputError, match=r"there are 24 months\. Must be the twelve months of a climatology"):
        read_loads(tmp_path / "two.nc", reference_year=2016, source="two.nc")


@pytest.mark.parametrize("value", [-9999.0, 1e20, 9.96921e36, 1e308])
def test_a_fill_value_that_is_not_declared_is_refused(value: float, tmp_path: Path) -> None:
    values = np.where(np.isnan(inland(LATITUDE, LONGITUDE)), value, 2.0)
    phasor_file(tmp_path / "w.nc", values=values)
    with pytest.raises(InputError, match=r"the load reaches .* Check units and fill value"):
        read_loads(tmp_path / "w.nc", reference_year=2016, source="w.nc")
    months = np.repeat(values[None], 12, axis=0)
    months[6] *= 0.5
    places = {"month": np.arange(1, 13), "lat": LATITUDE, "lon": LONGITUDE}
    dataset = xr.Dataset({"load": (("month", "lat", "lon"), months, MASS)}, places)
    dataset.to_netcdf(tmp_path / "m.nc", engine="h5netcdf")
    with pytest.raises(InputError, match=r"the load reaches|all the water of the Earth"):
        read_loads(tmp_path / "m.nc", reference_year=2016, source="m.nc")
