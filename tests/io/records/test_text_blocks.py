"""Reading many rows at once must give what reading them line by line gives, however the file is cut."""

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.records import text_blocks
from massfit.io.records.deployment import DeploymentFile
from massfit.io.records.record_text import read_text_record
from massfit.io.records.samples import Samples

TIMES = np.datetime64("2016-02-28T23:58", "s") + np.arange(90) * np.timedelta64(15, "s")
VALUES = [f"{4100 + 0.25 * (k % 7):.4f}" for k in range(90)]
SPLIT = [str(time).replace("-", " ").replace("T", " ").replace(":", " ") for time in TIMES]
NAMES = ("year", "month", "day", "hour", "minute", "second", "pressure")
FORMS: dict[str, tuple[str, dict[str, Any]]] = {
    "iso": ("time,pressure\n" + "".join(f"{t}Z,{v}\n" for t, v in zip(TIMES, VALUES, strict=True)), {"delimiter": ","}),
    "tenths": (
        "time;pressure;q\n" + "".join(f'"{t}.5";{v};x\n' for t, v in zip(TIMES, VALUES, strict=True)),
        {"delimiter": ";"},
    ),
    "blanks": (
        "# a\ntime pressure\n" + "".join(f"{t}\t {v} \n" for t, v in zip(TIMES, VALUES, strict=True)), {},
    ),
    "parts": ("".join(f"  {t}  {v}\n" for t, v in zip(SPLIT, VALUES, strict=True)), {"columns": NAMES}),
    "windows": ("time,pressure\r\n" + "".join(f"{t},{v}\r\n" for t, v in zip(TIMES, VALUES, strict=True)),
        {"delimiter": ","}),
    "old mac": ("time,pressure\r" + "".join(f"{t},{v}\r" for t, v in zip(TIMES, VALUES, strict=True)),
        {"delimiter": ","}),
    "no last end": (("time,pressure\n" + "".join(f"{t},{v}\n" for t, v in zip(TIMES, VALUES, strict=True)))[:-1],
        {"delimiter": ","}),
}  # fmt: skip


def read(folder: Path, text: str, entry: dict[str, Any]) -> Samples:
    (folder / "a.txt").write_bytes(text.encode())
    return read_text_record(folder / "a.txt", DeploymentFile("a.txt", units="dbar", **entry))


def line_by_line(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(text_blocks, "_even", lambda *_: None)


def assert_same(first: Samples, second: Samples) -> None:
    np.testing.assert_array_equal(first.time, second.time)
    np.testing.assert_array_equal(first.pressure, second.pressure)


@pytest.mark.parametrize("size", [7, 100, 1001, 4_000_000])
@pytest.mark.parametrize("name", FORMS)
def test_blocks_join_without_a_seam(name: str, size: int, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    text, entry = FORMS[name]
    monkeypatch.setattr(text_blocks, "BLOCK_BYTES", size)
    samples = read(tmp_path, text, entry)
    half = np.timedelta64(500 if name == "tenths" else 0, "ms")
    np.testing.assert_array_equal(samples.time, TIMES + half)
    np.testing.assert_allclose(samples.pressure, np.array(VALUES, dtype=float) * 1e4, rtol=1e-15)
    line_by_line(monkeypatch)
    assert_same(read(tmp_path, text, entry), samples)


def test_plain_files_are_read_many_rows_at_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("read line by line")

    monkeypatch.setattr(text_blocks, "_uneven", refuse)
    for text, entry in FORMS.values():
        assert read(tmp_path, text, entry).time.size == TIMES.size
    with pytest.raises(AssertionError):  # the control: a comment in the middle takes the other way
        read(tmp_path, FORMS["iso"][0] + "# end\n", FORMS["iso"][1])


def spoiled(text: str, rng: np.random.Generator) -> str:
    lines = text.splitlines(keepends=True)
    for _ in range(int(rng.integers(1, 4))):
        k = int(rng.integers(1, len(lines)))
        match int(rng.integers(7)):
            case 0:
                lines[k] = "# a remark\n"
            case 1:
                lines[k] = "\n"
            case 2:
                lines[k] = lines[k].rstrip("\n") + ",7\n"
            case 3:
                lines[k] = lines[k].replace("4100", "low")
            case 4:
                lines[k] = lines[k].replace("2016-0", "2016-1", 1)
            case 5:
                lines[k] = lines[k][:5] + "\n"
            case 6:
                lines[k] = lines[k].replace("4100", "é41")
    return "".join(lines)


@pytest.mark.parametrize("name", ["iso", "blanks", "parts"])
def test_faults_are_the_same_however_the_file_is_cut(
    name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    text, entry = FORMS[name]
    rng = np.random.default_rng(7)
    texts = [spoiled(text, rng) for _ in range(12)]

    def outcome(damaged: str) -> object:
        try:
            samples = read(tmp_path, damaged, entry)
        except InputError as error:
            return sorted(map(str, error.faults))
        return (samples.time.tolist(), samples.pressure.tolist())

    whole = [outcome(damaged) for damaged in texts]
    assert any(isinstance(found, list) for found in whole)
    assert any(isinstance(found, tuple) for found in whole)
    monkeypatch.setattr(text_blocks, "BLOCK_BYTES", 100)
    assert [outcome(damaged) for damaged in texts] == whole
    line_by_line(monkeypatch)
    assert [outcome(damaged) for damaged in texts] == whole


def test_a_file_without_ends_of_lines_does_not_fill_the_memory(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(text_blocks, "BLOCK_BYTES", 50_000)
    with pytest.raises(InputError, match=r"a.txt:92: the line has 100000 characters or more"):
        read(tmp_path, FORMS["iso"][0] + "1" * 300_000, FORMS["iso"][1])
