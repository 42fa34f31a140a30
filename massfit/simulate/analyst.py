"""What the analyst of an invented network is given beside records and models."""

from datetime import date

import numpy as np

from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.network import Series
from massfit.settings import Corrections, Fingerprint, Frame, Settings
from massfit.simulate.clock import Clock
from massfit.simulate.dynamics import complex_normal, phasor_series
from massfit.simulate.loads import draw_water_load
from massfit.simulate.names import load_names
from massfit.simulate.noise import ornstein_uhlenbeck
from massfit.simulate.options import SimulationOptions
from massfit.simulate.world import World

NETWORK_NAME = "Lantern Array"
_MEMBER_CELL_DEG = 2.0
_AIR_ERROR_SD = 4.0  # Pa per component, as the network file states it


def settings(options: SimulationOptions, clock: Clock) -> Settings:
    """State the settings of the network file: defaults, but for the period and the files."""
    last_day = (clock.first_day + (clock.n_days - 1)).astype(object)
    return Settings(
        frame=Frame(
            name=NETWORK_NAME,
            reference_year=clock.reference_year,
            start=date(options.first_year, 1, 1),
            end=last_day,
        ),
        corrections=Corrections(
            ocean_mean_atmosphere="fields/ocean_mean_atmosphere.csv",
            ocean_mean_atmosphere_sd_hpa=_AIR_ERROR_SD / 100.0,
            atmosphere_load="fields/atmosphere_load.nc",
            tides="already-removed" if options.sampling == "daily" else "remove",
        ),
        fingerprint=Fingerprint(loads=("fields/loads.nc",)),
    )


def air_as_given(rng: np.random.Generator, world: World, clock: Clock) -> tuple[Series, complex]:
    """Draw the ocean-mean air pressure as a centre would give it, and its annual error.

    Parameters
    ----------
    rng : numpy.random.Generator
    world : World
    clock : Clock
        The clock of `world`.

    Returns
    -------
    series : Series
        Daily means, Pa.
    error : complex
        Annual phasor of given minus true, Pa.
    """
    error = complex_normal(rng, _AIR_ERROR_SD, 1)
    daily = clock.by_day
    pressure = clock.daily(world.air_series) + phasor_series(error, daily.days)[0]
    pressure += 3.0 * ornstein_uhlenbeck(rng, (clock.n_days,), step_days=1.0, time_scale_days=3.0)
    return Series("ocean-mean air pressure", daily.time, np.round(pressure, 1)), complex(error[0])


def members(rng: np.random.Generator, ocean: OceanFunction, count: int) -> tuple[LoadPattern, ...]:
    """Draw load patterns that the analyst takes for equally plausible; the truth is none of them."""
    patterns = [draw_water_load(ocean, rng, name=name, cell_deg=_MEMBER_CELL_DEG) for name in load_names(count)]
    return tuple(rounded(pattern, 0.01) for pattern in patterns)


def rounded(pattern: LoadPattern, step: float) -> LoadPattern:
    """Round a pattern to the resolution that its file has.

    Parameters
    ----------
    pattern : LoadPattern
    step : float
        In the unit of the pattern.
    """
    values = np.round(pattern.values / step) * step
    return LoadPattern(pattern.name, pattern.latitude_deg, pattern.longitude_deg, values, pattern.reference)
