"""Site phasors as one Dataset, as the network stage receives them."""

from collections.abc import Mapping, Sequence
from datetime import date, timedelta
from typing import NamedTuple

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.fit import SiteFit
from massfit.annual.noise import NoiseModel
from massfit.contracts import SITE_PHASORS
from massfit.errors import Fault, InputError
from massfit.network import ReducedSite, reduced_faults
from massfit.phasor import COMPONENTS
from massfit.site import Site

Floats = NDArray[np.float64]

NO_MODEL = "none"
"""Name on the model axis of a phasor from which no model was subtracted."""


class _Row(NamedTuple):
    """One site of the Dataset, from whichever side it comes."""

    site: str
    models: tuple[str, ...]
    weight: Floats
    phasor: Floats
    covariance: Floats
    model_noise: Floats
    reduced_sd: float
    days: float
    effective_sample_size: float
    mean_only: bool
    year_share: Mapping[int, float]
    noise: NoiseModel | None


def site_phasors(
    fits: Sequence[SiteFit],
    *,
    models: Sequence[str],
    reference_year: int,
    reduced: Sequence[ReducedSite] = (),
    sites: Sequence[Site] = (),
    period: tuple[date, date] | None = None,
) -> xr.Dataset:
    """Join the fits of all sites, and the phasors that were made elsewhere.

    Parameters
    ----------
    fits : sequence of SiteFit
    models : sequence of str
        All circulation models of the network. "none" is appended when some site has no
        model subtracted.
    reference_year : int
    reduced : sequence of ReducedSite
        Sites that were reduced elsewhere, one Gaussian each; they stand behind the fits.
        Each calendar year of theirs has the same share.
    sites : sequence of Site
        Where the sites are, and their groups; not stated where any is missing.
    period : (datetime.date, datetime.date), optional
        First and last day of the period that the answer is the mean of; by default the whole
        calendar years of the records.

    Returns
    -------
    xarray.Dataset
        As declared in `contracts.SITE_PHASORS`; besides, `effective_sample_size` (site).

    Raises
    ------
    InputError
        Repeated sites, a model that the network does not have, or a phasor made elsewhere that is
        not well formed.
    """
    _check(fits, models, reduced)
    rows = [_fit_row(fit) for fit in fits] + [_reduced_row(site) for site in reduced]
    axis = [*models, NO_MODEL] if any(not row.models for row in rows) else list(models)
    shape = (len(rows), max((len(row.weight) for row in rows), default=1))
    phasor = np.full((*shape, len(axis), 2), np.nan)
    weight = np.zeros(shape)
    covariance = np.zeros((*shape, 2, 2))
    for place, row in enumerate(rows):
        used = len(row.weight)
        # parts that a site does not need repeat its first with no weight
        source = np.where(np.arange(shape[1]) < used, np.arange(shape[1]), 0)
        columns = [axis.index(name) for name in row.models or (NO_MODEL,)]
        phasor[place][:, columns] = row.phasor[source]
        covariance[place] = row.covariance[source]
        weight[place, :used] = row.weight
    values = {
        "phasor": phasor,
        "weight": weight,
        "covariance": covariance,
        "model_noise": np.array([row.model_noise for row in rows]).reshape(-1, 2, 2),
        "reduced_sd": np.array([row.reduced_sd for row in rows]),
        "days": np.array([row.days for row in rows], float),
    }
    years, values["year_share"], values["period_share"] = _year_shares([row.year_share for row in rows], period)
    places = {site.id: site for site in sites}
    placed = [places[row.site] for row in rows if row.site in places]
    groups = {}
    if len(placed) == len(rows):
        values["latitude"] = np.array([site.latitude_deg for site in placed])
        values["longitude"] = np.array([site.longitude_deg for site in placed])
        groups = {"group": (("site",), np.array([site.group or "" for site in placed], dtype=object))}
    values |= _noise([row.noise for row in rows])
    declared = {**SITE_PHASORS.variables, **SITE_PHASORS.optional}
    if any(row.mean_only for row in rows):
        values["mean_only"] = np.array([row.mean_only for row in rows], np.int8)
    variables = {name: (declared[name].dims, array, {"units": declared[name].units}) for name, array in values.items()}
    sizes = np.array([row.effective_sample_size for row in rows])
    return xr.Dataset(
        {**variables, "effective_sample_size": (("site",), sizes, {"units": "1"})},
        coords={
            "site": [row.site for row in rows],
            "model": axis,
            "component": list(COMPONENTS),
            "component2": list(COMPONENTS),
            "year": years,
            **groups,
        },
        attrs={"reference_year": reference_year},
    )


def _noise(models: Sequence[NoiseModel | None]) -> dict[str, Floats]:
    """Noise of every site at the mode of its fit, NaN where it was reduced elsewhere; nothing where all were."""
    terms = [0 if model is None else len(model.rates) for model in models]
    if all(model is None for model in models):
        return {}
    rate, variance = np.full((2, len(models), max(terms)), np.nan)
    white = np.full(len(models), np.nan)
    for place, (model, count) in enumerate(zip(models, terms, strict=True)):
        if model is not None:
            rate[place, :count], variance[place, :count] = model.rates, model.variances
            white[place] = np.sqrt(np.mean(model.white**2))
    return {"noise_rate": rate, "noise_variance": variance, "noise_white": white}


def site_noise(phasors: xr.Dataset, site: str) -> NoiseModel | None:
    """Noise of a site at the mode of its fit.

    Parameters
    ----------
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    site : str

    Returns
    -------
    NoiseModel or None
        With one white noise for all its recorders; None where the site was reduced elsewhere, or nothing is known.
    """
    if "noise_white" not in phasors:
        return None
    own = phasors[["noise_rate", "noise_variance", "noise_white"]].sel(site=site)
    white = own["noise_white"].values.astype(float)
    rate, variance = (own[name].values.astype(float) for name in ("noise_rate", "noise_variance"))
    there = np.isfinite(rate)
    return None if np.isnan(white) else NoiseModel(rate[there], variance[there], white.reshape(1))


def _year_shares(
    shares: Sequence[Mapping[int, float]], period: tuple[date, date] | None
) -> tuple[list[int], Floats, Floats]:
    """Years, their share in each site (n_site, n_year) and in the period (n_year,), as parts of its days."""
    of_sites = {year for share in shares for year in share}
    first, last = period or (date(min(of_sites), 1, 1), date(max(of_sites), 12, 31))
    years = sorted(of_sites | set(range(first.year, last.year + 1)))
    end = last + timedelta(days=1)
    days = [max((min(end, date(year + 1, 1, 1)) - max(first, date(year, 1, 1))).days, 0) for year in years]
    table = np.array([[share.get(year, 0.0) for year in years] for share in shares])
    return years, table, np.array(days) / sum(days)


def _uniform_years(years: tuple[int, int]) -> dict[int, float]:
    first, last = years
    return dict.fromkeys(range(first, last + 1), 1.0 / (last - first + 1))


def _fit_row(fit: SiteFit) -> _Row:
    return _Row(
        site=fit.site,
        models=fit.models,
        weight=fit.weight,
        phasor=fit.phasor,
        covariance=fit.covariance,
        model_noise=fit.model_noise,
        reduced_sd=fit.reduced_sd,
        days=fit.days,
        effective_sample_size=fit.effective_sample_size,
        mean_only=False,
        year_share=fit.year_share,
        noise=fit.noise.typical,
    )


def _reduced_row(site: ReducedSite) -> _Row:
    return _Row(
        site=site.site,
        models=site.models,
        weight=np.ones(1),
        phasor=site.model_phasors[None],
        covariance=site.covariance[None],
        model_noise=site.model_noise,
        reduced_sd=np.nan,
        days=np.nan,
        effective_sample_size=np.nan,
        mean_only=site.mean_only,
        year_share=_uniform_years(site.years),
        noise=None,
    )


def _check(fits: Sequence[SiteFit], models: Sequence[str], reduced: Sequence[ReducedSite]) -> None:
    names = [fit.site for fit in fits] + [site.site for site in reduced]
    faults = [
        Fault(name, "site", "two phasors are of this site", "One fit, or one phasor made elsewhere")
        for name in sorted({name for name in names if names.count(name) > 1})
    ]
    faults += [
        Fault(fit.site, model, "the network has no such model", f"Must be one of {list(models)}")
        for fit in fits
        for model in fit.models
        if model not in models
    ]
    faults += [fault for site in reduced for fault in reduced_faults(site, models)]
    if NO_MODEL in models:
        faults.append(Fault("models", NO_MODEL, "this name is kept for sites without a model", action="Rename it"))
    if faults:
        raise InputError(faults)
