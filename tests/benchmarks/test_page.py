"""docs/benchmarks.md lists what the benchmarks of today measure."""

import importlib.util
import re
from pathlib import Path
from types import ModuleType

import pytest

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def script() -> ModuleType:
    found = importlib.util.spec_from_file_location("make_benchmarks", ROOT / "docs/make_benchmarks.py")
    assert found is not None
    assert found.loader is not None
    module = importlib.util.module_from_spec(found)
    found.loader.exec_module(module)
    return module


def test_a_row_says_what_is_wanted(script: ModuleType) -> None:
    row = {"what": "a", "beside": "b", "ratio": 1.2345, "most": 1.5}
    text = script.page([row, {**row, "most": -500.0}, {**row, "most": None}], "here")
    assert "| a | b | 1.23 | at most 1.5 |" in text
    assert "| a | b | 1.23 | at least 500 |" in text
    assert "| a | b | 1.23 |  |" in text


def test_every_number_of_the_page_is_as_wanted() -> None:
    rows = re.findall(
        r"\| ([\d.e+]+) \| (at most|at least) ([\d.]+) \|", (ROOT / "docs/benchmarks.md").read_text("utf-8")
    )
    assert len(rows) > 8
    for ratio, side, limit in rows:
        assert float(ratio) <= float(limit) if side == "at most" else float(ratio) >= float(limit)
