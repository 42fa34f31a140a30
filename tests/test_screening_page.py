"""The commands of docs/theory/screening.md, as they stand there."""

import re
import shlex
from pathlib import Path

import pytest
from click.testing import CliRunner

from massfit.cli.main import main

PAGE = Path(__file__).parents[1] / "docs/theory/screening.md"


def commands() -> list[list[str]]:
    """Every massfit command of the page, as words without its name."""
    blocks = re.findall(r"```bash\n(.*?)```", PAGE.read_text(), re.DOTALL)
    lines = [line for block in blocks for line in block.splitlines() if line.startswith("massfit ")]
    return [shlex.split(line)[1:] for line in lines]


@pytest.mark.slow  # tests/cli/test_screen.py runs such commands on smaller fields
def test_the_commands_of_the_screening_page_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr("massfit.pipeline.save_screen.draw_screening", lambda *_: {})  # drawn in tests/cli
    simulate, screen = commands()
    for words in (simulate, screen):
        done = CliRunner().invoke(main, words)
        assert done.exit_code == 0, done.output
    assert (tmp_path / "demo/screening/sites.csv").is_file()
