"""What the answer would have been under another choice, by quadrature."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.constants import PASCAL_PER_HPA
from massfit.display import counted
from massfit.phasor import as_complex
from massfit.posterior.convergence import worse
from massfit.posterior.network_model import pooled_moments, second_routes
from massfit.posterior.observations import Observations
from massfit.posterior.quadrature import ScalePosterior
from massfit.settings import PosteriorSettings, Priors


@dataclass(frozen=True)
class _Choice:
    """Everything that a second route needs."""

    observations: Observations
    admittance: NDArray[np.complex128]
    settings: PosteriorSettings
    priors: Priors
    atmosphere_sd_hpa: float

    def routes(self) -> list[ScalePosterior]:
        return second_routes(
            self.observations,
            self.admittance,
            settings=self.settings,
            priors=self.priors,
            atmosphere_sd_hpa=self.atmosphere_sd_hpa,
        )


def alternative_answers(
    observations: Observations,
    fingerprints: xr.Dataset,
    base: Sequence[ScalePosterior],
    *,
    admittance: NDArray[np.complex128],
    settings: PosteriorSettings,
    priors: Priors,
    atmosphere_sd_hpa: float,
) -> list[dict[str, object]]:
    """Answers under other choices, beside the one given.

    Parameters
    ----------
    observations : Observations
    fingerprints : xarray.Dataset
        Its members' names and reference cases are used.
    base : sequence of ScalePosterior
        Second route of the answer given, one a load member.
    admittance : (n_member, n_site) array of complex
    settings : PosteriorSettings
    priors : Priors
    atmosphere_sd_hpa : float

    Returns
    -------
    list of dict
        `name`; `shift_sd`, the shift of the mean in standard deviations of the answer
        given, and `sd_ratio`, each of the component that moves more; `in_phase_hpa` and
        `quadrature_hpa`, the mean.
    """
    choice = _Choice(observations, admittance, settings, priors, atmosphere_sd_hpa)
    mean, covariance = pooled_moments(base)
    cases = [*_other_models(choice), *_members(base, fingerprints), *_uniform(choice, fingerprints)]
    return [_beside(name, pooled_moments(routes), mean, covariance) for name, routes in cases]


def _beside(
    name: str,
    other: tuple[NDArray[np.float64], NDArray[np.float64]],
    mean: NDArray[np.float64],
    covariance: NDArray[np.float64],
) -> dict[str, object]:
    sd = np.sqrt(np.diag(covariance))
    ratio = np.sqrt(np.diag(other[1])) / sd
    return {
        "name": name,
        "shift_sd": worse((other[0] - mean) / sd),
        "sd_ratio": float(np.exp(worse(np.log(ratio)))),
        "in_phase_hpa": float(other[0][0] / PASCAL_PER_HPA),
        "quadrature_hpa": float(other[0][1] / PASCAL_PER_HPA),
    }


def _other_models(choice: _Choice) -> Iterator[tuple[str, list[ScalePosterior]]]:
    if choice.settings.model_truth == "centred":
        other, name = replace(choice.settings, model_truth="exchangeable"), "truth exchangeable with the models (r = 1)"
    else:
        other, name = replace(choice.settings, model_truth="centred"), "truth at the models' centre (r = 0)"
    yield name, replace(choice, settings=other).routes()
    real = [model for model in choice.observations.models if model != NO_MODEL]
    for model in real if len(real) > 1 else []:
        fewer, left = choice.observations.without_model(model)
        if left.any():
            # sites that say nothing without it: it is their only model, or only the mean over several is known
            lost = int((~left).sum())
            yield (
                f"without model {model}" + (f" and {counted(lost, 'site')}" if lost else ""),
                replace(choice, observations=fewer, admittance=choice.admittance[:, left]).routes(),
            )
    for word, factor in (("half", 0.5), ("double", 2.0)):
        scaled = replace(choice.priors, model_common_hpa=factor * choice.priors.model_common_hpa)
        yield f"{word} the prior scale of s_common", replace(choice, priors=scaled).routes()


def _members(
    base: Sequence[ScalePosterior], fingerprints: xr.Dataset
) -> Iterator[tuple[str, list[ScalePosterior]]]:
    if len(base) > 1:
        names = fingerprints["member"].values if "member" in fingerprints.coords else range(1, len(base) + 1)
        for name, route in zip(names, base, strict=True):
            yield f"load member {name} alone", [route]


def _uniform(choice: _Choice, fingerprints: xr.Dataset) -> Iterator[tuple[str, list[ScalePosterior]]]:
    yield "uniform ocean (F = 1)", replace(choice, admittance=np.ones_like(choice.admittance[:1])).routes()
    if "reference_admittance" in fingerprints:
        cases = fingerprints["reference_admittance"].assign_coords(site=fingerprints["site"].astype(str))
        for k, name in enumerate(cases["case"].values):
            case = as_complex(cases[k].sel(site=list(choice.observations.sites)).values)
            if not np.allclose(case, 1.0):
                yield str(name), replace(choice, admittance=case[None]).routes()
