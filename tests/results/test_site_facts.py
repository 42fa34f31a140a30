"""Coverage, and the spread of the fingerprint, against closed forms."""

import numpy as np
import pytest
import xarray as xr

from massfit.phasor import as_components
from massfit.results.site_facts import coverage, member_table

TIME = np.datetime64("2014-03-01T12", "ns") + np.arange(900) * np.timedelta64(1, "D")


def test_coverage_counts_days_between_first_and_last() -> None:
    used = np.zeros(TIME.size, dtype=bool)
    used[[10, 11, 19]] = True
    assert coverage(TIME, used) == {"first_day": "2014-03-11", "last_day": "2014-03-20", "coverage": 0.3}


def test_spread_of_members() -> None:
    # a quarter turn of a year is 91.31 days
    members = np.array([[1.0 + 0.0j, 1j], [1.2 + 0.0j, 1j]])
    fingerprints = xr.Dataset(
        {"admittance": (("member", "site", "component"), as_components(members))}, {"site": ["A", "B"]}
    )
    second, first = member_table(fingerprints, ["B", "A"])
    assert first["ratio"] == pytest.approx(1.1)
    assert first["ratio_range"] == pytest.approx([1.0, 1.2])
    assert first["spread"] == pytest.approx(0.2 / np.sqrt(2.0))
    assert second["delay_range_days"] == pytest.approx([91.31055, 91.31055])
    assert second["spread"] == pytest.approx(0.0)
    assert member_table(fingerprints.isel(member=[0]), ["A"])[0]["spread"] is None
