"""Fields of ocean models in every form they come in, and what each wrong one is told."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from screening.invented_ocean import daily, eddying_ocean

from massfit.errors import InputError
from massfit.io.fields.model_fields import read_model_fields
from massfit.io.fields.sea_floor_field import FileSource
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import ModelField


@pytest.fixture(scope="module")
def field() -> xr.Dataset:
    """Three years, as a file has them: float32, Pa."""
    pressure = eddying_ocean(time=daily("2011-01-01", "2014-01-01"), spacing=15.0).astype(np.float32)
    return pressure.assign_attrs(units="Pa").to_dataset(name="pressure")


@pytest.fixture(scope="module")
def expected(field: xr.Dataset) -> xr.Dataset:
    """Map of the field in memory."""
    return screen_sea_floor([ModelField("north", field["pressure"], "subtract")])


def one_file(data: xr.Dataset, folder: Path) -> Path:
    data.to_netcdf(folder / "north.nc", engine="h5netcdf")
    return folder / "north.nc"


def classic(data: xr.Dataset, folder: Path) -> Path:
    data.to_netcdf(folder / "north.nc", engine="scipy")
    return folder / "north.nc"


def in_pieces(data: xr.Dataset, folder: Path) -> Path:
    encoding = {"pressure": {"chunksizes": (40, 6, 24), "zlib": True}}
    data.to_netcdf(folder / "north.nc", engine="h5netcdf", encoding=encoding)
    return folder / "north.nc"


def by_place(data: xr.Dataset, folder: Path) -> Path:
    encoding = {"pressure": {"chunksizes": (data.sizes["time"], 3, 24)}}
    data.to_netcdf(folder / "north.nc", engine="h5netcdf", encoding=encoding)
    return folder / "north.nc"


def many_files(data: xr.Dataset, folder: Path) -> Path:
    # names out of the order of time
    for name, span in (("c", slice(0, 50)), ("a", slice(50, 51)), ("b", slice(51, None))):
        data.isel(time=span).to_netcdf(folder / f"north_{name}.nc", engine="h5netcdf")
    return folder / "north_*.nc"


def a_folder(data: xr.Dataset, folder: Path) -> Path:
    (folder / "north").mkdir()
    many_files(data, folder / "north")
    (folder / "north" / "README").write_text("not a field")
    return folder / "north"


def a_store(data: xr.Dataset, folder: Path) -> Path:
    pytest.importorskip("zarr")
    data.to_zarr(folder / "north.zarr", consolidated=False, encoding={"pressure": {"chunks": (60, 6, 24)}})
    return folder / "north.zarr"


def other_order(data: xr.Dataset, folder: Path) -> Path:
    west = data.assign_coords(lon=(data["lon"] + 180.0) % 360.0 - 180.0).sortby("lon")[["pressure"]]
    turned = west.isel(lat=slice(None, None, -1)).transpose("lat", "lon", "time")
    turned = turned.rename(lat="y", lon="x", time="t")
    turned["y"].attrs["units"], turned["x"].attrs["units"] = "degrees_north", "degrees_east"
    turned.to_netcdf(folder / "north.nc", engine="h5netcdf")
    return folder / "north.nc"


def other_unit(data: xr.Dataset, folder: Path) -> Path:
    dbar = (data / 1e4).astype(np.float64)
    dbar["pressure"].attrs["units"] = "dbar"
    return one_file(dbar, folder)


FORMS = (one_file, classic, in_pieces, by_place, many_files, a_folder, a_store, other_order, other_unit)


@pytest.mark.parametrize("write", FORMS, ids=lambda write: write.__name__)
def test_the_map_does_not_depend_on_the_form_of_the_field(
    write: Callable[[xr.Dataset, Path], Path], field: xr.Dataset, expected: xr.Dataset, tmp_path: Path
) -> None:
    path = write(field, tmp_path)
    (read,) = read_model_fields([str(path)], ocean_mean=["subtract"])
    assert read.name == "north"
    found = screen_sea_floor([read])
    assert np.array_equal(found["lon"], expected["lon"])
    assert np.allclose(found["sd"], expected["sd"], rtol=1e-6, equal_nan=True)
    assert np.allclose(found["dynamic_phasor"], expected["dynamic_phasor"], rtol=1e-6, atol=1e-4, equal_nan=True)


def test_packed_values_and_their_fill_are_decoded(field: xr.Dataset, tmp_path: Path) -> None:
    packing = {"dtype": "int16", "scale_factor": 0.1, "add_offset": 5.0, "_FillValue": -32768}
    field.to_netcdf(tmp_path / "north.nc", engine="h5netcdf", encoding={"pressure": packing})
    (read,) = read_model_fields([str(tmp_path / "north.nc")], ocean_mean=["removed"])
    values = read.source.read(slice(3, 5), slice(2, 9))
    expected = field["pressure"].values[3:5, 2:9]
    assert np.array_equal(np.isnan(values), np.isnan(expected))
    assert np.nanmax(np.abs(values - expected)) < 0.051


def test_blocks_reach_over_files(field: xr.Dataset, tmp_path: Path) -> None:
    (read,) = read_model_fields([str(many_files(field, tmp_path))], ocean_mean=["removed"])
    assert isinstance(read.source, FileSource)
    assert [(piece.first, piece.last) for piece in read.source.pieces] == [(0, 50), (50, 51), (51, 220)]
    assert np.array_equal(read.source.read(slice(48, 54), slice(0, 12)), field["pressure"][48:54], equal_nan=True)


def without(name: str) -> Callable[[xr.Dataset], xr.Dataset]:
    return lambda data: data.drop_vars(name)


def with_calendar(calendar: str) -> Callable[[xr.Dataset], xr.Dataset]:
    def changed(data: xr.Dataset) -> xr.Dataset:
        days = (np.arange(data.sizes["time"]) * 5.0, {"units": "days since 2011-01-01", "calendar": calendar})
        return data.assign_coords(time=("time", *days))

    return changed


def with_units(units: str | None) -> Callable[[xr.Dataset], xr.Dataset]:
    def changed(data: xr.Dataset) -> xr.Dataset:
        attributes = {} if units is None else {"units": units}
        return data.assign(pressure=data["pressure"].drop_attrs().assign_attrs(attributes))

    return changed


CALENDAR_RULE = (
    "Must be standard, gregorian or proleptic_gregorian: a year needs its real length. "
    "Give every time its real date; a 29 February that is not there may be missing."
)
UNIT_RULE = "Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, psi, psia, mm, cm, m."
FAULTS: dict[str, tuple[Callable[[xr.Dataset], xr.Dataset], str]] = {
    "no time": (
        lambda data: data.isel(time=0, drop=True),
        "variable: no variable has the wanted dimensions; there are pressure (lat, lon). "
        "Must be over (time, lat, lon).",
    ),
    "360_day": (with_calendar("360_day"), f"time: the calendar is '360_day'. {CALENDAR_RULE}"),
    "noleap": (with_calendar("noleap"), f"time: the calendar is 'noleap'. {CALENDAR_RULE}"),
    "no units": (
        with_units(None),
        "pressure: no units are stated. Must be a pressure such as Pa or hPa. Add them.",
    ),
    "a height": (
        with_units("cm"),
        "pressure: the unit 'cm' is a height, not a pressure. Must be a pressure such as Pa or hPa. "
        "Convert the values.",
    ),
    "unknown unit": (
        with_units("stone"),
        f"pressure: unknown unit 'stone'. {UNIT_RULE} Convert the data to one of these.",
    ),
    "no latitude": (without("lat"), "lat: the dimension has no coordinate variable. Add it."),
    "beyond a pole": (
        lambda data: data.assign_coords(lat=data["lat"] * 2.0),
        "lat: a latitude is 165. Must be in [-90, 90].",
    ),
    "twice around": (
        lambda data: data.assign_coords(lon=data["lon"] * 2.0 % 360.0),
        "lon: the columns span 690 degrees. Once around. Drop the column that stands twice.",
    ),
    "two variables": (
        lambda data: data.assign(other=data["pressure"]),
        "variable: several variables could be meant: pressure, other. Must be one. "
        "Keep one in the file, or state `variable`.",
    ),
}


@pytest.mark.parametrize("name", FAULTS)
def test_a_wrong_field_is_told_what_is_wrong(name: str, field: xr.Dataset, tmp_path: Path) -> None:
    change, message = FAULTS[name]
    path = one_file(change(field), tmp_path)
    with pytest.raises(InputError) as caught:
        read_model_fields([str(path)], ocean_mean=["subtract"])
    assert str(caught.value) == f"{path}: {message}"


def test_files_that_do_not_go_together_are_refused(field: xr.Dataset, tmp_path: Path) -> None:
    field.isel(time=slice(0, 60)).to_netcdf(tmp_path / "a.nc", engine="h5netcdf")
    field.isel(time=slice(50, 100)).to_netcdf(tmp_path / "b.nc", engine="h5netcdf")
    field.isel(time=slice(100, 220), lat=slice(1, None)).to_netcdf(tmp_path / "c.nc", engine="h5netcdf")
    with pytest.raises(InputError) as caught:
        read_model_fields([str(tmp_path)], ocean_mean=["subtract"])
    assert str(caught.value) == (
        f"{tmp_path}/c.nc: latitude: there are 11 values from -67.5 to 82.5. Must be as in {tmp_path}/a.nc. "
        "Use one grid."
    )
    (tmp_path / "c.nc").unlink()
    with pytest.raises(InputError) as caught:
        read_model_fields([str(tmp_path)], ocean_mean=["subtract"])
    assert str(caught.value) == (
        f"{tmp_path}/b.nc: time: it begins 2011-09-10T12:00, and {tmp_path}/a.nc ends 2011-10-25T12:00. "
        "Files must follow each other. Leave one of them out."
    )


def test_what_is_named_must_be_there(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    (tmp_path / "text.nc").write_text("not NetCDF")
    named = [f"{tmp_path}/no.nc", f"{tmp_path}/no*.nc", f"{tmp_path}/empty", f"{tmp_path}/text.nc", "https://a.b/c.nc"]
    with pytest.raises(InputError) as caught:
        read_model_fields(named, ocean_mean=["subtract", "west=removed", "no=maybe"])
    assert str(caught.value).splitlines() == [
        "--ocean-mean: west=removed: no model is called 'west'. Must be one of no, empty, text, c.",
        "no: ocean mean: the choice is 'maybe'. Must be subtract (the mean over the model's own ocean is subtracted "
        "here) or removed (it was before). Give --ocean-mean subtract for all models, or --ocean-mean no=removed.",
        f"{tmp_path}/no.nc: there is no such file. Must be NetCDF or Zarr. Check the path.",
        f"{tmp_path}/no*.nc: the pattern fits no file. At least one. Check the pattern.",
        f"{tmp_path}/empty: the folder holds no NetCDF file and no Zarr store. At least one. Check the path.",
        f"{tmp_path}/text.nc: the file cannot be read as NetCDF (it starts with b'not NetC'). "
        "Must be NetCDF-3 or NetCDF-4. Fetch it again.",
        "https://a.b/c.nc: it is an address. Must be a file: no address is ever opened. Fetch it.",
    ]


def test_a_store_without_its_library_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "north.zarr").mkdir()
    (tmp_path / "north.zarr" / "zarr.json").write_text("{}")
    monkeypatch.setitem(__import__("sys").modules, "zarr", None)
    with pytest.raises(InputError) as caught:
        read_model_fields([str(tmp_path / "north.zarr")], ocean_mean=["subtract"])
    assert str(caught.value) == (
        f"{tmp_path}/north.zarr: it is a Zarr store, and the library that reads them is not installed (import of zarr "
        "halted; None in sys.modules). Install massfit[big], or give NetCDF."
    )
