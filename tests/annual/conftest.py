"""Invented deployments for the tests of one site."""

from collections.abc import Callable

import numpy as np
import pytest

from massfit.annual.record import ReducedRecord

YEAR = 365.2422
ORIGIN = np.datetime64("2016-01-01T00:00", "ns")


def invent(
    rng: np.random.Generator,
    *,
    count: int = 730,
    first: float = 0.5,
    every: int = 1,
    phasor: tuple[float, float] = (60.0, 50.0),
    semi: tuple[float, float] = (10.0, -8.0),
    slope: float = 100.0,
    size: float = 0.0,
    time_constant: float = 60.0,
    white: float = 10.0,
    ocean: np.ndarray | None = None,
    label: str = "1",
    drift: str = "exponential+linear",
    steps: tuple[np.datetime64, ...] = (),
    circulation: np.ndarray | None = None,
) -> ReducedRecord:
    """One deployment in Pa; days count from 1 January 2016, slope is per year."""
    days = first + every * np.arange(count)
    angle = 2 * np.pi * days / YEAR
    pressure = phasor[0] * np.cos(angle) + phasor[1] * np.sin(angle)
    pressure += semi[0] * np.cos(2 * angle) + semi[1] * np.sin(2 * angle)
    age = days - first + 0.5
    pressure += slope * age / 365.25 + size * np.exp(-age / time_constant) + white * rng.normal(size=count)
    if ocean is not None:
        pressure += ocean
    time = ORIGIN + np.round(days * 86400).astype("m8[s]")
    models = np.empty((0, count)) if circulation is None else circulation
    return ReducedRecord(label, time, pressure, models, time[0] - np.timedelta64(12, "h"), drift, steps)


def ornstein_uhlenbeck(rng: np.random.Generator, count: int, sd: float, time_scale: float) -> np.ndarray:
    """Exact draw at daily steps."""
    keep = np.exp(-1 / time_scale)
    values = np.empty(count)
    values[0] = sd * rng.normal()
    for i in range(1, count):
        values[i] = keep * values[i - 1] + sd * np.sqrt(1 - keep**2) * rng.normal()
    return values


@pytest.fixture(scope="session")
def make_record() -> Callable[..., ReducedRecord]:
    return invent


@pytest.fixture(scope="session")
def make_red() -> Callable[..., np.ndarray]:
    return ornstein_uhlenbeck
