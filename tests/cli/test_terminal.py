"""What the commands show on a terminal, and what they give to other programs."""

import json
import re
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from click.testing import CliRunner

from massfit.cli.main import main
from massfit.results.estimate import Estimate

OnTerminal = Callable[..., tuple[str, str, int]]
STEERING = re.compile(r"\x1b\[[0-9;?]*[A-Za-z]")
MODULE = (sys.executable, "-m", "massfit")


def test_faults_fit_the_terminal_and_are_whole_elsewhere(
    network_folder: Path, change: Callable[[str, str], None], on_terminal: OnTerminal
) -> None:
    change('id = "A"', f'id = "{"Station of the long name, " * 5}"')
    change("latitude = -11.25", "latitude = 95.0")
    change('drift = "linear"', 'drift = "cubic"')
    output, shown, code = on_terminal((*MODULE, "estimate", str(network_folder)))
    assert code == 2
    assert output == ""
    # what stands after the progress of the stages
    shown = STEERING.sub("", shown[shown.index("massfit: ") :])
    lines = shown.replace("\r", "").splitlines()
    # a path or another word that is longer stands whole on its own line
    assert [line for line in lines if len(line) > 80 and len(line.split()) > 2] == []
    refused = CliRunner().invoke(main, ["estimate", str(network_folder)])
    whole = refused.stderr[refused.stderr.index("massfit: ") :]
    assert " ".join(whole.split()) == " ".join(shown.split())
    assert len(whole.splitlines()) < len(lines)


def test_json_is_the_estimate_and_nothing_else(
    network_folder: Path, run: Estimate, monkeypatch: pytest.MonkeyPatch
) -> None:
    def finished(*_: object, progress: Callable[[str, int, int], None], **__: object) -> Estimate:
        progress("reading", 0, 1)
        return run

    monkeypatch.setattr("massfit.pipeline.save.estimate_to_folder", finished)
    loud, quiet = ["estimate", str(network_folder), "--json"], ["estimate", str(network_folder), "--json", "--quiet"]
    for words in (loud, quiet):
        done = CliRunner().invoke(main, words)
        assert done.exit_code == 0, done.output
        assert json.loads(done.stdout) == run.summary
        assert ("reading" in done.stderr) is (words is loud)


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_the_shells_get_their_completion(shell: str) -> None:
    done = CliRunner().invoke(main, prog_name="massfit", env={"_MASSFIT_COMPLETE": f"{shell}_source"})
    assert done.exit_code == 0
    assert f"_MASSFIT_COMPLETE={shell}_complete" in done.output


def test_completion_offers_commands_and_options() -> None:
    def offered(words: str, count: int) -> list[str]:
        variables = {"_MASSFIT_COMPLETE": "bash_complete", "COMP_WORDS": words, "COMP_CWORD": str(count)}
        done = CliRunner().invoke(main, prog_name="massfit", env=variables)
        return [line.partition(",")[2] for line in done.output.splitlines()]

    assert {"estimate", "simulate"} <= set(offered("massfit ", 1))
    assert {"--output", "--overwrite", "--json"} <= set(offered("massfit estimate -", 2))
    assert offered("massfit simulate --sampling ", 3) == ["hourly", "15s", "daily"]
