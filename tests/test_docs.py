"""The documentation builds without a warning."""

import subprocess
import sys
from pathlib import Path

DOCS = Path(__file__).parents[1] / "docs"


def test_the_docs_build_without_warnings(tmp_path: Path) -> None:
    command = [sys.executable, "-m", "sphinx", "-q", "-E", "-W", "--keep-going", "-b", "html", str(DOCS), str(tmp_path)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert (tmp_path / "index.html").exists()
