"""Surrogates of a network: its own days, drift, noise, models and errors, with another cycle in them.

A surrogate record is what was subtracted from the record, a draw of its drift, noise drawn from the fitted noise model,
and the annual cycle of the surrogate: that of the ocean mass through the site's fingerprint, the response to the air
over land, the air-pressure error and the site scatter. The models keep their weather; their errors at the annual
line are taken off and drawn anew.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.annual.drift_draws import DrawnDrift, draw_drift
from massfit.annual.noise import NoiseCovariance, NoiseModel
from massfit.annual.record import ReducedRecord
from massfit.constants import PASCAL_PER_HPA, TROPICAL_YEAR_DAYS
from massfit.corrections.circulation import CirculationAtSites
from massfit.network import ReducedSite
from massfit.phasor import admittance_matrix, annual_basis, days_since
from massfit.pipeline.site_stage import PhasorTable
from massfit.pipeline.sites import SiteTask
from massfit.posterior.network_model import Choices, inflation
from massfit.posterior.observations import Observations, read_observations
from massfit.posterior.replicate import cycle_of_years, draw_errors, replicate_phasors
from massfit.posterior.result import Posterior
from massfit.records.record import Calibrations
from massfit.results.estimate import SiteReduction
from massfit.settings import PosteriorSettings, Priors

Floats = NDArray[np.float64]

CYCLE_SD_HPA = 0.3
"""The cycle of a surrogate is drawn about the answer with this standard deviation, hPa per component."""


@dataclass(frozen=True)
class SiteBase:
    """One site of every surrogate, without cycle and noise.

    Parameters
    ----------
    task : SiteTask
        Its daily means hold the corrections and the mean of the models.
    records : tuple of ReducedRecord
        The same days as observed, less both: what the drift is drawn from.
    noise : NoiseModel
    errors : mapping of str to (2,) array
        Annual phasor by which each model present differs from their mean, with the sign of an error, Pa.
    """

    task: SiteTask
    records: tuple[ReducedRecord, ...]
    noise: NoiseModel
    errors: Mapping[str, Floats]


@dataclass(frozen=True)
class SurrogateBase:
    """All that surrogates of a network are made from.

    Parameters
    ----------
    sites : tuple of SiteBase
        Sites with records.
    table : PhasorTable
        Joins their phasors, and holds the sites that were reduced elsewhere.
    fingerprints : xarray.Dataset
        contracts.FINGERPRINTS.
    observations : Observations
        Of the answer given.
    admittance : (n_member, n_site) array of complex
    known : (n_site, 2) array
        Response to the air over land, Pa.
    centre : (2,) array
        Answer given, Pa.
    scales : mapping of str to (n,) array
        Draws of the scales, Pa.
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float
    """

    sites: tuple[SiteBase, ...]
    table: PhasorTable
    fingerprints: xr.Dataset
    observations: Observations
    admittance: NDArray[np.complex128]
    known: Floats
    centre: Floats
    scales: Mapping[str, Floats]
    settings: PosteriorSettings
    priors: Priors
    atmosphere_sd_hpa: float


@dataclass(frozen=True)
class Surrogate:
    """One surrogate, as an analyst would receive it, and its truth.

    Parameters
    ----------
    tasks : tuple of SiteTask
    elsewhere : tuple of ReducedSite
    annual : (2,) array
        Annual phasor of ocean mass, Pa.
    at_sites : mapping of str to (2,) array
        True phasor of each site, mean over its models, Pa: what a record without noise would give.
    """

    tasks: tuple[SiteTask, ...]
    elsewhere: tuple[ReducedSite, ...]
    annual: Floats
    at_sites: Mapping[str, Floats]


def surrogate_base(
    tasks: Sequence[SiteTask],
    reductions: Sequence[SiteReduction],
    table: PhasorTable,
    phasors: xr.Dataset,
    fingerprints: xr.Dataset,
    posterior: Posterior,
) -> SurrogateBase:
    """Gather what surrogates of a network are made from.

    Parameters
    ----------
    tasks : sequence of SiteTask
    reductions : sequence of SiteReduction
        Of the same sites.
    table : PhasorTable
    phasors, fingerprints : xarray.Dataset
        contracts.SITE_PHASORS and contracts.FINGERPRINTS.
    posterior : Posterior
        The answer given.

    Returns
    -------
    SurrogateBase
    """
    observations, admittance = read_observations(phasors, fingerprints)
    known = np.zeros((len(observations.sites), 2))
    if "air_load_response" in fingerprints:
        known = fingerprints["air_load_response"].sel(site=list(observations.sites)).values.astype(float)
    names = [str(name) for name in posterior.to_dataset()["scale_name"].values]
    return SurrogateBase(
        sites=tuple(site_base(task, reduction) for task, reduction in zip(tasks, reductions, strict=True)),
        table=table,
        fingerprints=fingerprints,
        observations=observations,
        admittance=admittance,
        known=known,
        centre=posterior.draws.mean(axis=0),
        scales=dict(zip(names, posterior.scales.reshape(-1, len(names)).T, strict=True)),
        settings=posterior.settings,
        priors=posterior.priors,
        atmosphere_sd_hpa=posterior.atmosphere_sd_hpa,
    )


def site_base(task: SiteTask, reduction: SiteReduction) -> SiteBase:
    """Strip a site of its cycle, its drift and its noise.

    Parameters
    ----------
    task : SiteTask
    reduction : SiteReduction
        Of the same site.

    Returns
    -------
    SiteBase
    """
    table, fit = reduction.corrections, reduction.fit
    known = table["long_period_tides"] + table["pole_tide"] + table["ocean_mean_atmosphere"]
    if fit.models:
        known = known + table["circulation"].sel(model=list(fit.models)).mean("model")
    daily, observed = [], []
    for drift in fit.drifts:
        (record,) = (each for each in reduction.daily if each.deployment == drift.deployment)
        place = np.searchsorted(table["time"].values, drift.time)
        daily.append(replace(record, time=drift.time, pressure=known.values[place]))
        observed.append(
            ReducedRecord(
                drift.deployment,
                drift.time,
                drift.reduced + drift.drift,
                np.empty((0, len(drift.time))),
                record.start,
                record.drift,
                record.steps,
                calibrations=record.calibrations,
            )
        )
    phasor = fit.single_gaussian()[0]
    return SiteBase(
        replace(task, daily=tuple(daily), judge=False),
        tuple(observed),
        fit.noise.typical,
        dict(zip(fit.models, phasor - phasor.mean(axis=0), strict=False)),
    )


def make_surrogate(base: SurrogateBase, rng: np.random.Generator) -> Surrogate:
    """Draw one surrogate of a network.

    Parameters
    ----------
    base : SurrogateBase
    rng : numpy.random.Generator

    Returns
    -------
    Surrogate
        Its cycle is normal about the answer with 0.3 hPa per component; its scales are one draw of the posterior; its
        fingerprint is one more load member, normal with the mean and the inflated covariance of those given.
    """
    seen = base.observations
    annual = base.centre + CYCLE_SD_HPA * PASCAL_PER_HPA * rng.standard_normal(2)
    admittance = further_member(base.admittance, rng)
    chosen = int(rng.integers(len(base.scales["s_site"])))
    scales = {name: values[chosen : chosen + 1] for name, values in base.scales.items()}
    errors = draw_errors(seen, scales, Choices(base.settings, base.priors, base.atmosphere_sd_hpa), rng)
    # the models' weather is in the noise that was fitted to the record less their mean: its mean is taken off
    there = seen.present[None, :, :, None]
    weather = np.where(there, errors.weather, np.nan)
    weather = np.nan_to_num(weather - np.nanmean(weather, axis=2, keepdims=True))
    own = errors.model[0] + weather[0]
    through = admittance_matrix(admittance)
    signal = np.einsum("sij,j->si", through, annual) + base.known + errors.site[0]
    mean_error = np.nanmean(np.where(there[0], own, np.nan), axis=1)
    of_years = np.einsum("sij,sj->si", through, cycle_of_years(seen, errors)[0])
    at_sites = dict(zip(seen.sites, signal + of_years + mean_error, strict=True))
    tasks = []
    for each in base.sites:
        s = seen.sites.index(each.task.site.id)
        by_model = dict(zip(seen.models, own[s], strict=True))
        years = dict(zip(seen.years, errors.years[0] @ through[s].T, strict=True))
        tasks.append(_site_surrogate(each, signal[s], years, by_model, rng))
    phasors = replicate_phasors(seen, admittance[None], annual[None], errors, rng)[0] + base.known[:, None]
    elsewhere = tuple(
        _reduced_surrogate(each, seen, phasors[seen.sites.index(each.site)]) for each in base.table.elsewhere
    )
    return Surrogate(tuple(tasks), elsewhere, annual, at_sites)


def further_member(admittance: NDArray[np.complex128], rng: np.random.Generator) -> NDArray[np.complex128]:
    """Draw one more load member (n_site,) like those given (n_member, n_site)."""
    count = len(admittance)
    weights = rng.standard_normal(count) * np.sqrt(inflation(count) / count)
    return np.asarray(admittance.mean(axis=0) + weights @ (admittance - admittance.mean(axis=0)))


def _site_surrogate(
    base: SiteBase,
    signal: Floats,
    years: Mapping[int, Floats],
    errors: Mapping[str, Floats],
    rng: np.random.Generator,
) -> SiteTask:
    task = base.task
    year = task.settings.frame.reference_year
    noise = _drawn_noise(base, year, rng)
    drifts = draw_drift(base.records, base.noise, reference_year=year, rng=rng, priors=task.settings.priors)
    daily = tuple(
        replace(
            record,
            pressure=record.pressure + _cycle(record.time, year, signal, years) + drift.days[0] + own,
            calibrations=_drawn_readings(record.calibrations, drift, rng),
        )
        for record, drift, own in zip(task.daily, drifts, noise, strict=True)
    )
    # without a model the record itself holds the error of that column
    bare = errors.get(NO_MODEL) if not base.errors else None
    if bare is not None:
        daily = tuple(replace(r, pressure=r.pressure + _cycle(r.time, year, bare)) for r in daily)
    circulation = tuple(
        _with_error(model, year, errors[model.name] - base.errors[model.name]) if model.name in base.errors else model
        for model in task.circulation
    )
    return replace(task, daily=daily, circulation=circulation)


def _cycle(
    time: NDArray[np.datetime64], year: int, phasor: Floats, years: Mapping[int, Floats] | None = None
) -> Floats:
    """Annual cycle of a phasor, and of how single calendar years differ from it."""
    phasors = np.tile(phasor, (len(time), 1))
    calendar = time.astype("datetime64[Y]").astype(int) + 1970
    for number, own in (years or {}).items():
        phasors[calendar == number] += own
    return np.asarray((annual_basis(days_since(time, year)) * phasors).sum(axis=1))


def _with_error(model: CirculationAtSites, year: int, error: Floats) -> CirculationAtSites:
    """Let a model err by so much more: a phasor of the record less the model grows by the error.

    Its values are means over its intervals, which hold less of a cycle (a calendar month 0.989).
    """
    step = float(np.median(np.diff(model.time)) / np.timedelta64(1, "D"))
    held = np.sinc(step / TROPICAL_YEAR_DAYS)
    return replace(model, pressure=model.pressure - held * _cycle(model.time, year, error)[:, None])


def _drawn_noise(base: SiteBase, year: int, rng: np.random.Generator) -> list[Floats]:
    """Noise of every deployment: one red process for the site, white noise of each recorder."""
    days = [days_since(record.time, year) for record in base.task.daily]
    instrument = np.repeat(np.arange(len(days)), [len(each) for each in days])
    order = np.argsort(np.concatenate(days), kind="stable")
    covariance = NoiseCovariance(np.concatenate(days)[order], instrument[order], base.noise)
    noise = np.empty(len(order))
    noise[order] = covariance.color(rng.standard_normal((len(order), 1)))[:, 0]
    return np.split(noise, np.cumsum([len(each) for each in days])[:-1])


def _drawn_readings(
    calibrations: Calibrations | None, drift: DrawnDrift, rng: np.random.Generator
) -> Calibrations | None:
    """Draw readings at a known pressure, with the drift drawn and errors of their own."""
    if calibrations is None:
        return None
    errors = calibrations.sd * rng.standard_normal(len(calibrations.sd))
    return replace(calibrations, pressure=drift.calibrations[0] + errors)


def _reduced_surrogate(reduced: ReducedSite, seen: Observations, phasors: Floats) -> ReducedSite:
    """Give a site that was reduced elsewhere another phasor in the form it had."""
    columns = [seen.models.index(name) for name in reduced.models or (NO_MODEL,)]
    own = phasors[columns]
    return replace(reduced, phasor=own.mean(axis=0) if reduced.phasor.ndim == 1 else own)
