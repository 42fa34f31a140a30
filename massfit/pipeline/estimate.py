"""The chain on one page: from a network's raw records to the network posterior.

Each step is a pure function of a room below; this module only puts them in
order, the way a method section would.
"""

from massfit.annual.dataset import site_phasors
from massfit.corrections.circulation import circulation_at_sites
from massfit.corrections.responses import equilibrium_responses
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import Network, check_network
from massfit.pipeline.air import network_air
from massfit.pipeline.context import in_context, records_span, stated_period
from massfit.pipeline.fingerprints import network_fingerprints, network_operator
from massfit.pipeline.parts import Mapped, Store, kept
from massfit.pipeline.progress import Progress, StageTimes, ignore
from massfit.pipeline.provenance import provenance
from massfit.pipeline.sites import SiteTask, daily_records, reduce_sites, usable_sites
from massfit.pipeline.workers import Workers
from massfit.posterior.predictive import predictive_check
from massfit.posterior.sample import sample_posterior
from massfit.posterior.summary import summarise
from massfit.results.correction_tables import with_corrections
from massfit.results.estimate import Estimate


def estimate(
    network: Network, *, progress: Progress = ignore, workers: int = 1, store: Store | None = None
) -> Estimate:
    """Do the main job: from raw records to the posterior of the annual cycle of ocean mass.

    Parameters
    ----------
    network : Network
        From `massfit.read_network`, from `massfit.simulate_network`, or built from arrays.
    progress : callable, optional
        Called with the stage, how many parts of it are done, and how many there are.
    workers : int
        Processes that share the sites. The numbers do not depend on it; a script that asks for more than one keeps
        its own work under ``if __name__ == "__main__"``.
    store : Store, optional
        Keeps finished parts and gives them back, so that an interrupted run need not compute them again; it must
        keep the parts of different versions of the program apart. Nothing is kept by default.

    Returns
    -------
    Estimate
        The answer (`summary`), the posterior, and every step towards it.

    Raises
    ------
    InputError
        Every fault of the network that was found before the first one that stops the run.

    Examples
    --------
    >>> from massfit.simulate.network import simulate_network
    >>> from massfit.simulate.options import SimulationOptions
    >>> options = SimulationOptions(sites=3, years=2, sampling="daily", incidents=False, bad_site=False)
    >>> result = estimate(simulate_network(options, seed=1).network, workers=1)
    >>> 0.3 < result.summary["amplitude_hpa"]["median"] < 1.7
    True
    """
    with Workers(workers) as pool:
        return _estimate(network, StageTimes(progress), pool, kept(pool.results, store))


def _estimate(network: Network, progress: StageTimes, pool: Workers, mapped: Mapped) -> Estimate:
    check_network(network)
    settings = network.settings
    records = daily_records(network, progress)
    sites = usable_sites(network, records)
    progress("sea-level equation", 0, 1)
    ocean = OceanFunction.builtin()
    operator = network_operator(network, ocean)
    footprints = site_footprints(operator, sites)
    air = network_air(network, ocean)
    fingerprints = network_fingerprints(network, operator, sites, footprints, air)
    responses = equilibrium_responses(
        operator,
        sites,
        long_period_tides=settings.corrections.long_period_tides,
        pole_tide=settings.corrections.pole_tide,
    )
    progress("sea-level equation", 1, 1)
    circulation = tuple(
        circulation_at_sites(model, sites, ocean=ocean, footprints=footprints, air_pressure=network.air_pressure)
        for model in network.circulation
    )
    tasks = [
        SiteTask(
            site,
            records[site.id],
            responses.sel(site=[site.id]),
            air.ocean_mean,
            tuple(model.only(site.id) for model in circulation),
            settings,
        )
        for site in sites
        if records[site.id]
    ]
    reductions = reduce_sites(tasks, progress, mapped)
    elsewhere = [each for each in network.reduced if each.site in {site.id for site in sites}]
    phasors = site_phasors(
        [reduction.fit for reduction in reductions],
        models=network.model_names,
        reference_year=settings.frame.reference_year,
        reduced=elsewhere,
        sites=sites,
        period=stated_period(settings.frame, *records_span(reductions, elsewhere)),
    )
    phasors = with_corrections(phasors, reductions)
    progress("network posterior", 0, fingerprints.sizes["member"])
    posterior = sample_posterior(
        phasors,
        fingerprints,
        settings=settings.posterior,
        priors=settings.priors,
        atmosphere_sd_hpa=settings.corrections.ocean_mean_atmosphere_sd_hpa,
        progress=lambda done, total: progress("network posterior", done, total),
        mapped=mapped,
    )
    summary = summarise(
        posterior,
        phasors,
        fingerprints,
        reference_year=settings.frame.reference_year,
        ocean_area_m2=float(fingerprints.attrs["ocean_area_m2"]),
        sea_water_density=settings.fingerprint.sea_water_density,
    )
    summary["predictive_check"] = predictive_check(posterior, phasors, fingerprints)
    return Estimate(
        network=network,
        fingerprints=fingerprints,
        reductions=tuple(reductions),
        site_phasors=phasors,
        posterior=posterior,
        summary=in_context(summary, network, reductions, float(fingerprints.attrs["ocean_area_m2"])),
        provenance={**provenance(network, processes=pool.count), "elapsed_s": progress.seconds()},
    )
