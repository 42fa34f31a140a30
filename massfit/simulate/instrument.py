"""Invented recorders: when they lay on the bottom, how they drift, and what befell them."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.constants import JULIAN_YEAR_DAYS
from massfit.records.record import Record
from massfit.simulate.clock import Clock
from massfit.simulate.options import SimulationOptions
from massfit.site import Interval

_WHITE_DAILY_SD = 8.0  # Pa on a daily mean
_OF_A_SAMPLE = 1.0  # noise of one sample over that of a daily mean
_SPIKE_EVERY_DAYS = 60.0
_LOST_EVERY_DAYS = 40.0
_LIFTED, _SWAYING = 9000.0, 1500.0  # Pa: mean and standard deviation while off the bottom


@dataclass(frozen=True)
class Deployment:
    """One recorder on the bottom.

    Parameters
    ----------
    first_day, last_day : int
        Days of the clock, both used.
    offset : float
        Pa.
    slope_per_year, exponential, time_constant_days : float
        Drift: Pa a year, Pa at the start, days.
    white_sd : float
        Instrument noise of a daily mean, Pa.
    step_day : int, optional
        Day of the clock at whose first instant the recorder moved.
    step : float
        Pa.
    disturbed : tuple of int, optional
        First and last day of the clock on which the recorder did not rest on the bottom.
    """

    first_day: int
    last_day: int
    offset: float
    slope_per_year: float
    exponential: float
    time_constant_days: float
    white_sd: float
    step_day: int | None = None
    step: float = 0.0
    disturbed: tuple[int, int] | None = None

    def drift(self, days: NDArray[np.float64]) -> NDArray[np.float64]:
        """Drift at days of the clock, Pa, counted from the first instant on the bottom."""
        elapsed = days - self.first_day
        return self.slope_per_year * elapsed / JULIAN_YEAR_DAYS + self.exponential * np.exp(
            -elapsed / self.time_constant_days
        )

    def summary(self, label: str) -> Mapping[str, Any]:
        """Truth about the recorder, for truth.json."""
        return {
            "deployment": label,
            "slope_hpa_per_year": self.slope_per_year / 100.0,
            "exponential_hpa": self.exponential / 100.0,
            "time_constant_days": self.time_constant_days,
            "step_hpa": self.step / 100.0,
        }


def draw_deployments(rng: np.random.Generator, n_days: int, role: str) -> tuple[Deployment, ...]:
    """Draw recorders that followed each other at one site.

    Parameters
    ----------
    rng : numpy.random.Generator
    n_days : int
        Length of the network's period.
    role : str
        "overlap": the second was laid about ten months before the first was taken up; "short": a single one
        for little more than a year; "step": the first was moved; "disturbed": the first was lifted for some days;
        anything else: the usual chain.
    """
    intervals = _intervals(rng, n_days, role)
    return tuple(
        _draw_deployment(rng, first, last, role if number == 0 else "")
        for number, (first, last) in enumerate(intervals)
    )


def _intervals(rng: np.random.Generator, n_days: int, role: str) -> list[tuple[int, int]]:
    if role == "overlap":
        taken_up = round(rng.uniform(0.5, 0.6) * n_days)
        return [(0, taken_up), (taken_up - min(300, taken_up // 2), n_days - 1)]
    if role == "short":
        length = min(n_days, int(rng.integers(400, 500)))
        first = int(rng.integers(0, n_days - length + 1))
        return [(first, first + length - 1)]
    count = max(1, round(n_days / rng.uniform(550.0, 900.0)))
    turns = np.linspace(0, n_days, count + 1).round().astype(int)
    turns[1:-1] += rng.integers(-60, 61, count - 1)
    ashore = rng.integers(2, 26, count)  # days between two recorders
    late, early = int(rng.integers(0, n_days // 15)), int(rng.integers(0, n_days // 15))
    firsts = [late, *(turns[1:-1] + ashore[1:])]
    lasts = [*(turns[1:-1] - 1), n_days - 1 - early]
    return [(int(first), int(last)) for first, last in zip(firsts, lasts, strict=True)]


def _draw_deployment(rng: np.random.Generator, first: int, last: int, role: str) -> Deployment:
    stepped = role == "step"
    middle = first + round(rng.uniform(0.35, 0.65) * (last - first))
    return Deployment(
        first_day=first,
        last_day=last,
        offset=float(rng.normal(0.0, 5000.0)),
        slope_per_year=float(rng.normal(0.0, 300.0)),
        exponential=float(rng.choice([-1.0, 1.0]) * 1800.0 * np.exp(rng.normal(0.0, 0.5))),
        time_constant_days=float(np.exp(rng.uniform(np.log(10.0), np.log(200.0)))),
        white_sd=float(_WHITE_DAILY_SD * np.exp(rng.normal(0.0, 0.3))),
        step_day=middle if stepped else None,
        step=float(rng.choice([-1.0, 1.0]) * rng.uniform(250.0, 600.0)) if stepped else 0.0,
        disturbed=(middle, middle + 11) if role == "disturbed" else None,
    )


def exclusions(deployments: Sequence[Deployment], clock: Clock) -> tuple[Interval, ...]:
    """Intervals that the analyst leaves out, by the deck log.

    Parameters
    ----------
    deployments : sequence of Deployment
        Of one site.
    clock : Clock
    """
    return tuple(
        Interval(
            (clock.first_day + deployment.disturbed[0]).astype("datetime64[ns]"),
            (clock.first_day + deployment.disturbed[1] + 1).astype("datetime64[ns]") - np.timedelta64(1, "ns"),
            "lifted by a drifting mooring line",
        )
        for deployment in deployments
        if deployment.disturbed is not None
    )


def observe(
    rng: np.random.Generator,
    deployment: Deployment,
    clock: Clock,
    sea_floor_pressure: NDArray[np.float64],
    *,
    blank: Record,
    options: SimulationOptions,
) -> Record:
    """Write down what a recorder saw.

    Parameters
    ----------
    rng : numpy.random.Generator
    deployment : Deployment
    clock : Clock
    sea_floor_pressure : (n_time,) array
        Anomaly at the site on the clock, Pa.
    blank : Record
        Empty, with site, label, reference and source.
    options : SimulationOptions
        Factor on the white noise; whether gaps, lost samples and spikes occur.

    Returns
    -------
    Record
        Whole pascals, the resolution of the recorder.
    """
    per_day = clock.samples_per_day
    part = slice(deployment.first_day * per_day, (deployment.last_day + 1) * per_day)
    time = clock.time[part]
    days = (np.arange(part.start, part.stop) + 0.5) / per_day
    pressure = sea_floor_pressure[part] + deployment.offset + deployment.drift(days)
    pressure += options.noise * deployment.white_sd * _white(rng, time.size, per_day)
    steps: tuple[np.datetime64, ...] = ()
    if deployment.step_day is not None:
        pressure[days > deployment.step_day] += deployment.step
        steps = ((clock.first_day + deployment.step_day).astype("datetime64[ns]"),)
    if deployment.disturbed is not None:
        aloft = (days > deployment.disturbed[0]) & (days < deployment.disturbed[1] + 1)
        pressure[aloft] += rng.normal(-_LIFTED, _SWAYING, np.count_nonzero(aloft))
    pressure = np.round(pressure)
    if options.incidents:
        if per_day > 1:
            _spoil(rng, pressure, days)
        keep = _outside_gaps(rng, days)
        time, pressure = time[keep], pressure[keep]
    return replace(blank, time=time, pressure=pressure, steps=steps)


def _white(rng: np.random.Generator, count: int, per_day: int) -> NDArray[np.float64]:
    """Noise of samples whose daily mean has a standard deviation of one.

    Samples within an hour share most of theirs: electronics and temperature change slowly, and 5760 independent errors
    a day would have to be large to leave as much in its mean (common practice).
    """
    held = max(per_day // 24, 1)
    hours = np.sqrt(per_day / held) * rng.standard_normal(-(-count // held))
    if held == 1:
        return np.asarray(hours)
    smooth = np.interp(np.arange(count), held * (np.arange(hours.size) + 0.5), hours)
    return np.asarray(smooth + _OF_A_SAMPLE * rng.standard_normal(count))


def _spoil(rng: np.random.Generator, pressure: NDArray[np.float64], days: NDArray[np.float64]) -> None:
    """Add spikes and lost samples to a fresh record, in place."""
    length = np.ptp(days)
    spikes = rng.integers(0, days.size, rng.poisson(length / _SPIKE_EVERY_DAYS))
    sizes = np.round(10.0 ** rng.uniform(2.5, 4.5, spikes.size)) * rng.choice([-1.0, 1.0], spikes.size)
    np.add.at(pressure, spikes, sizes)
    pressure[rng.integers(0, days.size, rng.poisson(length / _LOST_EVERY_DAYS))] = np.nan


def _outside_gaps(rng: np.random.Generator, days: NDArray[np.float64]) -> NDArray[np.bool_]:
    keep = np.ones(days.size, dtype=bool)
    for _ in range(rng.poisson(1.0)):
        start = rng.uniform(days[0] + 30.0, days[-1] - 30.0)
        keep &= ~((days > start) & (days < start + rng.uniform(1.0, 20.0)))
    return keep
