"""A bare interpreter beside `import massfit` and `massfit --help`. Wanted: both less than 150 ms above the first."""

import subprocess
import sys

import pytest

pytestmark = pytest.mark.benchmark(group="startup")

COMMANDS = {
    "bare interpreter": ("-c", "pass"),
    "import massfit": ("-c", "import massfit"),
    "massfit --help": ("-m", "massfit", "--help"),
}


@pytest.mark.parametrize("name", COMMANDS)
def test_startup(benchmark, name: str) -> None:
    benchmark.pedantic(
        subprocess.run,
        ([sys.executable, *COMMANDS[name]],),
        {"check": True, "stdout": subprocess.DEVNULL},
        rounds=15,
        warmup_rounds=2,
    )
