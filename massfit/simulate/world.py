"""The truth of an invented network that is the same for all sites."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import STANDARD_GRAVITY
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.phasor import annual_basis, phasor_from_peak
from massfit.simulate.clock import Clock
from massfit.simulate.dynamics import complex_normal, phasor_series
from massfit.simulate.loads import draw_air_pressure, draw_water_load, with_total
from massfit.simulate.noise import ornstein_uhlenbeck

_TRUTH_CELL_DEG = 0.5
_AIR_CELL_DEG = 1.0
_YEAR_SD = 5.0  # Pa per component: the cycle of one year against the mean of all


@dataclass(frozen=True, eq=False)
class World:
    """What every site shares.

    Parameters
    ----------
    annual : complex
        The target A: annual phasor of ocean-mean water, mean over the period, Pa.
    year_changes : (n_time,) array of complex
        Phasor of the running year minus `annual` on the clock, Pa; zero mean over the period.
    semiannual : complex
        Semi-annual phasor of ocean-mean water, Pa.
    water_vapour : complex
        Annual phasor of the mass of water vapour, kg.
    load : LoadPattern
        Annual load of water and snow on land, kg m-2, at half a degree.
    air_annual : complex
        Annual phasor of ocean-mean air pressure, Pa.
    air_pressure : LoadPattern
        Annual phasor of surface pressure, Pa.
    air_series : (n_time,) array
        Ocean-mean air pressure on the clock, Pa.
    """

    annual: complex
    year_changes: NDArray[np.complex128]
    semiannual: complex
    water_vapour: complex
    load: LoadPattern
    air_annual: complex
    air_pressure: LoadPattern
    air_series: NDArray[np.float64]

    def water(self, admittance: complex, days: NDArray[np.float64]) -> NDArray[np.float64]:
        """Pressure of the ocean's water at a site of this admittance, Pa."""
        running = admittance * (self.annual + self.year_changes)
        basis = annual_basis(days)
        seasons = phasor_series(np.array([self.semiannual]), days, harmonic=2)[0]
        return np.asarray(running.real * basis[:, 0] + running.imag * basis[:, 1] + seasons)


def draw_world(rng: np.random.Generator, ocean: OceanFunction, clock: Clock) -> World:
    """Draw ocean mass, load and air, consistent with each other.

    Water on land, water vapour and ocean keep their sum; dry air keeps its mass.

    Parameters
    ----------
    rng : numpy.random.Generator
    ocean : OceanFunction
    clock : Clock
    """
    annual = phasor_from_peak(rng.normal(85.0, 5.0), rng.normal(278.0, 4.0))
    water_vapour = phasor_from_peak(0.65e15 * rng.normal(1.0, 0.05), rng.normal(195.0, 3.0))
    air_annual = phasor_from_peak(rng.normal(63.0, 3.0), rng.normal(192.0, 4.0))
    on_land = -annual * ocean.area_m2 / STANDARD_GRAVITY - water_vapour
    load = draw_water_load(ocean, rng, name="truth", cell_deg=_TRUTH_CELL_DEG, texture=0.35)
    return World(
        annual=annual,
        year_changes=_year_changes(rng, clock),
        semiannual=phasor_from_peak(rng.normal(15.0, 3.0), rng.uniform(0.0, 365.0)),
        water_vapour=water_vapour,
        load=with_total(load, on_land),
        air_annual=air_annual,
        air_pressure=draw_air_pressure(
            ocean, rng, ocean_mean=air_annual, water_vapour=water_vapour, cell_deg=_AIR_CELL_DEG
        ),
        air_series=_air_series(rng, air_annual, clock),
    )


def _year_changes(rng: np.random.Generator, clock: Clock) -> NDArray[np.complex128]:
    years = clock.time.astype("datetime64[Y]").astype(np.int64)
    number = years - years[0]
    changes = complex_normal(rng, _YEAR_SD, int(number[-1]) + 1)[number]
    return np.asarray(changes - changes.mean())


def _air_series(rng: np.random.Generator, annual: complex, clock: Clock) -> NDArray[np.float64]:
    days = clock.days
    seasons = phasor_series(np.array([annual]), days)[0]
    seasons += phasor_series(complex_normal(rng, 9.0, 1), days, harmonic=2)[0]
    weather = ornstein_uhlenbeck(rng, (days.size,), step_days=clock.step_days, time_scale_days=8.0)
    return np.asarray(seasons + 20.0 * weather)
