from pathlib import Path
from typing import Any

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import centred, read_record
from massfit.records.record import Record

PARTS = ("year", "month", "day", "hour", "minute", "second", "kind", "pressure")


def read(folder: Path, text: str, **entry: Any) -> Record:
    (folder / "a.txt").write_text(text)
    settings: dict[str, Any] = {"units": "hPa", **entry}
    return read_record(folder, DeploymentFile("a.txt", **settings), site="A", deployment="A/1")


def faults_of(folder: Path, text: str, **entry: Any) -> list[str]:
    with pytest.raises(InputError) as caught:
        read(folder, text, **entry)
    return [str(fault) for fault in caught.value.faults]


def absolute_hpa(record: Record) -> list[float]:
    return np.round((record.pressure + record.reference) / 100.0, 6).tolist()


def test_header_line_and_iso_time(tmp_path: Path) -> None:
    rows = "2016-01-01T00:00:00Z,5.5\n2016-01-01T03:00+02:00,6.5\n\n2016-01-01 02:00,7.5\n"
    text = "# from the ship\n\ntime,pressure\n" + rows
    record = read(tmp_path, text, delimiter=",")
    assert record.time.tolist() == [1451606400 * 10**9 + hour * 3600 * 10**9 for hour in range(3)]
    assert absolute_hpa(record) == [5.5, 6.5, 7.5]
    assert record.reference == 650.0


def test_date_in_parts_kinds_and_missing_values(tmp_path: Path) -> None:
    text = (
        "%comment\n2011 03 11 05 46 30.5 2 10.0\n2011 3 11 5 46 15 1 9999.000\n"
        "2011 03 11 05 46 00 1 12.0\n2011 03 10 00 00 00 3 13.0\n2011 03 10 00 00 00 1 -1\n"
    )
    record = read(tmp_path, text, columns=PARTS, comment="%", missing=(9999.0, -1.0), keep_kinds=("1", "2"))
    assert np.datetime_as_string(record.time, "ms").tolist() == [
        "2011-03-11T05:46:30.500",
        "2011-03-11T05:46:15.000",
        "2011-03-11T05:46:00.000",
        "2011-03-10T00:00:00.000",
    ]
    assert np.isnan(record.pressure).tolist() == [False, True, False, True]
    assert [(action.what, action.count) for action in record.actions] == [("rows of other kinds left out", 1)]


@pytest.mark.parametrize("count", [1, 3])
def test_dates_need_only_year_month_day(tmp_path: Path, count: int) -> None:
    text = "".join(f"2016,02,{day},1.0\n" for day in range(27, 27 + count))
    record = read(tmp_path, text, columns=("year", "month", "day", "pressure"), delimiter=",")
    assert record.time[-1] == np.datetime64(f"2016-02-{26 + count}")


def test_time_formats(tmp_path: Path) -> None:
    record = read(tmp_path, "03/02/16-12:30 1\n", columns=("t", "p"), time_column="t", time_format="%d/%m/%y-%H:%M")
    assert record.time[0] == np.datetime64("2016-02-03T12:30")
    record = read(tmp_path, "1 2.5\n", columns=("p", "t"), time_column="t", time_format="hours since 2016-02-03T12:00")
    assert record.time[0] == np.datetime64("2016-02-03T14:30")


def test_date_and_clock_in_two_columns(tmp_path: Path) -> None:
    record = read(tmp_path, "date clock pressure\n2016-02-03 12:30:15 1\n", time_column="date clock")
    assert record.time[0] == np.datetime64("2016-02-03T12:30:15")


def test_a_stray_quote_does_not_swallow_lines(tmp_path: Path) -> None:
    text = 'time,pressure\n2016-01-01,6\n2016-01-02,"7\n2016-01-03,8\n'
    assert absolute_hpa(read(tmp_path, text, delimiter=",")) == [6.0, 7.0, 8.0]


def test_a_stray_control_byte_is_a_fault_of_its_line(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path, "time pressure\n2016-01-01 6\n2016-01-02 7\x018\n")
    assert fault.startswith("a.txt:3: pressure")


def test_a_count_of_days_from_long_ago_keeps_its_millisecond(tmp_path: Path) -> None:
    # 310 years in ns overflow 64 bits; day 113225 after 1700-01-01 is 2010-01-01 (proleptic Gregorian)
    record = read(tmp_path, "113225.5 1\n", columns=("t", "p"), time_column="t", time_format="days since 1700-01-01")
    assert record.time[0] == np.datetime64("2010-01-01T12:00")


def test_column_by_name_among_others(tmp_path: Path) -> None:
    text = "date;a;note;b\n2016-01-01;1.0;fine;\n2016-01-02;2.0;bad;6.0\n"
    record = read(tmp_path, text, delimiter=";", time_column="date", variable="b")
    assert np.isnan(record.pressure[0])
    assert absolute_hpa(record)[1] == 6.0


def test_quoted_header_and_byte_order_mark(tmp_path: Path) -> None:
    assert absolute_hpa(read(tmp_path, '\ufeff"time","pressure"\r\n2016-01-01,5\r\n', delimiter=",")) == [5.0]


def test_height_of_water_and_steps(tmp_path: Path) -> None:
    steps = ("2016-01-05T02:00:00+02:00", "2016-01-06")
    text = "time height\n2016-01-01 10.0\n"
    record = read(tmp_path, text, units="m", density_kg_m3=1025.0, steps=steps)
    assert record.reference == pytest.approx(10 * 1025 * 9.80665, rel=1e-15)
    assert record.steps == (np.datetime64("2016-01-05"), np.datetime64("2016-01-06"))
    assert not record.find_steps


def test_settings_faults_come_together(tmp_path: Path) -> None:
    (tmp_path / "a.txt").write_text("time presure other\n2016-01-01 1 2\n")
    entry = DeploymentFile("a.txt", variable="pressure", keep_kinds=("1",))
    with pytest.raises(InputError) as caught:
        read_record(tmp_path, entry, site="A", deployment="A/1")
    assert [fault.name for fault in caught.value.faults] == ["units", "variable", "keep_kinds"]
    assert "Did you mean 'presure'?" in str(caught.value)


def test_data_faults_come_together_with_line_numbers(tmp_path: Path) -> None:
    text = "time pressure\n2016-01-01 1\n2016-01-02 1 7\n2016-13-01 2\n# note\n2016-01-03 abc\n2016-01-04 1,5\n"
    assert faults_of(tmp_path, text) == [
        "a.txt:3: fields in the row: the value is 3. Must be 2. Correct it.",
        "a.txt:6: pressure: the value is 'abc' (and 1 more lines). Must be a number, or empty. Correct it.",
        "a.txt:4: time: the value is '2016-13-01'. Must be ISO 8601, UTC. Correct it or state `time_format`.",
    ]


@pytest.mark.parametrize(
    ("row", "expected"),
    [
        ("11 03 01 1", "a.txt:1: year: the value is 11. Must be within [1900, 2200]. Write years with four digits."),
        ("2011 02 29 1", "a.txt:1: day: the value is 29. Must be a day of its month. Correct it."),
        ("2011 02 nan 1", "a.txt:1: day: the value is nan. Must be within [1, 31]. Correct it."),
        ("2011 2.5 1 1", "a.txt:1: month: the value is 2.5. Must be within [1, 12]. Correct it."),
        ("2011 x 1 1", "a.txt:1: month: the value is 'x'. Must be a number, or empty. Correct it."),
    ],
)
def test_impossible_dates(tmp_path: Path, row: str, expected: str) -> None:
    assert faults_of(tmp_path, row + "\n", columns=("year", "month", "day", "pressure")) == [expected]


def test_year_out_of_range_in_iso(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path, "time pressure\n0011-03-01 1\n")
    assert "'0011-03-01'" in fault


@pytest.mark.parametrize(
    ("text", "entry", "expected"),
    [
        ("", {}, "no row of data"),
        ("time pressure\n", {}, "no row of data"),
        ("2016-01-01 5.0\n", {}, "no header line"),
        ("time,pressure\n2016-01-01,5\n", {}, "State `delimiter`, for example delimiter = ','"),
        ("2016-01-01 5 6\n", {"columns": ("time", "pressure")}, "has 3 fields and `columns` names 2"),
        ("2016-01-01 5 6\n", {"columns": ("time", "pressure", "pressure")}, "more than one column"),
        ("time pressure\n2016-01-01 nan\n", {}, "none of the 1 samples is valid"),
        ("time pressure\n2016-01-01 1\n", {"units": "psig"}, "Did you mean 'psi'?"),
        ("time pressure\n2016-01-01 1\n", {"time_format": "decimal"}, "'decimal' is not a time format"),
        ("year month pressure\n2016 1 1\n", {}, "there is no column 'day'"),
    ],
)
def test_faults_say_what_to_do(tmp_path: Path, text: str, entry: dict[str, Any], expected: str) -> None:
    (fault,) = faults_of(tmp_path, text, **entry)
    assert expected in fault


def test_stamps_move_by_half_of_their_own_interval() -> None:
    # hourly, then 15 min, with a gap and in falling order
    start = np.array(["2016-01-02T00:15", "2016-01-02T00:00", "2016-01-01T02:00", "2016-01-01T01:00"], "datetime64[ns]")
    middle = np.datetime_as_string(centred(start), "s").tolist()
    assert middle == ["2016-01-02T00:22:30", "2016-01-02T00:07:30", "2016-01-01T02:30:00", "2016-01-01T01:30:00"]


def deep_recorder(folder: Path, name: str, **entry: Any) -> Record:
    columns = (*PARTS[:-1], "height")
    settings = DeploymentFile(name, units="m", density_kg_m3=1025.0, columns=columns, missing=(9999.0,), **entry)
    return read_record(folder, settings, site="A", deployment="A/1")


@pytest.mark.parametrize(
    ("name", "rows"), [("deep_recorder_21401_201103.txt", 5920), ("deep_recorder_21418_201103.txt", 2952)]
)
def test_deep_recorder_files(open_data: Path, name: str, rows: int) -> None:
    record = deep_recorder(open_data, name)
    # rows counted in the files
    assert record.time.size == rows
    assert record.time.min() >= np.datetime64("2011-03-01")
    assert record.time.max() < np.datetime64("2011-04-01")


def test_routine_rows_of_a_deep_recorder(open_data: Path) -> None:
    record = deep_recorder(open_data, "deep_recorder_21401_201103.txt", keep_kinds=("1",))
    # one row every 15 minutes of March
    assert record.time.size == 31 * 96
    assert np.all(np.diff(np.sort(record.time)) == np.timedelta64(15, "m"))


@pytest.mark.parametrize("column", ["depth_mj03e_m", "depth_mj03f_m"])
def test_daily_table_by_column_name(open_data: Path, column: str) -> None:
    entry = DeploymentFile(
        "axial_botpt_mj03e_mj03f_daily_2015_2026.csv",
        units="m",
        density_kg_m3=1025.0,
        delimiter=",",
        variable=column,
        time_column="date_utc",
        stamp="start",
    )
    record = read_record(open_data, entry, site="A", deployment="A/1")
    lines = (open_data / entry.file).read_text().splitlines()
    place = lines[0].split(",").index(column)
    expected = [float(line.split(",")[place] or "nan") for line in lines[1:]]
    depth = (record.pressure + record.reference) / (1025.0 * 9.80665)
    np.testing.assert_allclose(depth, expected, rtol=0, atol=1e-9)
    assert record.time[0] == np.datetime64("2015-01-01T12:00")


# headers over stated columns, and days of the year


def test_header_and_units_rows_over_stated_columns_are_no_data(tmp_path: Path) -> None:
    columns = ("year", "month", "day", "pressure")
    record = read(tmp_path, "YYYY MO DY P\n- - - dbar\n2016 1 1 5.0\n2016 1 2 6.0\n", columns=columns)
    assert absolute_hpa(record) == [5.0, 6.0]
    # a row with a number is a row of data, wherever it stands
    (fault,) = faults_of(tmp_path, "YYYY MO DY 2\n2016 1 1 5.0\n", columns=(*columns[:3], "x", "pressure"))[:1]
    assert "the row has 4 fields and `columns` names 5" in fault
    assert "no row of data" in faults_of(tmp_path, "YYYY MO DY P\n", columns=columns)[0]


@pytest.mark.parametrize("count", ["1e300", "-1e9", "nan", "500000"])
def test_counts_of_days_outside_the_years_that_are_read(count: str, tmp_path: Path) -> None:
    settings = {"columns": ("time", "pressure"), "time_format": "days since 1950-01-01"}
    (fault,) = faults_of(tmp_path, f"24106 1.0\n{count} 2.0\n", **settings)
    assert "Must be a number of days since 1950-01-01" in fault


def test_day_of_the_year(tmp_path: Path) -> None:
    columns = ("year", "day_of_year", "hour", "pressure")
    record = read(tmp_path, "2016 60 6 1.0\n2016 366 0 2.0\n2015 1.25 0 3.0\n", columns=columns)
    expected = ["2016-02-29T06:00", "2016-12-31T00:00", "2015-01-01T06:00"]
    assert np.datetime_as_string(record.time, "m").tolist() == expected
    (fault,) = faults_of(tmp_path, "2015 366 0 1.0\n", columns=columns)
    assert "a.txt:1: day_of_year: the value is 366. Must be a day of its year" in fault
    assert "Must be within [1, 367]" in faults_of(tmp_path, "2015 367 0 1.0\n", columns=columns)[0]
    assert "there is no column 'year'" in faults_of(tmp_path, "366 1.0\n", columns=("day_of_year", "pressure"))[0]
