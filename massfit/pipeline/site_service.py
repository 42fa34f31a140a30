"""Service of the recorders of a finished run: what its files know of them, and the plan."""

from collections.abc import Sequence

import numpy as np
import xarray as xr

from massfit.annual.dataset import site_noise
from massfit.annual.record import ReducedRecord
from massfit.pipeline.progress import Progress, ignore
from massfit.pipeline.site_plan import NetworkNow
from massfit.results.finished import FinishedRun
from massfit.siting.service_plan import ServedSite, ServicePlan, service_months

MONTHS = tuple(range(0, 25, 3))
"""Months of service looked at: each quarter of two years."""


def plan_service(
    run: FinishedRun, network: NetworkNow, *, months: Sequence[int] = MONTHS, progress: Progress = ignore
) -> xr.Dataset | None:
    """Say what the answer becomes if a recorder fails, is recovered or is redeployed in a month to come.

    Parameters
    ----------
    run : FinishedRun
        A finished estimate.
    network : NetworkNow
        Of this run.
    months : sequence of int
        From the last day of any record.
    progress : callable

    Returns
    -------
    xarray.Dataset or None
        From :func:`massfit.siting.service_plan.service_months`; None where no record or no noise is known.
    """
    sites = served_sites(run)
    if not sites:
        return None
    plan = ServicePlan(
        error=network.error,
        observations=network.observations,
        admittance=network.admittance,
        choices=network.choices,
        sites=sites,
        reference_year=int(run.summary["reference_year"]),
    )
    return service_months(plan, months, lambda done, total: progress("service", done, total))


def served_sites(run: FinishedRun) -> tuple[ServedSite, ...]:
    """Find the sites whose recorders and noise the files of a run know.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    tuple of ServedSite
        In the order of the sites; none in results of before these were kept.
    """
    records, phasors = run.datasets.get("reduced_records.nc"), run.datasets["site_phasors.nc"]
    if records is None or "deployment_start" not in records:
        return ()
    ends = np.cumsum(records["row_size"].values)
    found: dict[str, list[ReducedRecord]] = {}
    for place, last in enumerate(ends):
        rows = slice(last - int(records["row_size"].values[place]), last)
        time = records["time"].values[rows][np.isfinite(records["reduced"].values[rows])]
        if len(time):
            found.setdefault(str(records["site"].values[place]), []).append(_recorder(records, place, time))
    noises = {name: site_noise(phasors, name) for name in map(str, phasors["site"].values) if name in found}
    return tuple(ServedSite(name, tuple(found[name]), noise) for name, noise in noises.items() if noise is not None)


def _recorder(records: xr.Dataset, place: int, time: np.ndarray) -> ReducedRecord:
    own = records.isel(deployment=place)
    return ReducedRecord(
        deployment=str(own["deployment"].item()),
        time=time,
        pressure=np.zeros(len(time)),
        circulation=np.empty((0, len(time))),
        start=np.datetime64(own["deployment_start"].values.item(), "ns"),
        drift=str(own["drift_form"].item()),
    )
