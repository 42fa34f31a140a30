"""The chain on one page: from a network's raw records to the network posterior.

Each step is a pure function of a room below; this module only puts them in
order, the way a method section would.
"""

from massfit.network import Network
from massfit.pipeline.calibrate import calibrate
from massfit.pipeline.context import in_context, sites_in_context
from massfit.pipeline.fingerprints import network_fingerprints
from massfit.pipeline.parts import Mapped, Store, kept
from massfit.pipeline.progress import Progress, StageTimes, ignore
from massfit.pipeline.provenance import provenance
from massfit.pipeline.site_stage import site_stage
from massfit.pipeline.surrogate import surrogate_base
from massfit.pipeline.what_if import other_answers
from massfit.pipeline.workers import Workers
from massfit.posterior.predictive import predictive_check
from massfit.posterior.sample import sample_posterior
from massfit.posterior.summary import summarise
from massfit.results.calibration import calibration_summary
from massfit.results.estimate import Estimate


def estimate(
    network: Network,
    *,
    progress: Progress = ignore,
    workers: int = 1,
    store: Store | None = None,
    what_if: bool = False,
    surrogates: int = 0,
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
    what_if : bool
        Answer the network under every other choice too, sites fitted anew where it takes that: some ten times the
        work. The rows are `summary["what_if"]`; `summary["moved_site"]` is how far a wrong site would pull.
    surrogates : int
        Number of surrogates of this network, with a known cycle, that are analysed like the records to see whether
        the regions hold it; each takes the time of a run. What was found is `calibration` and
        `summary["calibration"]`.

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
        return _estimate(network, StageTimes(progress), pool, kept(pool.results, store), what_if, surrogates)


def _estimate(
    network: Network, progress: StageTimes, pool: Workers, mapped: Mapped, what_if: bool, surrogates: int
) -> Estimate:
    settings = network.settings
    stage = site_stage(network, progress, mapped)
    fingerprints = network_fingerprints(network, stage.operator, stage.sites, stage.footprints, stage.air)
    phasors = stage.phasors
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
        mapped=mapped,
    )
    summary["predictive_check"] = predictive_check(posterior, phasors, fingerprints)
    if what_if:
        summary |= other_answers(
            stage.tasks, stage.table.of, phasors, fingerprints, posterior, progress=progress, mapped=mapped
        )
    calibration = None
    if surrogates:
        base = surrogate_base(stage.tasks, stage.reductions, stage.table, phasors, fingerprints, posterior)
        times = progress.seconds()
        one_s = times["site phasors"] + times["network posterior"]
        calibration = calibrate(base, surrogates, progress=progress, mapped=mapped, expected_s=surrogates * one_s)
        summary["calibration"] = calibration_summary(calibration)
    return Estimate(
        network=network,
        fingerprints=fingerprints,
        reductions=stage.reductions,
        site_phasors=phasors,
        posterior=posterior,
        summary=in_context(
            summary,
            sites_in_context(network, stage.reductions, stage.circulation),
            float(fingerprints.attrs["ocean_area_m2"]),
        ),
        provenance={**provenance(network, processes=pool.count), "elapsed_s": progress.seconds()},
        calibration=calibration,
    )
