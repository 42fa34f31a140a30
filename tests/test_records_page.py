"""Every example of the page on preparing records is written and read as it stands there."""

import re
import tomllib
from pathlib import Path

import numpy as np
import pytest
from pydantic import TypeAdapter

from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_file import read_record
from massfit.records.record import Record

PAGE = (Path(__file__).parents[1] / "docs/records.md").read_text()
BLOCKS = re.findall(r"```\{code-block\} (\w+)\n:caption: (?:(reads|writes) )?(\S+)\n(.*?)```", PAGE, re.DOTALL)


def read_as_shown(name: str, folder: Path, monkeypatch: pytest.MonkeyPatch) -> Record:
    monkeypatch.chdir(folder)
    entries = []
    for language, _, file, content in BLOCKS:
        if file == name and language == "text":
            (folder / file).write_text(content)
        elif file == name and language == "python":
            exec(compile(content, file, "exec"), {})
        elif file == name and language == "toml":
            table = tomllib.loads(content)
            # a single value is a list of one in the network file, too
            table["missing"] = [table["missing"]] if isinstance(table.get("missing"), int) else table.get("missing", [])
            entries.append(TypeAdapter(DeploymentFile).validate_python(table))
    (entry,) = entries
    return read_record(folder, entry, site="A", deployment="A/1")


# name: (absolute pressure in Pa of the valid samples, what was said)
EXPECTED = {
    "K7.csv": ([48_711_250.0, 48_712_500.0], []),
    "K8.txt": ([1040 * 9.80665 * height for height in (5263.646, 5263.545)], ["rows of other kinds left out"]),
    "K9.txt": ([4_100.8e4, 4_100.6e4, 4_100.7e4], []),
    "stations.nc": (None, ["samples with flag 3 (suspect) left out", "samples with flag 4 (fail) left out"]),
    "depth.mat": ([1030 * 9.80665 * depth for depth in (1509.7, 1509.697, 1509.696)], []),
    "L1.csv": ([48_711_250.0], ["samples with flag 2 (not evaluated) left out", "samples with flag 4 (fail) left out"]),
    "L2.csv": ([48_711_250.0, 48_712_500.0, 48_713_750.0], ["times brought to UTC", "clock corrected"]),
}


@pytest.mark.parametrize("name", EXPECTED)
def test_an_example_reads_as_it_stands(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    record = read_as_shown(name, tmp_path, monkeypatch)
    pressure, said = EXPECTED[name]
    valid = record.pressure[np.isfinite(record.pressure)] + record.reference
    if pressure is not None:
        np.testing.assert_allclose(valid, pressure, rtol=1e-12)
    assert [action.what for action in record.actions] == said


def test_no_example_is_left_out() -> None:
    assert {file for _, _, file, _ in BLOCKS} == set(EXPECTED)


def test_the_station_and_the_clock_are_those_that_were_asked_for(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # samples 20 to 47 of the file; 24 to 35 have flag 2, the four before flag 4, the rest flag 3
    record = read_as_shown("stations.nc", tmp_path, monkeypatch)
    assert record.time.size == 12
    assert record.time[0] == np.datetime64("2016-01-02T00:30")
    record = read_as_shown("L2.csv", tmp_path, monkeypatch)
    assert record.time[0] == np.datetime64("2016-01-01T10:30")
    assert record.time[-1] == np.datetime64("2016-01-01T12:28:57.500")
    assert read_as_shown("K9.txt", tmp_path, monkeypatch).time[1] == np.datetime64("2016-01-01T00:00:22.525")
