"""Where and how long to measure next: candidates, record length and service of a finished run."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError, collect
from massfit.fingerprint.admittance import site_fingerprints
from massfit.fingerprint.maps import admittance_maps
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import Network
from massfit.phasor import as_complex
from massfit.pipeline.fingerprints import network_operator, network_rotation, network_vapour
from massfit.pipeline.progress import Progress, ignore
from massfit.posterior.mixtures import sites_by_mixture
from massfit.posterior.network_model import Choices, network_model, second_routes
from massfit.posterior.observations import Observations, read_observations
from massfit.results.finished import FinishedRun
from massfit.settings import PosteriorSettings, Priors
from massfit.site import Site
from massfit.siting.gain_map import (
    Candidate,
    Plan,
    admittance_at,
    asked_places,
    best_places,
    candidate_map,
    check_candidates,
    unknown_depth,
)
from massfit.siting.length_dataset import length_dataset
from massfit.siting.network_error import NetworkError, network_error
from massfit.siting.planned_noise import PlannedNoise, map_record_covariance, record_covariance, typical_noise

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class PlanOptions:
    """What the user asks of the plan of the next recorder.

    Parameters
    ----------
    years : float
        Length of its record.
    noise_sd : float, optional
        Standard deviation of its daily means, Pa; by default the noise of the network's middle site.
    target_sd : float, optional
        Error of a component of the answer that is to be reached, Pa.
    candidates : tuple of Candidate
        Places asked about, and the file they are from.
    source : str
    quietness : xarray.Dataset, optional
        contracts.QUIETNESS_MAP, instead of one noise for all places.
    depth : callable, optional
        From latitudes and longitudes, degrees, to depths, m.
    """

    years: float = 2.0
    noise_sd: float | None = None
    target_sd: float | None = None
    candidates: tuple[Candidate, ...] = ()
    source: str = "candidates"
    quietness: xr.Dataset | None = None
    depth: Callable[[Floats, Floats], Floats] = unknown_depth


@dataclass(frozen=True)
class NetworkNow:
    """The network of a finished run, as its posterior had it.

    Parameters
    ----------
    observations : Observations
    admittance : (n_member, n_site) array of complex
    choices : Choices
    error : NetworkError
    """

    observations: Observations
    admittance: NDArray[np.complex128]
    choices: Choices
    error: NetworkError


def network_now(run: FinishedRun) -> NetworkNow:
    """Prepare the network of a finished run for changes.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    NetworkNow

    Raises
    ------
    InputError
        The sites have no positions.
    """
    observations, admittance = read_observations(run.datasets["site_phasors.nc"], run.datasets["fingerprints.nc"])
    if observations.position is None:
        problem = "the sites have no positions"
        raise InputError(Fault("site_phasors.nc", "latitude", problem, "Must be there", "Make the results anew"))
    chosen = run.provenance["settings"]
    choices = Choices(
        PosteriorSettings(**chosen["posterior"]),
        Priors(**chosen["priors"]),
        float(chosen["corrections"]["ocean_mean_atmosphere_sd_hpa"]),
    )
    mixed = sites_by_mixture(observations, admittance, choices)
    model = network_model(observations, admittance, choices, mixed=mixed)
    routes = second_routes(observations, admittance, choices, mixed=mixed)
    return NetworkNow(observations, admittance, choices, network_error(model, routes))


def plan_sites(
    run: FinishedRun, now: NetworkNow, network: Network, options: PlanOptions, *, progress: Progress = ignore
) -> dict[str, xr.Dataset]:
    """Say where the next recorder would help most and how long it must stay.

    Parameters
    ----------
    run : FinishedRun
        A finished estimate.
    now : NetworkNow
        Of this run.
    network : Network
        Its network file: settings, sites and loads; records are not needed.
    options : PlanOptions
    progress : callable

    Returns
    -------
    dict of str to xarray.Dataset
        `candidate_map`, `best_places`, `record_length`, and `asked_places` where any were asked about.

    Raises
    ------
    InputError
        The network file has other load members than the run, or a candidate on land.
    """
    _check(run, network, options)
    progress("candidates", 0, 2)
    phasors, priors = run.datasets["site_phasors.nc"], now.choices.priors
    noise = typical_noise(phasors, priors)
    if options.noise_sd is not None:
        noise = noise.scaled(options.noise_sd)
    records = _records(options, noise, priors)
    plan = Plan(now.error, now.observations, now.choices, options.years, records, options.depth)
    operator = network_operator(network, OceanFunction.builtin())
    vapour, rotation = network_vapour(network), network_rotation(network, operator)
    maps = admittance_maps(operator, network.loads, water_vapour=vapour, rotation=rotation)
    progress("candidates", 1, 2)
    cells = candidate_map(plan, maps)
    found = {"candidate_map": cells, "best_places": best_places(plan, cells, maps)}
    if options.candidates:
        sites = [Site(each.name, each.latitude_deg, each.longitude_deg) for each in options.candidates]
        prints = site_fingerprints(operator, sites, network.loads, water_vapour=vapour, rotation=rotation)

        def record_of(daily_sd: float) -> Floats:
            return record_covariance(noise.scaled(daily_sd).model, options.years, priors)

        there = as_complex(prints["admittance"].values)
        found["asked_places"] = asked_places(plan, options.candidates, there, record_of)
    if found["best_places"].sizes["place"]:
        best = found["best_places"].isel(place=0)
        at_best = admittance_at(maps, best["latitude"].item(), best["longitude"].item())
        found["record_length"] = length_dataset(plan, noise, best, at_best, phasors, target_sd=options.target_sd)
    progress("candidates", 2, 2)
    return {name: data.assign_attrs(noise_source=noise.source) for name, data in found.items()}


def _check(run: FinishedRun, network: Network, options: PlanOptions) -> None:
    faults: list[Fault] = []
    with collect(faults):
        check_candidates(options.candidates, source=options.source)
    had = [str(name) for name in run.datasets["fingerprints.nc"]["member"].values]
    now = [load.name for load in network.loads]
    if had != now:
        problem = f"the load members are {', '.join(now)}; those of the results are {', '.join(had)}"
        action = "Give the network file that the results were made with"
        faults.append(Fault(network.source or "network", "fingerprint.loads", problem, "Must be the same", action))
    if faults:
        raise InputError(faults)


def _records(
    options: PlanOptions, noise: PlannedNoise, priors: Priors
) -> Callable[[Floats, Floats], tuple[Floats, Floats]]:
    if options.quietness is not None:
        return map_record_covariance(options.quietness, noise, options.years, priors)
    everywhere = record_covariance(noise.model, options.years, priors)

    def at(latitude_deg: Floats, longitude_deg: Floats) -> tuple[Floats, Floats]:
        count = len(np.broadcast_arrays(latitude_deg, longitude_deg)[0])
        return np.broadcast_to(everywhere, (count, 2, 2)), np.full(count, np.nan)

    return at
