"""Draws from the network posterior: the scales by emcee, the phasor exactly given the scales."""

from collections.abc import Callable, Iterable, Sequence
from typing import Any, NamedTuple

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.posterior.convergence import Convergence, diagnose, worst
from massfit.posterior.explore import (
    ENSEMBLES,
    MAX_STEPS,
    STEPS,
    EnsembleChains,
    EnsembleTask,
    run_ensembles,
)
from massfit.posterior.importance import DRAWS, Proposal, ScalePosterior, fit_proposal, integrate_scales
from massfit.posterior.mixtures import sites_by_mixture
from massfit.posterior.network_model import Choices, inflation, network_model, scale_priors
from massfit.posterior.notes import method_notes, network_warnings
from massfit.posterior.observations import Observations, read_observations
from massfit.posterior.regression import LinearModel
from massfit.posterior.result import Posterior
from massfit.settings import PosteriorSettings, Priors


def sample_posterior(
    site_phasors: xr.Dataset,
    fingerprints: xr.Dataset,
    *,
    settings: PosteriorSettings,
    priors: Priors,
    atmosphere_sd_hpa: float = 0.04,
    progress: Callable[[int, int], None] | None = None,
    mapped: Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]] = map,
) -> Posterior:
    """Draw from the posterior of the annual phasor of ocean mass.

    Parameters
    ----------
    site_phasors : xarray.Dataset
        Per `massfit.contracts.SITE_PHASORS`, Pa.
    fingerprints : xarray.Dataset
        Per `massfit.contracts.FINGERPRINTS`; matched with the sites by id.
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float
        Standard deviation of the error of the ocean-mean air pressure, hPa per component.
    progress : callable, optional
        Called with the number of parts done and of all.
    mapped : callable, optional
        Applies a function to each of a sequence, in order; one that shares the parts among
        processes gives the same numbers.

    Returns
    -------
    Posterior

    Raises
    ------
    InputError
        Every fault of the two Datasets.

    Notes
    -----
    The numbers depend neither on the order of the sites and models nor on the number of processes.
    One posterior for every load member, pooled in equal numbers: the recorders do not
    choose among the members (a cut, Plummer 2015, Statistics and Computing 25, 37-43).

    Examples
    --------
    Two sites, one ocean model, one load member:

    >>> import numpy as np, xarray as xr
    >>> from massfit.settings import PosteriorSettings, Priors
    >>> def variable(dims, values, units):
    ...     return (dims, np.array(values, dtype=float), {"units": units})
    >>> identity = 100.0 * np.eye(2)
    >>> site_phasors = xr.Dataset(
    ...     {
    ...         "phasor": variable(("site", "part", "model", "component"), [[[[5, 90]]], [[[9, 94]]]], "Pa"),
    ...         "weight": variable(("site", "part"), [[1], [1]], "1"),
    ...         "covariance": variable(("site", "part", "component", "component2"), [[identity]] * 2, "Pa2"),
    ...         "model_noise": variable(("site", "component", "component2"), np.zeros((2, 2, 2)), "Pa2"),
    ...         "reduced_sd": variable(("site",), [150, 150], "Pa"),
    ...         "days": variable(("site",), [900, 900], "d"),
    ...     },
    ...     coords={"site": ["north", "south"], "model": ["invented"]},
    ...     attrs={"reference_year": 2016},
    ... )
    >>> fingerprints = xr.Dataset(
    ...     {"admittance": variable(("member", "site", "component"), [[[1.1, 0], [1.1, 0]]], "1")},
    ...     coords={"site": ["north", "south"]},
    ...     attrs={"earth_model": "", "max_degree": 180, "ocean_area_m2": 3.6e14, "sea_water_density_kg_m3": 1025},
    ... )
    >>> posterior = sample_posterior(site_phasors, fingerprints, settings=PosteriorSettings(), priors=Priors())
    >>> posterior.converged, bool(abs(posterior.draws.mean(axis=0)[1] / 100 - 0.84) < 0.03)
    (True, True)
    """
    observations, admittance = read_observations(site_phasors, fingerprints)
    choices = Choices(settings, priors, atmosphere_sd_hpa)
    mixed, proposal = _mixed_and_proposal(observations, admittance, choices)
    model = network_model(observations, admittance, choices, mixed=mixed)
    prior_scales = scale_priors(priors, model.scale_count)
    effort = 1
    while True:
        chains, routes = _both_routes(
            _Run(model, prior_scales, proposal, settings.seed, effort), mapped, progress or _silent
        )
        diagnostics = [diagnose(chains, k, route) for k, route in enumerate(routes)]
        if all(diagnostic.converged for diagnostic in diagnostics) or effort * STEPS >= MAX_STEPS:
            break
        effort *= 2
    members = _member_names(fingerprints)
    convergence = worst(diagnostics)
    member_annual = _by_chain(chains.annual)
    annual, member_of_draw = pool_members(member_annual)
    away = _by_chain(chains.years)
    return Posterior(
        annual=annual,
        member_of_draw=member_of_draw,
        member_annual=member_annual,
        scales=np.exp(_by_chain(chains.log_scales[:, :, chains.kept])),
        year_annual=annual[:, :, None] + np.moveaxis(away, 0, 1).reshape(*annual.shape[:2], *away.shape[3:]),
        years=observations.years if away.shape[3] else (),
        members=members,
        sites=observations.sites,
        models=observations.models,
        convergence=convergence,
        member_convergence=tuple(diagnostics),
        second_route=tuple(routes),
        settings=settings,
        priors=priors,
        atmosphere_sd_hpa=atmosphere_sd_hpa,
        mixed=mixed,
        warnings=(*network_warnings(observations, model, members, priors, fingerprints), *_doubts(convergence)),
        method=method_notes(model, settings, mixed),
    )


def _mixed_and_proposal(
    observations: Observations, admittance: NDArray[np.complex128], choices: Choices
) -> tuple[tuple[str, ...], Proposal]:
    """Sites that enter by their mixture, and where the nodes are drawn, both at the mean of the load members."""
    mean = admittance.mean(axis=0)[None]

    def fitted(mixed: tuple[str, ...]) -> Proposal:
        middle = network_model(observations, mean, choices, mixed=mixed)
        rng = np.random.default_rng(choices.settings.seed)
        return fit_proposal(middle, scale_priors(choices.priors, middle.scale_count), rng=rng)

    proposal = fitted(())
    mixed = sites_by_mixture(observations, admittance, choices, start=proposal)
    return mixed, fitted(mixed) if mixed else proposal


def _silent(done: int, total: int) -> None:
    """Report nothing."""


def _member_names(fingerprints: xr.Dataset) -> tuple[str, ...]:
    if "member" in fingerprints.coords:
        return tuple(str(name) for name in fingerprints["member"].values)
    return tuple(f"member {k + 1}" for k in range(fingerprints.sizes["member"]))


class NodesTask(NamedTuple):
    """The second route of one load member; the task travels to a worker process whole.

    Parameters
    ----------
    model : LinearModel
    prior_scales : (n_scale,) array
        Pa.
    member : int
    draws : int
    start : Proposal
    rng : numpy.random.Generator
    """

    model: LinearModel
    prior_scales: NDArray[np.float64]
    member: int
    draws: int
    start: Proposal
    rng: np.random.Generator


class _Run(NamedTuple):
    """One attempt at both routes; a later one makes twice the effort of the one before."""

    model: LinearModel
    prior_scales: NDArray[np.float64]
    proposal: Proposal
    seed: int
    effort: int

    def tasks(self) -> list[EnsembleTask | NodesTask]:
        """All ensembles, then the nodes of every load member."""
        of_ensembles, of_nodes = np.random.default_rng([self.seed, self.effort]).spawn(2)
        # the same random numbers for every load member: what differs between them is the load
        state = of_nodes.integers(2**32)
        return [
            EnsembleTask(self.model, self.prior_scales, ENSEMBLES, self.effort * STEPS, of_ensembles),
            *(
                NodesTask(
                    self.model, self.prior_scales, k, self.effort * DRAWS, self.proposal, np.random.default_rng(state)
                )
                for k in range(self.model.member_count)
            ),
        ]


def _sample_part(task: EnsembleTask | NodesTask) -> EnsembleChains | ScalePosterior:
    if isinstance(task, EnsembleTask):
        return run_ensembles(task)
    return integrate_scales(
        task.model, task.prior_scales, member=task.member, rng=task.rng, draws=task.draws, start=task.start
    )


def _both_routes(
    run: _Run,
    mapped: Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]],
    progress: Callable[[int, int], None],
) -> tuple[EnsembleChains, list[ScalePosterior]]:
    """Chains of all ensembles, and the nodes of every load member."""
    tasks, parts = run.tasks(), []
    for part in mapped(_sample_part, tasks):
        parts.append(part)
        progress(len(parts), len(tasks))
    return EnsembleChains(*parts[0]), parts[1:]


def _by_chain(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """From (n_ensemble, n_member, n_step, n_walker, ...) to (n_member, n_ensemble, n_step * n_walker, ...)."""
    ensembles, members, steps, walkers = values.shape[:4]
    return np.swapaxes(values, 0, 1).reshape(members, ensembles, steps * walkers, *values.shape[4:])


def pool_members(member_annual: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Pool the members' draws, with the spread of their means inflated.

    Parameters
    ----------
    member_annual : (n_member, n_chain, n_draw, 2) array
        Pa.

    Returns
    -------
    annual : (n_chain, n_member * n_draw, 2) array
        Pa.
    member_of_draw : (n_member * n_draw,) array of int
    """
    count, chains, draws, _ = member_annual.shape
    shift = member_annual.mean(axis=(1, 2)) - member_annual.mean(axis=(0, 1, 2))
    stretched = member_annual + (np.sqrt(inflation(count)) - 1.0) * shift[:, None, None]
    pooled = np.moveaxis(stretched, 0, 1).reshape(chains, count * draws, 2)
    return pooled, np.repeat(np.arange(count), draws)


def _doubts(convergence: Convergence) -> list[str]:
    return [
        f"Not converged: {text}. Try another seed; if it stays, look for a site that disagrees."
        for text in convergence.failures()
    ]
