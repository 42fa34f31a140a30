"""From observations and choices to the regression of all load members, and the moments pooled over them."""

from collections.abc import Collection, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.posterior.importance import DRAWS, ScalePosterior, integrate_scales
from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel, linear_model
from massfit.posterior.rows import observation_rows
from massfit.posterior.sharing import Sharing, find_sharing
from massfit.settings import PosteriorSettings, Priors


@dataclass(frozen=True)
class Choices:
    """What the analyst chose.

    Parameters
    ----------
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float
        Standard deviation of the common air-pressure correction, hPa per component.
    """

    settings: PosteriorSettings
    priors: Priors
    atmosphere_sd_hpa: float


def network_model(
    observations: Observations,
    admittance: NDArray[np.complex128],
    choices: Choices,
    *,
    mixed: Collection[str] = (),
    sharing: Sharing | None = None,
) -> LinearModel:
    """Build the regression of all load members.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
    choices : Choices
    mixed : collection of str
        Sites that enter by their mixture; the others by its mean and covariance.
    sharing : Sharing, optional
        What the sites share; found from the observations by default.

    Returns
    -------
    LinearModel

    Raises
    ------
    InputError
        A correlation length is asked for and the sites have no positions.
    """
    settings, priors = choices.settings, choices.priors
    return linear_model(
        observation_rows(observations, mixed),
        admittance,
        find_sharing(observations, settings.group_scatter) if sharing is None else sharing,
        annual_sd=priors.annual_sd_hpa * PASCAL_PER_HPA,
        atmosphere_sd=choices.atmosphere_sd_hpa * PASCAL_PER_HPA,
        year_sd=priors.year_sd_hpa * PASCAL_PER_HPA,
        unmodelled_sd=priors.unmodelled_annual_hpa * PASCAL_PER_HPA,
        truth=1.0 if settings.model_truth == "exchangeable" else 0.0,
        student=settings.site_scatter == "student-t",
    )


def scale_priors(priors: Priors, scale_count: int) -> NDArray[np.float64]:
    """Scales (scale_count,) of the half-t priors of s_site, s_local, s_common and s_group, Pa."""
    in_hpa = [priors.site_scatter_hpa, priors.model_local_hpa, priors.model_common_hpa, priors.group_scatter_hpa]
    return PASCAL_PER_HPA * np.array(in_hpa[:scale_count])


def second_routes(
    observations: Observations,
    admittance: NDArray[np.complex128],
    choices: Choices,
    *,
    mixed: Collection[str] = (),
    draws: int = DRAWS,
) -> list[ScalePosterior]:
    """Importance-weighted nodes of every load member; parameters as in `network_model` and `integrate_scales`."""
    model = network_model(observations, admittance, choices, mixed=mixed)
    prior_scales = scale_priors(choices.priors, model.scale_count)
    return [
        integrate_scales(model, prior_scales, member=k, rng=np.random.default_rng(choices.settings.seed), draws=draws)
        for k in range(model.member_count)
    ]


def inflation(member_count: int) -> float:
    """Factor on the variance between K load members.

    (K + 1) / (K - 1) turns the mean square spread of K members about their own mean
    into the expected square distance of one more member from that mean; zero for K = 1.
    """
    return (member_count + 1.0) / (member_count - 1.0) if member_count > 1 else 0.0


def pooled_moments(members: Sequence[ScalePosterior]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Mean (2,) and covariance (2, 2) of A over the load members, Pa and Pa2."""
    mean = np.mean([member.mean for member in members], axis=0)
    within = np.mean([member.covariance for member in members], axis=0)
    return mean, within + member_spread(members)


def member_spread(members: Sequence[ScalePosterior]) -> NDArray[np.float64]:
    """Covariance (2, 2) between the load members, inflated, Pa2."""
    means = np.array([member.mean for member in members])
    shift = means - means.mean(axis=0)
    return np.asarray(inflation(len(members)) * shift.T @ shift / len(members))
