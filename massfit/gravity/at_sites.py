"""What satellite gravity says at each recorder."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_RADIUS, STANDARD_GRAVITY
from massfit.fingerprint.transforms import SphereGrid, as_cilm
from massfit.gravity.annual import fit_columns
from massfit.gravity.kernel import gaussian_weights
from massfit.gravity.monthly import MonthlyMass
from massfit.gravity.predicted import PredictedMass
from massfit.site import Site


@dataclass(frozen=True, eq=False)
class SitePressure:
    """Annual phasor of satellite pressure at one recorder.

    Parameters
    ----------
    site : str
    seen : complex
        Of the smoothed field, Pa.
    covariance : (2, 2) array
        Pa2.
    factors : (K,) array of complex
        Unsmoothed pressure at the point over the smoothed field, as each load member predicts it.
    """

    site: str
    seen: complex
    covariance: NDArray[np.float64]
    factors: NDArray[np.complex128]


def satellite_at_sites(
    monthly: MonthlyMass,
    sites: Sequence[Site],
    predicted: PredictedMass,
    admittance: NDArray[np.complex128],
    *,
    smoothing_km: float,
    reference_year: int,
    alias_days: Sequence[float],
    added: complex = 0j,
    blind: Sequence[int] = (),
) -> tuple[SitePressure, ...]:
    """Fit the annual cycle of satellite pressure at points.

    Parameters
    ----------
    monthly : MonthlyMass
    sites : sequence of Site
    predicted : PredictedMass
    admittance : (K, n_site) array of complex
        F of each member at each site.
    smoothing_km : float
        Of the Gaussian: striped errors of monthly solutions hide a point that is not smoothed.
    reference_year : int
    alias_days : sequence of float
    added : complex
        Uniform layer to add, kg m-2.
    blind : sequence of int
        Degrees that the fields do not hold, taken out of the prediction too.

    Returns
    -------
    tuple of SitePressure
    """
    harmonics = smoothed_harmonics(sites, monthly.max_degree, smoothing_km)
    series = np.einsum("scnm,tcnm->ts", harmonics, monthly.mass)
    seen_by_members = harmonics.copy()
    seen_by_members[:, :, list(blind)] = 0.0
    smoothed = np.einsum(
        "scnm,kcnm->ks", seen_by_members, predicted.total[..., : monthly.max_degree + 1, : monthly.max_degree + 1]
    )
    factors = admittance * predicted.ocean_mean[:, None] / smoothed
    fits = fit_columns(monthly.spans, series, reference_year=reference_year, alias_days=alias_days)
    return tuple(
        SitePressure(site.id, STANDARD_GRAVITY * (fit.phasor + added), STANDARD_GRAVITY**2 * fit.covariance, factor)
        for site, fit, factor in zip(sites, fits, factors.T, strict=True)
    )


def smoothed_harmonics(sites: Sequence[Site], max_degree: int, smoothing_km: float) -> NDArray[np.float64]:
    """Values at points of each smoothed harmonic.

    Parameters
    ----------
    sites : sequence of Site
    max_degree : int
    smoothing_km : float

    Returns
    -------
    (n_site, 2, N + 1, N + 1) array
        Of 4-pi-normalised harmonics, without the Condon-Shortley phase.
    """
    latitude = np.array([site.latitude_deg for site in sites])
    longitude = np.array([site.longitude_deg for site in sites])
    points = SphereGrid(max_degree).harmonics_at(latitude, longitude)
    values = 4.0 * np.pi * np.stack([as_cilm(point, max_degree) for point in points])
    return np.asarray(values * gaussian_weights(max_degree, smoothing_km)[:, None])


def geocentre_of(degree_one: NDArray[np.complex128], first_love: float, earth_density: float) -> NDArray[np.complex128]:
    """Motion of the centre of figure seen from the centre of mass.

    Parameters
    ----------
    degree_one : (..., 3) array of complex
        Surface mass C11, S11, C10, 4-pi-normalised, kg m-2.
    first_love : float
        k'_1 in the frame of the centre of figure.
    earth_density : float
        kg m-3.

    Returns
    -------
    (..., 3) array of complex
        X, Y, Z, m: -sqrt(3) a C (Blewitt 2003; Swenson, Chambers & Wahr 2008), with C the coefficient of the potential;
        the radius cancels.
    """
    potential = (1.0 + first_love) * degree_one / (earth_density * EARTH_RADIUS)
    return np.asarray(-np.sqrt(3.0) * EARTH_RADIUS * potential)
