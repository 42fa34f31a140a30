"""What benchmarks measure, kept for docs/make_benchmarks.py."""

import json
from collections.abc import Callable

import pytest


@pytest.fixture
def measured(record_property: Callable[[str, object], None]) -> Callable[[str, str, float, float | None], None]:
    """Keep a ratio: of what, beside what, how much, and the most that is wanted; the least where it is negative."""

    def keep(what: str, beside: str, ratio: float, most: float | None) -> None:
        record_property("measured", json.dumps({"what": what, "beside": beside, "ratio": float(ratio), "most": most}))

    return keep
