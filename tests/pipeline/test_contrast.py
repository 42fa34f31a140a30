"""What differs between two results folders is told, and nothing else."""

import copy
import json
import shutil
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner

from massfit.cli.main import main
from massfit.io.results.partial_folder import claimed
from massfit.io.results.results_folder import write_results
from massfit.phasor import as_components, delay_days
from massfit.report.words.contrast_text import contrast_text
from massfit.results.contrast import contrast
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run


@pytest.fixture(scope="module")
def first(run: Estimate) -> FinishedRun:
    return finished_run(run, command="massfit estimate here")


def changed(run: FinishedRun, **provenance: Any) -> tuple[FinishedRun, dict[str, Any]]:
    """Give a copy of a run and its summary, which may be changed."""
    summary = copy.deepcopy(dict(run.summary))
    return replace(run, summary=summary, provenance={**copy.deepcopy(dict(run.provenance)), **provenance}), summary


def move(site: dict[str, Any], shift: np.ndarray) -> None:
    site["phasor_hpa"] = (np.array(site["phasor_hpa"]) + shift).tolist()


def test_a_run_does_not_differ_from_itself(first: FinishedRun) -> None:
    found = contrast(first, first)
    assert found["settings"] == found["versions"] == {}
    assert found["inputs"] == {"only_first": [], "only_second": [], "changed": []}
    assert found["warnings"] == {"only_first": [], "only_second": []}
    assert {site["shift_sd"] for site in found["sites"]["shared"]} == {0.0}
    answer = found["answer"]
    assert answer["shift_hpa"] == pytest.approx([0.0, 0.0])
    assert (answer["shift_sd"], answer["amplitude_hpa"], answer["peak_days"], answer["sd_ratio"]) == (0, 0, 0, 1)


def test_a_shift_by_one_standard_deviation_of_each_component_is_one(first: FinishedRun) -> None:
    second, summary = changed(first)
    root = np.linalg.cholesky(summary["sites"][1]["phasor_covariance_hpa2"])
    move(summary["sites"][1], shift := root @ [1.0, -1.0])
    root = np.linalg.cholesky(summary["covariance_hpa2"])
    for name, by in zip(("in_phase_hpa", "quadrature_hpa"), root @ [2.0, 2.0], strict=True):
        summary[name]["mean"] += by
    found = contrast(first, second)
    assert [site["shift_sd"] for site in found["sites"]["shared"]] == pytest.approx([0.0, 1.0, 0.0])
    assert found["sites"]["shared"][1]["shift_hpa"] == pytest.approx(shift)
    assert found["answer"]["shift_sd"] == pytest.approx(2.0)


def test_a_wider_answer_and_a_later_peak_have_their_sign(first: FinishedRun) -> None:
    second, summary = changed(first)
    summary["covariance_hpa2"] = (4.0 * np.array(summary["covariance_hpa2"])).tolist()
    old = complex(summary["in_phase_hpa"]["mean"], summary["quadrature_hpa"]["mean"])
    # ten days later and a tenth larger
    new = 1.1 * old * np.exp(2j * np.pi * 10.0 / 365.2422)
    summary["in_phase_hpa"]["mean"], summary["quadrature_hpa"]["mean"] = as_components(new).tolist()
    answer = contrast(first, second)["answer"]
    assert answer["sd_ratio"] == pytest.approx(2.0)
    assert answer["peak_days"] == pytest.approx(10.0)
    assert answer["amplitude_hpa"] == pytest.approx(0.1 * abs(old))


def test_another_reference_year_is_no_difference_of_the_cycle(first: FinishedRun) -> None:
    second, summary = changed(first)
    summary["reference_year"] += 2  # 731 days later, for 2016 is a leap year
    assert first.summary["reference_year"] == 2015
    turn = np.exp(-2j * np.pi * 731.0 / 365.2422)  # the new origin lies 0.5 d after a whole number of cycles
    matrix = np.array([[turn.real, -turn.imag], [turn.imag, turn.real]])
    for site in summary["sites"]:
        site["phasor_hpa"] = (matrix @ site["phasor_hpa"]).tolist()
        site["phasor_covariance_hpa2"] = (matrix @ site["phasor_covariance_hpa2"] @ matrix.T).tolist()
    mean = matrix @ [summary["in_phase_hpa"]["mean"], summary["quadrature_hpa"]["mean"]]
    summary["in_phase_hpa"]["mean"], summary["quadrature_hpa"]["mean"] = mean.tolist()
    summary["covariance_hpa2"] = (matrix @ summary["covariance_hpa2"] @ matrix.T).tolist()
    assert float(delay_days(turn)) == pytest.approx(-0.5156)
    found = contrast(first, second)
    assert found["answer"]["shift_sd"] < 1e-9
    assert found["answer"]["peak_days"] == pytest.approx(0.0, abs=1e-9)
    assert max(site["shift_sd"] for site in found["sites"]["shared"]) < 1e-9


def test_inputs_settings_versions_sites_and_warnings_are_named(first: FinishedRun) -> None:
    one = replace(first, provenance={**first.provenance, "inputs": {"a.nc": "1", "b.nc": "2"}})
    second, summary = changed(one, inputs={"b.nc": "3", "c.nc": "4"}, python="2.7")
    second.provenance["settings"]["priors"]["year_sd_hpa"] = 0.07
    second.provenance["settings"]["frame"]["start"] = None
    second.provenance["versions"]["numpy"] = "0.1"
    gone = summary["sites"].pop(0)["id"]
    summary["sites"][0]["warnings"] = ["it ticks"]
    summary["warnings"].append("the moon is out")
    found = contrast(one, second)
    assert found["inputs"] == {"only_first": ["a.nc"], "only_second": ["c.nc"], "changed": ["b.nc"]}
    assert found["settings"] == {"priors.year_sd_hpa": [0.05, 0.07], "frame.start": ["2014-01-01", None]}
    assert set(found["versions"]) == {"python", "numpy"}
    assert found["sites"]["only_first"] == [gone]
    assert {"the moon is out", f"{summary['sites'][0]['id']}: it ticks"} <= set(found["warnings"]["only_second"])
    text = contrast_text(found, "one", "two")
    for words in (
        "changed    b.nc", "only in A  a.nc", "only in B  c.nc", "priors.year_sd_hpa: 0.05 in A, 0.07 in B",
        f"only in A  {gone}", "only in B  the moon is out", "python: ",
    ):  # fmt: skip
        assert words in text


def test_lines_fit_eighty_columns_whatever_the_names(first: FinishedRun) -> None:
    second, summary = changed(first, inputs={f"records/{'long' * 30}_{k}.nc": "1" for k in range(40)})
    summary["network"] = "The Extraordinarily Verbose Network of Names without End " * 3
    summary["warnings"] = ["W" * 200, *(f"a long story about recorder {k} " * 5 for k in range(30))]
    for site in summary["sites"]:
        move(site, np.array([-123.4, 1234.5]))
    text = contrast_text(contrast(first, second), "/somewhere/very/deep" * 6, "b")
    assert max(map(len, text.splitlines())) <= 80
    assert "and 28 more" in text


def test_the_command_tells_two_folders_apart(first: FinishedRun, tmp_path: Path) -> None:
    second, summary = changed(first)
    summary["sites"][0]["phasor_hpa"][0] += 0.5
    for name, run in (("one", first), ("two", second)):
        with claimed(tmp_path / name) as partial:
            write_results(partial, run, pictures={}, page="")
    done = CliRunner().invoke(main, ["contrast", str(tmp_path / "one"), str(tmp_path / "two"), "--json"])
    assert done.exit_code == 0, done.output
    found = json.loads(done.output)
    assert found == json.loads(json.dumps(contrast(first, second)))
    assert found["sites"]["shared"][0]["shift_hpa"] == pytest.approx([0.5, 0.0])
    words = CliRunner().invoke(main, ["contrast", str(tmp_path / "one"), str(tmp_path / "two")]).output
    assert "the phasors of 1 differ" in words
    assert "Settings: the same" in words


def test_every_fault_of_both_folders_is_told(first: FinishedRun, tmp_path: Path) -> None:
    with claimed(tmp_path / "one") as partial:
        write_results(partial, first, pictures={}, page="")
    shutil.copytree(tmp_path / "one", tmp_path / "two")
    (tmp_path / "one" / "posterior.nc").unlink()
    (tmp_path / "two" / "estimate.json").write_text("{}")
    done = CliRunner().invoke(main, ["contrast", str(tmp_path / "one"), str(tmp_path / "two")])
    assert done.exit_code == 2
    assert "2 faults" in done.output
    assert "posterior.nc" in done.output
    assert "estimate.json" in done.output
