"""What the answer would have been under another choice, by the second route."""

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.constants import PASCAL_PER_HPA
from massfit.display import counted
from massfit.phasor import as_complex
from massfit.posterior.convergence import worse
from massfit.posterior.importance import Proposal, ScalePosterior, fit_proposal, integrate_scales
from massfit.posterior.network_model import Choices, member_spread, network_model, pooled_moments, scale_priors
from massfit.posterior.observations import Observations
from massfit.posterior.regression import LinearModel
from massfit.posterior.sharing import find_sharing

_DRAWS = 1000


@dataclass(frozen=True)
class Case:
    """Everything that a second route needs, at one admittance a site.

    Parameters
    ----------
    observations : Observations
    admittance : (n_site,) array of complex
    choices : Choices
    mixed : tuple of str
        Sites that enter by their mixture.
    """

    observations: Observations
    admittance: NDArray[np.complex128]
    choices: Choices
    mixed: tuple[str, ...]

    def route(self, start: Proposal) -> ScalePosterior:
        """Give nodes of this case; the same random numbers for every one, so that differences are no chance."""
        return integrate_scales(self._model, self._prior_scales, rng=self._rng(), draws=_DRAWS, start=start)

    def proposal(self, like: Proposal | None = None) -> Proposal:
        """Where the nodes are drawn."""
        return fit_proposal(self._model, self._prior_scales, rng=self._rng(), like=like)

    @cached_property
    def _model(self) -> LinearModel:
        return network_model(self.observations, self.admittance[None], self.choices, mixed=self.mixed)

    @property
    def _prior_scales(self) -> NDArray[np.float64]:
        return scale_priors(self.choices.priors, self._model.scale_count)

    def _rng(self) -> np.random.Generator:
        return np.random.default_rng(self.choices.settings.seed)

    def with_settings(self, **changes: object) -> "Case":
        """Give the case under other settings."""
        settings = replace(self.choices.settings, **changes)  # type: ignore[arg-type]
        return replace(self, choices=replace(self.choices, settings=settings))


def alternative_answers(
    observations: Observations,
    fingerprints: xr.Dataset,
    base: Sequence[ScalePosterior],
    *,
    admittance: NDArray[np.complex128],
    choices: Choices,
    mixed: tuple[str, ...] = (),
    mapped: Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]] = map,
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
    choices : Choices
    mixed : tuple of str
        Sites that enter by their mixture.
    mapped : callable, optional
        Applies a function to each of a sequence, in order.

    Returns
    -------
    list of dict
        `name`; `shift_sd`, the shift of the mean in standard deviations of the answer
        given, and `sd_ratio`, each of the component that moves more; `in_phase_hpa` and
        `quadrature_hpa`, the mean.

    Notes
    -----
    The shift is that at the mean admittance of the load members, the spread between the members that of the answer
    given.
    """
    given = Case(observations, admittance.mean(axis=0), choices, mixed)
    start, spread = given.proposal(), member_spread(base)
    mean, covariance = pooled_moments(base)
    cases = [("", given, True), *_other_models(given), *_uniform(given, fingerprints)]
    moments = list(mapped(_moments, [AlternativeTask(case, start, alike) for _, case, alike in cases]))
    (middle, *own_middle), others = moments[0], zip(cases[1:], moments[1:], strict=True)
    rows = [
        (name, mean + own_mean - middle, own + spread, np.array(own_middle) + spread)
        for (name, _, _), (own_mean, *own) in others
    ]
    rows += [(name, route.mean, route.covariance, covariance) for name, route in _members(base, fingerprints)]
    return [_beside(name, other, own, mean, reference) for name, other, own, reference in rows]


class AlternativeTask(NamedTuple):
    """A case to be answered; the task travels to a worker process whole.

    Parameters
    ----------
    case : Case
    start : Proposal
        That of the answer given.
    alike : bool
        Whether it suits this case as it is.
    """

    case: Case
    start: Proposal
    alike: bool


def _moments(task: AlternativeTask) -> NDArray[np.float64]:
    """Mean (first row) and covariance (the others) of the answer of a case."""
    route = task.case.route(task.start if task.alike else task.case.proposal(like=task.start))
    return np.vstack([route.mean, route.covariance])


def _beside(
    name: str,
    other: NDArray[np.float64],
    own: NDArray[np.float64],
    mean: NDArray[np.float64],
    covariance: NDArray[np.float64],
) -> dict[str, object]:
    sd = np.sqrt(np.diag(covariance))
    ratio = np.sqrt(np.diag(own)) / sd
    return {
        "name": name,
        "shift_sd": worse((other - mean) / sd),
        "sd_ratio": float(np.exp(worse(np.log(ratio)))),
        "in_phase_hpa": float(other[0] / PASCAL_PER_HPA),
        "quadrature_hpa": float(other[1] / PASCAL_PER_HPA),
    }


def _other_models(given: Case) -> Iterator[tuple[str, Case, bool]]:
    """Names and cases, and whether the proposal of the answer given suits them."""
    settings, observations = given.choices.settings, given.observations
    if settings.model_truth == "centred":
        yield "truth exchangeable with the models (r = 1)", given.with_settings(model_truth="exchangeable"), True
    else:
        yield "truth at the models' centre (r = 0)", given.with_settings(model_truth="centred"), True
    if settings.site_scatter == "normal":
        yield "Student site scatter", given.with_settings(site_scatter="student-t"), False
    else:
        yield "normal site scatter", given.with_settings(site_scatter="normal"), False
    if find_sharing(observations, settings.group_scatter).has_group:
        yield "no scatter shared between sites", given.with_settings(group_scatter=False), False
    real = [model for model in observations.models if model != NO_MODEL]
    for model in real if len(real) > 1 else []:
        fewer, left = observations.without_model(model)
        if left.any():
            # sites that say nothing without it: it is their only model, or only the mean over several is known
            lost = int((~left).sum())
            name = f"without model {model}" + (f" and {counted(lost, 'site')}" if lost else "")
            yield name, replace(given, observations=fewer, admittance=given.admittance[left]), False
    for word, factor in (("half", 0.5), ("double", 2.0)):
        priors = given.choices.priors
        scaled = replace(priors, model_common_hpa=factor * priors.model_common_hpa)
        yield f"{word} the prior scale of s_common", replace(given, choices=replace(given.choices, priors=scaled)), True


def _members(base: Sequence[ScalePosterior], fingerprints: xr.Dataset) -> Iterator[tuple[str, ScalePosterior]]:
    if len(base) > 1:
        names = fingerprints["member"].values if "member" in fingerprints.coords else range(1, len(base) + 1)
        for name, route in zip(names, base, strict=True):
            yield f"load member {name} alone", route


def _uniform(given: Case, fingerprints: xr.Dataset) -> Iterator[tuple[str, Case, bool]]:
    yield "uniform ocean (F = 1)", replace(given, admittance=np.ones_like(given.admittance)), True
    if "reference_admittance" in fingerprints:
        cases = fingerprints["reference_admittance"].assign_coords(site=fingerprints["site"].astype(str))
        for k, name in enumerate(cases["case"].values):
            case = as_complex(cases[k].sel(site=list(given.observations.sites)).values)
            if not np.allclose(case, 1.0):
                yield str(name), replace(given, admittance=case), True
