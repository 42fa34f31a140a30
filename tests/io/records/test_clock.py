"""Zones, offsets and drift of the recorder's clock; what stamps betray, and what they do not."""

from pathlib import Path
from typing import Any

import erfa
import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.records.clock import LEAP_SECONDS, SET_BACK, clock_notes, corrected_clock
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.records.record import Record

SECOND, HOUR = np.timedelta64(1, "s"), np.timedelta64(1, "h")


def read(folder: Path, text: str, **entry: Any) -> Record:
    (folder / "a.txt").write_text(text)
    settings = {"units": "dbar", "delimiter": ",", **entry}
    return read_record(folder, DeploymentFile("a.txt", **settings), site="A", deployment="A/1")


def message(folder: Path, text: str, **entry: Any) -> str:
    with pytest.raises(InputError) as caught:
        read(folder, text, **entry)
    return str(caught.value)


def rows(form: str, count: int = 6) -> str:
    return "".join(f"{form.format(hour)},{hour}.5\n" for hour in range(count))


def test_leap_seconds_are_those_of_the_standards_library() -> None:
    # ERFA carries the table of IERS Bulletin C; rows before 1972 are no leap seconds, and 1972-01-01 starts the count
    table = erfa.leap_seconds.get()
    days = [np.datetime64(f"{row['year']:04d}-{row['month']:02d}-01") for row in table if row["year"] >= 1972][1:]
    assert [leap.astype("datetime64[D]") for leap in LEAP_SECONDS] == days


def test_a_drift_known_at_recovery_is_spread_over_the_record() -> None:
    true = np.datetime64("2014-01-01", "ns") + np.arange(400) * np.timedelta64(1, "D")
    fraction = np.arange(400) / 399.0
    stamps = true + np.round((2.0 + 88.0 * fraction) * 1e9).astype("timedelta64[ns]")
    entry = DeploymentFile("a.txt", clock_offset_s=2.0, clock_offset_end_s=90.0)
    corrected, actions = corrected_clock(stamps, entry)
    # the stamps are spaced by the fast clock itself: its drift of 88 s in 399 days is 2.6e-6 of 88 s
    assert np.abs(corrected - true).max() < np.timedelta64(1, "ms")
    # the order of the file does not matter
    np.testing.assert_array_equal(corrected_clock(stamps[::-1], entry)[0], corrected[::-1])
    assert [action.detail for action in actions] == ["+2 s from UTC at the first sample, +90 s at the last"]


def test_an_offset_is_taken_off_and_the_default_does_nothing() -> None:
    stamps = np.datetime64("2014-01-01", "ns") + np.arange(3) * HOUR
    fast, _ = corrected_clock(stamps, DeploymentFile("a.txt", clock_offset_s=-1.5))
    assert (fast - stamps == np.timedelta64(1500, "ms")).all()
    same, actions = corrected_clock(stamps, DeploymentFile("a.txt"))
    assert same is stamps
    assert actions == ()


def test_a_stated_zone_is_brought_to_utc(tmp_path: Path) -> None:
    text = "time,pressure\n" + rows("2016-01-01T0{}:00")
    record = read(tmp_path, text, utc_offset_hours=-9.5)
    assert record.time[0] == np.datetime64("2016-01-01T09:30")
    assert ("times brought to UTC", "the zone is -9.5 h from UTC") in [(a.what, a.detail) for a in record.actions]


@pytest.mark.parametrize(
    ("header", "row", "expected"),
    [
        ("# Time zone: HST\ntime,pressure\n", "2016-01-01T0{}:00",
            "a.txt:1: time: the file says that its times are in 'HST'. Must be UTC. State utc_offset_hours = -10; 0 if "
            "they are UTC."),
        ("# times are in UTC+05:30\ntime,pressure\n", "2016-01-01T0{}:00",
            "a.txt:1: time: the file says that its times are in 'UTC+05:30'. Must be UTC. State utc_offset_hours = "
            "5.5; 0 if they are UTC."),
        ("#\n# all in local time\ntime,pressure\n", "2016-01-01T0{}:00",
            "a.txt:2: time: the file says that its times are in 'local time'. Must be UTC. State utc_offset_hours, the "
            "hours by which they are ahead of UTC; 0 if they are UTC."),
        ("time,pressure\n", "2016-01-01 0{}:00 JST",
            "a.txt:2: time: the file says that its times are in 'JST'. Must be UTC. State utc_offset_hours = 9; 0 if "
            "they are UTC."),
    ],
    ids=["header", "offset", "local", "suffix"],
)  # fmt: skip
def test_a_file_that_names_another_zone_is_refused(header: str, row: str, expected: str, tmp_path: Path) -> None:
    assert message(tmp_path, header + rows(row)) == expected
    if "local" not in expected:
        # stated, it is read; stated otherwise, it is refused
        hours = float(expected.split("utc_offset_hours = ")[1].split(";")[0])
        record = read(tmp_path, header + rows(row), utc_offset_hours=hours)
        assert record.time[0] == np.datetime64("2016-01-01") - np.timedelta64(int(60 * hours), "m")
        assert "Must agree" in message(tmp_path, header + rows(row), utc_offset_hours=3)
    assert read(tmp_path, header + rows(row), utc_offset_hours=0).time[0] == np.datetime64("2016-01-01")


@pytest.mark.parametrize("suffix", [" UTC", " GMT", "Z", " utc", "+00:00"])
def test_utc_by_any_name_is_utc(suffix: str, tmp_path: Path) -> None:
    record = read(tmp_path, "# time zone: UTC, by Time Ltd, East\ntime,pressure\n" + rows("2016-01-01 0{}:00" + suffix))
    assert record.time[-1] == np.datetime64("2016-01-01T05:00")
    assert record.actions == ()


def test_summer_and_winter_time_in_the_stamps_are_told_apart(tmp_path: Path) -> None:
    text = "time,pressure\n2016-10-30 00:00 CET,1\n2016-10-30 00:00 CEST,2\n"
    assert "a.txt:3: time: the file says that its times are in 'CEST' and utc_offset_hours is 1" in message(
        tmp_path, text, utc_offset_hours=1
    )


def test_offsets_in_the_stamps_are_taken_off_once(tmp_path: Path) -> None:
    text = "time,pressure\n" + rows("2016-01-01T0{}:00+02:00")
    record = read(tmp_path, text)
    assert record.time[0] == np.datetime64("2015-12-31T22:00")
    assert ("times with an offset from UTC brought to UTC", 6) in [(a.what, a.count) for a in record.actions]
    assert "has an offset and utc_offset_hours is 2. Must be one of the two" in message(
        tmp_path, text, utc_offset_hours=2
    )


def test_a_sixtieth_second_is_the_next_minute(tmp_path: Path) -> None:
    text = "time,pressure\n2016-12-31T23:59:59Z,1\n2016-12-31T23:59:60Z,2\n2017-01-01T00:00:01Z,3\n"
    record = read(tmp_path, text)
    assert record.time[1] == np.datetime64("2017-01-01")
    assert record.actions[0].what == "seconds of 60 read as the next minute"
    parts = "2016,12,31,23,59,60,1\n2017,1,1,0,0,15,1.5\n"
    columns = ("year", "month", "day", "hour", "minute", "second", "pressure")
    again = read(tmp_path, parts, columns=columns)
    assert again.time[0] == np.datetime64("2017-01-01")
    assert [(action.what, action.count) for action in again.actions] == [(record.actions[0].what, 1)]
    # a 61st is no time
    assert "Must be ISO 8601" in message(tmp_path, text.replace(":60Z", ":61Z"))


def test_the_attributes_of_a_netcdf_file_may_name_a_zone(tmp_path: Path) -> None:
    import xarray as xr

    def made(**attributes: Any) -> None:
        time = ("time", np.arange(48.0), {"units": "hours since 2016-01-01", "standard_name": "time", **attributes})
        pressure = ("time", np.linspace(1, 2, 48), {"units": "dbar"})
        xr.Dataset({"p": pressure}, {"time": time}).to_netcdf(
            tmp_path / "a.nc", engine="h5netcdf", encoding={"time": {"_FillValue": None}}
        )

    made(time_zone="Etc/GMT+10")
    with pytest.raises(InputError, match=r"times are in 'Etc/GMT\+10'. Must be UTC. State utc_offset_hours, the hours"):
        read_record(tmp_path, DeploymentFile("a.nc"), site="A", deployment="A/1")
    made(time_zone="PST")
    with pytest.raises(InputError, match=r"times are in 'PST'. Must be UTC. State utc_offset_hours = -8"):
        read_record(tmp_path, DeploymentFile("a.nc"), site="A", deployment="A/1")
    record = read_record(tmp_path, DeploymentFile("a.nc", utc_offset_hours=-8), site="A", deployment="A/1")
    assert record.time[0] == np.datetime64("2016-01-01T08:00")
    made(time_zone="UTC")
    assert read_record(tmp_path, DeploymentFile("a.nc"), site="A", deployment="A/1").actions == ()


# what stamps betray


def year_of(minutes: int) -> np.ndarray:
    return np.arange("2016-01-01", "2017-01-01", minutes, dtype="datetime64[m]").astype("datetime64[ns]")


@pytest.mark.parametrize("minutes", [15, 60])
@pytest.mark.parametrize("order", [1, -1])
def test_summer_time_is_betrayed_by_the_hour_that_comes_twice(minutes: int, order: int) -> None:
    time = year_of(minutes)
    summer = (time >= np.datetime64("2016-03-27T01:00")) & (time < np.datetime64("2016-10-30T01:00"))
    local = time + summer * HOUR
    pressure = np.sin(np.arange(time.size) / 8.0)
    (note,) = clock_notes(local[::order], pressure[::order])
    assert note.what == SET_BACK
    last = "2016-10-30T01:00:00" if minutes == 60 else "2016-10-30T01:45:00"
    assert note.detail == f"by 1 h at {last}"
    assert clock_notes(time[::order], pressure[::order]) == ()


def test_files_put_together_and_mixed_rows_are_no_turned_clock() -> None:
    time = year_of(60)
    pressure = np.sin(np.arange(time.size) / 8.0)
    # two pieces that share their last and first five hours, and repeat the values there
    pieces = np.concatenate([np.arange(5000), np.arange(4995, time.size)])
    assert clock_notes(time[pieces], pressure[pieces]) == ()
    # a clock that starts again, and quick rows put behind the slow ones of each day
    again = np.concatenate([np.arange(3000), np.arange(3000)])
    assert clock_notes(time[again], pressure[again]) == ()
    quick = time[100] + np.arange(200) * np.timedelta64(15, "s")
    mixed = np.concatenate([time[:130], quick, time[130:]])
    assert clock_notes(mixed, np.arange(float(mixed.size))) == ()


@pytest.mark.parametrize("sign", [1, -1])
def test_a_clock_that_missed_a_leap_second_is_noted(sign: int) -> None:
    time = np.datetime64("2016-12-31T12:00", "ns") + np.arange(4000) * np.timedelta64(15, "s")
    stepped = np.where(time < np.datetime64("2017-01-01"), time, time + sign * SECOND)
    (note,) = clock_notes(stepped, np.arange(4000.0))
    assert (note.what, note.count) == ("leap seconds in the clock", 1)
    assert "2017-01-01" in note.detail
    assert clock_notes(time, np.arange(4000.0)) == ()
    # a step of another day, or of two seconds, is none
    other = np.where(time < np.datetime64("2016-12-31T20:00"), time, time + SECOND)
    assert clock_notes(other, np.arange(4000.0)) == ()
    two = np.where(time < np.datetime64("2017-01-01"), time, time + 2 * SECOND)
    assert clock_notes(two, np.arange(4000.0)) == ()


def test_the_real_records_have_clocks_that_were_left_alone(open_data: Path) -> None:
    columns = ("year", "month", "day", "hour", "minute", "second", "kind", "height")
    for name in ("deep_recorder_21401_201103.txt", "deep_recorder_21418_201103.txt"):
        entry = DeploymentFile(name, units="m", density_kg_m3=1025.0, columns=columns, missing=(9999.0,))
        record = read_record(open_data, entry, site="A", deployment="A/1")
        assert record.actions == ()
