"""What the figure of one site shows, taken from the Datasets and numbers of a run."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import JULIAN_YEAR_DAYS, PASCAL_PER_HPA
from massfit.phasor import annual_basis, days_since
from massfit.results.daily_parts import SERIES, about_zero, deployments_by_site, subtracted_series
from massfit.results.finished import FinishedRun

Floats = NDArray[np.float64]
Times = NDArray[np.datetime64]


@dataclass(frozen=True)
class DeploymentCurve:
    """Daily record of one deployment and its drift.

    Parameters
    ----------
    label : str
    time : (n,) array of datetime64
        Every day of the record.
    pressure : (n,) array
        Less its own median, hPa.
    drift, drift_sd : (n,) array
        On the same level, hPa; NaN on days that the fit did not use. The standard deviation may be all NaN.
    """

    label: str
    time: Times
    pressure: Floats
    drift: Floats
    drift_sd: Floats


@dataclass(frozen=True)
class Spectrum:
    """Power of the residuals of a site.

    Parameters
    ----------
    cycles_per_year, density, expected, noise : (F,) array
        Densities in hPa2 day.
    low, high : (F,) array
        Central 95 % of the density when the fitted noise is right, hPa2 day.
    """

    cycles_per_year: Floats
    density: Floats
    expected: Floats
    noise: Floats
    low: Floats
    high: Floats


@dataclass(frozen=True)
class SiteSheet:
    """One site at a glance.

    Parameters
    ----------
    site : str
    place : str
        Where it lies, in words.
    deployments : tuple of DeploymentCurve
    steps : tuple of datetime64
        Changes of level that were fitted.
    excluded : tuple of (datetime64, datetime64)
        Intervals that the analyst left out.
    missing : (k,) array of datetime64
        Days within the deployments that have no daily value or were not used.
    corrections : mapping of str to (n,) array
        Series subtracted, about their means, hPa, by the words of `SERIES`.
    models : (2, n) array or None
        Lowest and highest of the circulation models on each day, about their own means, hPa; None with fewer than two.
    correction_time : (n,) array of datetime64
    reduced_time : (m,) array of datetime64
    reduced, annual : (m,) array
        What remains of the record, and the fitted annual cycle, hPa.
    spectrum : Spectrum or None
    autocorrelation : (L,) array
        Of the whitened residuals; empty where the fit was not judged.
    autocorrelation_limit : float
        Its central 95 % for white residuals lies within plus and minus this.
    years : sequence of (year, (2,) array, (2, 2) array)
        Phasor and covariance of single years, hPa.
    phasor : (2,) array
    covariance : (2, 2) array
    walk : sequence of (str, (2,) array)
        From the phasor of the record, by what is taken off in turn, to the phasor of the site: words, and the phasor
        after it, hPa.
    facts : sequence of (str, str)
        Name and text of what is worth knowing.
    doubts : tuple of str
        Warnings.
    """

    site: str
    place: str
    deployments: tuple[DeploymentCurve, ...]
    steps: tuple[np.datetime64, ...]
    excluded: tuple[tuple[np.datetime64, np.datetime64], ...]
    missing: Times
    corrections: Mapping[str, Floats]
    models: Floats | None
    correction_time: Times
    reduced_time: Times
    reduced: Floats
    annual: Floats
    spectrum: Spectrum | None
    autocorrelation: Floats
    autocorrelation_limit: float
    years: Sequence[tuple[int, Floats, Floats]]
    phasor: Floats
    covariance: Floats
    walk: Sequence[tuple[str, Floats]]
    facts: Sequence[tuple[str, str]]
    doubts: tuple[str, ...]


def site_sheets(run: FinishedRun) -> list[SiteSheet]:
    """Prepare the figure of every site that has records.

    Parameters
    ----------
    run : FinishedRun
        Of `massfit phasors`.

    Returns
    -------
    list of SiteSheet
        In the order of the sites.
    """
    parts = deployments_by_site(run)
    phasors, year = run.datasets["site_phasors.nc"], run.summary["reference_year"]
    return [_sheet(site, parts[site["id"]], phasors, run, year) for site in run.summary["sites"] if site["id"] in parts]


def _sheet(
    site: Mapping[str, Any], deployments: Sequence[xr.Dataset], phasors: xr.Dataset, run: FinishedRun, year: int
) -> SiteSheet:
    own = phasors.sel(site=site["id"])
    used = [part.isel(obs=np.isfinite(part["reduced"].values)) for part in deployments]
    time = np.concatenate([part["time"].values for part in used])
    order = np.argsort(time, kind="stable")
    days, first = np.unique(np.concatenate([part["time"].values for part in deployments]), return_index=True)
    phasor = np.array(site["phasor_hpa"])
    judged = site["judged"]
    return SiteSheet(
        site=site["id"],
        place=_place(site),
        deployments=tuple(_curve(part) for part in deployments),
        steps=tuple(np.datetime64(step[0]) for drift in site["drift"] for step in drift["steps"]),
        excluded=tuple((np.datetime64(start), np.datetime64(end)) for start, end, _ in site["exclude"]),
        missing=_missing(deployments),
        corrections={words: values[first] for words, values in subtracted_series(deployments).items()},
        models=_model_range(deployments, first),
        correction_time=days,
        reduced_time=time[order],
        reduced=np.concatenate([part["reduced"].values for part in used])[order] / PASCAL_PER_HPA,
        annual=(annual_basis(days_since(time, year)) @ phasor)[order],
        spectrum=_spectrum(own) if judged else None,
        autocorrelation=_autocorrelation(own) if judged else np.zeros(0),
        autocorrelation_limit=1.96 / np.sqrt(len(time)),
        years=[
            (row["year"], np.array(row["phasor_hpa"]), np.array(row["covariance_hpa2"]))
            for row in (judged["years"] if judged else [])
        ],
        phasor=phasor,
        covariance=np.array(site["phasor_covariance_hpa2"]),
        walk=_walk(site),
        facts=_facts(site, run.summary["actions"]),
        doubts=tuple(site["warnings"]),
    )


def _place(site: Mapping[str, Any]) -> str:
    longitude = (site["longitude"] + 180.0) % 360.0 - 180.0
    words = [f"{abs(site['latitude']):.2f} {'N' if site['latitude'] >= 0 else 'S'}"]
    words += [f"{abs(longitude):.2f} {'E' if longitude >= 0 else 'W'}"]
    words += [] if site["depth_m"] is None else [f"{site['depth_m']:.0f} m deep"]
    return ", ".join([*words, *([site["group"]] if site["group"] else [])])


def _curve(part: xr.Dataset) -> DeploymentCurve:
    pressure = part["pressure"].values
    used = np.isfinite(part["drift"].values)
    level = float(np.median(pressure))
    # the drift has the level of the record less all that was subtracted: it is drawn through the record
    drift = part["drift"].values + (np.mean((pressure - part["drift"].values)[used]) if used.any() else 0.0)
    sd = part["drift_sd"].values if "drift_sd" in part else np.full(len(pressure), np.nan)
    return DeploymentCurve(
        label=str(part["deployment"].values),
        time=part["time"].values,
        pressure=(pressure - level) / PASCAL_PER_HPA,
        drift=(drift - level) / PASCAL_PER_HPA,
        drift_sd=sd / PASCAL_PER_HPA,
    )


def _missing(deployments: Sequence[xr.Dataset]) -> Times:
    """Days between the first and the last of a deployment on which it gave nothing to the fit."""
    found = []
    for part in deployments:
        day = part["time"].values.astype("datetime64[D]")
        there = day[np.isfinite(part["reduced"].values)]
        found.append(np.setdiff1d(np.arange(day[0], day[-1] + 1), there))
    return np.unique(np.concatenate(found)) if found else np.array([], "datetime64[D]")


def _model_range(deployments: Sequence[xr.Dataset], days: NDArray[np.intp]) -> Floats | None:
    present = deployments[0]["model_present"].values == 1
    if present.sum() < 2:
        return None
    models = np.concatenate([part["circulation"].values for part in deployments], axis=-1)[present][:, days]
    about = np.array([about_zero(model) for model in models])
    return np.array([about.min(axis=0), about.max(axis=0)])


def _spectrum(own: xr.Dataset) -> Spectrum:
    known = np.isfinite(own["frequency"].values)
    unit = PASCAL_PER_HPA**2
    expected = own["expected_density"].values[known] / unit
    scatter = 1.96 / np.sqrt(own["bin_frequencies"].values[known])
    return Spectrum(
        cycles_per_year=own["frequency"].values[known] * JULIAN_YEAR_DAYS,
        density=own["residual_density"].values[known] / unit,
        expected=expected,
        noise=own["noise_density"].values[known] / unit,
        # mean of k exponential variables, by the normal approximation of its logarithm
        low=expected * np.exp(-scatter),
        high=expected * np.exp(scatter),
    )


def _autocorrelation(own: xr.Dataset) -> Floats:
    values = own["autocorrelation"].values
    return np.asarray(values[np.isfinite(values)])


def _walk(site: Mapping[str, Any]) -> list[tuple[str, Floats]]:
    rows = {row["series"]: np.array(row["phasor_hpa"]) for row in site["corrections"] if row["summand"]}
    record = next(np.array(row["phasor_hpa"]) for row in site["corrections"] if row["series"] == "record")
    walk, here = [("record", record)], record
    for words, name in {**SERIES, "calibrations": "calibrations"}.items():
        if name in rows:
            here = here - rows[name]
            walk.append((words.removesuffix(" (model mean)"), here))
    return walk


def _facts(site: Mapping[str, Any], actions: Mapping[str, Sequence[Mapping[str, Any]]]) -> list[tuple[str, str]]:
    """Say in words what the fit found, for the block of text."""
    noise, judged = site["noise"], site["judged"]
    share = f"{100.0 * site['coverage']:.0f} %"
    forms = ", ".join(f"{form} {100.0 * weight:.0f} %" for form, weight in noise["forms"].items() if weight > 0.05)
    white = noise["white_hpa"]
    whites = sorted(mean for mean, _ in white)
    spread = f"{whites[0]:.2f}" if whites[-1] - whites[0] < 0.005 else f"{whites[0]:.2f} to {whites[-1]:.2f}"
    facts = [
        (
            "phasor",
            f"amplitude {site['amplitude_hpa']:.2f} \u00b1 {site['amplitude_sd_hpa']:.2f} hPa, peak day "
            f"{site['peak_day']:.0f} \u00b1 {site['peak_sd_days']:.0f}",
        ),
        ("days", f"{site['days']}, {share} of {site['first_day']} to {site['last_day']}"),
        ("subtracted", ", ".join(site["models"]) or "no ocean model"),
        (
            "noise",
            f"red {noise['red_hpa'][0]:.2f} hPa, memory {noise['memory_days'][0]:.0f} d ({forms}); white {spread} hPa; "
            f"reduced record {site['reduced_sd_hpa']:.2f} hPa (1 sd)",
        ),
    ]
    if judged:
        facts.append(
            (
                "judged",
                f"drift and steps widen the sigma {judged['inflation']:.2f} times; whitened mean square "
                f"{judged['whitened_mean_square']:.2f}, portmanteau p = {judged['portmanteau_p']:.2g}",
            )
        )
    facts += [(f"recorder {_number(drift)}", _drift_words(drift)) for drift in site["drift"]]
    facts += [("left out", f"{start[:10]} to {end[:10]}: {reason}") for start, end, reason in site["exclude"]]
    for drift in site["drift"]:
        done = [f"{row['what']} {row['count']}" for row in actions.get(drift["deployment"], []) if row["count"]]
        if done:
            facts.append((f"done to {_number(drift)}", "; ".join(done)))
    return facts


def _number(drift: Mapping[str, Any]) -> str:
    """Find the number of a deployment at its site."""
    return str(drift["deployment"]).rpartition("/")[2]


def _drift_words(drift: Mapping[str, Any]) -> str:
    words = [f"{drift['first_day']}, {drift['days']} d"]
    if drift["slope_hpa_per_year"]:
        words.append("slope {:.2f} \u00b1 {:.2f} hPa/yr".format(*drift["slope_hpa_per_year"]))
    if drift["exponential_hpa"]:
        words.append("exponential {:.1f} \u00b1 {:.1f} hPa".format(*drift["exponential_hpa"]))
    if drift["logarithm_hpa"]:
        words.append("logarithm {:.1f} \u00b1 {:.1f} hPa".format(*drift["logarithm_hpa"]))
    if drift["time_constant_days"]:
        words.append("T_d {:.0f} \u00b1 {:.0f} d".format(*drift["time_constant_days"]))
    if len(drift["forms"]) > 1:
        words.append("forms " + ", ".join(f"{form} {weight:.2f}" for form, weight in drift["forms"].items()))
    words += [f"step {size:+.2f} \u00b1 {sd:.2f} hPa on {time[:10]}" for time, size, sd in drift["steps"]]
    return ", ".join(words)
