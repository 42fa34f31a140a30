"""From observations and choices to one regression, and one second route, a load member."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.posterior.likelihood import LinearModel, linear_model, observation_rows
from massfit.posterior.observations import Observations
from massfit.posterior.quadrature import ScalePosterior, integrate_scales
from massfit.settings import PosteriorSettings, Priors


def member_models(
    observations: Observations,
    admittance: NDArray[np.complex128],
    *,
    settings: PosteriorSettings,
    priors: Priors,
    atmosphere_sd_hpa: float,
) -> list[LinearModel]:
    """One regression a load member.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float
        Standard deviation of the common air-pressure correction, hPa.

    Returns
    -------
    list of LinearModel
    """
    rows = observation_rows(observations)
    return [
        linear_model(
            rows,
            member,
            annual_sd=priors.annual_sd_hpa * PASCAL_PER_HPA,
            atmosphere_sd=atmosphere_sd_hpa * PASCAL_PER_HPA,
            truth=1.0 if settings.model_truth == "exchangeable" else 0.0,
        )
        for member in admittance
    ]


def scale_priors(priors: Priors) -> NDArray[np.float64]:
    """Scales (3,) of the half-t priors of s_site, s_local and s_common, Pa."""
    in_hpa = [priors.site_scatter_hpa, priors.model_local_hpa, priors.model_common_hpa]
    return PASCAL_PER_HPA * np.array(in_hpa)


def second_routes(
    observations: Observations,
    admittance: NDArray[np.complex128],
    *,
    settings: PosteriorSettings,
    priors: Priors,
    atmosphere_sd_hpa: float,
) -> list[ScalePosterior]:
    """Quadrature over the scales for every load member; parameters as in `member_models`."""
    models = member_models(
        observations, admittance, settings=settings, priors=priors, atmosphere_sd_hpa=atmosphere_sd_hpa
    )
    return [integrate_scales(model, scale_priors(priors)) for model in models]


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
