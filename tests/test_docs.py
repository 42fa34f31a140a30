"""The documentation builds without a warning, and every example of the gallery runs."""

import shutil
import subprocess
import sys
from pathlib import Path

DOCS = Path(__file__).parents[1] / "docs"


def test_the_docs_build_without_warnings(tmp_path: Path) -> None:
    # the gallery writes beside its examples, so a copy is built
    source, built = tmp_path / "docs", tmp_path / "html"
    shutil.copytree(DOCS, source, ignore=shutil.ignore_patterns("_build", "gallery", "sg_execution_times.rst"))
    options = ["-q", "-E", "-W", "--keep-going", "-b", "html"]
    command = [sys.executable, "-m", "sphinx", *options, str(source), str(built)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert (built / "index.html").exists()
    for example in (DOCS / "examples").glob("plot_*.py"):
        page = (built / "gallery" / f"{example.stem}.html").read_text("utf-8")
        assert f"sphx_glr_{example.stem}_001.png" in page, "the example shows no figure"
        assert "Traceback" not in page
