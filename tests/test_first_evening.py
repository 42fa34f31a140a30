"""The page docs/first_evening.md is replayed: its commands are run, its outputs found, its values filled in."""

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

PAGE = Path(__file__).parents[1] / "docs" / "first_evening.md"
BLOCK = re.compile(r"```(bash|text)\n(.*?)```|((?:^\| (?!where)[^\n]*\n)+)", re.DOTALL | re.MULTILINE)
NUMBER = re.compile(r"[-+]?\d[\d.]*")


def steps() -> list[tuple[str, str]]:
    """Commands, outputs and tables of the page, in order."""
    found = BLOCK.finditer(PAGE.read_text("utf-8"))
    return [(match[1], match[2]) if match[1] else ("table", match[3]) for match in found]


def run(script: str, folder: Path, open_data: Path) -> str:
    tools = str(Path(sys.executable).parent)
    more = {"OPEN_DATA": str(open_data), "PYTHONIOENCODING": "utf-8", "PATH": f"{tools}:{os.environ['PATH']}"}
    done = subprocess.run(
        ["bash", "-c", script], cwd=folder, env={**os.environ, **more}, capture_output=True, text=True, check=False
    )
    assert done.returncode in (0, 2), done.stderr
    return done.stdout + done.stderr


def fill_in(file: Path, table: str) -> None:
    """Write the values of a table where the network file leaves them open, each exactly once."""
    sections = re.split(r"(?m)^(?=\[[a-z]|\[\[site\]\])", file.read_text("utf-8"))
    for row in table.splitlines():
        where, key, value = (cell.strip().strip("`") for cell in row.strip("|").split("|"))
        (place,) = [k for k, text in enumerate(sections) if text.startswith(f"[{where}]") or f'id = "{where}"' in text]
        sections[place], count = re.subn(rf'(?m)^( *{key} = )""', rf"\g<1>{value}", sections[place])
        assert count == 1, row
    text = "".join(sections)
    assert [line for line in text.splitlines() if '= ""' in line and not line.startswith("#")] == []
    file.write_text(text, "utf-8")


def test_the_page_is_true(open_data: Path, tmp_path: Path) -> None:
    output = command = ""
    for kind, text in steps():
        if kind == "bash":
            command = text
            output = run(text, tmp_path, open_data)
        elif kind == "table":
            fill_in(tmp_path / "evening" / "network.toml", text)
        else:
            lines = [line for line in text.splitlines() if line != "..."]
            shown = output
            if "estimate" in command:
                # the answer itself may move with the method; its form may not
                lines, shown = [NUMBER.sub("#", line) for line in lines], NUMBER.sub("#", output)
            there = shown.splitlines()
            assert [line for line in lines if line not in there] == []
    assert (tmp_path / "evening" / "results" / "report.html").exists()


@pytest.mark.parametrize("kind", ["bash", "text", "table"])
def test_the_page_has_every_kind_of_step(kind: str) -> None:
    assert len([found for found, _ in steps() if found == kind]) == {"bash": 6, "text": 5, "table": 1}[kind]
