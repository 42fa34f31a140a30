"""The answer of a part of the network under other choices, with normal scatter: what the bench of the page asks.

Dropping a site or a model is a question to the network that was run, not a new estimate: everything that was known of
the other sites stays as it was.
"""

from collections.abc import Collection
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.constants import PASCAL_PER_HPA
from massfit.errors import Fault, InputError
from massfit.posterior.importance import ScalePosterior, fit_proposal, integrate_scales
from massfit.posterior.mixtures import sites_by_mixture
from massfit.posterior.network_model import Choices, scale_priors
from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel, linear_model
from massfit.posterior.rows import observation_rows
from massfit.posterior.scale_grid import integrate_on_grid
from massfit.posterior.sharing import find_sharing
from massfit.settings import Priors

TRUTHS = {"exchangeable": 1.0, "centred": 0.0}
"""r by the setting `model_truth`."""


@dataclass(frozen=True)
class Scenario:
    """What is left out, and what is chosen instead.

    Parameters
    ----------
    without_sites, without_models, without_members : frozenset of str
    truth : float
        r: variance of the truth about the models' centre in units of s_common^2.
    model_common_hpa : float
        Scale of the prior of s_common, hPa.
    """

    without_sites: frozenset[str] = field(default_factory=frozenset)
    without_models: frozenset[str] = field(default_factory=frozenset)
    without_members: frozenset[str] = field(default_factory=frozenset)
    truth: float = 1.0
    model_common_hpa: float = 0.15


def as_gaussian(observations: Observations) -> Observations:
    """Observations of which every site has one part: the mean and the covariance of its mixture.

    Parameters
    ----------
    observations : Observations

    Returns
    -------
    Observations
    """
    return replace(
        observations,
        weight=np.ones((len(observations.sites), 1)),
        part_phasor=observations.phasor[:, None],
        part_covariance=observations.covariance[:, None],
    )


def answer_scenario(
    observations: Observations,
    admittance: NDArray[np.complex128],
    members: Collection[str],
    choices: Choices,
    scenario: Scenario,
) -> tuple[LinearModel, list[ScalePosterior]]:
    """Integrate the network posterior of a scenario.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
    members : collection of str
        Names of the load members, in order.
    choices : Choices
        Of the run; its site scatter is taken as normal.
    scenario : Scenario

    Returns
    -------
    model : LinearModel
    posteriors : list of ScalePosterior
        One for every load member that is kept.

    Raises
    ------
    InputError
        A name that the run does not have, or nothing is left.
    """
    left, factors = _left(as_gaussian(observations), admittance, members, scenario)
    model = _model(left, factors, choices, scenario, student=False)
    return model, integrate_on_grid(model, scale_priors(_priors(choices, scenario), model.scale_count))


def answer_with_student_scatter(
    observations: Observations,
    admittance: NDArray[np.complex128],
    members: Collection[str],
    choices: Choices,
    scenario: Scenario,
) -> list[ScalePosterior]:
    """Integrate a scenario with Student-t site scatter and mixtures, by importance-weighted nodes of its own.

    Parameters
    ----------
    observations, admittance, members, choices, scenario
        As for :func:`answer_scenario`.

    Returns
    -------
    list of ScalePosterior
        One for every load member that is kept; `standard_error` says how far chance moves its mean.

    Raises
    ------
    InputError
        A name that the run does not have, or nothing is left.
    """
    left, factors = _left(observations, admittance, members, scenario)
    priors = _priors(choices, scenario)
    settings = replace(choices.settings, site_scatter="student-t")
    mixed = sites_by_mixture(left, factors, Choices(settings, priors, choices.atmosphere_sd_hpa))
    model = _model(left, factors, choices, scenario, student=True, mixed=mixed)
    scales, seed = scale_priors(priors, model.scale_count), choices.settings.seed
    middle = replace(model, design=model.design.mean(axis=0, keepdims=True))
    start = fit_proposal(middle, scales, rng=np.random.default_rng(seed))
    return [
        integrate_scales(model, scales, member=k, rng=np.random.default_rng(seed), start=start)
        for k in range(model.member_count)
    ]


def _left(
    observations: Observations, admittance: NDArray[np.complex128], members: Collection[str], scenario: Scenario
) -> tuple[Observations, NDArray[np.complex128]]:
    """Observations of the sites that are left, and their admittances under the members that are."""
    _refuse_unknown(observations, members, scenario)
    reduced, kept = _without(observations, scenario)
    of_members = [k for k, name in enumerate(members) if name not in scenario.without_members]
    if not kept.any() or not of_members:
        raise InputError(Fault("scenario", "", "no site, model or load member is left", "", "Leave out less"))
    return reduced.select(kept), admittance[of_members][:, kept]


def _priors(choices: Choices, scenario: Scenario) -> Priors:
    return replace(choices.priors, model_common_hpa=scenario.model_common_hpa)


def _model(
    left: Observations,
    admittance: NDArray[np.complex128],
    choices: Choices,
    scenario: Scenario,
    *,
    student: bool,
    mixed: Collection[str] = (),
) -> LinearModel:
    priors = choices.priors
    return linear_model(
        observation_rows(left, mixed),
        admittance,
        find_sharing(left, choices.settings.group_scatter),
        annual_sd=priors.annual_sd_hpa * PASCAL_PER_HPA,
        atmosphere_sd=choices.atmosphere_sd_hpa * PASCAL_PER_HPA,
        year_sd=priors.year_sd_hpa * PASCAL_PER_HPA,
        unmodelled_sd=priors.unmodelled_annual_hpa * PASCAL_PER_HPA,
        truth=scenario.truth,
        student=student,
    )


def _refuse_unknown(observations: Observations, members: Collection[str], scenario: Scenario) -> None:
    known = {
        "without_sites": (scenario.without_sites, observations.sites),
        "without_models": (scenario.without_models, [name for name in observations.models if name != NO_MODEL]),
        "without_members": (scenario.without_members, members),
    }
    faults = [
        Fault("scenario", key, f"the run has no {name!r}", f"Known: {', '.join(there) or 'none'}", "Name one of these")
        for key, (asked, there) in known.items()
        for name in sorted(asked - set(there))
    ]
    if faults:
        raise InputError(faults)


def _without(observations: Observations, scenario: Scenario) -> tuple[Observations, NDArray[np.bool_]]:
    """Observations less the models, and the sites (n_site,) that still say something."""
    off = np.array([name in scenario.without_models for name in observations.models])
    phasor = np.where(off[:, None], np.nan, observations.part_phasor)
    fewer = replace(observations, part_phasor=phasor)
    kept = np.array([site not in scenario.without_sites for site in observations.sites])
    whole = fewer.model_count == observations.model_count
    only_mean = np.array([site in observations.mean_only for site in observations.sites])
    return fewer, kept & (fewer.model_count > 0) & (whole | ~only_mean)  # a mean cannot be taken apart
