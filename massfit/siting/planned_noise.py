"""Noise to plan a recorder with: that of the network's own sites, a stated size, or a map of quietness."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import site_noise
from massfit.annual.noise import NoiseModel
from massfit.contracts import QUIETNESS_MAP, require
from massfit.settings import Priors
from massfit.siting.planned_record import expected_covariance, years_of_record

Floats = NDArray[np.float64]

REFERENCE_YEAR = 2027
"""Phases of plans count from this year: widths do not depend on it."""

MEMORY_DAYS = 20.0
"""Memory of the red noise where no site of the network tells of any: that of deep records, some weeks (common
practice)."""

_WHITE_SHARE = 0.1  # of the variance


@dataclass(frozen=True)
class PlannedNoise:
    """Noise of one daily mean of a planned recorder, and where it is from.

    Parameters
    ----------
    model : NoiseModel
    source : str
        In words.
    """

    model: NoiseModel
    source: str

    @property
    def daily_sd(self) -> float:
        """Standard deviation of a daily mean, Pa."""
        return float(np.hypot(self.model.red_sd, self.model.white[0]))

    def scaled(self, daily_sd: float) -> "PlannedNoise":
        """Noise of the same form whose daily means have the standard deviation given, Pa."""
        factor, own = daily_sd / self.daily_sd, self.model
        model = NoiseModel(own.rates, factor**2 * own.variances, factor * own.white)
        return replace(self, model=model, source=f"stated: {daily_sd / 100.0:g} hPa a day, form of {self.source}")


def default_noise() -> PlannedNoise:
    """Red noise of 1 hPa and weeks of memory, where nothing is known of the network's own."""
    variance = 100.0**2
    red = NoiseModel(
        np.array([1.0 / MEMORY_DAYS]),
        np.array([(1.0 - _WHITE_SHARE) * variance]),
        np.sqrt(np.array([_WHITE_SHARE * variance])),
    )
    return PlannedNoise(red, f"red noise of {MEMORY_DAYS:g} days' memory")


def typical_noise(phasors: xr.Dataset, priors: Priors, *, years: float = 2.0) -> PlannedNoise:
    """Noise of the network's middle site: the one whose record of so many years would have the median error.

    Parameters
    ----------
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    priors : Priors
    years : float

    Returns
    -------
    PlannedNoise
        :func:`default_noise` where the noise of no site is known.
    """
    names = [str(site) for site in phasors["site"].values]
    known = {name: model for name in names if (model := site_noise(phasors, name)) is not None}
    if not known:
        return default_noise()
    errors = {name: np.trace(record_covariance(model, years, priors)) for name, model in known.items()}
    middle = sorted(errors, key=errors.__getitem__)[len(errors) // 2]
    return PlannedNoise(known[middle], f"the middle site of the network, {middle}")


def record_covariance(noise: NoiseModel, years: float, priors: Priors, *, drift: str = "exponential+linear") -> Floats:
    """Covariance (2, 2) of the phasor of one recorder of so many years, Pa2, the same in both components.

    The half trace of the expected covariance: at which date a recorder will be laid is not known, and turning the date
    through the year turns the axes of its error.
    """
    recorder = years_of_record(years, drift=drift)
    covariance = expected_covariance([recorder], noise, reference_year=REFERENCE_YEAR, priors=priors)
    return np.asarray(0.5 * np.trace(covariance) * np.eye(2))


def map_record_covariance(
    quietness: xr.Dataset, noise: PlannedNoise, years: float, priors: Priors
) -> Callable[[Floats, Floats], tuple[Floats, Floats]]:
    """Errors of records by a map of quietness.

    Parameters
    ----------
    quietness : xarray.Dataset
        contracts.QUIETNESS_MAP.
    noise : PlannedNoise
        Its form says how much drift adds to the error of so long a record.
    years : float
    priors : Priors

    Returns
    -------
    callable
        From latitude and longitude, degrees, to covariances (c, 2, 2), Pa2, of the cells that hold the places, NaN
        where the map has no value; and the disagreement (c,) of the models, Pa, NaN where the map has none.

    Notes
    -----
    The map holds the error by the dynamics alone. What drift adds is the ratio of the errors with drift and without
    that the form of the noise has; the noise of the instrument is added in square.

    Raises
    ------
    InputError
        The map is not as declared.
    """
    require(quietness, QUIETNESS_MAP)
    lengths = quietness["record_years"].values.astype(float)
    sds = quietness["expected_annual_sd"].transpose("record_years", "lat", "lon").values.astype(float)
    sd = _at_length(lengths, sds, years)
    with_drift, without = (record_covariance(noise.model, years, priors, drift=drift) for drift in _DRIFTS)
    white = replace(noise.model, rates=np.zeros(0), variances=np.zeros(0))
    instrument = record_covariance(white, years, priors)
    factor = with_drift[0, 0] / without[0, 0]

    def at(latitude_deg: Floats, longitude_deg: Floats) -> tuple[Floats, Floats]:
        cell, inside = _cells(quietness, latitude_deg, longitude_deg)
        variance = np.where(inside, factor * sd[cell] ** 2 + instrument[0, 0], np.nan)
        apart = quietness["disagreement"].values if "disagreement" in quietness else np.full(sd.shape, np.nan)
        return variance[:, None, None] * np.eye(2), np.where(inside, apart[cell].astype(float), np.nan)

    return at


_DRIFTS = ("exponential+linear", "none")


def _at_length(lengths: Floats, sds: Floats, years: float) -> Floats:
    """Errors (lat, lon) of a record of so many years: log-log between those of the map, 1 / root of T beyond."""
    order = np.argsort(lengths)
    lengths, sds = lengths[order], sds[order]
    if len(lengths) == 1 or not lengths[0] <= years <= lengths[-1]:
        end = 0 if years < lengths[0] else -1
        return np.asarray(sds[end] * np.sqrt(lengths[end] / years))
    right = int(np.clip(np.searchsorted(lengths, years), 1, len(lengths) - 1))
    share = np.log(years / lengths[right - 1]) / np.log(lengths[right] / lengths[right - 1])
    return np.asarray(sds[right - 1] ** (1.0 - share) * sds[right] ** share)


def _cells(
    quietness: xr.Dataset, latitude_deg: Floats, longitude_deg: Floats
) -> tuple[tuple[NDArray[np.intp], NDArray[np.intp]], NDArray[np.bool_]]:
    """Find the cell whose centre is nearest in latitude and in longitude, and whether the place is in the map."""
    lat, lon = quietness["lat"].values.astype(float), quietness["lon"].values.astype(float)
    north = np.abs(np.asarray(latitude_deg)[:, None] - lat)
    east = np.abs((np.asarray(longitude_deg)[:, None] - lon + 180.0) % 360.0 - 180.0)
    inside = [away.min(axis=1) <= 0.51 * np.diff(axis).max() for away, axis in ((north, lat), (east, lon))]
    return (north.argmin(axis=1), east.argmin(axis=1)), inside[0] & inside[1]
