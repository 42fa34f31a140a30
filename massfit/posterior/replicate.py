"""Site phasors drawn from the network model: what another network of the same make would have measured."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.phasor import admittance_matrix
from massfit.posterior.observations import Observations, record_covariance

Floats = NDArray[np.float64]

STUDENT_FREEDOM = 4.0
"""Degrees of freedom of Student site scatter."""


@dataclass(frozen=True)
class NetworkErrors:
    """Everything between the true phasor of a site and the record less a model, but for the record's own noise.

    Parameters
    ----------
    site : (n, n_site, 2) array
        Pa, shared by the models at a site: air-pressure correction and dynamics that no model has.
    model : (n, n_site, n_model, 2) array
        Pa, of each model: the error it makes everywhere, and the one it makes at the site.
    weather : (n, n_site, n_model, 2) array
        Pa, of each model's own weather at the annual line.
    """

    site: Floats
    model: Floats
    weather: Floats


def draw_errors(
    observations: Observations,
    scales: Mapping[str, Floats],
    *,
    atmosphere_sd: float,
    truth: float,
    student: bool,
    rng: np.random.Generator,
) -> NetworkErrors:
    """Draw the errors of a network once for every set of scales.

    Parameters
    ----------
    observations : Observations
        Give the sites, the models and the models' own weather.
    scales : mapping of str to (n,) array
        Pa: s_site, s_local, s_common.
    atmosphere_sd : float
        Pa per component.
    truth : float
        r: variance of the truth about the models' centre in units of s_common^2.
    student : bool
        Whether site scatter follows Student's t with 4 degrees of freedom, one size for both components of a site.
    rng : numpy.random.Generator

    Returns
    -------
    NetworkErrors
        Missing pairs are drawn like the others.
    """
    count, sites, models = len(scales["s_site"]), len(observations.sites), len(observations.models)

    def normal(*shape: int) -> Floats:
        return rng.standard_normal((count, *shape, 2))

    stretch = np.ones((count, sites, 1))
    if student:
        stretch = np.sqrt(STUDENT_FREEDOM / rng.chisquare(STUDENT_FREEDOM, (count, sites, 1)))
    site = atmosphere_sd * normal(1) + scales["s_site"][:, None, None] * stretch * normal(sites)
    common = scales["s_common"][:, None, None] * (normal(models) + np.sqrt(truth) * normal(1))
    local = scales["s_local"][:, None, None, None] * normal(sites, models)
    weather = np.einsum("sij,nsmj->nsmi", _root(observations.model_noise), normal(sites, models))
    return NetworkErrors(site, common[:, None] + local, weather)


def replicate_phasors(
    observations: Observations,
    admittance: NDArray[np.complex128],
    annual: Floats,
    errors: NetworkErrors,
    rng: np.random.Generator,
) -> Floats:
    """Phasors that the same records would have given with other errors.

    Parameters
    ----------
    observations : Observations
        Give the record covariances and the pairs that are there.
    admittance : (n, n_site) array of complex
    annual : (n, 2) array
        Annual phasor of ocean mass, Pa.
    errors : NetworkErrors
    rng : numpy.random.Generator
        Of the records' own noise.

    Returns
    -------
    (n, n_site, n_model, 2) array
        Pa; NaN where a pair is missing.
    """
    own = np.stack(
        [
            record_covariance(covariance, noise, count)
            for covariance, noise, count in zip(
                observations.covariance, observations.model_noise, observations.model_count, strict=True
            )
        ]
    )
    record = np.einsum("sij,nsj->nsi", _root(own), rng.standard_normal(errors.site.shape))
    signal = np.einsum("nsij,nj->nsi", admittance_matrix(admittance), annual)
    phasor = (signal + record + errors.site)[:, :, None] + errors.model + errors.weather
    return np.where(observations.present[None, :, :, None], phasor, np.nan)


def _root(covariance: Floats) -> Floats:
    """Symmetric roots of (..., 2, 2) covariances, which may be singular."""
    values, vectors = np.linalg.eigh(covariance)
    return np.asarray((vectors * np.sqrt(np.maximum(values, 0.0))[..., None, :]) @ np.swapaxes(vectors, -1, -2))
