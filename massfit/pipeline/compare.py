"""Compare a finished run with satellite gravity."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from datetime import date, timedelta
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import EARTH_RADIUS, PASCAL_PER_HPA, STANDARD_GRAVITY
from massfit.earth.love import love_numbers
from massfit.errors import Fault, InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.gravity.compare import GravityComparison, NetworkAnswer, compare_with_gravity
from massfit.gravity.definitions import Part
from massfit.gravity.field import Span
from massfit.gravity.inputs import GravityInputs
from massfit.gravity.predicted import predicted_mass
from massfit.gravity.satellite import Context
from massfit.network import Network
from massfit.phasor import as_complex
from massfit.pipeline.fingerprints import network_operator, network_vapour
from massfit.posterior.regression import FREEDOM, SCALES
from massfit.results.comparison import comparison_dataset, comparison_summary
from massfit.results.estimate import Estimate
from massfit.results.finished import FinishedRun, finished_run
from massfit.results.posterior_groups import POSTERIOR

_PARTS = {
    "ocean_mean_atmosphere": ("ocean-mean air pressure", "water of the ocean and the air above it"),
    "long_period_tides": ("Sa", "water, with the annual tide Sa at the recorders left in"),
    "pole_tide": ("pole tide", "water, with the pole tide at the recorders left in"),
}
"""Corrections that other determinations leave in: what they are called, and what the cycle is then of."""


def compare_gravity(run: FinishedRun | Estimate, network: Network, gravity: GravityInputs) -> GravityComparison:
    """Set a network's answer beside satellite gravity: same quantity, ocean, years and conventions.

    Parameters
    ----------
    run : FinishedRun or Estimate
        From `massfit.estimate`, or read from a results folder.
    network : Network
        Its settings, sites and loads; the records are not needed.
    gravity : GravityInputs
        From `massfit.read_gravity`.

    Returns
    -------
    GravityComparison

    Raises
    ------
    InputError
        Fields that do not fit the settings, an ocean model of the run that assimilated satellite gravity,
        or too few months.

    Examples
    --------
    >>> from massfit.pipeline.estimate import estimate
    >>> from massfit.simulate.network import simulate_network
    >>> from massfit.simulate.options import SimulationOptions
    >>> options = SimulationOptions(
    ...     sites=1, years=2, models=1, load_members=2, sampling="daily", incidents=False, bad_site=False, satellites=1
    ... )
    >>> invented = simulate_network(options, seed=5)
    >>> found = compare_gravity(estimate(invented.network), invented.network, invented.gravity)
    >>> truth = invented.truth["amplitude_hpa"]
    >>> abs(abs(found.satellite.phasor) / 100.0 - truth) < 0.3, found.agreement.compatible
    (True, True)
    """
    if isinstance(run, Estimate):
        run = finished_run(run, command="massfit.estimate(network) in Python")
    _refuse_assimilated(network, gravity)
    _refuse_other_members(run, network)
    settings, chosen = network.settings, gravity.settings
    ocean = OceanFunction.builtin()
    degree = max(settings.fingerprint.max_degree, chosen.max_degree)
    operator = network_operator(network, ocean, max_degree=degree)
    vapour = network_vapour(network)
    context = Context(
        ocean,
        love_numbers(network.earth, max_degree=degree),
        predicted_mass(operator, network.loads, water_vapour=vapour, max_degree=chosen.max_degree),
        vapour,
        comparison_window(run, gravity),
        settings.frame.reference_year,
    )
    return compare_with_gravity(gravity, network_answer(run, network, vapour, ocean.area_m2), context)


def with_comparison(run: FinishedRun, network: Network, gravity: GravityInputs) -> FinishedRun:
    """Add a comparison with satellite gravity to a finished run.

    Parameters
    ----------
    run, network, gravity
        As for :func:`compare_gravity`.

    Returns
    -------
    FinishedRun
        With `comparison` in its summary, `comparison.nc` among its Datasets and the gravity files among its inputs.
    """
    found = compare_gravity(run, network, gravity)
    area = float(run.summary["ocean_area_m2"])
    summary = comparison_summary(found, reference_year=run.summary["reference_year"], ocean_area_m2=area)
    return replace(
        run,
        summary={**run.summary, "comparison": summary},
        provenance={**run.provenance, "inputs": {**run.provenance["inputs"], **gravity.inputs}},
        datasets={**run.datasets, "comparison.nc": comparison_dataset(found, run.summary)},
    )


def comparison_window(run: FinishedRun, gravity: GravityInputs) -> Span:
    """Years of the comparison: those stated, else the period that the answer is the mean of.

    Parameters
    ----------
    run : FinishedRun
    gravity : GravityInputs

    Returns
    -------
    Span
    """
    first, last = (date.fromisoformat(str(day)[:10]) for day in run.summary["period"])
    start, end = gravity.settings.start or first, gravity.settings.end or last
    if not start < end:
        problem = f"the window runs from {start} to {end}"
        raise InputError(Fault("[gravity]", "start", problem, "Must begin before it ends", "Correct start and end"))
    return Span(np.datetime64(start, "s"), np.datetime64(end + timedelta(days=1), "s"))


def network_answer(run: FinishedRun, network: Network, vapour: complex, ocean_area_m2: float) -> NetworkAnswer:
    """Take from a run what is compared.

    Parameters
    ----------
    run : FinishedRun
    network : Network
    vapour : complex
        Annual phasor of the mass of water vapour in the air, kg.
    ocean_area_m2 : float

    Returns
    -------
    NetworkAnswer
        Sites without a phasor are left out.
    """
    summary = run.summary
    mean = complex(summary["in_phase_hpa"]["mean"], summary["quadrature_hpa"]["mean"])
    rows = {site["id"]: site for site in summary["sites"]}
    sites = [site for site in network.sites if site.id in rows]
    fingerprints = run.datasets["fingerprints.nc"].sel(site=[site.id for site in sites])
    phasors = PASCAL_PER_HPA * np.array([rows[site.id]["phasor_hpa"] for site in sites])
    if "air_load_response" in fingerprints:
        phasors = phasors - fingerprints["air_load_response"].values
    return NetworkAnswer(
        PASCAL_PER_HPA * mean,
        PASCAL_PER_HPA**2 * np.array(summary["covariance_hpa2"]),
        sites,
        as_complex(phasors),
        PASCAL_PER_HPA**2 * np.array([rows[site.id]["phasor_covariance_hpa2"] for site in sites])
        + site_scatter(run, network, [len(rows[site.id]["models"]) for site in sites])[:, None, None] * np.eye(2),
        _admittance(fingerprints),
        _parts(summary["sites"], vapour, ocean_area_m2),
        *_yearly(run.datasets[POSTERIOR]),
        PASCAL_PER_HPA * network.settings.priors.year_sd_hpa,
        _by_member(run),
    )


def _by_member(run: FinishedRun) -> NDArray[np.complex128]:
    """Mean of the draws that were made under each load member, Pa."""
    member = run.datasets["posterior.nc/sample_stats"]["load_member"].values
    draws = as_complex(run.datasets[POSTERIOR]["member_annual_phasor"].transpose("chain", "draw", "component").values)
    return np.array([draws[member == each].mean() for each in np.unique(member)])


def site_scatter(run: FinishedRun, network: Network, models: Sequence[int]) -> NDArray[np.float64]:
    """Variance of what parts a recorder from the water at its site beside the error of its record.

    Parameters
    ----------
    run : FinishedRun
    network : Network
    models : sequence of int
        Number of circulation models at each site.

    Returns
    -------
    (n_site,) array
        Of each component, Pa2: scatter of sites and groups, disagreement of the models and their common error, all
        as the posterior has them; the prior of the circulation where none was subtracted; and the ocean-mean air.
    """
    posterior, settings = run.datasets[POSTERIOR], network.settings
    squares = {name: float(np.mean(posterior[name].values ** 2)) for name in SCALES if name in posterior}
    own = FREEDOM / (FREEDOM - 2.0) if settings.posterior.site_scatter == "student-t" else 1.0
    truth = 1.0 if settings.posterior.model_truth == "exchangeable" else 0.0
    air = (PASCAL_PER_HPA * settings.corrections.ocean_mean_atmosphere_sd_hpa) ** 2
    always = own * squares.get("s_site", 0.0) + squares.get("s_group", 0.0) + air
    circulation = [
        (squares.get("s_local", 0.0) + squares.get("s_common", 0.0)) / count + truth * squares.get("s_common", 0.0)
        if count else (PASCAL_PER_HPA * settings.priors.unmodelled_annual_hpa) ** 2
        for count in models
    ]  # fmt: skip
    return always + np.array(circulation)


def _admittance(fingerprints: xr.Dataset) -> NDArray[np.complex128]:
    return as_complex(fingerprints["admittance"].transpose("member", "site", "component").values)


def _yearly(posterior: xr.Dataset) -> tuple[NDArray[np.float64] | None, tuple[int, ...]]:
    """Draws of the phasor of each year, and the years; nothing where the model tells none apart."""
    if "year_phasor" not in posterior:
        return None, ()
    draws = posterior["year_phasor"].transpose("chain", "draw", "year", "component").values
    return draws.reshape(-1, *draws.shape[2:]), tuple(int(year) for year in posterior["year"].values)


def _parts(sites: Sequence[Mapping[str, Any]], vapour: complex, ocean_area_m2: float) -> dict[str, Part]:
    """Phasors that other definitions leave in, Pa: means over the sites of what was taken off there."""
    found: dict[str, Part] = {}
    for series, (name, text) in _PARTS.items():
        values = [
            complex(*correction["phasor_hpa"])
            for site in sites
            for correction in site.get("corrections", ())
            if correction["series"] == series and correction["phasor_hpa"] is not None
        ]
        if values and any(values):
            found[name] = Part(text, PASCAL_PER_HPA * complex(np.mean(values)), series != "ocean_mean_atmosphere")
    if vapour:
        text = "water that the ocean exchanges with the land alone, not with the vapour in the air"
        found["the vapour put back"] = Part(text, STANDARD_GRAVITY * vapour / ocean_area_m2)
        text = "water, less its mean over the whole Earth (degree 0), which the vapour in the air takes along"
        found["degree 0 left out"] = Part(text, STANDARD_GRAVITY * vapour / (4.0 * np.pi * EARTH_RADIUS**2))
    return found


def _refuse_assimilated(network: Network, gravity: GravityInputs) -> None:
    own = [model.name for model in network.circulation if model.assimilates_satellite_gravity]
    names = list(dict.fromkeys([*own, *gravity.assimilating_models]))
    if names:
        problem = f"{', '.join(names)} assimilated satellite gravity: the comparison would be with itself"
        raise InputError(Fault(network.source, "circulation", problem, "Independent models only", "Leave it out"))


def _refuse_other_members(run: FinishedRun, network: Network) -> None:
    made = [str(name) for name in run.datasets["fingerprints.nc"]["member"].values]
    now = [load.name for load in network.loads]
    if made != now:
        problem = (
            f"the results were made with the load members {', '.join(made)}, and the network file has {', '.join(now)}"
        )
        raise InputError(Fault(network.source, "loads", problem, "Must be the same", "Run massfit estimate anew"))
