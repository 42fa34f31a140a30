"""Site selection: a finished run asked which of its sites carry the answer."""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import partial
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.errors import Fault, InputError
from massfit.pipeline.executor import Embedded, Executor
from massfit.pipeline.progress import Progress, ignore
from massfit.posterior.mixtures import sites_by_mixture
from massfit.posterior.network_model import Choices
from massfit.posterior.node_integral import SubsetMoments, join_moments
from massfit.posterior.observations import read_observations
from massfit.posterior.subsets import SubsetTables, subset_posteriors, subset_tables
from massfit.results.datasets import with_description
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run
from massfit.results.siting import siting_dataset, siting_summary
from massfit.settings import PosteriorSettings, Priors
from massfit.siting.ranking import rank_network
from massfit.siting.threshold import column_of_sites, record_sd

RANKING = "siting.nc/ranking"
"""File and group of what was found."""

LEAST_SITES = 3
"""Sites below which there is nothing to choose among."""

PART = 512
"""Subsets that are answered in one piece: the same however many processes share them, and so is every bit."""

SUBSETS = 20
"""Random subsets of each size by default."""


@dataclass(frozen=True)
class SiteRanking:
    """What the sites of a network do for its answer.

    Parameters
    ----------
    summary : mapping
        `siting` of `estimate.json`.
    dataset : xarray.Dataset
        The group `ranking` of `siting.nc`.
    """

    summary: Mapping[str, Any]
    dataset: xr.Dataset


def rank_sites(
    run: FinishedRun | Estimate,
    *,
    subsets: int = SUBSETS,
    by: Mapping[str, float] | None = None,
    by_name: str = "value",
    target_width_hpa: float | None = None,
    with_pull: bool = True,
    executor: Executor | None = None,
    progress: Progress = ignore,
) -> SiteRanking:
    """Say which sites carry the answer, which would break it, and how few would do.

    Parameters
    ----------
    run : FinishedRun or Estimate
        From `massfit.estimate` or `massfit.read_results`.
    subsets : int
        Random subsets of each size.
    by : mapping of str to float, optional
        A value for every site, such as its quietness: sites of small values are kept first. By default the error of
        each site's record.
    by_name : str
        What that value is called.
    target_width_hpa : float, optional
        Width that a smaller network is to keep; 10 % more than that of all sites by default.
    with_pull : bool
        Whether to find what each site would have to read to move the answer by one standard deviation.
    executor : Executor, optional
        Who answers the random subsets, from :func:`massfit.pipeline.executor.make_executor`; by default this process.
    progress : callable

    Returns
    -------
    SiteRanking

    Raises
    ------
    InputError
        The run has fewer than 3 sites or did not converge, or a site has no value in `by`.

    Examples
    --------
    >>> import massfit
    >>> options = massfit.SimulationOptions(sites=3, years=2, sampling="daily", incidents=False, bad_site=False)
    >>> result = massfit.estimate(massfit.simulate_network(options, seed=1).network)
    >>> ranking = rank_sites(result, subsets=2, with_pull=False)
    >>> [row["sites"] for row in ranking.summary["without_sites"]]
    [2, 2, 2]
    """
    done = finished_run(run, command="massfit.estimate(network) in Python") if isinstance(run, Estimate) else run
    _check(done)
    observations, admittance = read_observations(done.datasets["site_phasors.nc"], done.datasets["fingerprints.nc"])
    chosen = done.provenance["settings"]
    choices = Choices(
        PosteriorSettings(**chosen["posterior"]),
        Priors(**chosen["priors"]),
        float(chosen["corrections"]["ocean_mean_atmosphere_sd_hpa"]),
    )
    if by is None:
        value, by_name = record_sd(observations) / PASCAL_PER_HPA, "error of the record / hPa"
    else:
        value = column_of_sites(by, observations.sites, by_name)
    mixed = sites_by_mixture(observations, admittance, choices)
    rows = {str(site["id"]): site["standardised_residual"] for site in done.summary["sites"]}
    ranking = rank_network(
        subset_tables(observations, admittance, choices, mixed=mixed),
        value,
        np.array([rows[name] for name in observations.sites], dtype=float),
        per_size=subsets,
        rng=np.random.default_rng(choices.settings.seed),
        with_pull=with_pull,
        answer=partial(shared_answer, executor or Embedded()),
        progress=lambda step, total: progress("site selection", step, total),
    )
    sites = done.summary["sites"]
    summary = siting_summary(
        ranking,
        sites,
        by_name=by_name,
        target_hpa=target_width_hpa,
        reference_year=int(done.summary["reference_year"]),
    )
    return SiteRanking(summary, siting_dataset(ranking, sites, by_name))


def shared_answer(executor: Executor, tables: SubsetTables, kept: NDArray[np.bool_]) -> SubsetMoments:
    """Answer subsets (n, n_site) piece by piece, wherever the executor has them done."""
    parts = np.split(kept, range(PART, len(kept), PART))
    return join_moments(list(executor.results(partial(subset_posteriors, tables), parts)))


def with_ranking(run: FinishedRun, ranking: SiteRanking) -> FinishedRun:
    """Add a ranking to a finished run.

    Parameters
    ----------
    run : FinishedRun
    ranking : SiteRanking
        Of this run.

    Returns
    -------
    FinishedRun
        With `siting` in its summary and the group `ranking` of `siting.nc` among its Datasets.
    """
    described = with_description(ranking.dataset, "which sites carry the answer", run.summary, run.provenance)
    return replace(
        run,
        summary={**run.summary, "siting": dict(ranking.summary)},
        datasets={**run.datasets, RANKING: described},
    )


def _check(run: FinishedRun) -> None:
    faults = []
    count = len(run.summary["sites"])
    if count < LEAST_SITES:
        problem = f"the network has {count} site{'s' * (count != 1)}"
        faults.append(Fault("results", "sites", problem, f"At least {LEAST_SITES} are needed to choose among them"))
    if not run.summary["convergence"]["converged"]:
        action = "Make the results anew with another seed, or look for a site that disagrees"
        faults.append(Fault("results", "convergence", "the answer did not converge", "Must be converged", action))
    if faults:
        raise InputError(faults)
