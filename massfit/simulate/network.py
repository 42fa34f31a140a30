"""Invent a network of which everything is known."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.corrections.long_period_tides import zonal_height
from massfit.corrections.pole_tide import observed_wobble
from massfit.fingerprint.ocean import OceanFunction
from massfit.gravity.inputs import GravityInputs
from massfit.network import Network
from massfit.phasor import peak_days
from massfit.records.record import Record
from massfit.records.stretches import stretches
from massfit.simulate.analyst import air_as_given, members, rounded, settings
from massfit.simulate.clock import Clock, make_clock
from massfit.simulate.dynamics import (
    Circulation,
    complex_normal,
    daily_means,
    draw_circulation,
    ocean_bumps,
    phasor_series,
)
from massfit.simulate.instrument import Deployment, draw_deployments, exclusions, observe
from massfit.simulate.loads import coarsened
from massfit.simulate.models import common_errors, draw_models
from massfit.simulate.noise import flicker, ornstein_uhlenbeck
from massfit.simulate.options import SimulationOptions
from massfit.simulate.places import draw_sites
from massfit.simulate.satellites import draw_satellites, satellite_truth
from massfit.simulate.sea_level import Responses, true_responses
from massfit.simulate.tides import draw_tides, tide_at
from massfit.simulate.world import World, draw_world
from massfit.site import Site

_AIR_CELL_DEG = 2.0
_FLICKER_SD = 55.0  # Pa
_UNMODELLED_SD = 12.0  # Pa per component: annual dynamics that no model has
_EDDY_SD = 420.0  # Pa, at the site no model can follow
_EDDY_SEASON_SD = 80.0  # Pa per component
_DEPTH_TO_PRESSURE = 10_080.0  # Pa a metre, mean over a deep water column

# one stream of random numbers a subject: more models do not move the sites; new subjects go last
_SUBJECTS = (
    "sites", "world", "members", "air", "circulation", "models", "recorders", "noise", "tides", "roles", "satellites",
)  # fmt: skip
_INCIDENTS = ("overlap", "step", "short", "disturbed", "missing", "text")


@dataclass(frozen=True, eq=False)
class SimulatedNetwork:
    """An invented network and the truth behind it.

    Parameters
    ----------
    network : Network
        All that an analyst would be given.
    truth : mapping
        Plain numbers, text and lists: what the analyst would like to know.
    gravity : GravityInputs, optional
        Satellite gravity of the same world.
    """

    network: Network
    truth: Mapping[str, Any]
    gravity: GravityInputs | None = None


def simulate_network(options: SimulationOptions | None = None, *, seed: int) -> SimulatedNetwork:
    """Invent a network of recorders with known truth.

    The truth is made by other means than the analysis uses: a load pattern outside the ensemble, solved to a
    higher degree; flicker noise; models that share an error.

    Parameters
    ----------
    options : SimulationOptions, optional
    seed : int
        Not negative; the same seed and options give the same network.

    Returns
    -------
    SimulatedNetwork

    Raises
    ------
    InputError
        Polar motion was not observed throughout the period.

    Examples
    --------
    >>> simulated = simulate_network(SimulationOptions(sites=2, sampling="daily"), seed=2)
    >>> len(simulated.network.sites), simulated.truth["reference_year"]
    (2, 2016)
    """
    options = SimulationOptions() if options is None else options
    streams = np.random.SeedSequence(seed).spawn(len(_SUBJECTS))
    rng = {name: np.random.default_rng(stream) for name, stream in zip(_SUBJECTS, streams, strict=True)}
    ocean, clock = OceanFunction.builtin(), make_clock(options)
    sites, roles = draw_sites(ocean, options.sites, rng["sites"]), _roles(rng["roles"], options)
    world, bumps = draw_world(rng["world"], ocean, clock), ocean_bumps(ocean)
    responses = true_responses(sites, world, bumps)
    circulation = draw_circulation(rng["circulation"], bumps, clock)
    common = common_errors(rng["models"], options.models, error=options.model_error)
    models = draw_models(
        rng["models"],
        daily_means(circulation, clock),
        clock.by_day,
        bumps=bumps,
        at_sites=xr.DataArray(responses.bumps, {"site": [site.id for site in sites]}, ("site", "pattern")),
        common=common,
        error=options.model_error,
        missing=sites[roles.index("missing")].id if "missing" in roles else None,
    )
    unmodelled = complex_normal(rng["noise"], _UNMODELLED_SD * options.model_error, options.sites)
    pressure = _modelled(world, responses, circulation, clock)
    pressure += phasor_series(unmodelled, clock.days) + _noise(rng["noise"], options, roles, clock)
    recorders = [draw_deployments(rng["recorders"], clock.n_days, role) for role in roles]
    records = _records(rng, options, sites, roles, recorders, pressure, clock)
    air, air_error = air_as_given(rng["air"], world, clock)
    gravity = draw_satellites(rng["satellites"], world, clock, options.satellites) if options.satellites else None
    network = Network(
        settings=replace(settings(options, clock), gravity=None if gravity is None else gravity.settings),
        sites=tuple(
            replace(site, exclude=exclusions(laid, clock)) for site, laid in zip(sites, recorders, strict=True)
        ),
        records=records,
        loads=members(rng["members"], ocean, options.load_members),
        circulation=models,
        ocean_mean_atmosphere=air,
        atmosphere_load=rounded(coarsened(world.air_pressure, _AIR_CELL_DEG), 0.1),
    )
    truth = _truth(world, clock) | {
        "seed": seed,
        "ocean_mean_air_error_hpa": _hpa(air_error),
        "model_common_error_hpa": {
            model.name: _hpa(error) for model, error in zip(models, common.tolist(), strict=True)
        },
        "sites": _site_truth(sites, roles, responses, unmodelled, recorders),
    }
    if gravity is not None:
        truth |= {"satellites": satellite_truth(gravity)}
    return SimulatedNetwork(network, truth, gravity)


def _roles(rng: np.random.Generator, options: SimulationOptions) -> list[str]:
    """Say what befalls each site; most have no role, at least two have none."""
    wanted = ["eddies"] * options.bad_site + list(_INCIDENTS) * options.incidents
    wanted = wanted[: max(0, options.sites - 2)]
    return [str(role) for role in rng.permutation(wanted + ["plain"] * (options.sites - len(wanted)))]


def _modelled(world: World, responses: Responses, circulation: Circulation, clock: Clock) -> NDArray[np.float64]:
    """All that is no noise, no short tide and no recorder's doing, (n_site, n_time) Pa."""
    days = clock.days
    m1, m2, _ = observed_wobble(clock.time)
    pressure = responses.bumps @ circulation.series(days)
    pressure += phasor_series(responses.air_load, days) + world.air_series
    pressure += np.outer(responses.zonal_tide, zonal_height(clock.time))
    pressure += np.outer(responses.wobble.real, m1) + np.outer(responses.wobble.imag, m2)
    pressure += np.array([world.water(admittance, days) for admittance in responses.admittance])
    return np.asarray(pressure, dtype=float)


def _noise(
    rng: np.random.Generator, options: SimulationOptions, roles: Sequence[str], clock: Clock
) -> NDArray[np.float64]:
    """Ocean noise of each site that no model holds, (n_site, n_time) Pa."""
    n, step = clock.n_days * clock.samples_per_day, clock.step_days
    sizes = options.noise * _FLICKER_SD * np.exp(rng.normal(0.0, 0.25, len(roles)))
    noise: NDArray[np.float64] = sizes[:, None] * np.array([flicker(rng, n, step_days=step) for _ in roles])
    if "eddies" in roles:
        eddies = _EDDY_SD * ornstein_uhlenbeck(rng, (n,), step_days=step, time_scale_days=25.0)
        season = phasor_series(complex_normal(rng, _EDDY_SEASON_SD, 1), clock.days)[0]
        noise[roles.index("eddies")] += eddies + season
    return noise


def _records(
    rng: Mapping[str, np.random.Generator],
    options: SimulationOptions,
    sites: Sequence[Site],
    roles: Sequence[str],
    recorders: Sequence[Sequence[Deployment]],
    pressure: NDArray[np.float64],
    clock: Clock,
) -> tuple[Record, ...]:
    """Observe all sites."""
    records: list[Record] = []
    for site, role, deployments, row in zip(sites, roles, recorders, pressure, strict=True):
        samples, at_site = _at_samples(rng["tides"], options, row, clock)
        for number, deployment in enumerate(deployments, 1):
            last_as_text = role == "text" and number == len(deployments)
            blank = _blank_record(site, number, "txt" if last_as_text else "nc")
            records.append(observe(rng["recorders"], deployment, samples, at_site, blank=blank, options=options))
    return tuple(records)


def _at_samples(
    rng: np.random.Generator, options: SimulationOptions, row: NDArray[np.float64], clock: Clock
) -> tuple[Clock, NDArray[np.float64]]:
    """Clock of the recorders of a site, and the pressure on it, Pa."""
    if options.sampling == "daily":
        return clock, row
    tides = draw_tides(rng)
    if options.sampling == "hourly":
        return clock, row + tide_at(tides, clock.time)
    fine = clock.by_quarter_minute
    time, hours = fine.time, clock.time.astype(np.int64)
    pressure = np.empty(time.size)
    # all but the tides is slow, and straight from hour to hour
    for part in stretches(time.size):
        pressure[part] = np.interp(time[part].astype(np.int64), hours, row) + tide_at(tides, time[part])
    return fine, pressure


def _blank_record(site: Site, number: int, suffix: str) -> Record:
    reference = float(round((site.depth_m or 0.0) * _DEPTH_TO_PRESSURE))
    return Record(
        site=site.id,
        deployment=f"{site.id}/{number}",
        time=np.empty(0, dtype="datetime64[ns]"),
        pressure=np.empty(0),
        reference=reference,
        source=f"records/{site.id.lower()}_{number}.{suffix}",
    )


def _truth(world: World, clock: Clock) -> dict[str, Any]:
    return {
        "amplitude_hpa": abs(world.annual) / 100.0,
        "peak_day": float(peak_days(world.annual)),
        "in_phase_hpa": world.annual.real / 100.0,
        "quadrature_hpa": world.annual.imag / 100.0,
        "reference_year": clock.reference_year,
        "water_vapour_kg": [world.water_vapour.real, world.water_vapour.imag],
        "ocean_mean_air_hpa": _hpa(world.air_annual),
    }


def _site_truth(
    sites: Sequence[Site],
    roles: Sequence[str],
    responses: Responses,
    unmodelled: NDArray[np.complex128],
    recorders: Sequence[Sequence[Deployment]],
) -> list[Mapping[str, Any]]:
    return [
        {
            "id": site.id,
            "role": roles[s],
            "admittance": [float(responses.admittance[s].real), float(responses.admittance[s].imag)],
            "air_load_response_hpa": _hpa(complex(responses.air_load[s])),
            "unmodelled_annual_hpa": _hpa(complex(unmodelled[s])),
            "deployments": [each.summary(f"{site.id}/{number}") for number, each in enumerate(recorders[s], 1)],
        }
        for s, site in enumerate(sites)
    ]


def _hpa(phasor: complex) -> list[float]:
    return [phasor.real / 100.0, phasor.imag / 100.0]
