from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from massfit.earth.love import LoveNumbers, love_numbers
from massfit.fingerprint.grid import CellGrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator


@dataclass(frozen=True)
class Rigid:
    """An Earth that does not yield: every closed form knows it."""

    h: NDArray[np.float64]
    k: NDArray[np.float64]
    profile: str = "rigid"


@pytest.fixture(scope="session")
def rigid() -> Rigid:
    return Rigid(np.zeros(1025), np.zeros(1025))


@pytest.fixture(scope="session")
def love() -> LoveNumbers:
    return love_numbers(max_degree=256)


@pytest.fixture(scope="session")
def operator(love: LoveNumbers) -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), love)


@pytest.fixture(scope="session")
def coarse(love: LoveNumbers) -> SeaLevelOperator:
    """The real ocean to degree 40, for checks that do not need more."""
    return prepare_operator(OceanFunction.builtin(), love, max_degree=40)


@pytest.fixture(scope="session")
def all_ocean() -> OceanFunction:
    cells = CellGrid(np.linspace(-90.0, 90.0, 19), np.linspace(0.0, 360.0, 37))
    return OceanFunction(cells, np.ones(cells.shape))


@pytest.fixture
def rng() -> np.random.Generator:
    return np.random.default_rng(20_240_117)
