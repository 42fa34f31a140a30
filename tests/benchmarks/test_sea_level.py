"""What the sea-level equation costs, in bare transforms and in seconds."""

import time

import numpy as np
import pytest

from massfit.earth.love import love_numbers
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.site import Site

pytestmark = pytest.mark.benchmark


@pytest.fixture(scope="module")
def operator() -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=180))


def seconds_of_a_pair(operator: SeaLevelOperator) -> float:
    """One synthesis and one analysis, best of ten."""
    coefficients = operator.grid.analyse(operator.ocean[None])
    best = np.inf
    for _ in range(10):
        start = time.perf_counter()
        operator.grid.analyse(operator.grid.synthesise(coefficients))
        best = min(best, time.perf_counter() - start)
    return best


def test_one_solve_in_bare_transforms(benchmark, operator: SeaLevelOperator) -> None:
    load = 1.0 - operator.ocean
    sea = benchmark(lambda: solve_sea_level(operator, load=load))
    # the operator is applied once a step and once before
    ratio = benchmark.stats.stats.min / ((sea.iterations + 1) * seconds_of_a_pair(operator))
    benchmark.extra_info["ratio to its bare transforms"] = ratio
    assert ratio < 2.5


def test_twenty_footprints(benchmark, operator: SeaLevelOperator) -> None:
    sites = [Site(f"S{i}", -30.0 + 3 * i, 200.0 + 5 * i) for i in range(20)]
    benchmark.pedantic(lambda: site_footprints(operator, sites), rounds=3)
    assert benchmark.stats.stats.min < 5.0
