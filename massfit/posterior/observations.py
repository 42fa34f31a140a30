"""What the network model sees of the sites: plain arrays, checked and matched by id."""

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from itertools import combinations

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.contracts import FINGERPRINTS, SITE_PHASORS, require
from massfit.errors import Fault, InputError
from massfit.phasor import as_complex

RECORD_FLOOR = 0.1
"""Least share of the record covariance that is left when the models' own weather is taken out of it."""

LEAST_APART = 0.01
"""Models whose phasors lie closer than this everywhere are copies, Pa; far below the skill of any ocean model."""


@dataclass(frozen=True)
class Observations:
    """Annual phasors of the sites, less the response to the air over land.

    Parameters
    ----------
    sites, models : tuple of str
        Names, in the order of the axes.
    weight : (n_site, n_part) array
        Weights of the parts of each site's mixture.
    part_phasor : (n_site, n_part, n_model, 2) array
        Pa; NaN where a site-model pair is missing.
    part_covariance : (n_site, n_part, 2, 2) array
        Pa2, of the record.
    model_noise : (n_site, 2, 2) array
        Pa2, of each model's own weather.
    mean_only : frozenset of str
        Sites of which only the mean over their models is known.
    years : tuple of int
        Calendar years of the records and the period; empty where they are not known.
    year_share : (n_site, n_year) array
        Share of each year in a site's phasor.
    period_share : (n_year,) array
        Share of each year in the period that the answer is the mean of.
    position : (n_site, 2) array, optional
        Latitude and longitude, radians.
    group : tuple of str
        Label of each site's group, empty where it has none.
    """

    sites: tuple[str, ...]
    models: tuple[str, ...]
    weight: NDArray[np.float64]
    part_phasor: NDArray[np.float64]
    part_covariance: NDArray[np.float64]
    model_noise: NDArray[np.float64]
    mean_only: frozenset[str] = frozenset()
    years: tuple[int, ...] = ()
    year_share: NDArray[np.float64] = field(default_factory=lambda: np.zeros((0, 0)))
    period_share: NDArray[np.float64] = field(default_factory=lambda: np.zeros(0))
    position: NDArray[np.float64] | None = None
    group: tuple[str, ...] = ()

    @cached_property
    def present(self) -> NDArray[np.bool_]:
        """(n_site, n_model), whether the pair exists."""
        return np.asarray(np.isfinite(self.part_phasor).all(axis=(1, 3)))

    @cached_property
    def model_count(self) -> NDArray[np.int64]:
        """(n_site,), number of models at each site."""
        return np.asarray(self.present.sum(axis=1))

    @cached_property
    def has_contrasts(self) -> NDArray[np.bool_]:
        """(n_site,), whether the site says how its models differ."""
        return (self.model_count > 1) & ~self._in_mean_only

    @property
    def _in_mean_only(self) -> NDArray[np.bool_]:
        return np.array([site in self.mean_only for site in self.sites], dtype=bool)

    @cached_property
    def phasor(self) -> NDArray[np.float64]:
        """(n_site, n_model, 2), Pa, mean over the parts."""
        return np.asarray(np.einsum("sk,skmc->smc", self.weight, self.part_phasor))

    @cached_property
    def mean_phasor(self) -> NDArray[np.float64]:
        """(n_site, 2), Pa, mean over the parts and the models."""
        return np.asarray(np.nanmean(self.phasor, axis=1))

    @cached_property
    def covariance(self) -> NDArray[np.float64]:
        """(n_site, 2, 2), Pa2, of the record, by the moments of the mixture."""
        shift = np.nanmean(self.part_phasor, axis=2) - self.mean_phasor[:, None]
        spread = np.einsum("sk,ski,skj->sij", self.weight, shift, shift)
        return np.asarray(np.einsum("sk,skij->sij", self.weight, self.part_covariance) + spread)

    def select(self, keep: NDArray[np.bool_]) -> "Observations":
        """Observations of the sites where `keep` (n_site,) is true."""
        return self.take(np.flatnonzero(keep))

    def take(self, chosen: NDArray[np.int64]) -> "Observations":
        """Observations of the sites of these indices; one may be taken more than once."""
        return replace(
            self,
            sites=tuple(self.sites[s] for s in chosen),
            weight=self.weight[chosen],
            part_phasor=self.part_phasor[chosen],
            part_covariance=self.part_covariance[chosen],
            model_noise=self.model_noise[chosen],
            year_share=self.year_share[chosen] if self.years else self.year_share,
            position=None if self.position is None else self.position[chosen],
            group=tuple(self.group[s] for s in chosen) if self.group else (),
        )

    def without_model(self, name: str) -> "tuple[Observations, NDArray[np.bool_]]":
        """Observations with one model left out, and which sites are left: a mean cannot be taken apart."""
        kept = [i for i, model in enumerate(self.models) if model != name]
        fewer = replace(self, models=tuple(self.models[i] for i in kept), part_phasor=self.part_phasor[:, :, kept])
        left = (fewer.model_count > 0) & ~(self._in_mean_only & (fewer.model_count < self.model_count))
        return fewer.select(left), left


def read_observations(
    site_phasors: xr.Dataset, fingerprints: xr.Dataset
) -> tuple[Observations, NDArray[np.complex128]]:
    """Match the site phasors with the fingerprints.

    Parameters
    ----------
    site_phasors : xarray.Dataset
        Per `massfit.contracts.SITE_PHASORS`, Pa.
    fingerprints : xarray.Dataset
        Per `massfit.contracts.FINGERPRINTS`; sites without a phasor are left unused.

    Returns
    -------
    observations : Observations
        Sites and models in the order of their names: the numbers do not depend on the order they come in.
    admittance : (n_member, n_site) array of complex
        F_s, in the order of the observations.

    Raises
    ------
    InputError
        Every fault of the two Datasets.
    """
    require(site_phasors, SITE_PHASORS)
    require(fingerprints, FINGERPRINTS)
    faults = _axis_faults(site_phasors, fingerprints)
    if faults:
        raise InputError(faults)
    site_phasors = _ordered(site_phasors)
    sites = tuple(str(site) for site in site_phasors["site"].values)
    matched = fingerprints.assign_coords(site=fingerprints["site"].astype(str)).sel(site=list(sites))
    admittance = as_complex(matched["admittance"].values)
    phasor = site_phasors["phasor"].values.astype(float)
    if "air_load_response" in matched:
        phasor = phasor - matched["air_load_response"].values[:, None, None, :]
    used = np.isfinite(phasor).any(axis=(0, 1, 3))  # a model without any site would be a column of nothing
    observations = Observations(
        sites,
        tuple(str(model) for model in site_phasors["model"].values[used]),
        site_phasors["weight"].values.astype(float),
        phasor[:, :, used],
        site_phasors["covariance"].values.astype(float),
        site_phasors["model_noise"].values.astype(float),
        _mean_only(site_phasors),
        *_years(site_phasors),
        _position(site_phasors),
        tuple(str(label) for label in site_phasors["group"].values) if "group" in site_phasors.coords else (),
    )
    faults = _value_faults(observations, admittance)
    if faults:
        raise InputError(faults)
    return observations, admittance


def _ordered(site_phasors: xr.Dataset) -> xr.Dataset:
    """Sites and models by name, the column without a model last."""
    sites, models = ([str(value) for value in site_phasors[axis].values] for axis in ("site", "model"))
    return site_phasors.isel(
        site=sorted(range(len(sites)), key=sites.__getitem__),
        model=sorted(range(len(models)), key=lambda m: (models[m] == NO_MODEL, models[m])),
    )


def _years(site_phasors: xr.Dataset) -> tuple[tuple[int, ...], NDArray[np.float64], NDArray[np.float64]]:
    if "year_share" not in site_phasors or "period_share" not in site_phasors:
        return (), np.zeros((0, 0)), np.zeros(0)
    years = tuple(int(year) for year in site_phasors["year"].values)
    return years, site_phasors["year_share"].values.astype(float), site_phasors["period_share"].values.astype(float)


def _position(site_phasors: xr.Dataset) -> NDArray[np.float64] | None:
    if "latitude" not in site_phasors or "longitude" not in site_phasors:
        return None
    degrees = [site_phasors[name].values.astype(float) for name in ("latitude", "longitude")]
    return np.asarray(np.radians(np.column_stack(degrees)))


def _mean_only(site_phasors: xr.Dataset) -> frozenset[str]:
    if "mean_only" not in site_phasors:
        return frozenset()
    return frozenset(str(site) for site in site_phasors["site"].values[site_phasors["mean_only"].values == 1])


def _axis_faults(site_phasors: xr.Dataset, fingerprints: xr.Dataset) -> list[Fault]:
    named = (
        ("site phasors", site_phasors, "site"),
        ("site phasors", site_phasors, "model"),
        ("fingerprints", fingerprints, "site"),
    )
    faults = [
        Fault(source, axis, f"the coordinate {axis!r} is missing", "Names are needed to match the sites")
        for source, data, axis in named
        if axis not in data.coords
    ]
    if faults:
        return faults
    for source, data, axis in named:
        names = [str(value) for value in data[axis].values]
        faults += [
            Fault(source, repeated, f"the {axis} appears {names.count(repeated)} times", "Names are unique")
            for repeated in sorted({value for value in names if names.count(value) > 1})
        ]
    if "year_share" in site_phasors and "year" not in site_phasors.coords:
        faults.append(Fault("site phasors", "year", "the coordinate 'year' is missing", "It names the years"))
    if site_phasors.sizes["site"] == 0:
        faults.append(Fault("site phasors", "site", "there is no site", "At least one is needed"))
    if fingerprints.sizes["member"] == 0:
        faults.append(Fault("fingerprints", "member", "there is no load member", "At least one is needed"))
    known = {str(value) for value in fingerprints["site"].values}
    return faults + [
        Fault("fingerprints", str(site), "the site has a phasor and no fingerprint", action="Compute its fingerprint")
        for site in site_phasors["site"].values
        if str(site) not in known
    ]


def _value_faults(observations: Observations, admittance: NDArray[np.complex128]) -> list[Fault]:
    faults = []
    for s, site in enumerate(observations.sites):
        problems = _site_problems(observations, s)
        faults += [Fault("site phasors", site, problem, allowed) for problem, allowed in problems]
        if not np.isfinite(admittance[:, s]).all() or (admittance[:, s] == 0).any():
            faults.append(Fault("fingerprints", site, "the admittance is zero or not finite", "Must be neither"))
    if observations.years and not _are_shares(observations.period_share):
        problem = f"the shares of the years are {observations.period_share.round(3).tolist()}"
        faults.append(Fault("site phasors", "period_share", problem, "Must be non-negative and sum to 1"))
    return faults + _copy_faults(observations)


def _are_shares(shares: NDArray[np.float64]) -> bool:
    return bool(np.isfinite(shares).all() and (shares >= 0).all() and abs(shares.sum() - 1) < 1e-6)


def _copy_faults(observations: Observations) -> list[Fault]:
    """Refuse models that agree at every site they share: the spread between models cannot be learned from copies."""
    faults = []
    for first, second in combinations(range(len(observations.models)), 2):
        shared = observations.present[:, first] & observations.present[:, second] & observations.has_contrasts
        apart = observations.phasor[shared, first] - observations.phasor[shared, second]
        if shared.any() and np.abs(apart).max() < LEAST_APART:
            names = f"{observations.models[first]}, {observations.models[second]}"
            problem = f"the two models give the same phasor at all {shared.sum()} sites they share"
            faults.append(Fault("circulation", names, problem, "Models that are not copies", "Leave one of them out"))
    return faults


def _site_problems(observations: Observations, s: int) -> Sequence[tuple[str, str]]:
    problems = []
    weight, covariance, noise = (
        observations.weight[s],
        observations.part_covariance[s],
        observations.model_noise[s],
    )
    present = [model for model, there in zip(observations.models, observations.present[s], strict=True) if there]
    if not present:
        problems.append(("no phasor is finite in every part", "At least one model, or the column 'none'"))
    if NO_MODEL in present and len(present) > 1:
        problems.append((f"has the column 'none' beside {len(present) - 1} models", "Must be one or the other"))
    if not _are_shares(weight):
        problems.append((f"the weights sum to {weight.sum():g}", "Must be non-negative and sum to 1"))
    if observations.years and not abs(observations.year_share[s].sum() - 1) < 1e-6:
        problems.append((f"the shares of the years sum to {observations.year_share[s].sum():g}", "Must sum to 1"))
    if observations.position is not None and not np.isfinite(observations.position[s]).all():
        problems.append(("its latitude or longitude is not finite", "Must be degrees north and east"))
    if not np.isfinite(covariance).all() or not (np.linalg.eigvalsh(covariance) > 0).all():
        problems.append(("a covariance is not positive definite", "Every part needs a positive definite one"))
    if not np.isfinite(noise).all() or not (np.linalg.eigvalsh(noise) >= -1e-9 * max(np.trace(noise), 1.0)).all():
        problems.append(("the model noise is not a covariance", "Must be finite and not negative"))
    return problems


def record_covariance(
    covariance: NDArray[np.float64], model_noise: NDArray[np.float64], model_count: int
) -> NDArray[np.float64]:
    """Covariance of the record error, which every model at the site shares.

    Parameters
    ----------
    covariance : (..., 2, 2) array
        C_s, Pa2, of the record less the mean of its models.
    model_noise : (2, 2) array
        D_s, Pa2.
    model_count : int
        M_s.

    Returns
    -------
    (..., 2, 2) array
        C_s - D_s / M_s, with its eigenvalues relative to C_s floored at `RECORD_FLOOR`
        so that it stays a covariance.
    """
    root = np.linalg.cholesky(covariance)
    inverse = np.linalg.inv(root)
    share = np.eye(2) - inverse @ (model_noise / model_count) @ np.swapaxes(inverse, -1, -2)
    values, vectors = np.linalg.eigh(share)
    floored = (vectors * np.maximum(values, RECORD_FLOOR)[..., None, :]) @ np.swapaxes(vectors, -1, -2)
    return np.asarray(root @ floored @ np.swapaxes(root, -1, -2))
