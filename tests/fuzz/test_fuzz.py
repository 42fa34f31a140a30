"""Mutated text and damaged NetCDF end in a reading or in an InputError: no traceback, no crash, no hang, no flood.

A failure names its seed; `python tests/fuzz/child.py KIND SEED` does that case alone.
"""

import os
import subprocess
import sys
from collections import Counter
from collections.abc import Iterator
from pathlib import Path

import pytest

CHILD = Path(__file__).with_name("child.py")
LOT = 2000  # seeds given to a child at once


def answers(kind: str, seeds: range) -> Iterator[tuple[int, str]]:
    """Answer of every seed; a child that dies is replaced and its case is a failure."""
    todo = list(seeds)
    while todo:
        lot = todo[:LOT]
        done = subprocess.run(
            [sys.executable, "-W", "ignore", str(CHILD), kind],
            input="".join(f"{seed}\n" for seed in lot),
            env={**os.environ, "OMP_NUM_THREADS": "1"},
            capture_output=True, text=True, check=False,
        )  # fmt: skip
        lines = done.stdout.splitlines()
        yield from zip(lot, lines, strict=False)
        if len(lines) < len(lot):
            last = done.stderr.strip().splitlines()[-1:]
            yield lot[len(lines)], f"FAILED: the process ended with {done.returncode} {' '.join(last)}"
            lines.append("")
        todo = todo[len(lines) :]


def check(kind: str, seeds: range) -> None:
    found = dict(answers(kind, seeds))
    failures = [f"{kind} {seed} {answer}" for seed, answer in found.items() if answer not in ("ok", "refused")]
    assert failures == []
    assert len(found) == len(seeds)
    counts = Counter(found.values())
    # the damage is neither always fatal nor always harmless
    assert min(counts["ok"], counts["refused"]) > len(seeds) // 100


@pytest.mark.parametrize(("kind", "count"), [("network", 3000), ("text", 7000), ("netcdf", 1000), ("matlab", 500)])
def test_only_input_errors(kind: str, count: int) -> None:
    check(kind, range(count))


@pytest.mark.slow
@pytest.mark.parametrize(
    ("kind", "count"), [("network", 30_000), ("text", 70_000), ("netcdf", 10_000), ("matlab", 5000)]
)
def test_only_input_errors_ten_times_more(kind: str, count: int) -> None:
    check(kind, range(count, 2 * count))
