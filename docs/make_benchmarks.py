"""Write docs/benchmarks.md anew: run the benchmarks and list what they measured (minutes; on a quiet machine)."""

import json
import platform
import subprocess
import sys
import tempfile
from collections.abc import Sequence
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

DOCS = Path(__file__).parent
HEAD = """\
# Benchmarks

What massfit costs, beside something that has to be done anyway or would be done otherwise, measured in one run of
`python docs/make_benchmarks.py`, which writes this page from `tests/benchmarks` (`pytest -m benchmark`). They are
ratios of processor times, since seconds are the machine's: here {machine}. What only a quiet machine can tell (seconds,
two cores against one) the benchmarks check and this page does not show. Memory is the peak beyond that of the imports.

| what | beside | ratio | wanted |
|---|---|---|---|
"""


def measure() -> tuple[list[dict[str, Any]], bool]:
    """Run the benchmarks: what they kept, and whether all were as wanted."""
    with tempfile.TemporaryDirectory() as folder:
        report = Path(folder) / "report.xml"
        options = [
            "-q",
            "-m",
            "benchmark",
            "-p",
            "no:cacheprovider",
            f"--junitxml={report}",
            "-o",
            "junit_family=xunit1",
        ]
        done = subprocess.run(
            [sys.executable, "-m", "pytest", *options, "tests/benchmarks"], cwd=DOCS.parent, check=False
        )
        found = ElementTree.parse(report).iter("property")
        kept = [json.loads(each.attrib["value"]) for each in found if each.attrib["name"] == "measured"]
        return kept, done.returncode == 0


def page(rows: Sequence[dict[str, Any]], machine: str) -> str:
    """The text of the page."""
    lines = [f"| {row['what']} | {row['beside']} | {row['ratio']:.3g} | {wanted(row['most'])} |" for row in rows]
    return HEAD.format(machine=machine) + "\n".join(lines) + "\n"


def wanted(most: float | None) -> str:
    """What is wanted in words: at most, or at least where the limit is negative."""
    if most is None:
        return ""
    return f"at most {most:g}" if most > 0 else f"at least {-most:g}"


if __name__ == "__main__":
    measured, as_wanted = measure()
    text = page(measured, f"{platform.machine()}, Python {platform.python_version()}")
    (DOCS / "benchmarks.md").write_text(text, encoding="utf-8")
    sys.exit(0 if as_wanted else 1)
