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
class PhasorTable:
    """What turns fits of the sites into one Dataset.

    Parameters
    ----------
    models : tuple of str
        Of the network.
    reference_year : int
    sites : tuple of Site
    elsewhere : tuple of ReducedSite
        Sites that were reduced elsewhere.
    period : (datetime.date, datetime.date)
        First and last day of the period that the answer is the mean of.
    """

    models: tuple[str, ...]
    reference_year: int
    sites: tuple[Site, ...]
    elsewhere: tuple[ReducedSite, ...]
    period: tuple[date, date]

    def of(self, fits: Sequence[SiteFit], elsewhere: Sequence[ReducedSite] | None = None) -> xr.Dataset:
        """Join fits, and other phasors of the sites reduced elsewhere where given, to contracts.SITE_PHASORS."""
        return site_phasors(
            fits,
            models=self.models,
            reference_year=self.reference_year,
            reduced=self.elsewhere if elsewhere is None else elsewhere,
            sites=self.sites,
            period=self.period,
        )


@dataclass(frozen=True)
class SiteStage:
    """What is known of every site before the network is looked at as a whole.

    Parameters
    ----------
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
    table : PhasorTable
        Joins fits of the sites.
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    """

    sites: tuple[Site, ...]
    operator: SeaLevelOperator
    footprints: xr.Dataset
    air: AirPressure
    responses: xr.Dataset
    circulation: tuple[CirculationAtSites, ...]
    tasks: tuple[SiteTask, ...]
    reductions: tuple[SiteReduction, ...]
    table: PhasorTable
    phasors: xr.Dataset


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
    table = PhasorTable(network.model_names, settings.frame.reference_year, sites, elsewhere, period)
    return SiteStage(
        sites,
        operator,
        footprints,
        air,
        responses,
        circulation,
        tuple(tasks),
        reductions,
        table,
        with_corrections(table.of([reduction.fit for reduction in reductions]), reductions),
    )
