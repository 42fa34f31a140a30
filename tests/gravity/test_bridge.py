"""The network across a gap between satellites, by hand."""

import numpy as np
import pytest

from massfit.gravity.bridge import bridge_step, bridged, largest_gap
from massfit.gravity.field import Span


def span(start: str, end: str) -> Span:
    return Span(np.datetime64(start, "s"), np.datetime64(end, "s"))


def months(first: str, last: str) -> list[Span]:
    return [span(str(month), str(month + 1)) for month in np.arange(np.datetime64(first), np.datetime64(last))]


def test_single_missing_months_are_no_gap() -> None:
    assert largest_gap(months("2015-01", "2015-06") + months("2015-07", "2016-01")) is None
    gap = largest_gap(months("2015-01", "2015-06") + months("2016-03", "2016-07"))
    assert gap is not None
    assert (str(gap.start)[:10], str(gap.end)[:10]) == ("2015-06-01", "2016-03-01")


def test_years_count_by_their_days() -> None:
    rng = np.random.default_rng(4)
    draws = np.array([10.0, 20.0, 40.0])[:, None] + 0.1 * rng.standard_normal((400, 3, 2))
    before, inside, after = bridged(
        draws, (2015, 2016, 2017), span("2015-01-01", "2018-01-01"), span("2016-07-01", "2017-04-11")
    )
    # 365 days of 2015 and 182 of 2016; 184 of 2016 and 100 of 2017; 265 of 2017
    assert before.phasor.real == pytest.approx((365 * 10 + 182 * 20) / 547, abs=0.02)
    assert inside.phasor.real == pytest.approx((184 * 20 + 100 * 40) / 284, abs=0.02)
    assert after.phasor.imag == pytest.approx(40.0, abs=0.02)
    assert after.covariance[0, 0] == pytest.approx(0.01, rel=0.3)
    expected = 0.01 * ((184 / 284) ** 2 + (100 / 284) ** 2)
    assert inside.covariance[1, 1] == pytest.approx(expected, rel=0.3)


def test_what_the_records_say_of_the_gap() -> None:
    rng = np.random.default_rng(6)
    years, window, gap = (2015, 2016, 2017), span("2015-01-01", "2018-01-01"), span("2016-01-01", "2017-01-01")
    sure = np.array([10.0, 25.0, 10.0])[:, None] + 0.3 * rng.standard_normal((4000, 3, 2))
    found = bridge_step(sure, years, window, gap, year_sd=5.0)
    assert found is not None
    assert found.phasor == pytest.approx(15.0 * (1 + 1j), abs=0.05)
    # a year less the mean of two others: 1 + 1/4 + 1/4, days of leap years aside
    assert found.assumed_sd == pytest.approx(5.0 * np.sqrt(1.5), rel=1e-3)
    assert found.learned == pytest.approx(1.0 - (0.3 / 5.0) ** 2, abs=2e-3)
    nothing = bridge_step(5.0 * rng.standard_normal((4000, 3, 2)), years, window, gap, year_sd=5.0)
    assert nothing is not None
    assert nothing.learned == pytest.approx(0.0, abs=0.05)
    assert bridge_step(sure, years, window, span("2019-01-01", "2020-01-01"), year_sd=5.0) is None


def test_parts_outside_the_window_are_left_out() -> None:
    draws = np.ones((50, 1, 2))
    parts = bridged(draws, (2015,), span("2015-01-01", "2016-01-01"), span("2015-10-01", "2016-09-01"))
    assert [part.name for part in parts] == ["before the gap", "in the gap"]
