"""Ocean-mean series: units, stamps, and faults with their lines."""

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.records.series_file import read_series
from massfit.network import Series

HEAD = "# units: hPa\n"


def read(folder: Path, text: str) -> Series:
    (folder / "mean.csv").write_text(text)
    return read_series(folder / "mean.csv", name="mean", source="mean.csv")


def test_values_are_in_pascal_at_their_times(tmp_path: Path) -> None:
    series = read(tmp_path, HEAD + "time,value\n2016-01-01T12:00:00Z,1.5\n2016-01-02T14:00+02:00,-2\n2016-01-03,nan\n")
    np.testing.assert_allclose(series.pressure, [150.0, -200.0])
    assert series.time.tolist() == np.array(["2016-01-01T12", "2016-01-02T12"], dtype="datetime64[ns]").tolist()


def test_a_start_stamp_moves_months_by_half_of_each(tmp_path: Path) -> None:
    rows = "".join(f"2015-{month:02d}-01,{month}\n" for month in range(1, 5))
    series = read(tmp_path, HEAD + "# stamp: start\ntime,value\n" + rows)
    # 31, 28, 31 days; the last interval takes the length of the one before
    expected = ["2015-01-16T12", "2015-02-15T00", "2015-03-16T12", "2015-04-16T12"]
    assert series.time.tolist() == np.array(expected, dtype="datetime64[ns]").tolist()


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("time,value\n2016-01-01,1\n", "mean.csv: units: no units are stated. Must be a pressure such as Pa or hPa. "
         'Add the line "# units: hPa" at the top.'),
        ("# units: mm\ntime,value\n", "mean.csv: units: the unit 'mm' is a height, not a pressure. "
         "Must be a pressure such as Pa or hPa. Convert the values."),
        (HEAD + "date,value\n", "mean.csv:2: the header is 'date,value'. Must be time,value. Name the columns."),
        (HEAD + "time,value\n2016-01-01,1\n2016-01-02,one\n2016-13-03,3\n",
         "mean.csv:4: value: the value is 'one'. Must be a number, or empty. Correct it.\n"
         "mean.csv:5: time: the value is '2016-13-03'. Must be ISO 8601, UTC. Correct it or state `time_format`."),
        (HEAD + "time,value\n2016-01-02,1\n\n2016-01-01,2\n",
         "mean.csv:5: time: 2016-01-01T00:00:00 follows 2016-01-02T00:00:00. Times must increase. "
         "Sort them and drop repeats."),
        (HEAD + "time,value\n2016-01-02,1,2\n",
         "mean.csv:3: 1 rows do not have two columns. Must be time,value. Correct the first of them."),
        (HEAD + "# stamp: end\ntime,value\n",
         "mean.csv: stamp: the stamp is 'end'. Must be \"middle\" or \"start\". Correct it."),
        (HEAD + "time,value\n2016-01-02,1\n",
         "mean.csv: value: the series has 1 values. Must be at least two. Check the file."),
    ],
)  # fmt: skip
def test_faults(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(InputError) as raised:
        read(tmp_path, text)
    assert str(raised.value) == message


def test_netcdf_with_bounds(tmp_path: Path) -> None:
    edges = np.array(["2015-01-01", "2015-02-01", "2015-03-01"], dtype="datetime64[ns]")
    series = xr.Dataset(
        {
            "mean": ("time", [1.0, 2.0], {"units": "mbar"}),
            "time_bounds": (("time", "edge"), np.column_stack([edges[:-1], edges[1:]])),
        },
        {"time": ("time", edges[1:], {"bounds": "time_bounds"})},  # stamped at the end: the bounds decide
    )
    series["time"].encoding["units"] = "hours since 2000-01-01"
    series.to_netcdf(tmp_path / "mean.nc", engine="h5netcdf")
    read = read_series(tmp_path / "mean.nc", name="mean", source="mean.nc")
    assert read.time.tolist() == np.array(["2015-01-16T12", "2015-02-15"], dtype="datetime64[ns]").tolist()
    np.testing.assert_allclose(read.pressure, [100.0, 200.0])


def test_another_calendar_is_refused(tmp_path: Path) -> None:
    time = ("time", [0, 1], {"units": "days since 2015-01-01", "calendar": "360_day"})
    series = xr.Dataset({"mean": ("time", [1.0, 2.0], {"units": "Pa"})}, {"time": time})
    series.to_netcdf(tmp_path / "mean.nc", engine="h5netcdf")
    with pytest.raises(InputError, match="calendar '360_day'"):
        read_series(tmp_path / "mean.nc", name="mean", source="mean.nc")


def test_a_mean_in_the_wrong_units_is_refused_and_its_level_is_no_matter(tmp_path: Path) -> None:
    rows = "time,value\n2016-01-01,1011.0\n2016-07-01,1012.3\n"
    assert read(tmp_path, HEAD + rows).pressure[0] == pytest.approx(101100.0)
    with pytest.raises(InputError, match="varies by 65 hPa"):
        read(tmp_path, "# units: kPa\n" + "time,value\n2016-01-01,0\n2016-07-01,13\n")
