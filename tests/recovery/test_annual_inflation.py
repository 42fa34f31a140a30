"""How far a short record inflates the sigma of the annual phasor: the price of not knowing the drift."""

import numpy as np
import pytest

from massfit.annual.diagnostics import diagnose_site
from massfit.annual.fit import fit_site
from massfit.annual.record import ReducedRecord
from massfit.settings import Priors

PRIORS = Priors(noise_forms=("exponential",))
YEARS = (0.75, 1.0, 1.5, 2.0, 3.0)
TIMES = (10.0, 30.0, 100.0, 300.0)


def inflation(years: float, time_constant: float, seed: int) -> float:
    """Sigma with drift, time constant free, and semi-annual cycle, over that with level and annual cycle alone."""
    rng = np.random.default_rng([seed, round(100 * years), round(time_constant)])
    days = np.arange(round(365.25 * years))
    keep = np.exp(-1 / 20.0)
    ocean = np.zeros(len(days))
    ocean[0] = 30 * rng.normal()
    for day in days[1:]:
        ocean[day] = keep * ocean[day - 1] + 30 * np.sqrt(1 - keep**2) * rng.normal()
    angle = 2 * np.pi * days / 365.2422
    pressure = ocean + 60 * np.cos(angle) + 50 * np.sin(angle) + 10 * rng.normal(size=len(days))
    pressure += 300 * days / 365.25 * rng.normal() + rng.choice([-1500, 1500]) * np.exp(-days / time_constant)
    time = np.datetime64("2016-01-01T12", "ns") + days * np.timedelta64(1, "D")
    record = ReducedRecord("1", time, pressure, np.empty((0, len(days))), time[0] - np.timedelta64(12, "h"))
    fit = fit_site([record], models=[], reference_year=2016, rng=rng, priors=PRIORS)
    return diagnose_site([record], fit, reference_year=2016, rng=rng, priors=PRIORS).inflation


@pytest.mark.parametrize(
    # ranges over time constants, measured for this project by an earlier fit written apart from this one
    ("years", "time_constant", "least", "most"),
    [(0.75, 100.0, 2.7, 17.0), (1.0, 100.0, 1.5, 5.9), (3.0, 30.0, 1.0, 1.1)],
)
def test_inflation_lies_in_the_known_ranges(years, time_constant, least, most):
    assert least < inflation(years, time_constant, 1) < most


@pytest.mark.slow
def test_table_of_inflation():
    """Prints the table of docs/theory/annual.md: means over six invented records each."""
    print("\nyears | " + " | ".join(f"{time:.0f} d" for time in TIMES))
    table = np.array([[np.mean([inflation(y, t, seed) for seed in range(6)]) for t in TIMES] for y in YEARS])
    for years, row in zip(YEARS, table, strict=True):
        print(f"{years} | " + " | ".join(f"{value:.2f}" for value in row))
    # longer records always pay less
    assert np.all(np.diff(table.max(axis=1)) < 0)
    assert np.all(table > 1.0)
