"""Which times are screened."""

import numpy as np
import pytest
from screening.invented_ocean import daily

from massfit.errors import InputError
from massfit.screening.times import time_axis


def months(first: str, last: str) -> np.ndarray:
    return np.arange(first, last, dtype="datetime64[M]").astype("datetime64[ns]") + np.timedelta64(15, "D")


def test_a_time_that_is_missing_is_no_fault() -> None:
    time = np.delete(daily("2010-01-01", "2014-01-01", 1), [100, 101, 500])
    axis = time_axis("north", time)
    assert axis.step_days == 1.0
    assert axis.whole_years == {2010, 2011, 2012, 2013}


def test_months_are_even_enough() -> None:
    assert len(time_axis("north", months("2010-03", "2016-01")).whole_years) == 5


FAULTS = {
    "short": (
        daily("2010-01-01", "2012-06-01", 1),
        "north: time: the field is 2.41 years long. Must be 3 years or more. "
        "Give a longer run; ten years or more tell much better.",
    ),
    "uneven": (
        np.sort(np.concatenate([daily("2010-01-01", "2014-01-01", 5), daily("2012-01-02", "2012-03-01", 5)])),
        "north: time: the steps are uneven: mostly 5 days, but 1 days after 2012-01-03T12:00. "
        "Must be equal steps or calendar months; a time that is missing may be left out. "
        "Average the field over equal intervals.",
    ),
    "gap": (
        np.concatenate([daily("2010-01-01", "2011-01-01", 1), daily("2012-01-01", "2014-01-01", 1)]),
        "north: time: 25 % of the times between the first and the last are missing. At most 10 %. "
        "Give every file, or a stretch without gaps.",
    ),
    "seasons": (
        daily("2000-01-01", "2014-01-01", 91),
        "north: time: the step is 91 days. Must be a month or less. Give daily to monthly means.",
    ),
    "one": (
        daily("2010-01-01", "2010-01-02", 1),
        "north: time: the times do not increase or are fewer than two. Must be in order.",
    ),
}


@pytest.mark.parametrize("name", FAULTS)
def test_other_times_are_refused(name: str) -> None:
    time, message = FAULTS[name]
    with pytest.raises(InputError) as caught:
        time_axis("north", time)
    assert str(caught.value) == message
