"""What the way from samples to daily means does to the annual line and to the tides that would look like it.

Prints the table of docs/theory/daily_means.md:  pytest -s -m "slow or not slow" tests/records/test_response.py
"""

import numpy as np
import pytest

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.records.daily import reduce_to_daily
from massfit.records.hourly import days_from_epoch
from massfit.records.record import Record
from massfit.records.tidal_lines import SHORT_TIDES

START = np.datetime64("2014-03-01", "ns")
SECOND = np.timedelta64(1, "s")
PASCAL_PER_MM = 1025.0 * 9.80665e-3
LINES = ("M2", "S2", "K2", "K1", "P1", "S1", "O1")
SPACING_S = {"15 s": 15, "1 min": 60, "15 min": 900, "1 h": 3600}


def stamps(days: float, spacing_s: int, *, gaps: float = 0.0, mixed: bool = False) -> np.ndarray:
    """Middles of the samples; a share of the time lost in gaps of hours to weeks; bursts of 15 s on some days."""
    rng = np.random.default_rng(11)
    seconds = np.arange(0, days * 86_400, spacing_s) + 0.5 * spacing_s
    if mixed:
        bursts = [86_400 * day + 3600 * rng.integers(0, 20) for day in rng.choice(int(days), int(days) // 10, False)]
        seconds = np.unique(np.concatenate([seconds, *(first + np.arange(0, 4 * 3600, 15.0) for first in bursts)]))
    lost = np.zeros(int(days * 24), dtype=bool)
    while lost.mean() < gaps:
        # from hours to weeks, as many hours of each
        length = int(np.exp(rng.uniform(np.log(3.0), np.log(500.0))))
        first = rng.integers(0, lost.size)
        lost[first : first + min(length, int(1.1 * gaps * lost.size - lost.sum()) + 1)] = True
    seconds = seconds[~lost[(seconds // 3600).astype(int)]]
    return START + np.round(seconds * 1000).astype("timedelta64[ms]").astype("timedelta64[ns]")


def wave(time: np.ndarray, cycles_per_day: float) -> np.ndarray:
    return np.cos(2 * np.pi * cycles_per_day * days_from_epoch(time) - 0.7)


def daily(time: np.ndarray, pressure: np.ndarray, *, tides: str = "remove") -> tuple[np.ndarray, np.ndarray]:
    reduced = reduce_to_daily(Record("A", "A/1", time, pressure), tides=tides)
    return days_from_epoch(reduced.time), reduced.pressure


def phasor(days: np.ndarray, values: np.ndarray, harmonic: int = 1) -> complex:
    """Least squares with level, slope, annual and semi-annual cycle, as lags at the epoch."""
    turns = [2 * np.pi * k * days / TROPICAL_YEAR_DAYS for k in (1, 2)]
    waves = [f(turn) for turn in turns for f in (np.cos, np.sin)]
    design = np.column_stack([np.ones(days.size), days - days[0], *waves])
    found = np.linalg.lstsq(design, values, rcond=None)[0]
    return complex(*found[2 * harmonic : 2 * harmonic + 2])


def leak(line: str, time: np.ndarray, *, tides: str = "remove") -> tuple[float, float]:
    """Of a metre of tide: annual amplitude, and the largest of all daily means, mm."""
    days, values = daily(time, 1000.0 * PASCAL_PER_MM * wave(time, SHORT_TIDES[line]), tides=tides)
    annual = abs(phasor(days, values)) if np.ptp(days) > 300 else np.nan
    return annual / PASCAL_PER_MM, float(np.abs(values).max()) / PASCAL_PER_MM


def response(time: np.ndarray, harmonic: int) -> complex:
    """What comes out of an annual or semi-annual cycle, over what goes in."""
    days, values = daily(time, 85.0 * wave(time, harmonic / TROPICAL_YEAR_DAYS))
    return phasor(days, values, harmonic) / (85.0 * np.exp(0.7j))


# length in days, sampling, share of the time in gaps, whether bursts of 15 s are mixed in; the last ones take longer
CASES = [
    (366, "15 min", 0.0, False),
    (366, "1 h", 0.0, False),
    (366, "1 h", 0.1, False),
    (366, "1 h", 0.3, False),
    (366, "15 min", 0.3, True),
    (1096, "1 h", 0.0, False),
    (1096, "1 h", 0.3, False),
    *(
        pytest.param(*case, marks=pytest.mark.slow)
        for case in (
            (366, "15 s", 0.0, False),
            (366, "1 min", 0.1, True),
            (1096, "15 min", 0.1, True),
            (1096, "1 min", 0.3, False),
            (1096, "15 s", 0.0, False),
        )
    ),
]


@pytest.mark.parametrize(("days", "sampling", "gaps", "mixed"), CASES)
def test_annual_line_passes_and_tides_do_not(days: int, sampling: str, gaps: float, mixed: bool) -> None:
    time = stamps(days, SPACING_S[sampling], gaps=gaps, mixed=mixed)
    # a mean over a day holds sin(x) / x = 1 - 1.2e-5 of the annual and 1 - 4.9e-5 of the semi-annual line
    passed = [abs(response(time, harmonic) - 1.0) for harmonic in (1, 2)]
    assert max(passed) < 1e-4
    leaks = {line: leak(line, time) for line in LINES}
    plain = {line: leak(line, time, tides="already-removed") for line in ("K1", "P1")}
    (worst, most_left), (plain_worst, plain_most) = (np.max([*each.values()], axis=0) for each in (leaks, plain))
    print(
        f"\n| {days} d | {sampling} | {gaps:.0%} | {'yes' if mixed else 'no'} | {passed[0]:.1e} | {passed[1]:.1e} "
        f"| {worst:.4f} | {most_left:.4f} | {plain_worst:.1f} | {plain_most:.0f} |"
    )
    for line, (annual, most) in leaks.items():
        # mm of a metre of tide
        assert annual < 0.01, line
        assert most < 0.1, line
    # control: plain means of the day leave 0.27 % and, where hours are missing, far more
    assert min(annual for annual, _ in plain.values()) > 1.0


@pytest.mark.parametrize("sampling", ["1 h", pytest.param("15 s", marks=pytest.mark.slow)])
@pytest.mark.parametrize("line", ["M2", "S2", "K1", "O1"])
def test_two_months_suppress_the_lines_that_they_part(line: str, sampling: str) -> None:
    for gaps in (0.0, 0.3):
        assert leak(line, stamps(60, SPACING_S[sampling], gaps=gaps))[1] < 0.1


def test_a_burst_of_a_day_weighs_no_more_than_its_hours() -> None:
    # the level is 10 hPa higher through one hour of a day, which is sampled every 15 s; the others every 15 min
    quarters, burst = np.arange(450.0, 40 * 86_400, 900.0), 20 * 86_400 + 6 * 3600 + np.arange(2.5, 3600, 15.0)
    seconds = np.concatenate([quarters, burst])
    time = START + np.sort(seconds * 1000).astype("timedelta64[ms]").astype("timedelta64[ns]")
    inside = (time >= START + (20 * 24 + 6) * 3600 * SECOND) & (time < START + (20 * 24 + 7) * 3600 * SECOND)
    level = np.where(inside, 1000.0, 0.0)
    days, values = daily(time, level, tides="already-removed")
    mean = values[np.floor(days) == np.floor(days_from_epoch(START + 20 * 86_400 * SECOND))]
    assert mean == pytest.approx(1000.0 / 24, abs=2.0)
    # control: three quarters of the day's samples lie in that hour
    assert level[np.abs(days_from_epoch(time) - days_from_epoch(START) - 20.5) < 0.5].mean() > 700.0


@pytest.mark.parametrize("first_hour", [0, 3, 9, 15, 18])
def test_a_day_without_six_hours_is_not_bent_by_the_tide(first_hour: int) -> None:
    time = stamps(366, 3600)
    lost = (time >= START + (100 * 24 + first_hour) * 3600 * SECOND) & (
        time < START + (100 * 24 + first_hour + 6) * 3600 * SECOND
    )
    time = time[~lost]
    tide = 1000.0 * PASCAL_PER_MM * (wave(time, SHORT_TIDES["M2"]) + wave(time, SHORT_TIDES["K1"]))
    days, values = daily(time, tide)
    here = np.floor(days) == np.floor(days_from_epoch(START + 100 * 86_400 * SECOND))
    assert abs(values[here][0]) < 0.1 * PASCAL_PER_MM
    # control: the plain mean of its eighteen hours is bent by centimetres
    _, plain = daily(time, tide, tides="already-removed")
    assert abs(plain[here][0]) > 30.0 * PASCAL_PER_MM
