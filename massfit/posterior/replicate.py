"""Site phasors drawn from the network model: what another network of the same make would have measured."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import admittance_matrix
from massfit.posterior.network_model import Choices
from massfit.posterior.observations import Observations, record_covariance
from massfit.posterior.regression import FREEDOM
from massfit.posterior.sharing import find_sharing

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class NetworkErrors:
    """Everything between the true phasor of a site and the record less a model, but for the record's own noise.

    Parameters
    ----------
    site : (n, n_site, 2) array
        Pa, shared by the models at a site: air-pressure correction and dynamics that no model has, the site's own and
        that of its group; and the circulation where no model was subtracted.
    model : (n, n_site, n_model, 2) array
        Pa, of each model: the error it makes everywhere, and the one it makes at the site.
    weather : (n, n_site, n_model, 2) array
        Pa, of each model's own weather at the annual line.
    years : (n, n_year, 2) array
        Pa of ocean mass: cycle of each year less that of the period.
    """

    site: Floats
    model: Floats
    weather: Floats
    years: Floats


def draw_errors(
    observations: Observations, scales: Mapping[str, Floats], choices: Choices, rng: np.random.Generator
) -> NetworkErrors:
    """Draw the errors of a network once for every set of scales.

    Parameters
    ----------
    observations : Observations
        Give the sites and what they share, the models and the models' own weather.
    scales : mapping of str to (n,) array
        Pa: s_site, s_local, s_common, and s_group where the model has it.
    choices : Choices
    rng : numpy.random.Generator

    Returns
    -------
    NetworkErrors
        Missing pairs are drawn like the others.
    """
    sharing = find_sharing(observations, choices.settings.group_scatter)
    count, sites, models = len(scales["s_site"]), len(observations.sites), len(observations.models)
    truth = 1.0 if choices.settings.model_truth == "exchangeable" else 0.0

    def normal(*shape: int) -> Floats:
        return rng.standard_normal((count, *shape, 2))

    def of_sites(loading: Floats) -> Floats:
        return np.asarray(np.einsum("sk,nkc->nsc", loading, normal(loading.shape[1])))

    places = int(sharing.place.max()) + 1
    stretch = np.ones((count, places, 1))
    if choices.settings.site_scatter == "student-t":
        stretch = np.sqrt(FREEDOM / rng.chisquare(FREEDOM, (count, places, 1)))
    own = (scales["s_site"][:, None, None] * stretch * normal(places))[:, sharing.place]
    site = choices.atmosphere_sd_hpa * PASCAL_PER_HPA * normal(1) + own
    site += choices.priors.unmodelled_annual_hpa * PASCAL_PER_HPA * of_sites(sharing.unmodelled)
    if sharing.has_group:
        alone = sharing.alone[:, None] * normal(places)[:, sharing.place]
        site += scales["s_group"][:, None, None] * (of_sites(sharing.group) + alone)
    common = scales["s_common"][:, None, None] * (normal(models) + np.sqrt(truth) * normal(1))
    local = scales["s_local"][:, None, None, None] * normal(sites, models)
    weather = np.einsum("sij,nsmj->nsmi", _root(observations.model_noise), normal(sites, models))
    years = choices.priors.year_sd_hpa * PASCAL_PER_HPA * normal(len(observations.years))
    years -= np.einsum("y,nyc->nc", observations.period_share, years)[:, None]
    return NetworkErrors(site, common[:, None] + local, weather, years)


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
    cycle = annual[:, None] + cycle_of_years(observations, errors)
    signal = np.einsum("nsij,nsj->nsi", admittance_matrix(admittance), cycle)
    phasor = (signal + record + errors.site)[:, :, None] + errors.model + errors.weather
    return np.where(observations.present[None, :, :, None], phasor, np.nan)


def cycle_of_years(observations: Observations, errors: NetworkErrors) -> Floats:
    """Cycle of ocean mass over each site's own years less that of the period, (n, n_site, 2) Pa."""
    if not observations.years:
        return np.zeros((*errors.site.shape[:2], 2))
    return np.asarray(np.einsum("sy,nyc->nsc", observations.year_share, errors.years))


def _root(covariance: Floats) -> Floats:
    """Symmetric roots of (..., 2, 2) covariances, which may be singular."""
    values, vectors = np.linalg.eigh(covariance)
    return np.asarray((vectors * np.sqrt(np.maximum(values, 0.0))[..., None, :]) @ np.swapaxes(vectors, -1, -2))
