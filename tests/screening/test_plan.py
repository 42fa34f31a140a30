"""The cut into parts: whole years, within the memory, whatever the field is stored in."""

from dataclasses import dataclass

import numpy as np
import pytest
from screening.invented_ocean import daily

from massfit.screening.design import make_design
from massfit.screening.plan import make_plan
from massfit.screening.times import time_axis


@dataclass(frozen=True, eq=False)
class Shape:
    """A field of which nothing but its shape is known."""

    time: np.ndarray
    latitude_deg: np.ndarray
    longitude_deg: np.ndarray
    chunks: tuple[int, int]

    def read(self, when: slice, rows: slice) -> np.ndarray:
        raise AssertionError((when, rows))


def shape(step: int, degrees: float, chunks: tuple[int, int], years: int = 10) -> Shape:
    time = daily("2000-01-01", f"{2000 + years}-01-01", step)
    return Shape(time, np.arange(-90.0, 90.0, degrees), np.arange(0.0, 360.0, degrees), chunks)


SHAPES = {
    "one degree, five days": (shape(5, 1.0, (1, 180)), 1.5),
    "quarter degree, daily": (shape(1, 0.25, (1, 720)), 1.5),
    "twelfth of a degree": (shape(5, 1 / 12, (1, 2160)), 1.5),
    "stored by place": (shape(1, 0.5, (3653, 10)), 1.5),
    "stored in great pieces": (shape(1, 0.5, (3653, 60)), 1.5),
    "stored by year": (shape(5, 0.5, (73, 90)), 0.5),
}


@pytest.mark.parametrize("name", SHAPES)
def test_every_time_and_row_is_in_one_part(name: str) -> None:
    source, memory_gb = SHAPES[name]
    axis = time_axis("north", source.time)
    plan = make_plan(source, axis, make_design(axis, 2000), memory_gb)
    assert plan.memory_bytes <= memory_gb * 1e9
    assert [span.start for span in plan.spans] == [0, *(span.stop for span in plan.spans[:-1])]
    assert plan.spans[-1].stop == source.time.size
    assert [band.start for band in plan.bands] == [0, *(band.stop for band in plan.bands[:-1])]
    assert plan.bands[-1].stop == source.latitude_deg.size
    # a calendar year is never cut, and stored pieces are read whole
    starts = axis.years[[span.start for span in plan.spans]]
    assert all(axis.years[span.start - 1] != year for span, year in zip(plan.spans[1:], starts[1:], strict=True))
    assert plan.block % min(source.chunks[0], source.time.size) == 0
    assert (plan.readings == 1) == all(band.start % source.chunks[1] == 0 for band in plan.bands)


def test_a_quarter_degree_takes_one_pass() -> None:
    source, memory_gb = SHAPES["quarter degree, daily"]
    axis = time_axis("north", source.time)
    plan = make_plan(source, axis, make_design(axis, 2000), memory_gb)
    assert len(plan.bands) == plan.readings == 1
