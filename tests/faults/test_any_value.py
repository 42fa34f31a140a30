"""Whatever stands behind a key, the reader answers with faults of that key and never with a traceback."""

import re
from pathlib import Path

import pytest

from massfit.errors import Fault, InputError
from massfit.io.network.network_file import read_network

VALUES = ["1", "-1.5", "true", '"x"', '""', "[]", "[1]", "{}", "[{}]", "2016-03-01", "07:30:00", "nan", '"a\\u0000b"']
PAIR = re.compile(r"^ *(\w+) = (.*)$", re.MULTILINE)


def pairs(text: str) -> list[tuple[str, int, int]]:
    """Keys of single-line pairs, and where their values stand."""
    return [(match[1], match.start(2), match.end(2)) for match in PAIR.finditer(text)]


def faults_of(folder: Path) -> tuple[Fault, ...]:
    try:
        read_network(folder)
    except InputError as error:
        return error.faults
    return ()


@pytest.mark.parametrize("stride", [9, pytest.param(1, marks=pytest.mark.slow)])
@pytest.mark.parametrize("value", VALUES)
def test_any_value_behind_any_key(network_folder: Path, value: str, stride: int) -> None:
    file = network_folder / "network.toml"
    text = file.read_text()
    refused = 0
    for key, start, end in pairs(text)[VALUES.index(value) % stride :: stride]:
        file.write_text(text[:start] + value + text[end:])
        faults = faults_of(network_folder)
        refused += bool(faults)
        assert {fault.source for fault in faults} <= {str(file), "records/a.csv", "records/b.nc"}
        line = text.count("\n", 0, start) + 1
        at_home = [fault for fault in faults if fault.line == line or fault.source != str(file)]
        assert bool(at_home) == bool(faults), f"no fault on the line of {key} = {value}: {faults}"
    # names, groups, depths and the like take many values; files, choices and places do not
    assert refused >= 12 // stride


@pytest.mark.parametrize("section", ["network", "site", "corrections", "circulation", "fingerprint", "gravity"])
@pytest.mark.parametrize("value", VALUES)
def test_any_value_for_a_section(tmp_path: Path, section: str, value: str) -> None:
    (tmp_path / "network.toml").write_text(f"{section} = {value}\n")
    assert faults_of(tmp_path)
