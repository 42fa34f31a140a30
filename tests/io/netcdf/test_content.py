"""What a file is told by its content, whatever its name."""

import gzip
import io
import zipfile
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from scipy.io import savemat

from massfit.errors import InputError
from massfit.io.netcdf.content import format_of
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record

TEXT = "time,pressure\n" + "".join(f"2016-01-{day:02d}T12:00:00Z,{day / 8}\n" for day in range(1, 29))


def zipped() -> bytes:
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w") as archive:
        archive.writestr("a.csv", TEXT)
    return stream.getvalue()


FOREIGN = {
    "random": (
        np.random.default_rng(4).bytes(5000),
        'a.nc: the file is neither NetCDF, MATLAB nor text (it starts with b"N\'\\xf8\\xb9\\xfb\\x1fl\\xf1"). Must be '
        "NetCDF, MATLAB or text. Check the path, or fetch it again.",
    ),
    "gzip": (
        gzip.compress(TEXT.encode()),
        "a.nc: the file is a gzip archive. Must be NetCDF, MATLAB or text. Unpack it.",
    ),
    "zip": (
        zipped(),
        "a.nc: the file is a zip archive or a spreadsheet. Must be NetCDF, MATLAB or text. Unpack it.",
    ),
    "utf-16": (TEXT.encode("utf-16"), "a.nc: the file is text in UTF-16. Must be UTF-8 or ASCII. Save it as UTF-8."),
    "grib": (b"GRIB" + bytes(100), "a.nc: the file is GRIB. Must be NetCDF, MATLAB or text. Write it as one of these."),
}


@pytest.mark.parametrize("name", FOREIGN)
def test_what_is_no_record_is_named(name: str, tmp_path: Path) -> None:
    content, expected = FOREIGN[name]
    (tmp_path / "a.nc").write_bytes(content)
    with pytest.raises(InputError) as caught:
        read_record(tmp_path, DeploymentFile("a.nc", units="hPa"), site="A", deployment="A/1")
    assert str(caught.value) == expected


def test_the_name_does_not_matter(tmp_path: Path) -> None:
    path = tmp_path / "a.nc"
    path.write_text(TEXT)
    assert format_of(path, source="a.nc") == "text"
    path.write_bytes(("# Höhe über Grund, ° µ\n" * 3 + TEXT).encode())
    assert format_of(path, source="a.nc") == "text"
    # a stray byte is the fault of its line, not of the file
    path.write_bytes(TEXT.replace("0.5", "0\0.5").encode())
    assert format_of(path, source="a.nc") == "text"
    path.write_text("")
    assert format_of(path, source="a.nc") == "text"
    savemat(path, {"p": np.arange(4.0)}, appendmat=False)
    assert format_of(path, source="a.nc") == "MATLAB"
    path = tmp_path / "a.csv"
    for engine in ("h5netcdf", "scipy"):
        xr.Dataset({"p": ("time", np.arange(3.0))}).to_netcdf(path, engine=engine)
        assert format_of(path, source="a.csv") == "NetCDF"


@pytest.mark.parametrize("seed", range(40))
def test_random_bytes_of_any_length_are_no_text(seed: int, tmp_path: Path) -> None:
    rng = np.random.default_rng(seed)
    (tmp_path / "a").write_bytes(rng.bytes(int(rng.integers(64, 30_000))))
    with pytest.raises(InputError, match=r"neither NetCDF, MATLAB nor text|the file is"):
        format_of(tmp_path / "a", source="a")
