import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.guess.starter_file import begin_network
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.flags import _is_good
from massfit.io.records.record_file import read_record
from massfit.pipeline.check import check_network
from massfit.records.record import Record

HOURS = 40
TIME = np.datetime64("2016-01-01T00:30", "ns") + np.arange(HOURS) * np.timedelta64(1, "h")
FLAGS = np.ones(HOURS, dtype=np.int8)
FLAGS[[1, 2]], FLAGS[3], FLAGS[[4, 5, 6]], FLAGS[7] = 2, 3, 4, 9
QARTOD = {"flag_values": np.array([1, 2, 3, 4, 9], np.int8), "flag_meanings": "PASS NOT_EVALUATED SUSPECT FAIL MISSING"}
COUNTED = [("3 (suspect)", 1), ("4 (fail)", 3), ("9 (missing)", 1)]


def dataset(flags: dict[str, tuple[Any, dict[str, Any]]], tied: str | None = "p_qc") -> xr.Dataset:
    attributes = {"units": "dbar", "standard_name": "sea_water_pressure_at_sea_floor"}
    if tied is not None:
        attributes["ancillary_variables"] = tied
    variables = {name: ("time", values, attrs) for name, (values, attrs) in flags.items()}
    return xr.Dataset({"p": ("time", np.arange(HOURS) / 8.0, attributes), **variables}, {"time": TIME})


def read(folder: Path, made: xr.Dataset, **entry: Any) -> Record:
    for variable in made.variables.values():
        variable.encoding.setdefault("_FillValue", None)
    made.to_netcdf(folder / "a.nc", engine="h5netcdf")
    return read_record(folder, DeploymentFile("a.nc", **entry), site="A", deployment="A/1")


def read_text(folder: Path, header: str, flags: list[str], **entry: Any) -> Record:
    stamps = zip(TIME.astype("datetime64[s]"), flags, strict=True)
    rows = "".join(f"{stamp},{k / 8},{flag}\n" for k, (stamp, flag) in enumerate(stamps))
    (folder / "a.csv").write_text(header + rows)
    settings = {"units": "dbar", "delimiter": ",", **entry}
    return read_record(folder, DeploymentFile("a.csv", **settings), site="A", deployment="A/1")


def dropped(record: Record) -> list[tuple[str, int]]:
    marked = [action for action in record.actions if action.what.startswith("samples with flag")]
    return [(each.what.removeprefix("samples with flag ").removesuffix(" left out"), each.count) for each in marked]


def assert_only_good(record: Record) -> None:
    values = (record.pressure + record.reference) / 1e4
    np.testing.assert_allclose(values, np.arange(HOURS)[FLAGS <= 2] / 8.0, atol=1e-9)
    np.testing.assert_array_equal(record.time, TIME[FLAGS <= 2])


@pytest.mark.parametrize(
    "attributes",
    [QARTOD, {"standard_name": "aggregate_quality_flag"}, {"standard_name": "sea_water_pressure status_flag"}],
    ids=["meanings", "quality_flag", "status_flag"],
)
def test_status_flags_of_a_netcdf_file(attributes: dict[str, Any], tmp_path: Path) -> None:
    record = read(tmp_path, dataset({"p_qc": (FLAGS, attributes)}))
    assert_only_good(record)
    expected = [(name.upper(), count) for name, count in COUNTED] if attributes is QARTOD else COUNTED
    assert dropped(record) == expected
    assert record.actions[0].detail == "p_qc; kept: 1, 2"


def test_a_text_column_called_flag(tmp_path: Path) -> None:
    record = read_text(tmp_path, "time,pressure,flag\n", FLAGS.astype(str).tolist())
    assert_only_good(record)
    assert dropped(record) == COUNTED
    # another name has to be stated
    named = read_text(tmp_path, "time,pressure,qc\n", FLAGS.astype(str).tolist(), flag_variable="qc")
    np.testing.assert_array_equal(named.pressure, record.pressure)
    assert read_text(tmp_path, "time,pressure,qc\n", FLAGS.astype(str).tolist()).time.size == HOURS


def test_which_flags_are_kept_is_a_choice(tmp_path: Path) -> None:
    made = dataset({"p_qc": (FLAGS, QARTOD)})
    record = read(tmp_path, made, keep_flags=(1, 3))
    assert dropped(record) == [("2 (NOT_EVALUATED)", 2), ("4 (FAIL)", 3), ("9 (MISSING)", 1)]
    assert read(tmp_path, made, flag_variable="none").time.size == HOURS


def test_the_words_of_a_file_are_believed_before_its_numbers(tmp_path: Path) -> None:
    # a scheme in which 0 and 2 are good: by number alone 1 would be kept
    words = "no_qc_performed bad_data probably_good_data interpolated_value"
    scheme = {"flag_values": np.array([0, 1, 2, 8], np.int8), "flag_meanings": words}
    values = np.array([0, 1, 2, 2] * 10, dtype=np.int8)
    assert dropped(read(tmp_path, dataset({"p_qc": (values, scheme)}))) == [("1 (bad_data)", 10)]
    values[0] = 8
    with pytest.raises(InputError, match=r"p_qc: the flag 8 \(interpolated_value\) stands 1 times"):
        read(tmp_path, dataset({"p_qc": (values, scheme)}))
    assert read(tmp_path, dataset({"p_qc": (values, scheme)}), keep_flags=(0, 2, 8)).time.size == HOURS - 10


@pytest.mark.parametrize(
    ("meaning", "good"),
    [
        ("good_data", True), ("NOT_EVALUATED", True), ("no_qc_performed", True), ("probably_good", True),
        ("unknown", True),
        ("not evaluated/not available/unknown", True), ("passed_all_tests", True), ("bad_data", False), ("Fail", False),
        ("not_good", False), ("probably_bad_data", False), ("suspect_or_high_interest", False), ("failed_qc", False),
        ("interpolated", None), ("value_changed", None), ("estimated", None),
    ],
)  # fmt: skip
def test_what_the_words_of_a_file_say(meaning: str, good: bool | None) -> None:
    assert _is_good(meaning) is good


def test_a_number_that_is_no_flag_of_qartod_is_asked_about(tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        read_text(tmp_path, "time,pressure,flag\n", ["0"] * HOURS)
    assert str(caught.value) == (
        "a.csv: flag: the flag 0 stands 40 times and nothing says whether such samples are good. Must be a number of "
        'QARTOD: 1 pass, 2 not evaluated, 3 suspect, 4 fail, 9 missing. State `keep_flags`, or flag_variable = "none" '
        "to use none."
    )


def test_samples_without_a_flag_are_kept_and_counted(tmp_path: Path) -> None:
    record = read_text(tmp_path, "time,pressure,flag\n", ["", *FLAGS[1:].astype(str).tolist()])
    assert record.time.size == np.count_nonzero(FLAGS <= 2)
    assert ("samples without a flag kept", 1) in [(action.what, action.count) for action in record.actions]
    filled = FLAGS.copy()
    filled[0] = -127
    made = dataset({"p_qc": (filled, QARTOD)})
    made["p_qc"].encoding["_FillValue"] = np.int8(-127)
    record = read(tmp_path, made)
    assert ("samples without a flag kept", 1) in [(action.what, action.count) for action in record.actions]


def test_of_several_flags_the_aggregate_counts_and_else_every_one(tmp_path: Path) -> None:
    gross, spikes = FLAGS.copy(), np.ones(HOURS, dtype=np.int8)
    gross[FLAGS == 3] = 1
    spikes[3] = 3
    tests = {
        "gross": (gross, {"standard_name": "gross_range_test_quality_flag"}),
        "spikes": (spikes, {"standard_name": "spike_test_quality_flag"}),
    }
    assert_only_good(read(tmp_path, dataset(tests, "gross spikes")))
    whole = {**tests, "all": (np.where(FLAGS == 2, 4, 1).astype(np.int8), {"standard_name": "aggregate_quality_flag"})}
    assert dropped(read(tmp_path, dataset(whole, "gross spikes all"))) == [("4 (fail)", 2)]


def test_flags_that_nothing_ties_to_the_pressure_are_named(tmp_path: Path) -> None:
    record = read(tmp_path, dataset({"quality": (FLAGS, QARTOD)}, tied=None))
    assert record.time.size == HOURS
    assert [(action.what, action.detail) for action in record.actions] == [
        ("flags not used", "quality: `flag_variable` may name it")
    ]
    assert_only_good(read(tmp_path, dataset({"quality": (FLAGS, QARTOD)}, tied=None), flag_variable="quality"))


def test_flags_of_the_chosen_station_of_a_ragged_file(tmp_path: Path) -> None:
    both = xr.Dataset(
        {
            "p": ("obs", np.tile(np.arange(HOURS) / 8.0, 2), dataset({}).p.attrs),
            "p_qc": ("obs", np.append(np.full(HOURS, 4, np.int8), FLAGS), QARTOD),
            "time": ("obs", np.tile(TIME, 2), {"standard_name": "time"}),
            "n": ("station", [HOURS, HOURS], {"sample_dimension": "obs"}),
            "id": ("station", np.array([b"a", b"b"]), {"cf_role": "timeseries_id"}),
        }
    )
    assert_only_good(read(tmp_path, both, station="b"))
    with pytest.raises(InputError, match="all 40 samples have flags that are left out"):
        read(tmp_path, both, station="a")


def test_bits_are_not_taken_for_numbers(tmp_path: Path) -> None:
    bits = {"flag_masks": np.array([1, 2, 4], np.int8), "flag_meanings": "low_battery spike gap"}
    with pytest.raises(InputError, match="its flags are bits"):
        read(tmp_path, dataset({"p_qc": (np.zeros(HOURS, np.int8), bits)}))
    assert read(tmp_path, dataset({"p_qc": (np.zeros(HOURS, np.int8), bits)}), keep_flags=(0,)).time.size == HOURS


def test_check_lists_the_flags_that_were_left_out(network_folder: Path, change: Callable[[str, str], None]) -> None:
    path = network_folder / "records/a.csv"
    rows = path.read_text().splitlines()
    path.write_text("".join(f"{row},{4 if k % 40 == 0 else 1}\n" for k, row in enumerate(rows)))
    change('columns = ["date", "pressure"]', 'columns = ["date", "pressure", "flag"]')
    (site, _) = check_network(network_folder).found["sites"]
    (note,) = site["deployments"][0]["notes"]
    assert note == f"samples with flag 4 (fail) left out: {len(rows[::40])}, flag; kept: 1, 2"


def test_a_network_begun_from_a_ragged_file_has_its_stations_and_says_their_flags(tmp_path: Path) -> None:
    ragged = xr.Dataset(
        {
            "p": ("obs", np.tile(np.arange(HOURS) / 8.0, 2), dataset({}).p.attrs),
            "p_qc": ("obs", np.append(FLAGS, FLAGS), QARTOD),
            "time": ("obs", np.tile(TIME, 2), {"standard_name": "time"}),
            "k": ("obs", np.repeat([0, 1], HOURS), {"instance_dimension": "station"}),
            "id": ("station", np.array([b"a", b"b"]), {"cf_role": "timeseries_id"}),
        }
    )
    for variable in ragged.variables.values():
        variable.encoding["_FillValue"] = None
    ragged.to_netcdf(tmp_path / "a.nc", engine="h5netcdf")
    text = begin_network(tmp_path).text
    assert [site["id"] for site in tomllib.loads(text)["site"]] == ["a", "b"]
    assert text.count("# samples with flag 4 (FAIL) left out: 3 (p_qc; kept: 1, 2)") == 2
    ragged["p_qc"].attrs["flag_meanings"] = "green blue red black none"
    ragged.to_netcdf(tmp_path / "a.nc", engine="h5netcdf")
    text = begin_network(tmp_path).text
    assert text.count('keep_flags = ""  # fill in: a list of the flags of good samples: p_qc: the flag 1 (green)') == 2
