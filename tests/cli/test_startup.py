"""Asking for help is quick: nothing heavy is imported before it is needed."""

import subprocess
import sys

import pytest

HEAVY = {"numpy", "scipy", "xarray", "pandas", "matplotlib", "pyshtools", "ducc0", "emcee", "pydantic", "rich", "h5py"}

_REPORT = "\nimport sys; print('imported:', *sorted({name.partition('.')[0] for name in sys.modules}))"
_HELP = "from massfit.cli.main import main\nmain(['{}'], standalone_mode=False)"


def imported_by(code: str) -> set[str]:
    done = subprocess.run([sys.executable, "-c", code + _REPORT], capture_output=True, text=True, check=True)
    return set(done.stdout.rpartition("imported:")[2].split())


@pytest.mark.parametrize("code", ["import massfit", _HELP.format("--help"), _HELP.format("--version")])
def test_nothing_heavy_is_imported(code: str) -> None:
    found = imported_by(code)
    assert "massfit" in found
    assert found & HEAVY == set()


def test_heavy_imports_would_be_seen() -> None:
    assert {"numpy", "xarray"} <= imported_by("import massfit; massfit.Network")
