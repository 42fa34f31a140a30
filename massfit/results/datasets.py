"""A finished run as Datasets, ready for NetCDF files."""

from collections.abc import Callable, Mapping, Sequence
from datetime import UTC, datetime
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.results.estimate import Estimate, SiteReduction
from massfit.results.posterior_groups import posterior_groups

CONVENTIONS = "CF-1.13, ACDD-1.3"

_ONE = "1"

_PARTS = {
    "own_ocean_mean": "part of circulation: less the model's own ocean mean",
    "self_attraction": "part of circulation: answer of the ocean to the attraction and load of the model's pressure",
    "local_air_pressure": "part of circulation: air pressure at the site less its mean over the ocean",
}

_GROUP_TITLES = {
    "posterior": "draws of the annual phasor of ocean mass and of the scales of the model",
    "sample_stats": "what each draw was made with",
    "observed_data": "annual phasor of each site",
    "constant_data": "what is taken as known of the sites",
}


def result_datasets(estimate: Estimate) -> dict[str, xr.Dataset]:
    """Every Dataset of a run by the name of its file, and of its group where the file has groups.

    Parameters
    ----------
    estimate : Estimate

    Returns
    -------
    dict of str to xarray.Dataset
        The group stands behind the file, "posterior.nc/posterior".
    """
    groups = posterior_groups(estimate.posterior, estimate.site_phasors, estimate.fingerprints)
    described = {
        **{f"posterior.nc/{name}": (group, _GROUP_TITLES[name]) for name, group in groups.items()},
        "site_phasors.nc": (estimate.site_phasors, "annual phasor of each site"),
        "fingerprints.nc": (estimate.fingerprints, "complex admittance of each site"),
    }
    if estimate.reductions:  # there are no records where every site was reduced elsewhere
        title = "daily records, every series subtracted, and what remains"
        described["reduced_records.nc"] = reduced_records(estimate.reductions), title
    if estimate.calibration is not None:
        described["calibration.nc"] = estimate.calibration, "surrogates of the network with a known cycle"
    return {
        name: with_description(dataset, title, estimate.summary, estimate.provenance)
        for name, (dataset, title) in described.items()
    }


def reduced_records(reductions: Sequence[SiteReduction]) -> xr.Dataset:
    """Daily records of all deployments end to end, with every correction, drift and remainder.

    Parameters
    ----------
    reductions : sequence of SiteReduction

    Returns
    -------
    xarray.Dataset
        A CF contiguous ragged array over `obs`; `row_size` counts the days of each deployment.
        ``pressure`` = the common corrections + the mean of the models present + ``drift`` + ``reduced``
        on the days that were used, up to a constant for each deployment; ``drift`` and
        ``reduced`` are NaN on the others. Where the fits were judged, ``drift_sd`` is the standard deviation of
        the drift.
    """
    rows = [(reduction, index) for reduction in reductions for index in range(len(reduction.daily))]
    daily = [reduction.daily[index] for reduction, index in rows]

    def joined(values: Callable[[SiteReduction, int], NDArray[np.float64]]) -> NDArray[np.float64]:
        return np.concatenate([values(reduction, index) for reduction, index in rows], axis=-1)

    variables: dict[str, tuple[tuple[str, ...], NDArray[np.float64], dict[str, str]]] = {
        "pressure": (("obs",), joined(lambda r, i: r.daily[i].pressure), _pascal("daily mean, short tides removed"))
    }
    for name in ("long_period_tides", "pole_tide", "ocean_mean_atmosphere"):
        text = f"{name.replace('_', ' ')}, subtracted"
        variables[name] = (("obs",), joined(lambda r, i, name=name: _correction(r, i, name)), _pascal(text))  # type: ignore[misc]
    variables["circulation"] = (
        ("model", "obs"),
        joined(lambda r, i: _correction(r, i, "circulation")),
        _pascal("bottom pressure of the circulation model, subtracted"),
    )
    for name, text in _PARTS.items():
        if any(name in reduction.corrections for reduction in reductions):
            part = joined(lambda r, i, name=name: _part(r, i, name))  # type: ignore[misc]
            variables[name] = ("model", "obs"), part, _pascal(text)
    variables["drift"] = (
        ("obs",),
        joined(lambda r, i: _fitted(r, i, "drift")),
        _pascal("fitted drift, steps and level"),
    )
    variables["reduced"] = (
        ("obs",),
        joined(lambda r, i: _fitted(r, i, "reduced")),
        _pascal("what remains; the annual cycle is in it"),
    )
    if all(reduction.diagnostics is not None for reduction in reductions):
        variables["drift_sd"] = ("obs",), joined(_drift_sd), _pascal("standard deviation of the fitted drift")
    return xr.Dataset(
        {
            **variables,
            "model_present": (
                ("deployment", "model"),
                np.array([reduction.corrections["present"].values for reduction, _ in rows], dtype=np.int8),
                {"long_name": "1 where the model was subtracted from the site", "units": _ONE},
            ),
            "row_size": (
                ("deployment",),
                np.array([len(record.time) for record in daily], dtype=np.int32),
                {"long_name": "number of days of each deployment", "sample_dimension": "obs", "units": _ONE},
            ),
        },
        coords={
            "time": (
                ("obs",),
                np.concatenate([record.time for record in daily]),
                {"long_name": "middle of the day, UTC"},
            ),
            "deployment": (
                ("deployment",),
                np.array([record.deployment for record in daily], dtype=object),
                {"cf_role": "timeseries_id"},
            ),
            "site": (("deployment",), np.array([record.site for record in daily], dtype=object)),
            "deployment_start": (
                ("deployment",),
                np.array([record.start for record in daily], dtype="datetime64[ns]"),
                {"long_name": "start of the deployment, origin of its drift, UTC"},
            ),
            "drift_form": (("deployment",), np.array([record.drift for record in daily], dtype=object)),
            "latitude": _place(rows, "latitude_deg", "degrees_north"),
            "longitude": _place(rows, "longitude_deg", "degrees_east"),
            "model": reductions[0].corrections["model"].values,
        },
        attrs={"featureType": "timeSeries"},
    )


def _pascal(text: str) -> dict[str, str]:
    return {"units": "Pa", "long_name": text}


def _place(
    rows: list[tuple[SiteReduction, int]], name: str, units: str
) -> tuple[tuple[str], NDArray[np.float64], dict[str, str]]:
    values = np.array([getattr(reduction.site, name) for reduction, _ in rows], dtype=float)
    return ("deployment",), values, {"units": units, "standard_name": name.removesuffix("_deg")}


def _correction(reduction: SiteReduction, index: int, name: str) -> NDArray[np.float64]:
    place = np.searchsorted(reduction.corrections["time"].values, reduction.daily[index].time)
    return np.asarray(reduction.corrections[name].values[..., place])


def _part(reduction: SiteReduction, index: int, name: str) -> NDArray[np.float64]:
    """Find a part of the models' pressure on the days of a deployment; NaN where a model lacks it."""
    if name in reduction.corrections:
        return _correction(reduction, index, name)
    return np.full((reduction.corrections.sizes["model"], len(reduction.daily[index].time)), np.nan)


def _fitted(reduction: SiteReduction, index: int, name: str) -> NDArray[np.float64]:
    """Fitted series of a deployment on all its days, NaN where a day was not used."""
    record = reduction.daily[index]
    values = np.full(len(record.time), np.nan)
    for drift in reduction.fit.drifts:
        if drift.deployment == record.deployment:
            values[np.searchsorted(record.time, drift.time)] = getattr(drift, name)
    return values


def _drift_sd(reduction: SiteReduction, index: int) -> NDArray[np.float64]:
    """Interpolate the standard deviation of the drift of a deployment to its days; NaN beyond those of the fit."""
    time = reduction.daily[index].time
    for curve in () if reduction.diagnostics is None else reduction.diagnostics.drifts:
        if curve.deployment == reduction.daily[index].deployment:
            days, known = (each.astype("datetime64[s]").astype(float) for each in (time, curve.time))
            return np.asarray(np.interp(days, known, curve.sd, left=np.nan, right=np.nan))
    return np.full(len(time), np.nan)


def with_description(
    dataset: xr.Dataset, title: str, summary: Mapping[str, Any], provenance: Mapping[str, Any]
) -> xr.Dataset:
    """Add the attributes by which a stranger finds out what a file is.

    Parameters
    ----------
    dataset : xarray.Dataset
    title : str
        What it holds.
    summary : mapping
        With `network`, `assumptions`, `reference_year`, `warnings` and, where there is a posterior, `convergence`.
    provenance : mapping

    Returns
    -------
    xarray.Dataset
    """
    converged = {"converged": int(summary["convergence"]["converged"])} if "convergence" in summary else {}
    attributes = {
        "Conventions": CONVENTIONS,
        "title": f"{summary['network']}: {title}",
        "summary": " ".join(summary["assumptions"]),
        "source": f"massfit {provenance['massfit']}",
        "date_created": datetime.now(UTC).isoformat(timespec="seconds"),
        "phase_reference": f"1 January {summary['reference_year']} 00:00 UTC",
        "comment": "; ".join(summary["warnings"]),
        **converged,
    }
    return dataset.assign_attrs({**dataset.attrs, **attributes})
