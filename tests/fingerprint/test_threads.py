"""Numbers of threads in the environment, whatever they look like, do not stop a transform."""

import os
import subprocess
import sys

import pytest

from massfit.fingerprint.threads import heed_thread_counts

TRANSFORM = """
import numpy as np
from massfit.fingerprint.transforms import SphereGrid
grid = SphereGrid(3)
print(float(np.abs(grid.synthesise(grid.analyse(np.ones((1, *grid.cells.shape)))) - 1.0).max()) < 1e-12)
"""


@pytest.mark.parametrize(
    ("own", "common", "expected"),
    [
        (None, None, None),
        (None, "2", None),
        (None, "", "0"),
        (None, " ", "0"),
        (None, "many", "0"),
        (None, "-1", "0"),
        (None, "4,2", "4"),
        ("", "2", "2"),
        ("", None, "0"),
        ("3", "", "3"),
    ],
)
def test_only_what_the_library_cannot_read_is_changed(
    own: str | None, common: str | None, expected: str | None
) -> None:
    environment = {"DUCC0_NUM_THREADS": own, "OMP_NUM_THREADS": common}
    given = {name: value for name, value in environment.items() if value is not None}
    found = dict(given)
    heed_thread_counts(found)
    assert found.get("DUCC0_NUM_THREADS") == expected
    assert found.get("OMP_NUM_THREADS") == common


@pytest.mark.parametrize("value", ["", "4,2"])
def test_a_transform_runs(value: str) -> None:
    environment = {**os.environ, "OMP_NUM_THREADS": value}
    environment.pop("DUCC0_NUM_THREADS", None)
    ran = subprocess.run(
        [sys.executable, "-c", TRANSFORM], env=environment, capture_output=True, text=True, check=False
    )
    assert ran.stdout.strip() == "True", ran.stderr
