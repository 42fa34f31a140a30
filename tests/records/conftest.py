"""Randomness of the tests of records."""

import numpy as np
import pytest


@pytest.fixture
def rng() -> np.random.Generator:
    """Fixed, so that a failure repeats."""
    return np.random.default_rng(20_160_101)
