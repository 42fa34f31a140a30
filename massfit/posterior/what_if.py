"""The network answer under other choices, each drawn anew, as rows of one table."""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.constants import PASCAL_PER_HPA
from massfit.display import counted
from massfit.phasor import as_complex, unwrapped_peak_days
from massfit.posterior.convergence import worse
from massfit.posterior.observations import read_observations
from massfit.posterior.result import Posterior
from massfit.posterior.sample import sample_posterior
from massfit.posterior.sharing import find_sharing
from massfit.settings import PosteriorSettings, Priors

FACTORS = (("half", 0.5), ("double", 2.0))
"""By how much the scale of a prior is changed."""

_SCALES = {
    "model_common_hpa": "prior of s_common (models, shared)",
    "model_local_hpa": "prior of s_local (models, at a site)",
    "site_scatter_hpa": "prior of s_site (site scatter)",
    "group_scatter_hpa": "prior of s_group (shared scatter)",
    "year_sd_hpa": "year-to-year sd of the cycle",
    "unmodelled_annual_hpa": "sd of the unmodelled circulation",
}

_WORDS = {
    "model_truth": {
        "exchangeable": "truth exchangeable with the models (r = 1)",
        "centred": "truth at the models' centre (r = 0)",
    },
    "site_scatter": {"normal": "normal site scatter", "student-t": "Student-t site scatter"},
}


@dataclass(frozen=True)
class Variant:
    """A choice, and everything that its answer is drawn from.

    Parameters
    ----------
    kind : str
        What the choice is about: the heading of its rows.
    name : str
    phasors, fingerprints : xarray.Dataset
        contracts.SITE_PHASORS and contracts.FINGERPRINTS.
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float
    """

    kind: str
    name: str
    phasors: xr.Dataset
    fingerprints: xr.Dataset
    settings: PosteriorSettings
    priors: Priors
    atmosphere_sd_hpa: float


def network_variants(base: Variant) -> list[Variant]:
    """Every other choice of the network stage, at the same site phasors.

    Parameters
    ----------
    base : Variant
        What the answer given was drawn from; its kind and name are not used.

    Returns
    -------
    list of Variant
        Model truth, site scatter, group scatter, priors of the scales and air-pressure error, each ocean model left
        out, and the reference fingerprints. Single load members are in the posterior already.
    """
    return [*_model_choices(base), *_prior_choices(base), *_fewer_models(base), *_reference_fingerprints(base)]


def _model_choices(base: Variant) -> Iterator[Variant]:
    settings = base.settings
    for name, changed in (_other(settings, key, words) for key, words in _WORDS.items()):
        yield replace(base, kind="network model", name=name, settings=changed)
    if settings.group_scatter is False:
        name, other = "neighbours share scatter (by group)", True
    else:
        name, other = "neighbours independent", False
    if _shares_scatter(base, settings.group_scatter) or _shares_scatter(base, other):
        yield replace(base, kind="network model", name=name, settings=replace(settings, group_scatter=other))


def _shares_scatter(base: Variant, group_scatter: bool | float) -> bool:
    observations, _ = read_observations(base.phasors, base.fingerprints)
    return find_sharing(observations, group_scatter).has_group


def _other(settings: PosteriorSettings, key: str, words: dict[str, str]) -> tuple[str, PosteriorSettings]:
    """Name and settings of the other one of two values."""
    (value,) = (value for value in words if value != getattr(settings, key))
    return words[value], replace(settings, **{key: value})  # type: ignore[arg-type]


def _prior_choices(base: Variant) -> Iterator[Variant]:
    skipped = set() if _shares_scatter(base, base.settings.group_scatter) else {"group_scatter_hpa"}
    if NO_MODEL not in base.phasors["model"].values:
        skipped.add("unmodelled_annual_hpa")
    for key, text in _SCALES.items():
        for word, factor in FACTORS if key not in skipped else ():
            priors = replace(base.priors, **{key: factor * getattr(base.priors, key)})
            yield replace(base, kind="priors", name=f"{word} the {text}", priors=priors)
    sd = base.atmosphere_sd_hpa
    for name, other in (
        ("air pressure without error", 0.0),
        (f"double the air-pressure error ({2 * sd:g} hPa)", 2.0 * sd),
    ):
        if other != sd:
            yield replace(base, kind="priors", name=name, atmosphere_sd_hpa=other)


def _fewer_models(base: Variant) -> Iterator[Variant]:
    models = [str(name) for name in base.phasors["model"].values if str(name) != NO_MODEL]
    for model in models if len(models) > 1 else []:
        fewer, lost = without_model(base.phasors, model)
        if fewer.sizes["site"]:
            name = f"without model {model}" + (f" and {counted(lost, 'site')}" if lost else "")
            yield replace(base, kind="ocean models", name=name, phasors=fewer)


def without_model(phasors: xr.Dataset, model: str) -> tuple[xr.Dataset, int]:
    """Site phasors with one ocean model left out.

    Parameters
    ----------
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    model : str

    Returns
    -------
    phasors : xarray.Dataset
    lost : int
        Sites that say nothing without the model: it is their only one, or only the mean over several is known.
    """
    had = np.isfinite(phasors["phasor"].sel(model=model).values).all(axis=(1, 2))
    fewer = phasors.sel(model=[name for name in phasors["model"].values if str(name) != model])
    left = np.isfinite(fewer["phasor"].values).all(axis=3).all(axis=1).any(axis=1)
    if "mean_only" in phasors:
        left &= ~((phasors["mean_only"].values == 1) & had)
    return fewer.isel(site=left), int((~left).sum())


def _reference_fingerprints(base: Variant) -> Iterator[Variant]:
    prints = base.fingerprints
    cases = {"uniform ocean (F = 1)": np.broadcast_to([1.0, 0.0], (prints.sizes["site"], 2))}
    if "reference_admittance" in prints:
        reference = prints["reference_admittance"]
        cases |= {str(name): reference[k].values for k, name in enumerate(reference["case"].values)}
    for name, values in cases.items():
        if name != "uniform ocean (F = 1)" and np.allclose(values, [1.0, 0.0]):
            continue
        one = prints.isel(member=[0])
        admittance = one["admittance"].copy(data=np.array(values, dtype=float)[None])
        yield replace(base, kind="fingerprint", name=name, fingerprints=one.assign(admittance=admittance))


def variant_answer(variant: Variant) -> dict[str, Any]:
    """Draw the answer of a choice.

    Parameters
    ----------
    variant : Variant

    Returns
    -------
    dict
        As :func:`answer_of`.

    Raises
    ------
    InputError
        Every fault of the two Datasets.
    """
    posterior = sample_posterior(
        variant.phasors,
        variant.fingerprints,
        settings=variant.settings,
        priors=variant.priors,
        atmosphere_sd_hpa=variant.atmosphere_sd_hpa,
    )
    return answer_of(posterior.draws, posterior.converged, len(posterior.sites))


def answer_of(draws: NDArray[np.float64], converged: bool, sites: int) -> dict[str, Any]:
    """Numbers of an answer that others are compared with.

    Parameters
    ----------
    draws : (n, 2) array
        Pa.
    converged : bool
    sites : int
        Number of sites behind it.

    Returns
    -------
    dict
        `mean_hpa` and `sd_hpa` of (in phase, quadrature), medians of `amplitude_hpa` and `peak_day`, `converged`,
        `sites`.
    """
    phasors = as_complex(draws)
    return {
        "mean_hpa": (draws.mean(axis=0) / PASCAL_PER_HPA).tolist(),
        "sd_hpa": (draws.std(axis=0, ddof=1) / PASCAL_PER_HPA).tolist(),
        "amplitude_hpa": float(np.median(np.abs(phasors)) / PASCAL_PER_HPA),
        "peak_day": float(np.median(unwrapped_peak_days(phasors))),
        "converged": converged,
        "sites": sites,
    }


def single_members(posterior: Posterior) -> list[tuple[str, dict[str, Any]]]:
    """Name and answer of every load member alone, which the pooled posterior holds already.

    Parameters
    ----------
    posterior : Posterior

    Returns
    -------
    list of (str, dict)
        Empty for one member.
    """
    if len(posterior.members) < 2:
        return []
    return [
        (f"load member {name} alone", answer_of(draws.reshape(-1, 2), state.converged, len(posterior.sites)))
        for name, draws, state in zip(
            posterior.members, posterior.member_annual, posterior.member_convergence, strict=True
        )
    ]


def what_if_row(kind: str, name: str, answer: dict[str, Any], base: dict[str, Any]) -> dict[str, Any]:
    """Set an answer beside the one given.

    Parameters
    ----------
    kind, name : str
    answer, base : dict
        Of :func:`answer_of`.

    Returns
    -------
    dict
        `kind`, `name`; `shift_sd`, the shift of the mean in standard deviations of the answer given, and `sd_ratio`,
        each of the component that moves more; `in_phase_hpa` and `quadrature_hpa`, means; `amplitude_hpa` and
        `peak_day`, medians; `converged`; `sites`.

    Examples
    --------
    >>> base = {"mean_hpa": [0.1, 0.8], "sd_hpa": [0.1, 0.1], "amplitude_hpa": 0.81, "peak_day": 84.0}
    >>> base |= {"converged": True, "sites": 9}
    >>> row = what_if_row("drift", "linear", {**base, "mean_hpa": [0.1, 0.75]}, base)
    >>> round(row["shift_sd"], 3), row["sd_ratio"]
    (-0.5, 1.0)
    """
    (mean, sd), (base_mean, base_sd) = (
        (np.array(each["mean_hpa"]), np.array(each["sd_hpa"])) for each in (answer, base)
    )
    return {
        "kind": kind,
        "name": name,
        "shift_sd": worse((mean - base_mean) / base_sd),
        "sd_ratio": float(np.exp(worse(np.log(sd / base_sd)))),
        "in_phase_hpa": answer["mean_hpa"][0],
        "quadrature_hpa": answer["mean_hpa"][1],
        **{key: answer[key] for key in ("amplitude_hpa", "peak_day", "converged", "sites")},
    }
