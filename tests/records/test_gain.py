import numpy as np
import pytest

from massfit.records.gain import find_gain_change
from massfit.records.tidal_lines import SHORT_TIDES
from massfit.records.tides import fit_short_tides

DAYS = 5200.0 + np.arange(24 * 500) / 24.0


def tide(days: np.ndarray) -> np.ndarray:
    """M2, S2, K1, O1 and N2 of decimetres, with the modulation by the node of M2, K1 and O1 (Pugh 1987)."""
    node = np.radians(125.04 - 0.0529538 * days)
    lines = {"M2": (3000.0, -0.037, -2.1), "S2": (1200.0, 0.0, 0.0), "K1": (1500.0, 0.115, -8.9),
             "O1": (1000.0, 0.187, 10.8), "N2": (600.0, -0.037, -2.1)}  # fmt: skip
    height = np.zeros(days.size)
    for name, (size, swing, turn) in lines.items():
        angle = 2 * np.pi * SHORT_TIDES[name] * days + np.radians(turn) * np.sin(node)
        height += size * (1.0 + swing * np.cos(node)) * np.cos(angle)
    return height


def searched(days: np.ndarray, pressure: np.ndarray) -> tuple[float, float] | None:
    return find_gain_change(days, pressure, fit_short_tides(days, pressure).constants)


@pytest.mark.parametrize("ratio", [0.9, 1.04, 1.5])
def test_the_day_and_the_ratio_are_found(rng: np.random.Generator, ratio: float) -> None:
    at = 5480.3
    pressure = np.where(at > DAYS, 1.0, ratio) * tide(DAYS) + rng.normal(scale=60.0, size=DAYS.size)
    day, found = searched(DAYS, pressure)
    assert day == pytest.approx(at, abs=5.0)
    assert found == pytest.approx(ratio, rel=0.006)


def test_nothing_is_found_through_years_of_the_turning_node(rng: np.random.Generator) -> None:
    days = 5200.0 + np.arange(24 * 1500) / 24.0
    assert searched(days, tide(days) + rng.normal(scale=60.0, size=days.size)) is None


@pytest.mark.parametrize("shape", ["step", "drift", "restless", "gap", "season", "S1"])
def test_what_is_no_change_of_gain(rng: np.random.Generator, shape: str) -> None:
    pressure = tide(DAYS) + rng.normal(scale=60.0, size=DAYS.size)
    days = DAYS
    if shape == "step":
        pressure += 9000.0 * (DAYS > 5400.2)
    elif shape == "drift":
        pressure += 5000.0 * np.exp(-(DAYS - DAYS[0]) / 20.0)
    elif shape == "season":
        pressure *= 1.0 + 0.05 * np.cos(2 * np.pi * DAYS / 365.2422)
    elif shape == "S1":
        pressure += 150.0 * np.cos(2 * np.pi * DAYS)
    elif shape == "restless":
        pressure += rng.normal(scale=600.0, size=DAYS.size) * (DAYS > 5450)
    else:
        kept = (DAYS < 5350) | (DAYS > 5410)
        days, pressure = DAYS[kept], pressure[kept]
    assert searched(days, pressure) is None


def test_records_that_cannot_tell() -> None:
    assert find_gain_change(DAYS[:500], tide(DAYS)[:500], ()) is None
    assert find_gain_change(DAYS, np.zeros(DAYS.size), ()) is None
