"""The first half of the chain: from a network's raw records to the phasors of its sites."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import xarray as xr

from massfit.annual.dataset import site_phasors
from massfit.annual.fit import SiteFit
from massfit.corrections.circulation import CirculationAtSites, circulation_at_sites
from massfit.corrections.responses import equilibrium_responses
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.network import Network, ReducedSite, check_network
from massfit.pipeline.air import AirPressure, network_air
from massfit.pipeline.context import records_span, stated_period
from massfit.pipeline.fingerprints import network_operator
from massfit.pipeline.parts import Mapped
from massfit.pipeline.progress import Progress
from massfit.pipeline.sites import SiteTask, daily_records, reduce_sites, usable_sites
from massfit.results.correction_tables import with_corrections
from massfit.results.estimate import SiteReduction
from massfit.site import Site


@dataclass(frozen=True)
class SiteStage:
    """What is known of every site before the network is looked at as a whole.

    Parameters
    ----------
    network : Network
    sites : tuple of Site
        Those that are used.
    operator : SeaLevelOperator
    footprints : xarray.Dataset
        contracts.FOOTPRINTS.
    air : AirPressure
    responses : xarray.Dataset
        contracts.EQUILIBRIUM_RESPONSES.
    circulation : tuple of CirculationAtSites
    tasks : tuple of SiteTask
        Of the sites that have records.
    reductions : tuple of SiteReduction
        Of the same.
    elsewhere : tuple of ReducedSite
        The others.
    period : (datetime.date, datetime.date)
        First and last day of the period that the answer is the mean of.
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    """

    network: Network
    sites: tuple[Site, ...]
    operator: SeaLevelOperator
    footprints: xr.Dataset
    air: AirPressure
    responses: xr.Dataset
    circulation: tuple[CirculationAtSites, ...]
    tasks: tuple[SiteTask, ...]
    reductions: tuple[SiteReduction, ...]
    elsewhere: tuple[ReducedSite, ...]
    period: tuple[date, date]
    phasors: xr.Dataset

    def joined(self, fits: Sequence[SiteFit], elsewhere: Sequence[ReducedSite] | None = None) -> xr.Dataset:
        """Join other fits of the sites, and other phasors of those reduced elsewhere, to contracts.SITE_PHASORS."""
        others = self.elsewhere if elsewhere is None else elsewhere
        return _joined(self.network, self.sites, self.period, fits, others)


def site_stage(network: Network, progress: Progress, mapped: Mapped, *, judge: bool = False) -> SiteStage:
    """Reduce, correct and fit every site of a network.

    Parameters
    ----------
    network : Network
    progress : callable
    mapped : callable
        Applies a function to each of a sequence and gives the results in order.
    judge : bool
        Whether the fit of every site is judged: spectrum, whiteness, year by year.

    Returns
    -------
    SiteStage

    Raises
    ------
    InputError
        Every fault of the network that was found before the first one that stops the run.
    """
    check_network(network)
    settings = network.settings
    records = daily_records(network, progress)
    sites = usable_sites(network, records)
    progress("sea-level equation", 0, 1)
    ocean = OceanFunction.builtin()
    operator = network_operator(network, ocean)
    footprints = site_footprints(operator, sites)
    air = network_air(network, ocean)
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
            judge,
        )
        for site in sites
        if records[site.id]
    ]
    reductions = tuple(reduce_sites(tasks, progress, mapped))
    elsewhere = tuple(each for each in network.reduced if each.site in {site.id for site in sites})
    period = stated_period(settings.frame, *records_span(reductions, elsewhere))
    phasors = _joined(network, sites, period, [reduction.fit for reduction in reductions], elsewhere)
    return SiteStage(
        network,
        sites,
        operator,
        footprints,
        air,
        responses,
        circulation,
        tuple(tasks),
        reductions,
        elsewhere,
        period,
        with_corrections(phasors, reductions),
    )


def _joined(
    network: Network,
    sites: Sequence[Site],
    period: tuple[date, date],
    fits: Sequence[SiteFit],
    elsewhere: Sequence[ReducedSite],
) -> xr.Dataset:
    return site_phasors(
        fits,
        models=network.model_names,
        reference_year=network.settings.frame.reference_year,
        reduced=elsewhere,
        sites=sites,
        period=period,
    )
