"""What becomes of the answer if a recorder fails, is recovered or is redeployed in a month to come.

The record error of every plan is that expected of its days and drifts (:mod:`massfit.siting.planned_record`), over that
expected of the record so far, times the error that the site stage found: the form of the noise says how the error
changes, the site stage how large it is.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.annual.noise import NoiseModel
from massfit.annual.operator import calendar_years
from massfit.annual.record import ReducedRecord
from massfit.constants import JULIAN_YEAR_DAYS
from massfit.phasor import admittance_matrix, days_since
from massfit.posterior.network_model import Choices, network_model
from massfit.posterior.observations import Observations, record_covariance
from massfit.siting.network_error import NetworkError, at_nodes, updated_covariance
from massfit.siting.planned_record import DAY, expected_covariance, planned_recorder

Floats = NDArray[np.float64]

MONTH_DAYS = JULIAN_YEAR_DAYS / 12.0

TURNAROUND_DAYS = 3
"""Days between the recovery of a recorder and the record of the next."""

STILL_DOWN_DAYS = 92
"""A recorder whose record reaches to within so many days of the network's last is taken to be on the bottom still."""


@dataclass(frozen=True)
class ServedSite:
    """A site and its recorders so far.

    Parameters
    ----------
    site : str
    recorders : tuple of ReducedRecord
        In order of deployment; their pressure does not count.
    noise : NoiseModel
    """

    site: str
    recorders: tuple[ReducedRecord, ...]
    noise: NoiseModel

    @property
    def last_day(self) -> np.datetime64:
        """Last day of its record."""
        return max(recorder.time[-1] for recorder in self.recorders)

    def running_on(self, end: np.datetime64) -> tuple[ReducedRecord, ...]:
        """Give the recorders, the last in place until a day that has not come."""
        last = max(self.recorders, key=lambda recorder: recorder.time[-1])
        more = np.arange(last.time[-1] + DAY, end, DAY)
        longer = np.append(last.time, more)
        others = tuple(recorder for recorder in self.recorders if recorder is not last)
        return (
            *others,
            replace(last, time=longer, pressure=np.zeros(len(longer)), circulation=np.empty((0, len(longer)))),
        )

    def without_last(self) -> tuple[ReducedRecord, ...]:
        """Give the recorders without the one on the bottom, lost with all that it recorded."""
        last = max(self.recorders, key=lambda recorder: recorder.time[-1])
        return tuple(recorder for recorder in self.recorders if recorder is not last)

    def redeployed(self, at: np.datetime64, end: np.datetime64, *, running: bool) -> tuple[ReducedRecord, ...]:
        """Give the recorders with a new one, and a new drift, from a day on; the old one is recovered then."""
        before = self.running_on(at) if running else self.recorders
        start = (at + TURNAROUND_DAYS * DAY).astype("datetime64[D]")
        days = int((end - start) / DAY)
        form = self.recorders[-1].drift
        return (*before, planned_recorder("next", start, days, drift=form)) if days > 0 else before


@dataclass(frozen=True)
class ServicePlan:
    """A network whose recorders are to be served.

    Parameters
    ----------
    error : NetworkError
        As it is.
    observations : Observations
    admittance : (n_member, n_site) array of complex
    choices : Choices
    sites : tuple of ServedSite
        Those whose recorders and noise are known.
    reference_year : int
    """

    error: NetworkError
    observations: Observations
    admittance: NDArray[np.complex128]
    choices: Choices
    sites: tuple[ServedSite, ...]
    reference_year: int

    @property
    def today(self) -> np.datetime64:
        """Last day of any record."""
        return max(site.last_day for site in self.sites)

    def running(self, site: ServedSite) -> bool:
        """Whether the last recorder is taken to be on the bottom still."""
        return bool(self.today - site.last_day <= STILL_DOWN_DAYS * DAY)


def service_months(plan: ServicePlan, months: Sequence[int], done: Callable[[int, int], None]) -> xr.Dataset:
    """Give the error of the answer for every site and month of service.

    Parameters
    ----------
    plan : ServicePlan
    months : sequence of int
        Months from the last day of any record, rising; the last is the horizon to which all others run on.
    done : callable
        Called with the number of sites that are done, and of all.

    Returns
    -------
    xarray.Dataset
        Over (site, month): `answer_sd_ended` and `record_sd_ended`, where the recorder fails, or is recovered and not
        replaced, in the month, its record kept; `answer_sd_redeployed` and `record_sd_redeployed`, where it is replaced
        then, with a drift of its own. Over (site): `record_sd_now`, `record_sd_on`, `answer_sd_lost` where the
        recorder on the bottom is lost with its record, and `running`. NaN where the recorder of a site has ended.
    """
    end = plan.today + np.timedelta64(round(months[-1] * MONTH_DAYS), "D")
    days = [plan.today + np.timedelta64(round(month * MONTH_DAYS), "D") for month in months]
    changes = [_Change(plan, site) for site in plan.sites]
    onward = [site.running_on(end) if plan.running(site) else site.recorders for site in plan.sites]
    years = _years(plan, onward)
    ahead = _ahead(plan, changes, onward, years)
    names, shape = [site.site for site in plan.sites], (len(plan.sites), len(months))
    fields = {name: np.full(shape, np.nan) for name in _BY_MONTH}
    lost, now, on = (np.full(shape[0], np.nan) for _ in range(3))
    for place, change in enumerate(changes):
        site, running = change.site, plan.running(change.site)
        now[place], on[place] = (_sd(change.scaled(own)[0]) for own in (site.recorders, onward[place]))
        for column, day in enumerate(days):
            plans = {"redeployed": site.redeployed(day, end, running=running)}
            if running:
                plans["ended"] = site.running_on(day)
            for name, recorders in plans.items():
                record, answer = change.errors(ahead, recorders, years)
                fields[f"record_sd_{name}"][place, column] = record
                fields[f"answer_sd_{name}"][place, column] = answer
        if running:
            lost[place] = change.errors(ahead, site.without_last(), years)[1]
        done(place + 1, shape[0])
    variables = {name: (("site", "month"), values, _PASCAL) for name, values in fields.items()}
    of_sites = {"record_sd_now": now, "record_sd_on": on, "answer_sd_lost": lost}
    running_flags = np.array([plan.running(site) for site in plan.sites], dtype=np.int8)
    return xr.Dataset(
        {
            **variables,
            **{name: (("site",), values, _PASCAL) for name, values in of_sites.items()},
            "running": (("site",), running_flags, {"units": "1"}),
        },
        coords={"site": names, "month": list(months)},
        attrs={
            "last_day": str(plan.today)[:10],
            "answer_sd_now_pa": _sd(plan.error.pooled_covariance),
            "answer_sd_on_pa": _sd(ahead.pooled_covariance),
        },
    )


_BY_MONTH = ("answer_sd_ended", "answer_sd_redeployed", "record_sd_ended", "record_sd_redeployed")
_PASCAL = {"units": "Pa"}


def _sd(covariance: Floats) -> float:
    return float(np.sqrt(0.5 * np.trace(covariance)))


class _Change:
    """How the record error of one site changes with its recorders."""

    def __init__(self, plan: ServicePlan, site: ServedSite) -> None:
        self.site, self._plan = site, plan
        self.index = plan.observations.sites.index(site.site)
        self._now = np.linalg.cholesky(self._expected(site.recorders))

    def _expected(self, recorders: Sequence[ReducedRecord]) -> Floats:
        plan = self._plan
        return expected_covariance(
            recorders, self.site.noise, reference_year=plan.reference_year, priors=plan.choices.priors
        )

    def scaled(self, recorders: Sequence[ReducedRecord]) -> tuple[Floats, Floats]:
        """Covariances (2, 2) of the site's record and of each model's own weather with other recorders, Pa2."""
        factor = np.linalg.cholesky(self._expected(recorders)) @ np.linalg.inv(self._now)
        seen = self._plan.observations
        covariance, noise = (factor @ own[self.index] @ factor.T for own in (seen.covariance, seen.model_noise))
        return covariance, noise

    def year_share(self, recorders: Sequence[ReducedRecord], years: tuple[int, ...]) -> Floats:
        """Share (n_year,) of each year in the record, by days."""
        days = np.concatenate([days_since(recorder.time, self._plan.reference_year) for recorder in recorders])
        own = calendar_years(days, self._plan.reference_year)
        return np.array([np.mean(own == year) for year in years])

    def errors(
        self, ahead: NetworkError, recorders: Sequence[ReducedRecord], years: tuple[int, ...]
    ) -> tuple[float, float]:
        """Errors of a component of the site's own phasor and of the answer with other recorders at this site, Pa."""
        rows = ahead.site_rows(self.index)
        across = np.swapaxes(rows.axes, 1, 2)
        design = across @ rows.design
        old = np.asarray(np.linalg.inv(across @ (rows.variance[:, :, None] * rows.axes)))
        if not recorders:
            return np.inf, _sd(ahead.changed(updated_covariance(ahead, design, -old)))
        covariance, noise = self.scaled(recorders)
        count = int(self._plan.observations.model_count[self.index])
        own = record_covariance(covariance, noise, count) + noise / count
        rest = (rows.variance - rows.record)[:, :1, None] * np.eye(2)
        changed = design.copy()
        if years:
            share = self.year_share(recorders, years) - ahead.model.sharing.period_share
            turned = admittance_matrix(self._plan.admittance[ahead.condition.member, self.index])
            year = ahead.model.year_sd * share[:, None, None, None] * turned
            changed[:, :, ahead.model.columns.year] = np.moveaxis(year, 0, 2).reshape(len(ahead), 2, -1)
        information = np.zeros((len(ahead), 4, 4))
        information[:, :2, :2], information[:, 2:, 2:] = -old, np.linalg.inv(rest + own)
        both = updated_covariance(ahead, np.concatenate([design, changed], axis=1), information)
        return _sd(covariance), _sd(ahead.changed(both))


def _years(plan: ServicePlan, onward: Sequence[Sequence[ReducedRecord]]) -> tuple[int, ...]:
    """Years of the network and of all plans; none where the network holds no year-to-year term."""
    had = plan.observations.years
    if len(had) < 2:
        return ()
    last = max(str(recorder.time[-1])[:4] for recorders in onward for recorder in recorders)
    return (*had, *range(had[-1] + 1, int(last) + 2))


def _single(observations: Observations) -> Observations:
    """One Gaussian for every site."""
    return replace(
        observations,
        weight=np.ones((len(observations.sites), 1)),
        part_phasor=observations.phasor[:, None],
        part_covariance=observations.covariance[:, None],
    )


def _ahead(
    plan: ServicePlan, changes: Sequence[_Change], onward: Sequence[Sequence[ReducedRecord]], years: tuple[int, ...]
) -> NetworkError:
    """Give the network when every recorder on the bottom has run on; its scales are those of today."""
    now = _single(plan.observations)
    covariance, noise = now.part_covariance.copy(), now.model_noise.copy()
    more = len(years) - len(now.years)
    share, period = now.year_share, now.period_share
    if years:
        share, period = np.pad(now.year_share, ((0, 0), (0, more))), np.append(now.period_share, np.zeros(more))
    for change, recorders in zip(changes, onward, strict=True):
        covariance[change.index, 0], noise[change.index] = change.scaled(recorders)
        if years and recorders is not change.site.recorders:
            share[change.index] = change.year_share(recorders, years)
    later = replace(
        now,
        part_covariance=covariance,
        model_noise=noise,
        years=years or now.years,
        year_share=share,
        period_share=period,
    )
    condition = replace(plan.error.condition, part=np.zeros_like(plan.error.condition.part))
    today, ahead = (
        at_nodes(
            network_model(seen, plan.admittance, plan.choices),
            condition,
            plan.error.pooled_mean,
            plan.error.pooled_covariance,
        )
        for seen in (now, later)
    )
    return replace(ahead, pooled_covariance=today.changed(ahead.annual_covariance))
