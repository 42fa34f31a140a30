"""Air pressure: its mean over the ocean, and its annual cycle.

Over an ocean that yields as an inverted barometer sea-floor pressure changes by the mean of the air pressure over
the whole ocean and by nothing else (about 0.63 hPa a year, highest in northern summer: Dorandeu & Le Traon 1999).
"""

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE, JULIAN_YEAR_DAYS
from massfit.corrections.grid_field import GridField, grid_field
from massfit.corrections.series import interval_edges
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.network import Series
from massfit.phasor import days_since

SHORTEST_FIT_DAYS = 365.0
"""Shortest span from which an annual phasor is fitted."""


def ocean_mean_air_pressure(air_pressure: xr.DataArray, ocean: OceanFunction) -> Series:
    """Mean of an air-pressure field over the ocean.

    Parameters
    ----------
    air_pressure : xarray.DataArray
        Pa, over (time, lat, lon) on the whole globe; may be lazy.
    ocean : OceanFunction
        Averaged over the cells of the field, conservatively.

    Returns
    -------
    massfit.network.Series
        Pa, at the times of the field.

    Raises
    ------
    InputError
        A field that misses a part of the ocean or holds missing values.
    """
    field = grid_field("air_pressure", air_pressure)
    weight = ocean_weight(field, ocean)
    covered = weight.sum() / ocean.area_m2
    if covered < 0.99:
        problem = f"the field covers {100 * covered:.0f} % of the ocean"
        raise InputError(Fault("air_pressure", "lat, lon", problem, "Must be global", "Give the global field"))
    mean = np.empty(field.time.size)
    for when, block in field.blocks():
        mean[when] = block @ (weight / weight.sum())
    if not np.all(np.isfinite(mean)):
        first = str(field.time[np.argmin(np.isfinite(mean))])[:16]
        raise InputError(Fault("air_pressure", "values", f"values are missing, first at {first}", "No missing value"))
    return Series("air_pressure", field.time, mean)


def ocean_weight(field: GridField, ocean: OceanFunction) -> NDArray[np.float64]:
    """Area of ocean in each cell of a field, (n_lat * n_lon,) m2."""
    cells = field.cells
    return np.asarray((regrid(ocean.fraction, ocean.cells, cells) * cells.cell_area_m2).ravel())


def air_pressure_pattern(air_pressure: xr.DataArray, reference_year: int) -> LoadPattern:
    """Annual phasor of air pressure in every cell, the source of the attraction of land air.

    Parameters
    ----------
    air_pressure : xarray.DataArray
        Pa, over (time, lat, lon) on the whole globe, equally spaced; may be lazy.
    reference_year : int
        Phases count from its 1 January.

    Returns
    -------
    LoadPattern
        Pa; over the ocean too, where its user ignores it.

    Raises
    ------
    InputError
        Less than a year of data.
    """
    field = grid_field("air_pressure", air_pressure)
    estimator = _phasor_estimator("air_pressure", field.time, reference_year)
    total = np.zeros((2, field.latitude_deg.size * field.longitude_deg.size))
    for when, block in field.blocks():
        total += estimator[:, when] @ block
    values = (total[0] + 1j * total[1]).reshape(field.latitude_deg.size, field.longitude_deg.size)
    return LoadPattern(
        "air pressure", field.latitude_deg, field.longitude_deg, values, "fitted to the air-pressure field"
    )


def annual_phasor(series: Series, reference_year: int) -> complex:
    """Annual phasor of a series, by least squares with an offset, a slope and the half-year line.

    Parameters
    ----------
    series : massfit.network.Series
        Means over intervals: their attenuation of the annual line is undone.
    reference_year : int
        Phases count from its 1 January.

    Returns
    -------
    complex
        Pa, in phase + i quadrature (see :mod:`massfit.phasor`).

    Raises
    ------
    InputError
        Less than a year of data.

    Examples
    --------
    >>> time = np.arange("2015-01-01T12", "2018-01-01T12", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    >>> series = Series("air", time, 7.0 + 63.0 * np.sin(ANNUAL_RATE * days_since(time, 2016)))
    >>> z = annual_phasor(series, 2016)
    >>> abs(round(z.real, 2)), round(z.imag, 2)
    (0.0, 63.0)
    """
    estimator = _phasor_estimator(series.name, series.time, reference_year)
    in_phase, quadrature = estimator @ series.pressure
    return complex(in_phase, quadrature)


def allows_annual_phasor(time: NDArray[np.datetime64]) -> bool:
    """Whether values at these times, middles of their intervals, span a year and number 12 or more."""
    return time.size >= 12 and _span_days(time) >= SHORTEST_FIT_DAYS


def _span_days(time: NDArray[np.datetime64]) -> float:
    if time.size < 2:
        return 0.0
    starts, ends = interval_edges(time)
    return float((ends[-1] - starts[0]) / np.timedelta64(1, "D"))


def _phasor_estimator(name: str, time: NDArray[np.datetime64], reference_year: int) -> NDArray[np.float64]:
    """Rows that turn values at `time` into the annual in-phase and quadrature parts, (2, n)."""
    if not allows_annual_phasor(time):
        problem = f"the annual phasor cannot be fitted to {time.size} values over {_span_days(time):.0f} days"
        raise InputError(Fault(name, "time", problem, "Must be 12 values or more over a year or more"))
    starts, ends = interval_edges(time)
    days = days_since(starts + (ends - starts) / 2, reference_year)
    width = (ends - starts) / np.timedelta64(1, "D")
    columns = [np.ones_like(days), (days - days.mean()) / JULIAN_YEAR_DAYS]
    for rate in (ANNUAL_RATE, 2.0 * ANNUAL_RATE):
        kept = np.sinc(rate * width / (2.0 * np.pi))  # what is left of the line in a mean over the interval
        columns += [kept * np.cos(rate * days), kept * np.sin(rate * days)]
    return np.asarray(np.linalg.pinv(np.column_stack(columns))[2:4])
