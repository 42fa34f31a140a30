"""Invented ocean circulation: weather and seasons of bottom pressure, and models that catch most of it.

A field is a sum of broad bumps over the ocean, each with its own series. The
whole-ocean mean of every bump is zero, so that circulation holds no ocean mass.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import annual_basis
from massfit.simulate.clock import Clock
from massfit.simulate.noise import ornstein_uhlenbeck
from massfit.simulate.places import unit_vectors

_BUMPS_ON_SPHERE = 160
_BUMP_RADIUS = np.deg2rad(11.0)
_WEATHER_SCALES_DAYS = (5.0, 35.0)  # not those of the noise model of the analysis
_QUIET_SD = 110.0  # Pa, weather at the equator
_STORMY_SD = 150.0  # Pa more at 50 degrees
_ANNUAL_SD = 0.28  # per component, as a share of the weather
_SEMIANNUAL_SD = 0.12


@dataclass(frozen=True, eq=False)
class Bumps:
    """Broad patterns over the ocean, each without an ocean mean.

    Parameters
    ----------
    centres : (n_bump, 3) array
        Unit vectors.
    ocean_mean : (n_bump + 1,) array
        Mean over the ocean of each pattern before it is taken out; the last is the exchange pattern.
    """

    centres: NDArray[np.float64]
    ocean_mean: NDArray[np.float64]

    @property
    def count(self) -> int:
        """Number of bumps, the exchange pattern not counted."""
        return len(self.centres)

    def at(self, latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]) -> NDArray[np.float64]:
        """Patterns at points, (n_point, n_bump + 1).

        The bumps are in Pa. The last pattern is the exchange of water between the quiet low latitudes, where it is
        1, and the rest of the ocean: the shape of the error that models share.
        """
        patterns = _raw_patterns(self.centres, latitude_deg, longitude_deg) - self.ocean_mean
        patterns[:, -1] /= 1.0 - self.ocean_mean[-1]
        return patterns


@lru_cache(maxsize=2)
def ocean_bumps(ocean: OceanFunction) -> Bumps:
    """Bumps on the ocean of a mask, on a spiral that covers the sphere evenly."""
    number = np.arange(_BUMPS_ON_SPHERE) + 0.5
    latitude = np.rad2deg(np.arcsin(1.0 - 2.0 * number / _BUMPS_ON_SPHERE))
    longitude = np.rad2deg(np.pi * (1.0 + np.sqrt(5.0)) * number) % 360.0
    wet = ocean.fraction_at(latitude, longitude) > 0.5
    centres = unit_vectors(latitude[wet], longitude[wet])
    cells = CellGrid(np.arange(-90.0, 91.0, 2.0), np.arange(0.0, 361.0, 2.0))
    weight = (regrid(ocean.fraction, ocean.cells, cells) * cells.cell_area_m2).ravel()
    lat, lon = np.meshgrid(np.arange(-89.0, 90.0, 2.0), np.arange(1.0, 360.0, 2.0), indexing="ij")
    mean = weight @ _raw_patterns(centres, lat.ravel(), lon.ravel()) / weight.sum()
    return Bumps(centres, mean)


def _raw_patterns(
    centres: NDArray[np.float64], latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]
) -> NDArray[np.float64]:
    cosine = np.clip(unit_vectors(latitude_deg, longitude_deg) @ centres.T, -1.0, 1.0)
    bumps = np.exp((cosine - 1.0) / _BUMP_RADIUS**2)
    # equal weather everywhere, before storms are added poleward
    bumps /= np.sqrt(np.sum(bumps**2, axis=1, keepdims=True) + 0.05)
    away = np.minimum(np.abs(latitude_deg) / 50.0, 1.2)
    bumps *= (_QUIET_SD + _STORMY_SD * away**2)[:, None]
    edge = np.clip((np.abs(latitude_deg) - 42.0) / 14.0, 0.0, 1.0)
    low_latitudes = 1.0 - edge**2 * (3.0 - 2.0 * edge)
    return np.column_stack([bumps, low_latitudes])


@dataclass(frozen=True, eq=False)
class Circulation:
    """Series of every pattern.

    Parameters
    ----------
    weather : (n_bump + 1, n_time) array
        Without seasons; the last row (exchange) is zero.
    annual, semiannual : (n_bump + 1,) arrays of complex
        Phasors; the exchange pattern's are in Pa.
    """

    weather: NDArray[np.float64]
    annual: NDArray[np.complex128]
    semiannual: NDArray[np.complex128]

    def series(self, days: NDArray[np.float64]) -> NDArray[np.float64]:
        """Weather and seasons together, (n_bump + 1, n_time)."""
        return self.weather + phasor_series(self.annual, days) + phasor_series(self.semiannual, days, harmonic=2)


def phasor_series(
    phasor: NDArray[np.complex128], days: NDArray[np.float64], *, harmonic: int = 1
) -> NDArray[np.float64]:
    """Series Re[Z exp(-i w t)] of phasors (n,), as (n, n_time)."""
    return np.column_stack([phasor.real, phasor.imag]) @ annual_basis(days, harmonic).T


def complex_normal(rng: np.random.Generator, sd: float, size: int) -> NDArray[np.complex128]:
    """Complex normal numbers with `sd` per component.

    Examples
    --------
    >>> complex_normal(np.random.default_rng(1), 1.0, 2).shape
    (2,)
    """
    parts = rng.normal(0.0, 1.0, (2, size)) * sd
    return np.asarray(parts[0] + 1j * parts[1])


def draw_circulation(rng: np.random.Generator, bumps: Bumps, clock: Clock) -> Circulation:
    """Draw the true circulation on a clock.

    Parameters
    ----------
    rng : numpy.random.Generator
    bumps : Bumps
    clock : Clock
    """
    return Circulation(
        weather=_weather(rng, bumps.count, clock.n_days * clock.samples_per_day, clock.step_days),
        annual=np.append(complex_normal(rng, _ANNUAL_SD, bumps.count), 0.0),
        semiannual=np.append(complex_normal(rng, _SEMIANNUAL_SD, bumps.count), 0.0),
    )


def daily_means(circulation: Circulation, clock: Clock) -> Circulation:
    """Circulation with its weather as daily means; seasons stay phasors."""
    return Circulation(clock.daily(circulation.weather), circulation.annual, circulation.semiannual)


def imitate(rng: np.random.Generator, truth: Circulation, *, common_error: complex, error: float) -> Circulation:
    """Make what one model would of the true circulation, day by day.

    Parameters
    ----------
    rng : numpy.random.Generator
    truth : Circulation
        Daily means.
    common_error : complex
        Annual phasor (Pa) of the model's error in the exchange pattern: shared by all quiet sites.
    error : float
        Factor on the regional annual errors.
    """
    bumps, days = truth.weather.shape[0] - 1, truth.weather.shape[1]
    caught = rng.uniform(0.70, 0.90)
    own = rng.uniform(0.30, 0.45) * _weather(rng, bumps, days, 1.0)
    return Circulation(
        weather=caught * truth.weather + own,
        annual=truth.annual + np.append(complex_normal(rng, 0.08 * error, bumps), common_error),
        semiannual=truth.semiannual + np.append(complex_normal(rng, 0.04 * error, bumps), 0.0),
    )


def _weather(rng: np.random.Generator, bumps: int, n_time: int, step_days: float) -> NDArray[np.float64]:
    parts = [
        ornstein_uhlenbeck(rng, (bumps, n_time), step_days=step_days, time_scale_days=scale)
        for scale in _WEATHER_SCALES_DAYS
    ]
    return np.vstack([np.sqrt(0.5) * sum(parts), np.zeros((1, n_time))])
