"""What the answer would have been: one table of every choice that cannot be known, each followed to the end."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any, get_args

import numpy as np
import xarray as xr

from massfit.annual.fit import SiteFit
from massfit.display import counted
from massfit.errors import InputError
from massfit.pipeline.parts import Mapped
from massfit.pipeline.progress import Progress
from massfit.pipeline.sites import SiteTask, reduce_site
from massfit.posterior.result import Posterior
from massfit.posterior.robustness import moved_site, weightiest_site
from massfit.posterior.what_if import (
    Variant,
    answer_of,
    network_variants,
    single_members,
    variant_answer,
    what_if_row,
)
from massfit.records.record import DailyRecord
from massfit.settings import DriftForm, NoiseForm, Priors
from massfit.site import LEAST_SITE_DAYS


@dataclass(frozen=True)
class Refit:
    """Another treatment of the records.

    Parameters
    ----------
    kind, name : str
    tasks : tuple of SiteTask
        Sites that are left, as they are to be fitted.
    """

    kind: str
    name: str
    tasks: tuple[SiteTask, ...]


def other_answers(
    tasks: Sequence[SiteTask],
    joined: Callable[[Sequence[SiteFit]], xr.Dataset],
    phasors: xr.Dataset,
    fingerprints: xr.Dataset,
    posterior: Posterior,
    *,
    progress: Progress,
    mapped: Mapped,
) -> dict[str, Any]:
    """Answer the network under every other choice.

    Parameters
    ----------
    tasks : sequence of SiteTask
        Of the answer given.
    joined : callable
        Joins the fits of the sites, and what was reduced elsewhere, to contracts.SITE_PHASORS.
    phasors, fingerprints : xarray.Dataset
        contracts.SITE_PHASORS and contracts.FINGERPRINTS of the answer given.
    posterior : Posterior
        The answer given.
    progress : callable
    mapped : callable
        Applies a function to each of a sequence and gives the results in order.

    Returns
    -------
    dict
        `what_if`, rows of :func:`massfit.posterior.what_if.what_if_row` in the order of their kinds; and `moved_site`,
        of :func:`massfit.posterior.robustness.moved_site` for the site that makes the largest share of the answer,
        where there are three sites or more.
    """
    given = Variant("", "", phasors, fingerprints, posterior.settings, posterior.priors, posterior.atmosphere_sd_hpa)
    refits = other_treatments(tasks)
    fits = _fits(refits, progress, mapped)
    variants = network_variants(given)
    variants += [
        replace(given, kind=refit.kind, name=refit.name + _lost(len(tasks) - len(own)), phasors=joined(own))
        for refit, own in zip(refits, fits, strict=True)
        if own
    ]
    base = answer_of(posterior.draws, posterior.converged, len(posterior.sites))
    rows = [what_if_row("fingerprint", name, answer, base) for name, answer in single_members(posterior)]
    progress("what if", 0, len(variants))
    for done, answer in enumerate(mapped(variant_answer, variants)):
        rows.append(what_if_row(variants[done].kind, variants[done].name, answer, base))
        progress("what if", done + 1, len(variants))
    order = list(dict.fromkeys(["network model", "priors", "ocean models", *(row["kind"] for row in rows)]))
    found: dict[str, Any] = {"what_if": sorted(rows, key=lambda row: order.index(row["kind"]))}
    if len(posterior.sites) > 2:
        progress("a site moved", 0, 1)
        found["moved_site"] = moved_site(given, weightiest_site(given, posterior), mapped=mapped)
        progress("a site moved", 1, 1)
    return found


def other_treatments(tasks: Sequence[SiteTask]) -> list[Refit]:
    """Name the other treatments of the records: drift, noise, and one half of them at a time.

    Parameters
    ----------
    tasks : sequence of SiteTask

    Returns
    -------
    list of Refit
        A treatment that changes nothing, or leaves no site, is left out.
    """
    if not tasks:
        return []
    return [refit for refit in (*_drifts(tasks), *_noises(tasks), *_halves(tasks)) if refit.tasks]


def _drifts(tasks: Sequence[SiteTask]) -> list[Refit]:
    refits = []
    for form in get_args(DriftForm):
        if form != "none":
            # a record that the analyst declared free of drift stays so
            own = [_with_records(t, lambda r, f=form: r if r.drift == "none" else replace(r, drift=f)) for t in tasks]  # type: ignore[misc]
            changed = any(record.drift not in ("none", form) for task in tasks for record in task.daily)
            refits.append(Refit("drift", f"every drift {form}", tuple(own) if changed else ()))
    return refits


def _noises(tasks: Sequence[SiteTask]) -> list[Refit]:
    priors = tasks[0].settings.priors
    forms = [form for form in get_args(NoiseForm) if priors.noise_forms != (form,)]
    choices = [(f"every noise {form}", replace(priors, noise_forms=(form,))) for form in forms]
    scales = tuple(2.0 * scale for scale in priors.noise_time_scales_days)
    choices.append(("double the time scales of the noise", replace(priors, noise_time_scales_days=scales)))
    return [Refit("noise", name, tuple(_with_priors(task, other) for task in tasks)) for name, other in choices]


def _halves(tasks: Sequence[SiteTask]) -> list[Refit]:
    times = np.concatenate([record.time for task in tasks for record in task.daily])
    middle = times.min() + (times.max() - times.min()) / 2
    day = str(middle.astype("datetime64[D]"))
    refits = []
    for name, kept in ((f"records before {day}", _before(middle)), (f"records from {day}", _from(middle))):
        own = [_with_records(task, kept) for task in tasks]
        refits.append(Refit("records", name, tuple(task for task in own if _days(task) >= LEAST_SITE_DAYS)))
    return refits


def _before(middle: np.datetime64) -> Callable[[DailyRecord], DailyRecord]:
    return lambda record: _cut(record, slice(None, int(np.searchsorted(record.time, middle))))


def _from(middle: np.datetime64) -> Callable[[DailyRecord], DailyRecord]:
    return lambda record: _cut(record, slice(int(np.searchsorted(record.time, middle)), None))


def _cut(record: DailyRecord, part: slice) -> DailyRecord:
    return replace(record, time=record.time[part], pressure=record.pressure[part])


def _with_records(task: SiteTask, change: Callable[[DailyRecord], DailyRecord]) -> SiteTask:
    changed = [change(record) for record in task.daily]
    return replace(task, daily=tuple(record for record in changed if len(record.time)))


def _with_priors(task: SiteTask, priors: Priors) -> SiteTask:
    return replace(task, settings=replace(task.settings, priors=priors))


def _days(task: SiteTask) -> int:
    return len(np.unique(np.concatenate([record.time for record in task.daily]))) if task.daily else 0


def fit_of(task: SiteTask) -> tuple[SiteFit, ...]:
    """Fit one site; what the fit was made from is not kept.

    Parameters
    ----------
    task : SiteTask

    Returns
    -------
    tuple of SiteFit
        Empty where too little of the record is left for a fit.
    """
    try:
        return (reduce_site(task).fit,)
    except InputError:
        return ()


def _fits(refits: Sequence[Refit], progress: Progress, mapped: Mapped) -> list[list[SiteFit]]:
    tasks = [task for refit in refits for task in refit.tasks]
    progress("other site fits", 0, len(tasks))
    found = []
    for fit in mapped(fit_of, tasks):
        found.append(fit)
        progress("other site fits", len(found), len(tasks))
    fits = iter(found)
    return [[fit for _ in refit.tasks for fit in next(fits)] for refit in refits]


def _lost(count: int) -> str:
    return f", without {counted(count, 'site')}" if count else ""
