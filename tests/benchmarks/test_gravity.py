"""200 monthly fields of degree 96: from the text to the annual phasor, against merely reading the text.

Times are of the processor, within one run. The bare reading turns every number of the file into a float, row by row.
Wanted: 1.5 times at most.
"""

import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from massfit.earth.love import love_numbers
from massfit.fingerprint.ocean import OceanFunction
from massfit.gravity.annual import fit_monthly
from massfit.gravity.field import Conventions, GravityField, Span
from massfit.gravity.kernel import ocean_kernel
from massfit.gravity.monthly import monthly_mass
from massfit.io.gravity.gravity_files import read_gravity_files
from massfit.io.gravity.write_gravity import icgem_text

pytestmark = pytest.mark.benchmark
MONTHS, DEGREE = 200, 96


def seconds(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start


def bare(folder: Path) -> int:
    count = 0
    for path in sorted(folder.glob("*.gfc")):
        body = path.read_text().partition("end_of_head\n")[2]
        count += len([[float(word) for word in line.split()[1:]] for line in body.splitlines()])
    return count


def test_from_text_to_the_annual_phasor(tmp_path: Path, measured) -> None:
    rng = np.random.default_rng(1)
    starts = np.datetime64("2003-01", "M") + np.arange(MONTHS)
    for start in starts:
        span = Span(start.astype("datetime64[s]"), (start + 1).astype("datetime64[s]"))
        values = 1e-9 * np.tril(rng.standard_normal((2, DEGREE + 1, DEGREE + 1)))
        field = GravityField(f"invented {start}", values, Conventions(3.986004415e14, 6378136.3, "zero_tide"), span)
        (tmp_path / f"x_{start}.gfc").write_text(icgem_text(field))
    love, ocean = love_numbers(max_degree=DEGREE), OceanFunction.builtin()

    def whole() -> complex:
        fields = [each for each in read_gravity_files(tmp_path, source="x") if isinstance(each, GravityField)]
        monthly = monthly_mass(fields, love, max_degree=DEGREE)
        kernel = ocean_kernel(ocean, max_degree=DEGREE, buffer_km=300.0)
        return fit_monthly(monthly.spans, kernel.mean(monthly.mass), reference_year=2010).phasor

    reading = min(seconds(lambda: bare(tmp_path)) for _ in range(2))
    chain = min(seconds(whole) for _ in range(2))
    what = "200 monthly fields of degree 96, from text to the annual phasor"
    measured(what, "merely reading the text", chain / reading, 1.5)
    assert chain < 1.5 * reading
