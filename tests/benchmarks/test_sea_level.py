"""What the sea-level equation costs, beside the bare transforms it needs, and in seconds."""

import time
import tracemalloc
from collections.abc import Callable

import numpy as np
import pytest

from massfit.earth.love import love_numbers
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.regions import draw_admittances, regional_responses
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.site import Site

pytestmark = pytest.mark.benchmark

SITES = [Site(f"S{i}", -30.0 + 3 * i, 200.0 + 5 * i) for i in range(20)]


@pytest.fixture(scope="module")
def operator() -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=180))


def seconds(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


@pytest.mark.parametrize("factor", [1.0, 1.0 + 0.5j], ids=["real", "phasor"])
def test_one_solve_beside_its_bare_transforms(benchmark, operator: SeaLevelOperator, factor: complex, measured) -> None:
    # the limit that it is measured against: one analysis of the load, and a synthesis and an analysis for each
    # time the operator is applied, which is once a step and once before; a phasor is two real fields
    load = (1.0 - operator.ocean) * factor
    fields = np.stack([load.real, load.imag]) if isinstance(factor, complex) else load[None]
    applied = solve_sea_level(operator, load=load).iterations + 1

    def bare() -> None:
        coefficients = operator.grid.analyse(fields)
        for _ in range(applied):
            operator.grid.analyse(operator.grid.synthesise(coefficients))

    # in turn, so that other work on the machine falls on both
    pairs = [(seconds(lambda: solve_sea_level(operator, load=load)), seconds(bare)) for _ in range(15)]
    ratio = float(np.median([one / other for one, other in pairs]))
    benchmark.pedantic(lambda: solve_sea_level(operator, load=load), rounds=3)
    benchmark.extra_info["ratio to its bare transforms"] = ratio
    kind = "of a phasor" if isinstance(factor, complex) else "of a real load"
    measured(f"one solve of the sea-level equation to degree 180, {kind}", "its bare transforms", ratio, 1.6)
    assert ratio < 1.6


def test_twenty_footprints(benchmark, operator: SeaLevelOperator) -> None:
    benchmark.pedantic(lambda: site_footprints(operator, SITES), rounds=3)
    assert benchmark.stats.stats.min < 5.0


def test_a_hundred_thousand_draws(benchmark, operator: SeaLevelOperator) -> None:
    responses = regional_responses(operator, site_footprints(operator, SITES), builtin_loads(("nominal",))[0])
    rng = np.random.default_rng(1)
    tracemalloc.start()
    drawn = draw_admittances(responses, rng=rng)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert drawn.shape == (100_000, 20)
    # the result takes 32 MB, a chunk of ten thousand draws 28 MB
    benchmark.extra_info["peak memory / MB"] = peak / 1e6
    assert peak < 70e6
    benchmark.pedantic(lambda: draw_admittances(responses, rng=rng), rounds=5)
    assert benchmark.stats.stats.min < 1.0


def test_ten_thousand_degrees(benchmark) -> None:
    benchmark.pedantic(lambda: love_numbers(max_degree=10_000), rounds=2)
    assert benchmark.stats.stats.min < 8.0
