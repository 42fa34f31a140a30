"""Circulation models: which variable, which unit, which sites, and big files left on disk."""

from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray as xr

from massfit.corrections.circulation import circulation_at_sites
from massfit.errors import InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.io.fields.circulation_file import read_circulation
from massfit.io.netcdf import netcdf_file as netcdf
from massfit.io.netcdf import variables
from massfit.io.network.network_text import circulation_table
from massfit.io.network.schema import CirculationEntry
from massfit.network import CirculationModel
from massfit.site import Site

TIME = np.arange("2015-01-01", "2015-01-11", dtype="datetime64[D]").astype("datetime64[ns]")
LATITUDE, LONGITUDE = np.arange(-60.0, 61.0, 10.0), np.arange(-175.0, 180.0, 10.0)
FIELD = np.random.default_rng(3).normal(size=(TIME.size, LATITUDE.size, LONGITUDE.size))


def read(path: Path, variable: str | None = None) -> CirculationModel:
    entry = CirculationEntry("Invented", path.name, "removed", "not-forced", variable=variable)
    return read_circulation(path, entry, ocean_mean=None, sites=["A", "B"], source=path.name)


def test_what_happens_to_a_model_that_covers_a_part_is_handed_on(tmp_path: Path) -> None:
    field().to_netcdf(tmp_path / "m.nc", engine="h5netcdf")
    assert read(tmp_path / "m.nc").partial == "missing"
    entry = CirculationEntry("Invented", "m.nc", "removed", "not-forced", partial="cut")
    model = read_circulation(tmp_path / "m.nc", entry, ocean_mean=None, sites=["A"], source="m.nc")
    assert model.partial == "cut"
    assert circulation_table(model, "m.nc", "removed")["partial"] == "cut"
    assert "partial" not in circulation_table(read(tmp_path / "m.nc"), "m.nc", "removed")


def field(**changes: object) -> xr.Dataset:
    options = {"units": "dbar", "time": TIME, "lat": LATITUDE} | changes
    coordinates = {"time": options["time"], "lat": options["lat"], "lon": LONGITUDE}
    return xr.Dataset({"bottom": (("time", "lat", "lon"), FIELD, {"units": options["units"]})}, coordinates)


@pytest.mark.parametrize(("engine", "file_format"), [("h5netcdf", "NETCDF4"), ("scipy", "NETCDF3_64BIT")])
def test_a_field_in_either_format(tmp_path: Path, engine: str, file_format: str) -> None:
    field().to_netcdf(tmp_path / "m.nc", engine=engine, format=file_format)
    model = read(tmp_path / "m.nc")
    np.testing.assert_allclose(model.pressure, 1e4 * FIELD, rtol=1e-12)
    assert model.pressure.attrs["units"] == "Pa"
    assert model.pressure["time"].to_numpy().tolist() == TIME.tolist()


def test_a_cut_classic_file_is_refused(tmp_path: Path) -> None:
    field().to_netcdf(tmp_path / "m.nc", engine="scipy", format="NETCDF3_64BIT")
    whole = (tmp_path / "m.nc").read_bytes()
    (tmp_path / "m.nc").write_bytes(whole[: len(whole) // 2])
    with pytest.raises(InputError, match=r"m\.nc: the file is cut short"):
        read(tmp_path / "m.nc")


def test_a_big_field_stays_on_disk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(variables, "_EAGER_BYTES", 100)
    field().to_netcdf(tmp_path / "m.nc", engine="h5netcdf")
    pressure = read(tmp_path / "m.nc").pressure
    assert not pressure.variable._in_memory
    np.testing.assert_allclose(pressure.isel(time=3), 1e4 * FIELD[3], rtol=1e-12)
    pressure.close()


def test_damage_in_the_middle_of_a_big_field_is_told_when_it_is_met(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # of a field above 64 MB the first look reads both ends only
    monkeypatch.setattr(variables, "_EAGER_BYTES", 100)
    monkeypatch.setattr(netcdf, "examined_problem", lambda _: "")
    chunked = {"bottom": {"fletcher32": True, "chunksizes": (1, LATITUDE.size, LONGITUDE.size)}}
    field().to_netcdf(tmp_path / "m.nc", engine="h5netcdf", encoding=chunked)
    with h5py.File(tmp_path / "m.nc") as file:
        place = file["bottom"].id.get_chunk_info(5).byte_offset
    content = bytearray((tmp_path / "m.nc").read_bytes())
    content[place + 9] ^= 255
    (tmp_path / "m.nc").write_bytes(content)
    model = read(tmp_path / "m.nc")
    np.testing.assert_allclose(model.pressure.isel(time=4), 1e4 * FIELD[4], rtol=1e-12)
    sites = [Site("A", -11.0, 205.0)]
    with pytest.raises(InputError, match=r"m\.nc: bottom: the file cannot be read as NetCDF \(OSError"):
        circulation_at_sites(model, sites, ocean=OceanFunction.builtin())


def test_sites_by_id(tmp_path: Path) -> None:
    values = np.column_stack([np.arange(10.0), -np.arange(10.0)])
    data = xr.Dataset({"p": (("site", "time"), values.T, {"units": "Pa"})}, {"time": TIME, "site": ["B", "C"]})
    data.to_netcdf(tmp_path / "m.nc", engine="h5netcdf")
    pressure = read(tmp_path / "m.nc").pressure
    assert pressure.dims == ("time", "site")
    np.testing.assert_array_equal(pressure.sel(site="B"), np.arange(10.0))


def test_the_variable_is_stated_where_two_could_be_meant(tmp_path: Path) -> None:
    two = field()
    two["other"] = two["bottom"] * 2.0
    two["other"].attrs["units"] = "dbar"
    two.to_netcdf(tmp_path / "m.nc", engine="h5netcdf")
    with pytest.raises(InputError, match="several variables could be meant: bottom, other"):
        read(tmp_path / "m.nc")
    np.testing.assert_allclose(read(tmp_path / "m.nc", "other").pressure, 2e4 * FIELD, rtol=1e-12)
    with pytest.raises(InputError, match='no variable "bottm"') as raised:
        read(tmp_path / "m.nc", "bottm")
    assert raised.value.faults[0].action == 'Did you mean "bottom"?'


@pytest.mark.parametrize(
    ("dataset", "message"),
    [
        (field(units="m"), "m.nc: bottom: the unit 'm' is a height, not a pressure. "
         "Must be a pressure such as Pa or hPa. Convert the values."),
        (field(time=TIME[::-1]), "m.nc: time: 2015-01-09T00:00:00 follows 2015-01-10T00:00:00. Times must increase. "
         "Sort them and drop repeats."),
        (field(lat=np.abs(LATITUDE)), "m.nc: lat: the coordinate is not monotonic. Must rise or fall "
         "throughout. Sort it."),
        (field().drop_vars("lon"), "m.nc: lon: the dimension has no coordinate variable. Add it."),
        (xr.Dataset({"p": (("time", "site"), np.zeros((10, 2)), {"units": "Pa"})}, {"time": TIME, "site": ["A1", "C"]}),
         "m.nc: site: none of its 2 sites (A1, C, ...) is in the network. Must be site ids of the network. "
         'Did you mean "A"?'),
        (xr.Dataset({"p": (("time", "site"), np.zeros((10, 2)), {"units": "Pa"})}, {"time": TIME, "site": ["A", "A"]}),
         "m.nc: site: sites stand twice: A. Must be unique. Keep one of each."),
    ],
)  # fmt: skip
def test_faults(tmp_path: Path, dataset: xr.Dataset, message: str) -> None:
    dataset.to_netcdf(tmp_path / "m.nc", engine="h5netcdf")
    with pytest.raises(InputError) as raised:
        read(tmp_path / "m.nc")
    assert str(raised.value) == message
