"""Every fault of a record file has its own exact message, whether the file is text, NetCDF or MATLAB."""

from collections.abc import Callable
from datetime import datetime
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from scipy.io import savemat

from massfit.errors import InputError
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.records.clean import usable_samples

ROWS = "".join(f"2014-01-{day:02d}T12:00:00Z,{day / 8}\n" for day in range(1, 29))
HEAD = "time,pressure\n"
ENTRY = {"units": "hPa", "delimiter": ","}
PARTS = "year month day hour pressure\n"
PARTS_ENTRY = {"units": "hPa"}

# name: (text of the file, how it is read, messages)
TEXT: dict[str, tuple[str, dict[str, Any], list[str]]] = {
    "no units": (HEAD + ROWS, {"delimiter": ","},
        ["a.txt: units: a text record does not say its unit. State `units`, for example units = "
         '"dbar".']),
    "unknown unit": (HEAD + ROWS, {"units": "hpa", "delimiter": ","},
        ["a.txt: units: unknown unit 'hpa'. Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, "
         "psi, psia, mm, cm, m. Did you mean 'hPa'?"]),
    "height without density": (HEAD + ROWS, {"units": "cm", "delimiter": ","},
        ["a.txt: units: 'cm' is a height of water and its density is None. Must be positive, kg m-3. "
         "State density_kg_m3."]),
    "empty file": ("", ENTRY,
        ["a.txt: the file has no row of data. Check the file and `comment`."]),
    "comments only": ("# a\n# b\n", ENTRY,
        ["a.txt: the file has no row of data. Check the file and `comment`."]),
    "header only": (HEAD, ENTRY,
        ["a.txt: the file has no row of data. Check the file and `comment`."]),
    "no header": (ROWS, ENTRY,
        ["a.txt:1: columns: no header line: the first row is ['2014-01-01T12:00:00Z', '0.125']. "
         'State `columns`, for example columns = ["time", "pressure"].']),
    "wrong delimiter": (HEAD.replace(",", ";") + ROWS.replace(",", ";"), ENTRY,
        ["a.txt: time_column: there is no column 'time'. The columns are time;pressure. State "
         "`time_column` or `columns`."]),
    "delimiter not stated": (HEAD + ROWS, {"units": "hPa"},
        ["a.txt:1: delimiter: columns are split at white space, but the row holds ','. State "
         "`delimiter`, for example delimiter = ','."]),
    "column that is not there": (HEAD + ROWS, {**ENTRY, "variable": "presure"},
        ["a.txt: variable: there is no column 'presure'. The columns are time, pressure. Did you "
         "mean 'pressure'?"]),
    "time column that is not there": (HEAD + ROWS, {**ENTRY, "time_column": "tim"},
        ["a.txt: time_column: there is no column 'tim'. The columns are time, pressure. Did you mean "
         "'time'?"]),
    "two columns for one meaning": (
        "1 1 3.0\n", {"units": "hPa", "columns": ("time", "pressure", "pressure")},
        ["a.txt: columns: 'pressure' stands for more than one column. Must be unique. Rename one."]),
    "columns that do not fit": (ROWS, {**ENTRY, "columns": ("time", "quality", "pressure")},
        ["a.txt:1: columns: the row has 2 fields and `columns` names 3. Must agree. Name every "
         "column in order."]),
    "kinds without a column": (HEAD + ROWS, {**ENTRY, "keep_kinds": ("A",)},
        ["a.txt: keep_kinds: there is no column 'kind'. The columns are time, pressure. State "
         "`keep_kinds` or `columns`."]),
    "kinds that do not occur": (
        "time kind pressure\n2014-01-01T12:00:00Z A 3.0\n", {"units": "hPa", "keep_kinds": ("B",)},
        ["a.txt: pressure: none of the 0 samples is valid. Check `missing` and the file."]),
    "a row too short": (HEAD + ROWS.replace("2014-01-05T12:00:00Z,", "2014-01-05T12:00:00Z"), ENTRY,
        ["a.txt:6: fields in the row: the value is 1. Must be 2. Correct it."]),
    "rows too long": (HEAD + ROWS.replace(",0.5", ",0.5,7").replace(",0.75", ",0.75,7"), ENTRY,
        ["a.txt:5: fields in the row: the value is 3 (and 1 more lines). Must be 2. Correct it."]),
    "a word for a number": (HEAD + ROWS.replace(",0.5", ",low"), ENTRY,
        ["a.txt:5: pressure: the value is 'low'. Must be a number, or empty. Correct it."]),
    "a decimal comma": ("time;pressure\n2014-01-01T12:00:00Z;3,25\n", {"units": "hPa", "delimiter": ";"},
        ["a.txt:2: pressure: the value is '3,25'. Must be a number, or empty. Correct it."]),
    "an infinite pressure": (HEAD + ROWS.replace(",0.5", ",1e999"), ENTRY,
        ["a.txt:5: pressure: the value is inf. Must be a number, or empty. Correct it."]),
    "no valid sample": (
        "time,pressure\n2014-01-01T12:00:00Z,-999\n2014-01-02T12:00:00Z,-999\n", {**ENTRY, "missing": (-999.0,)},
        ["a.txt: pressure: none of the 2 samples is valid. Check `missing` and the file."]),
    "a day that is not": (HEAD + ROWS.replace("2014-01-05", "2014-02-30"), ENTRY,
        ["a.txt:6: time: the value is '2014-02-30T12:00:00Z'. Must be ISO 8601, UTC. Correct it or "
         "state `time_format`."]),
    "an hour that is not": (HEAD + ROWS.replace("05T12", "05T25"), ENTRY,
        ["a.txt:6: time: the value is '2014-01-05T25:00:00Z'. Must be ISO 8601, UTC. Correct it or "
         "state `time_format`."]),
    "a time of another form": (HEAD + ROWS.replace("2014-01-05T12:00:00Z", "5 Jan 2014"), ENTRY,
        ["a.txt:6: time: the value is '5 Jan 2014'. Must be ISO 8601, UTC. Correct it or state "
         "`time_format`."]),
    "a year of another age": (HEAD + ROWS.replace("2014-01-05", "1014-01-05"), ENTRY,
        ["a.txt:6: time: the value is '1014-01-05T12:00:00Z'. Must be ISO 8601, UTC. Correct it or "
         "state `time_format`."]),
    "the format does not fit": (HEAD + ROWS, {**ENTRY, "time_format": "%d/%m/%Y"},
        ["a.txt:2: time: the value is '2014-01-01T12:00:00Z' (and 27 more lines). Must be of the "
         "form '%d/%m/%Y'. Correct it or state `time_format`."]),
    "a format without a year": (HEAD + ROWS, {**ENTRY, "time_format": "%H:%M"},
        ["a.txt: time_format: '%H:%M' is not a time format. Must be 'iso', a strptime format with a "
         "year, or like 'days since 1950-01-01'."]),
    "a format that is none": (HEAD + ROWS, {**ENTRY, "time_format": "%Y %Q"},
        ["a.txt: time_format: '%Y %Q' is not a time format ('Q' is a bad directive in format '%Y "
         "%Q'). Use the directives of strptime."]),
    "a count that is no number": (HEAD + ROWS, {**ENTRY, "time_format": "days since 1950-01-01"},
        ["a.txt:2: time: the value is '2014-01-01T12:00:00Z' (and 27 more lines). Must be a number "
         "of days since 1950-01-01. Correct it or state `time_format`."]),
    "a count since no date": (HEAD + ROWS, {**ENTRY, "time_format": "days since 1950-02-30"},
        ["a.txt: time_format: 'days since 1950-02-30' counts from no date (Day out of range in "
         'datetime string "1950-02-30"). Must be like \'days since 1950-01-01\'.']),
    "a year of two digits": (PARTS + "14 1 5 12 3.0\n", PARTS_ENTRY,
        ["a.txt:2: year: the value is 14. Must be within [1900, 2200]. Write years with four digits."]),
    "a month that is not": (PARTS + "2014 13 5 12 3.0\n2014 0 5 12 3.0\n", PARTS_ENTRY,
        ["a.txt:2: month: the value is 13 (and 1 more lines). Must be within [1, 12]. Correct it."]),
    "hour and month that are not": (PARTS + "2014 13 5 24 3.0\n", PARTS_ENTRY,
        ["a.txt:2: month: the value is 13. Must be within [1, 12]. Correct it.",
         "a.txt:2: hour: the value is 24. Must be within [0, 23]. Correct it."]),
    "a day the month does not have": (PARTS + "2014 4 31 12 3.0\n", PARTS_ENTRY,
        ["a.txt:2: day: the value is 31. Must be a day of its month. Correct it."]),
    "a part of a day": (PARTS + "2014 4 1.5 12 3.0\n", PARTS_ENTRY,
        ["a.txt:2: day: the value is 1.5. Must be within [1, 31]. Correct it."]),
    "a date without a day": ("year month pressure\n2014 4 3.0\n", PARTS_ENTRY,
        ["a.txt: columns: there is no column 'day'. The columns are year, month, pressure. State "
         "`columns`."]),
    "null characters": (HEAD + ROWS.replace(",0.5", ",0\0.5"), ENTRY,
        ["a.txt:5: pressure: the value is '0\\x00.5'. Must be a number, or empty. Correct it."]),
    "a terminal sequence": (HEAD + ROWS.replace(",0.5", ",\x1b[2J"), ENTRY,
        ["a.txt:5: pressure: the value is '\\x1b[2J'. Must be a number, or empty. Correct it."]),
    "text of another encoding": (HEAD + ROWS.replace(",0.5", ",0\udce9"), ENTRY,
        ["a.txt:5: pressure: the value is '0�'. Must be a number, or empty. Correct it."]),
    "a line without end": (HEAD + ROWS + "1" * 200_000, ENTRY,
        ["a.txt:30: the line has 100000 characters or more. Must be rows of a few numbers. Check the "
         "file."]),
    "a flag of no scheme": ("time,pressure,flag\n2014-01-01T12:00:00Z,3.0,0\n2014-01-02T12:00:00Z,3.0,1\n", ENTRY,
        ["a.txt: flag: the flag 0 stands 1 times and nothing says whether such samples are good. Must be "
         "a number of QARTOD: 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing. State `keep_flags`, or "
         'flag_variable = "none" to use none.']),
    "a flag that is a word": ("time,pressure,flag\n2014-01-01T12:00:00Z,3.0,good\n", ENTRY,
        ["a.txt:2: flag: the value is 'good'. Must be a whole number, or empty. Correct it, call a column "
         'of letters `kind` and state `keep_kinds`, or flag_variable = "none".']),
    "a flag between two": ("time,pressure,flag\n2014-01-01T12:00:00Z,3.0,1.5\n", ENTRY,
        ["a.txt:2: flag: the value is 1.5. Must be a whole number, or empty. Correct it, call a column "
         'of letters `kind` and state `keep_kinds`, or flag_variable = "none".']),
    "only flags that are left out": ("time,pressure,flag\n2014-01-01T12:00:00Z,3.0,4\n", ENTRY,
        ["a.txt: flag: all 1 samples have flags that are left out. Must be a number of QARTOD: 1 pass, 2 "
         "not evaluated, 3 suspect, 4 fail, 9 missing. State `keep_flags`, or flag_variable = \"none\" to "
         "use none."]),
    "a column of flags that is not there": (HEAD + ROWS, {**ENTRY, "flag_variable": "qc"},
        ["a.txt: flag_variable: there is no column 'qc'. The columns are time, pressure. State "
         "`flag_variable` or `columns`."]),
    "a zone in the header": ("# time zone: HST\n" + HEAD + ROWS.replace("Z", ""), ENTRY,
        ["a.txt:1: time: the file says that its times are in 'HST'. Must be UTC. State utc_offset_hours = "
         "-10; 0 if they are UTC."]),
    "a zone in the stamps": (HEAD + ROWS.replace("Z", " JST"), ENTRY,
        ["a.txt:2: time: the file says that its times are in 'JST'. Must be UTC. State utc_offset_hours = "
         "9; 0 if they are UTC."]),
    "another zone than stated": (HEAD + ROWS.replace("Z", " CEST"), {**ENTRY, "utc_offset_hours": 1.0},
        ["a.txt:2: time: the file says that its times are in 'CEST' and utc_offset_hours is 1. Must agree. "
         "Correct it; 0 if they are UTC."]),
    "an offset taken off twice": (HEAD + ROWS.replace("Z", "+02:00"), {**ENTRY, "utc_offset_hours": 2.0},
        ["a.txt:2: time: the stamp '2014-01-01T12:00:00+02:00' has an offset and utc_offset_hours is 2. "
         "Must be one of the two. Remove the key."]),
    "a 61st second": (HEAD + ROWS.replace("05T12:00:00", "05T12:00:61"), ENTRY,
        ["a.txt:6: time: the value is '2014-01-05T12:00:61Z'. Must be ISO 8601, UTC. Correct it or state "
         "`time_format`."]),
    "an interval without a start": ("pressure\n3.0\n", {"units": "hPa", "interval_s": 15.0},
        ["a.txt: time_column: there is no column 'time'. The columns are pressure. State `time_column` or "
         "`columns`."]),
    "a start without an interval": ("pressure\n3.0\n", {"units": "hPa", "start_time": datetime(2014, 1, 1)},
        ["a.txt: interval_s: the key is missing. start_time and interval_s go together. Add it."]),
    "an interval of years": (
        "pressure\n" + 90 * "3.0\n", {"units": "hPa", "start_time": datetime(2014, 1, 1), "interval_s": 1e8},
        ["a.txt: interval_s: 90 samples every 1e+08 s end in the year 2299. Must end before 2200. Correct it."]),
    "a factor of zero": (HEAD + ROWS, {**ENTRY, "scale_factor": 0.0},
        ["a.txt: scale_factor: the value is 0. Must not be 0. Correct it."]),
    "a unit in full": (HEAD + ROWS, {"units": "Pascal", "delimiter": ","},
        ["a.txt: units: unknown unit 'Pascal'. Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, psi, "
         "psia, mm, cm, m. Did you mean 'Pa'?"]),
    "noise": ("\x01\x02\x03" * 500, ENTRY,
        ["a.txt: the file is neither NetCDF, MATLAB nor text (it starts with "
         "b'\\x01\\x02\\x03\\x01\\x02\\x03\\x01\\x02'). Must be NetCDF, MATLAB or text. Check the path, or fetch it "
         "again."]),
    "a pickle": ("\x80\x04\x95cbuiltins\nprint\n(S'a'\ntR.", ENTRY,
        ["a.txt: time_column: there is no column 'time'. The columns are \\x80\\x04\\x95cbuiltins. "
         "State `time_column` or `columns`."]),
}  # fmt: skip


def message(folder: Path, **entry: Any) -> list[str]:
    try:
        read_record(folder, DeploymentFile("a.txt", **entry), site="A", deployment="A/1")
    except InputError as error:
        return str(error).splitlines()
    return []


@pytest.mark.parametrize("name", TEXT)
def test_text(name: str, tmp_path: Path) -> None:
    text, entry, expected = TEXT[name]
    (tmp_path / "a.txt").write_text(text, errors="surrogateescape", newline="")
    assert message(tmp_path, **entry) == expected


@pytest.mark.parametrize("rows", [ROWS + ROWS, "".join(2 * f"{line}\n" for line in ROWS.splitlines())])
def test_a_clock_that_starts_again_and_repeats_are_left_to_the_cleaning(rows: str, tmp_path: Path) -> None:
    (tmp_path / "a.txt").write_text(HEAD + rows)
    record = read_record(tmp_path, DeploymentFile("a.txt", **ENTRY), site="A", deployment="A/1")
    time, _, actions = usable_samples(record.time, record.pressure)
    assert record.time.size == 56
    assert time.size == 28
    assert ("repeated samples left out", 28) in [(action.what, action.count) for action in actions]


def small() -> xr.Dataset:
    attributes = {"units": "dbar", "standard_name": "sea_water_pressure_at_sea_floor"}
    return xr.Dataset(
        {"p": ("time", np.linspace(1.0, 2.0, 40), attributes)},
        {"time": ("time", np.arange(40.0), {"units": "days since 2014-01-01", "standard_name": "time"})},
    )


def attributes(dataset: xr.Dataset, variable: str, **changes: Any) -> xr.Dataset:
    """The same with other attributes of one variable; None takes one away."""
    new = {k: v for k, v in {**dataset[variable].attrs, **changes}.items() if v is not None}
    out = dataset.copy()
    out[variable].attrs = new
    return out


def two_stations(*names: str) -> xr.Dataset:
    both = xr.concat([small().drop_vars("time"), small().drop_vars("time")], dim="station")
    both = both.assign_coords(time=small()["time"])
    return both.assign(name=("station", list(names), {"cf_role": "timeseries_id"})) if names else both


def flagged(**flags: Any) -> xr.Dataset:
    tied = attributes(small(), "p", ancillary_variables="q")
    return tied.assign(q=("time", np.ones(40, dtype=np.int32), flags))


def ragged(**counted: Any) -> xr.Dataset:
    attrs = {"row_size": {"sample_dimension": "time"}, "index": {"instance_dimension": "station"}}
    named = small().assign(name=("station", ["a", "b"], {"cf_role": "timeseries_id"}))
    return named.assign({key: (*value, attrs[key]) for key, value in counted.items()})


NETCDF: dict[str, tuple[Callable[[], xr.Dataset], dict[str, Any], list[str]]] = {
    "units missing": (lambda: attributes(small(), "p", units=None), {},
        ["a.txt: p: the variable has no units. State `units`."]),
    "units unknown": (lambda: attributes(small(), "p", units="db"), {},
        ["a.txt: p: unknown unit 'db'. Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, psi, "
         "psia, mm, cm, m. Did you mean 'dbar'?"]),
    "units in conflict": (small, {"units": "hPa"},
        ["a.txt: p: the units are 'dbar' in the file and 'hPa' in the network file. Must agree. "
         "Correct the wrong one."]),
    "height without density": (lambda: attributes(small(), "p", units="m"), {},
        ["a.txt: p: 'm' is a height of water and its density is None. Must be positive, kg m-3. "
         "State density_kg_m3."]),
    "unit that is a number": (lambda: attributes(small(), "p", units=3.0), {},
        ["a.txt: p: unknown unit '3.0'. Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, psi, "
         "psia, mm, cm, m. Convert the data to one of these."]),
    "calendar of equal months": (lambda: attributes(small(), "time", calendar="360_day"), {},
        ["a.txt: time: the calendar of 'time' is '360_day'. Must be one of standard, gregorian, "
         "proleptic_gregorian. Convert them."]),
    "calendar without leap days": (lambda: attributes(small(), "time", calendar="noleap"), {},
        ["a.txt: time: the calendar of 'time' is 'noleap'. Must be one of standard, gregorian, "
         "proleptic_gregorian. Convert them."]),
    "calendar that is none": (lambda: attributes(small(), "time", calendar="lunar"), {},
        ["a.txt: time: the calendar of 'time' is 'lunar'. Must be one of standard, gregorian, "
         "proleptic_gregorian. Convert them."]),
    "time without units": (lambda: attributes(small(), "time", units=None), {},
        ["a.txt: time: time variables along 'p': none. Must be one, with units like 'seconds since "
         "1970-01-01' and the standard name time. Add or correct these attributes."]),
    "time since no date": (lambda: attributes(small(), "time", units="days since launch"), {},
        ["a.txt: time: the times in 'days since launch' cannot be decoded. Must be like 'seconds "
         "since 1970-01-01', in the years 1678 to 2262. Correct the units of the time."]),
    "time in no unit": (lambda: attributes(small(), "time", units="moons since 2014-01-01"), {},
        ["a.txt: time: the times in 'moons since 2014-01-01' cannot be decoded. Must be like "
         "'seconds since 1970-01-01', in the years 1678 to 2262. Correct the units of the time."]),
    "time of another age": (lambda: attributes(small(), "time", units="days since 0001-01-01"), {},
        ["a.txt: time: the times in 'days since 0001-01-01' cannot be decoded. Must be like 'seconds "
         "since 1970-01-01', in the years 1678 to 2262. Correct the units of the time."]),
    "no pressure": (lambda: small().rename(p="q").pipe(attributes, "q", units="degC", standard_name=None), {},
        ["a.txt: variable: no variable is recognised as pressure at the sea floor. Recognised by the "
         "standard names sea_water_pressure_at_sea_floor, sea_water_pressure, "
         "sea_water_pressure_due_to_sea_water or by a unit of pressure. State `variable`; the file "
         "has q, time."]),
    "two pressures": (lambda: small().assign(q=small()["p"]), {},
        ["a.txt: variable: more than one variable can be the pressure: p, q. Must be one. State "
         "`variable`."]),
    "variable that is not there": (small, {"variable": "P"},
        ["a.txt: variable: 'P' is not in the file. Must be one of p, time. Correct or remove "
         "`variable`."]),
    "variable without numbers": (lambda: small().assign(q=("time", ["a"] * 40)), {"variable": "q"},
        ["a.txt: variable: 'q' is not in the file. Must be one of p, time. Correct or remove "
         "`variable`."]),
    "station not chosen": (lambda: two_stations("north", "south"), {},
        ["a.txt: station: the file holds 2 stations and none was chosen. Must be one of north, "
         "south. State `station`."]),
    "station that is not there": (lambda: two_stations("north", "south"), {"station": "nort"},
        ["a.txt: station: 'nort' is not in the file. Must be one of north, south. Did you mean "
         "'north'?"]),
    "stations without names": (two_stations, {"station": "north"},
        ["a.txt: station: 'north' is not in the file. Must be one of none. Correct or remove "
         "`station`."]),
    "station of a file without stations": (small, {"station": "north"},
        ["a.txt: station: 'north' is not in the file. Must be one of none. Correct or remove "
         "`station`."]),
    "too many dimensions": (lambda: small().expand_dims(level=2, member=2), {},
        ["a.txt: p: 'p' has the dimensions ('level', 'member', 'time'). Must be time and at most "
         "station. Write one series to a file of its own."]),
    "only fill values": (lambda: attributes(small(), "p", valid_min=5.0), {},
        ["a.txt: pressure: none of the 40 samples is valid. Check `missing` and the file."]),
    "scale that is a word": (lambda: attributes(small(), "p", scale_factor="ten"), {},
        ["a.txt: p: scale_factor is 'ten'. Must be a number. Correct the attribute."]),
    "fill value that is a word": (lambda: attributes(small(), "p", missing_value="none"), {},
        ["a.txt: p: missing_value is 'none'. Must be a number. Correct the attribute."]),
    "range of three": (lambda: attributes(small(), "p", valid_range=[0.0, 1.0, 2.0]), {},
        ["a.txt: p: valid_range is [0.0, 1.0, 2.0]. Must be two numbers. Correct the attribute."]),
    "zone in the attributes": (lambda: attributes(small(), "time", time_zone="UTC+05:30"), {},
        ["a.txt: time: the file says that its times are in 'UTC+05:30'. Must be UTC. State utc_offset_hours "
         "= 5.5; 0 if they are UTC."]),
    "flags that are not there": (small, {"flag_variable": "p_qc"},
        ["a.txt: flag_variable: 'p_qc' is not in the file. Must be numbers along ('time',): time. Correct it."]),
    "flags that are bits": (lambda: flagged(flag_masks=[1, 2], flag_meanings="a b"), {},
        ["a.txt: q: its flags are bits (flag_masks), of which a sample may have several. Read by default are "
         'flag_values. State `keep_flags`, the numbers of good samples, or flag_variable = "none".']),
    "flags with a word too few": (lambda: flagged(flag_values=[1, 2, 3], flag_meanings="pass fail"), {},
        ["a.txt: q: there are 3 flag_values and 2 flag_meanings. Must be as many. Correct them, or state "
         '`keep_flags` and drop one; flag_variable = "none" uses no flags.']),
    "flags with a word that says nothing": (lambda: flagged(flag_values=[1, 2], flag_meanings="blue red"), {},
        ["a.txt: q: the flag 1 (blue) stands 40 times and nothing says whether such samples are good. The file "
         'says 1 blue, 2 red. State `keep_flags`, or flag_variable = "none" to use none.']),
    "stations of more samples than there are": (lambda: ragged(row_size=("station", [25, 25])), {"station": "a"},
        ["a.txt: row_size: the stations have 25, 25... samples, 50 in all. Must be none below 0, and 40 in all, "
         "the length of 'time'. Fetch it again, or write one file a station."]),
    "samples of no station": (lambda: ragged(index=("time", [0, 1, 2, 3] * 10)), {"station": "a"},
        ["a.txt: index: 20 samples are of no station, the first of 2. Must be within [0, 1]. Fetch it again."]),
    "time variable that is not there": (small, {"time_variable": "t"},
        ["a.txt: time_variable: 't' is not in the file. Must be one of time. Correct or remove `time_variable`."]),
    "no samples": (lambda: small().isel(time=slice(0)), {},
        ["a.txt: pressure: none of the 0 samples is valid. Check `missing` and the file."]),
}  # fmt: skip


@pytest.mark.parametrize("engine", ["h5netcdf", "scipy"])
@pytest.mark.parametrize("name", NETCDF)
def test_netcdf(name: str, engine: Any, tmp_path: Path) -> None:
    make, entry, expected = NETCDF[name]
    made = make()
    for variable in made.variables.values():
        variable.encoding["_FillValue"] = None
    made.to_netcdf(tmp_path / "a.txt", engine=engine)
    assert message(tmp_path, **entry) == expected


DAYS = 735_600.0 + np.arange(5.0)
VALUES = np.arange(5.0)
MATLAB: dict[str, tuple[dict[str, Any], dict[str, Any], list[str]]] = {
    "no units": ({"p": VALUES, "t": DAYS}, {"time_variable": "t"},
        ["a.txt: units: a MATLAB record does not say its unit. State `units`, for example units = \"dbar\"."]),
    "no time": ({"p": VALUES}, {"units": "Pa"},
        ["a.txt: time: nothing says what the times are. State `time_variable`, or `start_time` and `interval_s`; the "
         "file has p."]),
    "two pressures": ({"p": VALUES, "q": VALUES, "t": DAYS}, {"units": "Pa", "time_variable": "t"},
        ["a.txt: variable: more than one variable can be the pressure: p, q. Must be one. State `variable`; the file "
         "has p, q, t."]),
    "no vector": ({"p": "text"}, {"units": "Pa", "time_variable": "t"},
        ["a.txt: variable: no vector of numbers. Must be one. State `variable`; the file has no numbers.",
         "a.txt: time_variable: there is no array of numbers 't' in the file. Its arrays of real numbers are none. "
         "Correct `time_variable`."]),
    "misspelt": ({"press": VALUES, "t": DAYS}, {"units": "Pa", "variable": "pres", "time_variable": "t"},
        ["a.txt: variable: there is no array of numbers 'pres' in the file. Its arrays of real numbers are press, t. "
         'Did you mean "press"?']),
    "a matrix": ({"p": np.ones((5, 2)), "t": DAYS}, {"units": "Pa", "variable": "p", "time_variable": "t"},
        ["a.txt: variable: 'p' has the shape (5, 2). Must be a vector. Write one series to a variable of its own."]),
    "another length": ({"p": VALUES, "t": DAYS[:4]}, {"units": "Pa", "variable": "p", "time_variable": "t"},
        ["a.txt: t: it has 4 values and 'p' has 5. Must agree."]),
    "seconds as days": ({"p": VALUES, "t": 1e9 + VALUES}, {"units": "Pa", "variable": "p", "time_variable": "t"},
        ["a.txt: t: element 1 is 1000000000 (and 4 more). Must be a number of datenum in the years 1900 to 2200. "
         "Correct it or state `time_format`."]),
    "a format of text": (
        {"p": VALUES, "t": DAYS}, {"units": "Pa", "variable": "p", "time_variable": "t", "time_format": "%Y"},
        ["a.txt: time_format: '%Y' is not a count of time. Must be 'datenum' or like 'seconds since 1970-01-01'. "
         "Correct it."]),
}  # fmt: skip


@pytest.mark.parametrize("name", MATLAB)
def test_matlab(name: str, tmp_path: Path) -> None:
    variables, entry, expected = MATLAB[name]
    savemat(tmp_path / "a.txt", variables, appendmat=False)
    assert message(tmp_path, **entry) == expected
