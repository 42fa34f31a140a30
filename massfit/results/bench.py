"""What the bench of the page carries, and the answer to a scenario from the same numbers."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import as_components, peak_date
from massfit.posterior.importance import ScalePosterior
from massfit.posterior.mixture_answer import amplitude_and_day, pooled_mixture
from massfit.posterior.network_model import Choices, member_spread, pooled_moments, scale_priors
from massfit.posterior.observations import Observations, read_observations
from massfit.posterior.regression import LinearModel
from massfit.posterior.scenario import (
    TRUTHS,
    Scenario,
    answer_scenario,
    answer_with_student_scatter,
    as_gaussian,
)
from massfit.posterior.shares import variance_shares, variance_terms
from massfit.posterior.sharing import find_sharing
from massfit.results.finished import FinishedRun
from massfit.settings import PosteriorSettings, Priors

MOST_COLUMNS = 80
"""Columns of a network's regression above which a browser is too slow: the page then names the command instead."""

_HEAVY = 1e-6
"""Weight of the nodes that the shares of the variance are taken from."""


@dataclass(frozen=True)
class _Network:
    """What the run knew of each site."""

    observations: Observations
    admittance: NDArray[np.complex128]
    members: tuple[str, ...]
    choices: Choices


def _network(run: FinishedRun) -> _Network:
    fingerprints = run.datasets["fingerprints.nc"]
    observations, admittance = read_observations(run.datasets["site_phasors.nc"], fingerprints)
    settings = run.provenance["settings"]
    priors: dict[str, Any] = {
        key: tuple(value) if isinstance(value, list) else value for key, value in settings["priors"].items()
    }
    choices = Choices(
        PosteriorSettings(**settings["posterior"]),
        Priors(**priors),
        settings["corrections"]["ocean_mean_atmosphere_sd_hpa"],
    )
    return _Network(observations, admittance, tuple(str(name) for name in fingerprints["member"].values), choices)


def as_run(run: FinishedRun) -> Scenario:
    """Scenario that leaves nothing out and chooses what the run chose.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    Scenario
    """
    settings = run.provenance["settings"]
    return Scenario(
        truth=TRUTHS[settings["posterior"]["model_truth"]],
        model_common_hpa=settings["priors"]["model_common_hpa"],
    )


def bench_data(run: FinishedRun) -> dict[str, Any] | None:
    """Collect all that the script of the bench needs.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    dict or None
        Plain numbers and names, pressures in Pa; None where the network is too large for a browser.
    """
    network = _network(run)
    numbers = network_numbers(network.observations, network.admittance, network.choices)
    shared = sum(len(numbers[name][0]) for name in ("group", "year", "unmodelled"))
    if 2 * (shared + len(numbers["models"]) + 2) > MOST_COLUMNS:
        return None
    facts = {site["id"]: site for site in run.summary["sites"]}
    return {
        "network": run.summary["network"],
        "reference_year": run.summary["reference_year"],
        "members": list(network.members),
        **{name: [facts[site][name] for site in numbers["sites"]] for name in ("days", "reduced_sd_hpa")},
        **numbers,
    }


def network_numbers(observations: Observations, admittance: NDArray[np.complex128], choices: Choices) -> dict[str, Any]:
    """Write what the network posterior is made from as plain numbers.

    Parameters
    ----------
    observations : Observations
        Every site is taken by the mean and the covariance of its mixture.
    admittance : (n_member, n_site) array of complex
    choices : Choices

    Returns
    -------
    dict
        Pressures in Pa; None for a pair of site and model that is missing, and for the name of no model.
    """
    single, priors = as_gaussian(observations), choices.priors
    sharing = find_sharing(single, choices.settings.group_scatter)
    return {
        "sites": list(single.sites),
        "models": [None if model == NO_MODEL else model for model in single.models],
        "phasor": [[_known(pair) for pair in site] for site in single.phasor],
        "covariance": single.covariance.tolist(),
        "noise": single.model_noise.tolist(),
        "mean_only": [site in single.mean_only for site in single.sites],
        "admittance": as_components(admittance).tolist(),
        "place": sharing.place.tolist(),
        "group": sharing.group.tolist(),
        "group_by_label": isinstance(choices.settings.group_scatter, bool),
        "alone": sharing.alone.tolist(),
        "year": sharing.year.tolist(),
        "unmodelled": sharing.unmodelled.tolist(),
        "prior": {
            "annual": priors.annual_sd_hpa * PASCAL_PER_HPA,
            "atmosphere": choices.atmosphere_sd_hpa * PASCAL_PER_HPA,
            "year": priors.year_sd_hpa * PASCAL_PER_HPA,
            "unmodelled": priors.unmodelled_annual_hpa * PASCAL_PER_HPA,
        },
        "prior_scales": scale_priors(priors, 4 if sharing.has_group else 3).tolist(),
        "chosen": {"truth": TRUTHS[choices.settings.model_truth], "model_common_hpa": priors.model_common_hpa},
        "site_scatter": choices.settings.site_scatter,
    }


def _known(pair: NDArray[np.float64]) -> list[float] | None:
    return pair.tolist() if np.isfinite(pair).all() else None


def scenario_summary(run: FinishedRun, scenario: Scenario) -> dict[str, Any]:
    """Answer a scenario, with normal scatter.

    Parameters
    ----------
    run : FinishedRun
        Finished results.
    scenario : Scenario

    Returns
    -------
    dict
        `in_phase_hpa` and `quadrature_hpa` (mean, sd); `covariance_hpa2`; `amplitude_hpa` and `peak_day` (median,
        mean, sd, region50, region95); `peak_date`; `variance_share`; `sites`, the number of sites that were used;
        `site_scatter`, "normal".

    Raises
    ------
    InputError
        The scenario names what the run does not have, or leaves nothing.
    """
    network = _network(run)
    model, posteriors = answer_scenario(
        network.observations, network.admittance, network.members, network.choices, scenario
    )
    return {
        **_answer(posteriors, run.summary["reference_year"]),
        "variance_share": variance_shares(_terms(model, posteriors)),
        "sites": len(np.unique(model.rows.site)),
        "site_scatter": "normal",
    }


def student_summary(run: FinishedRun, scenario: Scenario) -> dict[str, Any] | None:
    """Answer a scenario with Student-t scatter and mixtures, where the run had these.

    Parameters
    ----------
    run : FinishedRun
    scenario : Scenario

    Returns
    -------
    dict or None
        As `scenario_summary`, without shares; besides `standard_error_hpa`, how far chance moves either mean.

    Raises
    ------
    InputError
        As for `scenario_summary`.
    """
    network = _network(run)
    if network.choices.settings.site_scatter == "normal":
        return None
    posteriors = answer_with_student_scatter(
        network.observations, network.admittance, network.members, network.choices, scenario
    )
    # the members share their random numbers
    error = np.mean([posterior.standard_error for posterior in posteriors], axis=0) / PASCAL_PER_HPA
    return {
        **_answer(posteriors, run.summary["reference_year"]),
        "standard_error_hpa": error.tolist(),
        "site_scatter": "student-t",
    }


def _answer(posteriors: Sequence[ScalePosterior], year: int) -> dict[str, Any]:
    pooled = zip(pooled_moments(posteriors), (1, 2), strict=True)
    mean, covariance = (value / PASCAL_PER_HPA**power for value, power in pooled)
    amplitude, day = amplitude_and_day(pooled_mixture(posteriors))
    return {
        **{
            name: {"mean": float(mean[k]), "sd": float(np.sqrt(covariance[k, k]))}
            for k, name in enumerate(("in_phase_hpa", "quadrature_hpa"))
        },
        "covariance_hpa2": covariance.tolist(),
        "amplitude_hpa": {key: (np.asarray(value) / PASCAL_PER_HPA).tolist() for key, value in amplitude.items()},
        "peak_day": day,
        "peak_date": peak_date(float(np.asarray(day["median"])), year),
    }


def _terms(model: LinearModel, posteriors: Sequence[ScalePosterior]) -> dict[str, float]:
    """Terms of the variance, those of each node from the nodes that weigh, the others from all."""
    of_all = {
        "fingerprint": float(np.trace(member_spread(posteriors))),
        "scales": float(np.mean([np.trace(posterior.scale_covariance) for posterior in posteriors])),
    }
    return {**variance_terms(model, [_heaviest(posterior) for posterior in posteriors]), **of_all}


def _heaviest(posterior: ScalePosterior) -> ScalePosterior:
    kept = posterior.weight > _HEAVY
    condition = posterior.condition.take(kept)
    return replace(
        posterior,
        log_scales=condition.log_scales,
        stretch=condition.stretch,
        part=condition.part,
        weight=posterior.weight[kept] / posterior.weight[kept].sum(),
        node_mean=posterior.node_mean[kept],
        node_covariance=posterior.node_covariance[kept],
    )
