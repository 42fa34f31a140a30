"""`massfit estimate RESULTS --scenario FILE`: a scenario of the page's bench, repeated by Python."""

import json
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from massfit.cli.main import main
from massfit.pipeline.save import save_results
from massfit.results.estimate import Estimate


@pytest.fixture(scope="module")
def network(run: Estimate, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder as a network's is after a run: its results inside."""
    folder = tmp_path_factory.mktemp("network")
    save_results(run, folder / "results")
    return folder


@pytest.fixture
def scenario(run: Estimate, tmp_path: Path) -> Path:
    file = tmp_path / "scenario.json"
    file.write_text(json.dumps({"without_sites": [run.posterior.sites[0]], "truth": 0}), encoding="utf-8")
    return file


def call(*words: object) -> Result:
    return CliRunner().invoke(main, [str(word) for word in words])


def test_results_or_the_network_they_stand_in_give_the_same(network: Path, scenario: Path) -> None:
    answers = [call("estimate", place, "--scenario", scenario, "--json") for place in (network, network / "results")]
    assert [done.exit_code for done in answers] == [0, 0]
    assert answers[0].output == answers[1].output
    answer = json.loads(answers[0].output)
    assert (answer["sites"], answer["everything"]["sites"]) == (2, 3)
    assert sum(answer["variance_share"].values()) == pytest.approx(1.0)


def test_the_text_fits_and_says_of_what_kind_it_is(network: Path, scenario: Path) -> None:
    before = sorted(path.name for path in (network / "results").iterdir())
    done = call("estimate", network, "--scenario", scenario)
    assert done.exit_code == 0
    assert all(len(line) <= 80 for line in done.output.splitlines())
    assert "Scenario: 2 of 3 sites, normal site scatter" in done.output
    assert "With Student-t scatter and mixtures, as the run had them: scenario" in " ".join(done.output.split())
    assert "not a new estimate" in done.output
    assert sorted(path.name for path in (network / "results").iterdir()) == before


def test_everything_is_the_run_itself_under_normal_scatter(network: Path, run: Estimate, tmp_path: Path) -> None:
    """Within what Student-t scatter and the mixtures of three good sites change."""
    (tmp_path / "whole.json").write_text("{}", encoding="utf-8")
    answer = json.loads(call("estimate", network, "--scenario", tmp_path / "whole.json", "--json").output)
    for name in ("in_phase_hpa", "quadrature_hpa"):
        assert abs(answer[name]["mean"] - run.summary[name]["mean"]) < 0.2 * run.summary[name]["sd"]
        assert answer[name]["sd"] == pytest.approx(run.summary[name]["sd"], rel=0.25)


def test_with_student_scatter_the_whole_is_the_answer_of_the_run(network: Path, run: Estimate, tmp_path: Path) -> None:
    """The run's draws come from its sampler, these numbers from weighted nodes: within a twentieth of the width."""
    (tmp_path / "whole.json").write_text("{}", encoding="utf-8")
    answer = json.loads(call("estimate", network, "--scenario", tmp_path / "whole.json", "--json").output)["student_t"]
    for name in ("in_phase_hpa", "quadrature_hpa"):
        assert abs(answer[name]["mean"] - run.summary[name]["mean"]) < 0.05 * run.summary[name]["sd"]
        assert answer[name]["sd"] == pytest.approx(run.summary[name]["sd"], rel=0.05)
    assert answer["amplitude_hpa"]["region95"] == pytest.approx(run.summary["amplitude_hpa"]["region95"], abs=0.03)
    assert max(answer["standard_error_hpa"]) < 0.02


def test_wrong_input_is_told_without_a_traceback(network: Path, scenario: Path, tmp_path: Path) -> None:
    (tmp_path / "bad.json").write_text('{"without_sites": ["Nowhere"], "without_models": ["None"]}', encoding="utf-8")
    refused = call("estimate", network, "--scenario", tmp_path / "bad.json")
    assert refused.exit_code == 2
    assert "the run has no 'Nowhere'" in refused.output
    assert "the run has no 'None'" in refused.output
    assert call("estimate", tmp_path, "--scenario", scenario).exit_code == 2
