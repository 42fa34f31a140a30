"""The sites of a run: daily means, corrections, and the fit of each."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from zlib import crc32

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.diagnostics import diagnose_site
from massfit.annual.fit import fit_site
from massfit.annual.record import ReducedRecord
from massfit.corrections.circulation import CirculationAtSites
from massfit.corrections.phasors import companion_series, correction_phasors
from massfit.corrections.site import site_corrections
from massfit.errors import Fault, InputError
from massfit.network import Network, Series
from massfit.pipeline.parts import Mapped
from massfit.pipeline.progress import Progress
from massfit.records.daily import reduce_to_daily
from massfit.records.record import DailyRecord
from massfit.results.estimate import SiteReduction
from massfit.settings import Settings
from massfit.site import LEAST_NETWORK_DAYS, LEAST_SITE_DAYS, Site


@dataclass(frozen=True)
class SiteTask:
    """All that the reduction of one site needs; it travels to a worker process whole.

    Parameters
    ----------
    site : Site
    daily : tuple of DailyRecord
    responses : xarray.Dataset
        contracts.EQUILIBRIUM_RESPONSES.
    ocean_mean_air : Series or None
    circulation : tuple of CirculationAtSites
        Of this site alone.
    settings : Settings
    judge : bool
        Whether the fit is judged too.
    """

    site: Site
    daily: tuple[DailyRecord, ...]
    responses: xr.Dataset
    ocean_mean_air: Series | None
    circulation: tuple[CirculationAtSites, ...]
    settings: Settings
    judge: bool = False


def daily_records(network: Network, progress: Progress) -> dict[str, tuple[DailyRecord, ...]]:
    """Reduce every record of the sites that are used to daily means.

    Parameters
    ----------
    network : Network
    progress : callable

    Returns
    -------
    dict of str to tuple of DailyRecord
        By site id; deployments without a single day are left out.
    """
    sites = {site.id: site for site in network.sites if site.excluded_because is None}
    frame, tides = network.settings.frame, network.settings.corrections.tides
    found: dict[str, tuple[DailyRecord, ...]] = dict.fromkeys(sites, ())
    for done, record in enumerate(network.records):
        progress("daily means", done, len(network.records))
        if record.site in sites:
            exclude = sites[record.site].exclude
            daily = reduce_to_daily(record, exclude=exclude, start=frame.start, end=frame.end, tides=tides)
            found[record.site] += (daily,) if len(daily.time) else ()
    progress("daily means", len(network.records), len(network.records))
    return found


def usable_sites(network: Network, records: Mapping[str, Sequence[DailyRecord]]) -> tuple[Site, ...]:
    """Sites with enough days to be fitted, and those that were reduced elsewhere.

    Parameters
    ----------
    network : Network
    records : mapping of str to sequence of DailyRecord

    Returns
    -------
    tuple of Site

    Raises
    ------
    InputError
        No site is left, or a network of records only has fewer than 180 days of data in all.
    """
    reduced = {each.site for each in network.reduced}
    days = {name: len(_days(own)) for name, own in records.items()}
    total = sum(days.values())
    sites = tuple(
        site
        for site in network.sites
        if days.get(site.id, 0) >= LEAST_SITE_DAYS or (site.id in reduced and site.excluded_because is None)
    )
    if (total < LEAST_NETWORK_DAYS and not reduced) or not sites:
        raise InputError(
            Fault(
                network.source or "network",
                "records",
                f"{total} days of data are left after the window and the exclusions, on {len(sites)} usable sites",
                f"At least {LEAST_NETWORK_DAYS} days in all, and one site with {LEAST_SITE_DAYS}",
                "Widen the window or add records",
            )
        )
    return sites


def reduce_sites(tasks: Sequence[SiteTask], progress: Progress, mapped: Mapped) -> list[SiteReduction]:
    """Correct and fit every site, in the order given.

    Parameters
    ----------
    tasks : sequence of SiteTask
    progress : callable
    mapped : callable
        Applies a function to each of a sequence and gives the results in order.

    Returns
    -------
    list of SiteReduction
    """
    progress("site phasors", 0, len(tasks))
    reductions = []
    for reduction in mapped(reduce_site, tasks):
        reductions.append(reduction)
        progress("site phasors", len(reductions), len(tasks))
    return reductions


def reduce_site(task: SiteTask) -> SiteReduction:
    """Take the corrections off one site's daily means and fit drift, noise and phasor.

    Parameters
    ----------
    task : SiteTask

    Returns
    -------
    SiteReduction
    """
    corrections = site_corrections(
        task.site,
        _days(task.daily),
        responses=task.responses,
        atmosphere=task.ocean_mean_air,
        circulation=task.circulation,
    )
    present = corrections["present"].values == 1
    used = np.isfinite(corrections["circulation"].values[present]).all(axis=0)
    models = [str(name) for name in corrections["model"].values[present]]
    records = [record for record in (_reduced(daily, corrections, used) for daily in task.daily) if len(record.time)]
    year = task.settings.frame.reference_year
    # a stream of its own, so that a site's numbers do not depend on which other sites there are
    rng = np.random.default_rng([task.settings.posterior.seed, crc32(task.site.id.encode())])
    fit = fit_site(
        records,
        models=models,
        reference_year=year,
        rng=rng,
        priors=task.settings.priors,
        site=task.site.id,
    )
    companions = np.zeros((0, 2)) if fit.companions is None else fit.companions
    calibrated = any(record.calibrations is not None for record in records)
    phasors = correction_phasors(corrections, companions, fit.single_gaussian()[0], calibrated=calibrated)
    judged = None
    if task.judge:
        judged = diagnose_site(records, fit, reference_year=year, rng=rng, priors=task.settings.priors)
    return SiteReduction(task.site, task.daily, corrections, used, fit, phasors, judged)


def _days(records: Sequence[DailyRecord]) -> NDArray[np.datetime64]:
    return np.unique(np.concatenate([record.time for record in records])) if records else np.array([], "datetime64[ns]")


def _reduced(daily: DailyRecord, corrections: xr.Dataset, used: NDArray[np.bool_]) -> ReducedRecord:
    """Take the corrections off one deployment, on the days that all present models share."""
    place = np.searchsorted(corrections["time"].values, daily.time)
    kept = used[place]
    place = place[kept]
    common = sum(
        corrections[name].values[place] for name in ("long_period_tides", "pole_tide", "ocean_mean_atmosphere")
    )
    present = corrections["present"].values == 1
    return ReducedRecord(
        deployment=daily.deployment,
        time=daily.time[kept],
        pressure=_rounded(daily.pressure[kept] - common),
        circulation=_rounded(corrections["circulation"].values[present][:, place]),
        start=daily.start,
        drift=daily.drift,
        steps=daily.steps,
        calibrations=daily.calibrations,
        companions=_rounded(companion_series(corrections, daily.pressure[kept], place)),
    )


def _rounded(pressure: NDArray[np.float64]) -> NDArray[np.float64]:
    """Round to a micropascal.

    The last bits of a product of matrices depend on how many sites it holds, and would steer the integration of the
    fit: a site's numbers shall not depend on which other sites there are.
    """
    return np.asarray(np.round(pressure, 6))
