"""Page and figures are drawn anew from the results folder alone; a file that was changed is named."""

import dataclasses
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from massfit.cli.main import main
from massfit.errors import InputError
from massfit.io.results.partial_folder import claimed
from massfit.io.results.read_results import read_results
from massfit.io.results.results_folder import file_digest
from massfit.pipeline.save import report_to_folder, save_results, save_run
from massfit.results.estimate import Estimate


@pytest.fixture(scope="module")
def saved(run: Estimate, tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("saved") / "results"
    save_results(run, place)
    return place


@pytest.fixture
def folder(saved: Path, tmp_path: Path) -> Path:
    shutil.copytree(saved, tmp_path / "results")
    return tmp_path / "results"


def content(folder: Path) -> dict[str, bytes]:
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*.*")}


def test_run_json_names_every_file(saved: Path) -> None:
    outputs = read_results(saved).provenance["outputs"]
    assert set(outputs) == set(content(saved))
    for name in set(outputs) - {"run.json"}:
        assert outputs[name] == file_digest(saved / name)


def test_everything_is_drawn_as_it_was_from_the_folder_alone(folder: Path) -> None:
    before = content(folder)
    drawn = [name for name in before if name.startswith("figures/") or name == "report.html"]
    assert len(drawn) >= 5
    for name in drawn:
        (folder / name).unlink()
    (folder / "my notes.txt").write_text("laid beside")
    done = CliRunner().invoke(main, ["report", str(folder)])
    assert done.exit_code == 0, done.output
    after = content(folder)
    assert after.pop("my notes.txt") == b"laid beside"
    assert after == before
    assert [path.name for path in folder.parent.iterdir()] == ["results"]


def test_tables_are_kept_to_the_byte_when_something_joins_the_run(folder: Path) -> None:
    text = 'line,amplitude_hpa,note\nM2,25.1234,"a, b"\nK1,1e-05,\n'
    rows = [{"line": "M2", "amplitude_hpa": 25.1234, "note": "a, b"}, {"line": "K1", "amplitude_hpa": 1e-5}]
    with claimed(folder) as partial:
        save_run(dataclasses.replace(read_results(folder), tables={"tides.csv": rows}), partial)
    with claimed(folder) as partial:
        save_run(read_results(folder), partial)
    assert (folder / "tides.csv").read_text() == text


def test_any_flipped_byte_is_reported_with_the_name_of_its_file(folder: Path) -> None:
    before = content(folder)
    assert len(before) >= 12
    for name, sound in before.items():
        for place in (0, len(sound) // 3, len(sound) - 1):
            damaged = bytearray(sound)
            damaged[place] ^= 0x01
            (folder / name).write_bytes(damaged)
            with pytest.raises(InputError) as caught:
                report_to_folder(folder)
            assert [fault.source for fault in caught.value.faults][-1] == str(folder / name)
        (folder / name).write_bytes(sound)
    assert content(folder) == before


def test_run_json_is_under_a_checksum_byte_by_byte(folder: Path) -> None:
    path = folder / "run.json"
    sound = path.read_bytes()
    for place in range(0, len(sound), 97):
        path.write_bytes(sound[:place] + bytes([sound[place] ^ 0x02]) + sound[place + 1 :])
        with pytest.raises(InputError, match=r"run\.json"):
            read_results(folder)


def test_the_command_says_what_was_changed_and_what_is_missing(folder: Path) -> None:
    (folder / "posterior.nc").write_bytes(b"another posterior")
    (folder / "sites.csv").unlink()
    (folder / "report.html").write_text("edited")
    before = content(folder)
    done = CliRunner().invoke(main, ["report", str(folder)])
    assert done.exit_code == 2
    said = " ".join(done.output.split())
    assert "3 faults" in said
    assert "posterior.nc: the file was changed since it was made: its SHA-256 begins " in said.replace(" : ", ": ")
    assert "sites.csv: the file is missing. Make the results anew with massfit estimate --overwrite." in said
    assert "Remove the file; massfit report draws it anew." in said
    assert content(folder) == before


def test_a_folder_of_something_else_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"no results folder of massfit: run\.json cannot be read"):
        report_to_folder(tmp_path)
    (tmp_path / "run.json").write_text("{}")
    with pytest.raises(InputError, match="damaged or of another version"):
        report_to_folder(tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["run.json"]


def test_a_file_name_in_run_json_leads_nowhere_else(folder: Path, tmp_path: Path) -> None:
    text = (folder / "run.json").read_text().replace('"sites.csv"', '"../sites.csv"')
    (folder / "run.json").write_text(text)
    shutil.copy(folder / "sites.csv", tmp_path / "sites.csv")
    with pytest.raises(InputError, match=r"run\.json: the file is damaged or of another version"):
        read_results(folder)
