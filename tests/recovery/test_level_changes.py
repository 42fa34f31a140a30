"""Changes of level at unknown times: how many are found, how many are invented, and what either does to the cycle.

The tables of docs/theory/daily_means.md:  pytest -s -m slow tests/recovery/test_level_changes.py
"""

from collections.abc import Callable

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.signal import lfilter

from massfit.annual.fit import SiteFit, fit_site
from massfit.annual.record import ReducedRecord
from massfit.records.hourly import instants
from massfit.records.level_changes import find_level_changes
from massfit.records.record import LevelChange

DAY = np.timedelta64(1, "D")
FAMILIES = ("white", "AR(1)", "flicker", "Matern", "power law", "eddies", "heavy tails")
"""The last three were not looked at when the thresholds were chosen."""


def ornstein_uhlenbeck(rng: np.random.Generator, n: int, sd: float, time: float) -> np.ndarray:
    decay = np.exp(-1.0 / time)
    kicks = rng.normal(scale=sd * np.sqrt(1.0 - decay**2), size=n)
    kicks[0] = rng.normal(scale=sd)
    return lfilter([1.0], [1.0, -decay], kicks)


def power_law(rng: np.random.Generator, n: int, sd: float, index: float) -> np.ndarray:
    """White kicks under a fractional filter (Kasdin 1995): index 1 is flicker noise."""
    steps = np.arange(1.0, n)
    weights = np.concatenate([[1.0], np.cumprod((steps - 1.0 + index / 2.0) / steps)])
    return np.fft.irfft(np.fft.rfft(weights, 2 * n) * np.fft.rfft(rng.normal(scale=sd, size=n), 2 * n), 2 * n)[:n]


def matern(rng: np.random.Generator, n: int, sd: float, time: float) -> np.ndarray:
    """Smoothness 3/2: a critically damped oscillator driven by white noise, stepped exactly."""
    rate = 1.0 / time
    turn = expm(np.array([[0.0, 1.0], [-(rate**2), -2.0 * rate]]))
    stationary = np.diag([1.0, rate**2])
    kicks = rng.normal(size=(n, 2)) @ np.linalg.cholesky(stationary - turn @ stationary @ turn.T).T
    driven = kicks[:, 0].copy()
    driven[1:] += turn[0, 1] * kicks[:-1, 1] - turn[1, 1] * kicks[:-1, 0]
    return sd * lfilter([1.0], [1.0, -2.0 * np.exp(-rate), np.exp(-2.0 * rate)], driven)


def eddies(rng: np.random.Generator, n: int, sd: float, period: float) -> np.ndarray:
    """AR(2) with a period, which it keeps for about one cycle."""
    decay = np.exp(-1.0 / period)
    values = lfilter([1.0], [1.0, -2.0 * decay * np.cos(2 * np.pi / period), decay**2], rng.normal(size=n))
    return sd * values / values.std()


def hours_of_noise(rng: np.random.Generator, family: str, n: int) -> np.ndarray:
    """Pa; weather of 0.3 to 1 hPa over 5 to 50 days, white noise of 0.05 to 0.3 hPa in a daily mean, and drift."""
    white = 100.0 * np.exp(rng.uniform(np.log(0.05), np.log(0.3))) * np.sqrt(24.0)
    red, time = 100.0 * rng.uniform(0.3, 1.0), 24.0 * rng.uniform(5.0, 50.0)
    noise: dict[str, Callable[[], np.ndarray]] = {
        "white": lambda: np.zeros(n),
        "AR(1)": lambda: ornstein_uhlenbeck(rng, n, red, time),
        "flicker": lambda: power_law(rng, n, 100.0 * rng.uniform(0.1, 0.35) / 24**0.25, 1.0),
        "Matern": lambda: matern(rng, n, red, time / 2.0),
        "power law": lambda: power_law(rng, n, 100.0 * rng.uniform(0.05, 0.2) / 24**0.5, 1.5),
        "eddies": lambda: eddies(rng, n, 300.0, 24.0 * rng.uniform(50.0, 120.0)),
        "heavy tails": lambda: ornstein_uhlenbeck(rng, n, red, time) + 40.0 * rng.standard_t(2.5, n),
    }
    days = np.arange(n) / 24.0
    size, time_constant = 1800.0 * np.exp(0.5 * rng.normal()), np.exp(rng.uniform(1.1, 5.3))
    drift = rng.choice([-1.0, 1.0]) * size * np.exp(-days / time_constant)
    cycle = 85.0 * np.cos(2 * np.pi * days / 365.2422 - rng.uniform(0.0, 6.28))
    return noise[family]() + rng.normal(scale=white, size=n) + drift + cycle + rng.normal(scale=300.0) * days / 365.0


def found(level: np.ndarray, *, daily: bool = False) -> tuple[LevelChange, ...]:
    """Changes in hours, or in their daily means."""
    if daily:
        means = level[: level.size // 24 * 24].reshape(-1, 24).mean(axis=1)
        return find_level_changes(np.arange(means.size) + 0.5, means, (), coarse=True)[0]
    return find_level_changes(np.arange(level.size) / 24.0, level, (), coarse=False)[0]


def false_alarms(family: str, years: float) -> tuple[float, int, int]:
    """Years looked at, and changes found where there are none, in hours and in days."""
    rng = np.random.default_rng([2011, FAMILIES.index(family)])
    seen, in_hours, in_days = 0.0, 0, 0
    while seen < years:
        length = rng.uniform(0.9, 5.0)
        level = hours_of_noise(rng, family, int(length * 8766))
        in_hours += len(found(level))
        in_days += len(found(level, daily=True))
        seen += length
    return seen, in_hours, in_days


@pytest.mark.parametrize("family", FAMILIES)
def test_less_than_one_false_alarm_in_twenty_years(family: str) -> None:
    years, in_hours, in_days = false_alarms(family, 20.0)
    assert max(in_hours, in_days) <= years / 20.0


@pytest.mark.slow
def test_false_alarms_of_many_years() -> None:
    print("\n| noise | record-years | false alarms, hours | false alarms, daily means |\n|---|---|---|---|")
    for family in FAMILIES:
        years, in_hours, in_days = false_alarms(family, 400.0)
        print(f"| {family} | {years:.0f} | {in_hours} | {in_days} |")
        assert max(in_hours, in_days) < years / 20.0


def detection(family: str, size: float, length_days: float, count: int) -> tuple[float, float, float]:
    """Share of changes that is found, share named rightly among these, and standard deviation of the size, Pa."""
    rng = np.random.default_rng([2012, FAMILIES.index(family), int(size), int(10 * length_days)])
    errors, named = [], 0
    for _ in range(count):
        hours = int(rng.uniform(1.0, 3.0) * 8766)
        days, at, sign = np.arange(hours) / 24.0, rng.uniform(0.1, 0.9) * hours / 24.0, rng.choice([-1.0, 1.0])
        shape = np.clip((days - at) / length_days, 0.0, 1.0) if length_days else days >= at
        changes = found(hours_of_noise(rng, family, hours) + sign * size * shape)
        near = [
            change for change in changes
            if change.end >= instants(np.array(at - 2.0))
            and change.start <= instants(np.array(at + length_days + 2.0))
        ]  # fmt: skip
        if near:
            errors.append(sum(change.size or 0.0 for change in near) - sign * size)
            named += any(change.kind == ("ramp" if length_days >= 1.0 else "step") for change in near)
    return len(errors) / count, named / max(len(errors), 1), float(np.std(errors)) if errors else np.nan


@pytest.mark.parametrize(("size", "length_days", "least"), [(1000.0, 0.0, 1.0), (5000.0, 3.0, 1.0), (500.0, 0.0, 0.8)])
def test_steps_and_ramps_are_found(size: float, length_days: float, least: float) -> None:
    share, named, error = detection("AR(1)", size, length_days, 10)
    assert share >= least
    assert size < 1000.0 or named >= 0.9
    # hPa; the weather of half a day to three days on either side
    assert error < 100.0


@pytest.mark.slow
def test_table_of_detection() -> None:
    print("\n| change | noise | 5 hPa | 10 hPa | 20 hPa | 50 hPa |\n|---|---|---|---|---|---|")
    for length_days, name in ((0.0, "step"), (0.25, "6 hours"), (1.0, "1 day"), (3.0, "3 days"), (7.0, "7 days")):
        for family in ("AR(1)", "flicker", "Matern", "eddies"):
            cells = [detection(family, size, length_days, 60) for size in (500.0, 1000.0, 2000.0, 5000.0)]
            texts = [f"{share:.0%}, {named:.0%}, {error / 100:.1f}" if share else "0%" for share, named, error in cells]
            print(f"| {name} | {family} | {' | '.join(texts)} |")
            assert all(share >= 0.9 for share, _, _ in cells[1:]) or family == "eddies"


def fitted(days: int, *, step: float, declared: tuple[float, ...], seed: int) -> SiteFit:
    """Fit of an invented daily record with a step in its middle, told or not."""
    rng = np.random.default_rng([2013, seed])
    time = np.datetime64("2016-01-01T12", "ns") + np.arange(days) * DAY
    pressure = ornstein_uhlenbeck(rng, days, 60.0, 15.0) + rng.normal(scale=10.0, size=days)
    pressure += 2000.0 * np.exp(-np.arange(days) / 40.0) + step * (np.arange(days) >= days // 2)
    steps = tuple(time[int(share * days)] - DAY // 2 for share in declared)
    record = ReducedRecord("A/1", time, pressure, np.empty((0, days)), time[0] - DAY // 2, steps=steps)
    return fit_site([record], models=[], reference_year=2016, rng=np.random.default_rng(1))


def change_of_phasor(days: int, step: float, declared: tuple[float, ...], seed: int) -> tuple[float, float]:
    """By how much the phasor moves, and its sigma grows, against the record without a step, Pa and ratio."""
    clean = fitted(days, step=0.0, declared=(), seed=seed).single_gaussian()
    other = fitted(days, step=step, declared=declared, seed=seed).single_gaussian()
    ratio = np.sqrt(np.trace(np.squeeze(other[1])) / np.trace(np.squeeze(clean[1])))
    return float(np.linalg.norm(other[0][0] - clean[0][0])), float(ratio)


def test_a_step_left_in_moves_the_phasor_and_a_false_one_widens_it() -> None:
    missed, _ = change_of_phasor(500, 1000.0, (), 0)
    told, told_ratio = change_of_phasor(500, 1000.0, (0.5,), 0)
    false, false_ratio = change_of_phasor(500, 0.0, (0.3,), 0)
    assert missed > 3.0 * told
    assert max(told_ratio, false_ratio) < 3.0
    assert false < missed


@pytest.mark.slow
def test_table_of_what_steps_do_to_the_phasor() -> None:
    print("\n| length | 5 hPa missed | 10 hPa missed | 10 hPa fitted | false step |\n|---|---|---|---|---|")
    for days, name in ((365, "1 yr"), (730, "2 yr"), (1460, "4 yr")):
        cases = [(500.0, ()), (1000.0, ()), (1000.0, (0.5,)), (0.0, (0.3,))]
        cells = np.array([[change_of_phasor(days, *case, seed) for seed in range(5)] for case in cases]).mean(axis=1)
        print(f"| {name} | " + " | ".join(f"{moved / 100:.2f} hPa, {ratio:.2f}" for moved, ratio in cells) + " |")
        assert cells[1, 0] > cells[2, 0]
