"""What the answer, each site alone and each ocean model say of the annual phasor, in one plane."""

from collections.abc import Sequence

import numpy as np
from contourpy import contour_generator
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.phasor import admittance_matrix, as_complex
from massfit.posterior.regions import density_regions
from massfit.results.finished import FinishedRun
from massfit.results.posterior_groups import POSTERIOR

Floats = NDArray[np.float64]

SMOOTHING_SD = 0.4
"""Kernel of the regions that are drawn, in standard deviations: their edges are the draws' and not their noise."""

Contour = tuple[float, Sequence[Floats]]


def answer_draws(run: FinishedRun) -> Floats:
    """Draws of the network phasor, (n, 2) hPa."""
    return np.asarray(run.datasets[POSTERIOR]["annual_phasor"].values.reshape(-1, 2) / PASCAL_PER_HPA)


def answer_contours(run: FinishedRun) -> list[Contour]:
    """Edges of the highest-density regions of the answer: probability and lines (k, 2) in hPa, the largest first."""
    regions = density_regions(answer_draws(run), bandwidth=SMOOTHING_SD)
    generator = contour_generator(regions.in_phase, regions.quadrature, regions.density)
    lines = {level: [np.asarray(line) for line in generator.lines(value)] for level, value in regions.levels.items()}
    return sorted(lines.items(), reverse=True)


def site_admittances(run: FinishedRun) -> NDArray[np.complex128]:
    """Admittance of every site, mean over the load members, (n_site,)."""
    return np.asarray(as_complex(np.array([site["admittance"] for site in run.summary["sites"]])))


def site_readings(run: FinishedRun) -> tuple[Floats, Floats]:
    """Divide the phasor of each site, less the known response, by its fingerprint: what it alone says of the answer.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    phasors : (n_site, 2) array
        hPa.
    covariances : (n_site, 2, 2) array
        Of the records, hPa2.
    """
    sites = run.summary["sites"]
    inverse = np.linalg.inv(admittance_matrix(site_admittances(run)))
    phasors = np.array([site["phasor_hpa"] for site in sites]) - _known_response(run)
    covariances = np.array([site["phasor_covariance_hpa2"] for site in sites])
    return np.einsum("sij,sj->si", inverse, phasors), np.einsum("sij,sjk,slk->sil", inverse, covariances, inverse)


def model_readings(run: FinishedRun) -> dict[str, Floats]:
    """Say where the answer would move with each ocean model alone.

    Parameters
    ----------
    run : FinishedRun

    Returns
    -------
    dict of str to (2,) array
        Mean of the answer and the model's mean difference from the others at the sites that have both, each site
        over its fingerprint and with equal weight, hPa. Empty for fewer than two models.
    """
    phasors = run.datasets["site_phasors.nc"]
    phasors = phasors.sel(site=[site["id"] for site in run.summary["sites"]])
    each = np.einsum("sk,skmc->smc", phasors["weight"].values, phasors["phasor"].values) / PASCAL_PER_HPA
    inverse = np.linalg.inv(admittance_matrix(site_admittances(run)))
    several = np.isfinite(each[..., 0]).sum(axis=1) > 1
    if "mean_only" in phasors:
        several &= phasors["mean_only"].values != 1
    if not several.any():
        return {}
    away = np.einsum("sij,smj->smi", inverse, each - np.nanmean(each, axis=1, keepdims=True))[several]
    centre = answer_draws(run).mean(axis=0)
    there = np.isfinite(away[..., 0]).any(axis=0)
    return {
        str(name): centre + np.nanmean(away[:, m], axis=0) for m, name in enumerate(phasors["model"].values) if there[m]
    }


def _known_response(run: FinishedRun) -> Floats:
    """G_s of every site, (n_site, 2) hPa; zero where air pressure on land was not given."""
    ids, fingerprints = [site["id"] for site in run.summary["sites"]], run.datasets["fingerprints.nc"]
    if "air_load_response" not in fingerprints:
        return np.zeros((len(ids), 2))
    return np.asarray(fingerprints["air_load_response"].sel(site=ids).values / PASCAL_PER_HPA)
