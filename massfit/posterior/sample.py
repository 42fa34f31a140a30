"""Draws from the network posterior: the scales by emcee, the phasor exactly given the scales."""

from collections.abc import Callable, Iterable, Sequence
from typing import Any, NamedTuple

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.posterior.convergence import Convergence, diagnose, worst
from massfit.posterior.explore import ENSEMBLES, MAX_STEPS, STEPS, WALKERS, ScaleExplorer
from massfit.posterior.likelihood import LinearModel, annual_given_scales
from massfit.posterior.network_model import inflation, member_models, scale_priors
from massfit.posterior.observations import Observations, read_observations
from massfit.posterior.quadrature import ScalePosterior, integrate_scales
from massfit.posterior.result import Posterior
from massfit.settings import PosteriorSettings, Priors

KEPT_STEPS = 25
"""Equally spaced steps of each ensemble at which the phasor is drawn."""

_METHOD = (
    "normal site scatter, no group scatter, no year-to-year term",
    f"scales by emcee, {ENSEMBLES} ensembles of {WALKERS} walkers a load member; network phasor drawn exactly",
    "second route: quadrature over the scales",
)


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
        Student scatter and group scatter are computed as normal and none; the
        warnings of the result say so.
    priors : Priors
    atmosphere_sd_hpa : float
        Standard deviation of the error of the ocean-mean air pressure, hPa per component.
    progress : callable, optional
        Called with the number of load members done and of all.
    mapped : callable, optional
        Applies a function to each of a sequence, in order; one that shares the load members among
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
    models = member_models(
        observations, admittance, settings=settings, priors=priors, atmosphere_sd_hpa=atmosphere_sd_hpa
    )
    members = _member_names(fingerprints)
    streams = np.random.default_rng(settings.seed).spawn(len(models))
    tasks = [_MemberTask(model, scale_priors(priors), rng) for model, rng in zip(models, streams, strict=True)]
    draws, scales, diagnostics, seconds = [], [], [], []
    for annual, scale, diagnostic, second in mapped(_sample_member, tasks):
        draws.append(annual)
        scales.append(scale)
        diagnostics.append(diagnostic)
        seconds.append(second)
        if progress is not None:
            progress(len(draws), len(tasks))
    member_annual = np.stack(draws)
    annual, member_of_draw = pool_members(member_annual)
    convergence = worst(diagnostics)
    return Posterior(
        annual,
        member_of_draw,
        member_annual,
        np.stack(scales),
        members,
        observations.sites,
        observations.models,
        convergence,
        tuple(diagnostics),
        tuple(seconds),
        settings,
        priors,
        atmosphere_sd_hpa,
        (*_warnings(observations, members, settings, fingerprints), *_doubts(convergence)),
        _METHOD,
    )


def _member_names(fingerprints: xr.Dataset) -> tuple[str, ...]:
    if "member" in fingerprints.coords:
        return tuple(str(name) for name in fingerprints["member"].values)
    return tuple(f"member {k + 1}" for k in range(fingerprints.sizes["member"]))


class _MemberTask(NamedTuple):
    model: LinearModel
    prior_scales: NDArray[np.float64]
    rng: np.random.Generator


def _sample_member(
    task: _MemberTask,
) -> tuple[NDArray[np.float64], NDArray[np.float64], Convergence, ScalePosterior]:
    """Draws (chain, draw, 2) and scales (chain, draw, 3) of one member, extended until they converge."""
    model, prior_scales, rng = task
    second_route = integrate_scales(model, prior_scales)
    explorer = ScaleExplorer(model, prior_scales, rng)
    steps = STEPS
    while True:
        chains = explorer.run(steps)
        kept = chains.thinned(KEPT_STEPS)
        annual = _draw_annual(model, kept.log_scales, rng)
        diagnostic = diagnose(annual, kept.log_scales, kept.log_posterior, chains.length, second_route)
        if diagnostic.converged or steps >= MAX_STEPS:
            break
        steps *= 2
    shape = (ENSEMBLES, -1)
    return annual.reshape(*shape, 2), np.exp(kept.log_scales).reshape(*shape, 3), diagnostic, second_route


def _draw_annual(model: LinearModel, log_scales: NDArray[np.float64], rng: np.random.Generator) -> NDArray[np.float64]:
    """One exact draw of the network phasor at each set of scales, (..., 2), Pa."""
    mean, covariance = annual_given_scales(model, log_scales.reshape(-1, 3))
    noise = rng.standard_normal(mean.shape)
    draws = mean + np.einsum("nij,nj->ni", np.linalg.cholesky(covariance), noise)
    return np.asarray(draws.reshape(*log_scales.shape[:-1], 2))


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


def _warnings(
    observations: Observations, members: tuple[str, ...], settings: PosteriorSettings, fingerprints: xr.Dataset
) -> list[str]:
    real = [model for model in observations.models if model != NO_MODEL]
    without = [
        site
        for site, there in zip(observations.sites, observations.present, strict=True)
        if not any(here and model != NO_MODEL for model, here in zip(observations.models, there, strict=True))
    ]
    return [
        text
        for applies, text in (
            (
                settings.site_scatter == "student-t",
                'site_scatter = "student-t" (the default) is computed as "normal" in this version: one bad site weighs '
                "more than it should.",
            ),
            (
                settings.group_scatter is not False,
                "group_scatter (on by default) is not computed in this version: sites are taken as independent, which "
                "is too sure where they are neighbours.",
            ),
            (
                len(members) == 1,
                "One load member: the uncertainty of the fingerprint is taken as zero. Give more "
                "patterns in [fingerprint] loads.",
            ),
            (
                len(real) < 2,
                f"{'One ocean model' if real else 'No ocean model'}: the spread between models is assumed from its "
                "prior, not seen. Give two or more.",
            ),
            (
                len(real) > 1 and not observations.has_contrasts.any(),
                "No site says how two ocean models differ: their local spread is assumed from its prior, not seen.",
            ),
            (len(observations.sites) == 1, "One site: its scatter is assumed from its prior, not seen."),
            (bool(without), f"No ocean model was subtracted at: {', '.join(without)}."),
            (
                "air_load_response" not in fingerprints,
                "The gravitational effect of the air over land was not taken off (no atmosphere load was given). "
                "Give [corrections] atmosphere_load or air_pressure.",
            ),
        )
        if applies
    ]


def _doubts(convergence: Convergence) -> list[str]:
    return [
        f"Not converged: {text}. Try another seed; if it stays, look for a site that disagrees."
        for text in convergence.failures()
    ]
