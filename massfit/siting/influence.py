"""Which sites carry the answer: what each adds, what each weighs, and how far each could pull.

All of it follows the phasors that were read, so all of it is diagnosis: no site is kept or dropped by it.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.phasor import admittance_matrix
from massfit.posterior.node_integral import SubsetMoments
from massfit.posterior.robust_terms import Points
from massfit.posterior.subsets import PreparedNetwork, SubsetTables, moved_tables, subset_posteriors

Floats = NDArray[np.float64]
Kept = NDArray[np.bool_]

OFFSETS_PA = (50.0, 100.0, 200.0, 400.0)
"""How far a site is moved off, either way, Pa."""


@dataclass(frozen=True)
class LeftOut:
    """What the answer would be without some sites.

    Parameters
    ----------
    kept : (n, n_site) array of bool
    moments : SubsetMoments
        n answers.
    shift_sd : (n, 2) array
        Shift of the mean, in standard deviations of the answer of all sites.
    sd_ratio : (n, 2) array
        Standard deviations, as parts of those of all sites.
    """

    kept: Kept
    moments: SubsetMoments
    shift_sd: Floats
    sd_ratio: Floats


def leave_out(tables: SubsetTables, kept: Kept, whole: SubsetMoments) -> LeftOut:
    """Answer the network without some of its sites, the scales integrated anew.

    Parameters
    ----------
    tables : SubsetTables
    kept : (n, n_site) array of bool
    whole : SubsetMoments
        One answer, of all sites.

    Returns
    -------
    LeftOut
    """
    moments = subset_posteriors(tables, kept)
    return LeftOut(kept, moments, (moments.mean - whole.mean) / whole.sd, moments.sd / whole.sd)


def site_weights(network: PreparedNetwork, log_scales: Floats) -> tuple[Floats, Floats]:
    """Information and leverage of every site, at fixed scales.

    Parameters
    ----------
    network : PreparedNetwork
    log_scales : (n_scale,) array
        Posterior means of the logarithms of the scales.

    Returns
    -------
    information : (n_site, 2) array
        Part of the precision of each component of A that is lost without the site. The parts do not add up to
        1: what the sites share, the models' errors above all, limits each of them.
    leverage : (n_site, 2) array
        How far the answer follows the site: derivative of each component of A by that of F_s A in the site's phasor.
        Adds up to 1 over the sites, less the pull of the prior.
    """
    count = len(network.table.model.sharing.place)
    scales = np.tile(log_scales, (count + 1, 1))
    everything = Points(network.table, network.factors, np.ones((1, count)), scales[:1])
    precision, shift = everything.normal_factors() if network.plain else everything.fitted_factors()[:2]
    kept = np.vstack([np.ones(count), 1.0 - np.eye(count)])
    fewer = Points(network.table, network.factors, kept, scales)
    variance = np.diagonal(fewer.answers(*fewer.only_kept(precision, shift), normal=True).covariance, axis1=1, axis2=2)
    return 1.0 - variance[0] / variance[1:], everything.leverage(precision)[0, :count]


@dataclass(frozen=True)
class Pull:
    """How far each site could pull the answer.

    Parameters
    ----------
    offset : (n_offset,) array
        Pa, along the site's own response to the answer; 0 included.
    shift_sd : (n_site, n_offset) array
        Shift of the mean of A along the answer's own direction, in its standard deviations.
    needed : (n_site,) array
        Smallest offset, Pa, that moves the answer by one standard deviation; NaN where none does that was tried.
    """

    offset: Floats
    shift_sd: Floats
    needed: Floats


def site_pull(
    tables: SubsetTables,
    whole: SubsetMoments,
    *,
    offsets: tuple[float, ...] = OFFSETS_PA,
    progress: Callable[[int, int], None] | None = None,
) -> Pull:
    """Move every site off in turn, more or less than it reads, and answer the network anew.

    Parameters
    ----------
    tables : SubsetTables
    whole : SubsetMoments
        One answer, of all sites.
    offsets : tuple of float
        Pa, ascending.
    progress : callable, optional
        Called with the number of sites done and of all.

    Returns
    -------
    Pull
    """
    count = tables.site_count
    steps = np.array([*(-value for value in reversed(offsets)), *offsets])
    mean = whole.mean[0]
    response = admittance_matrix(tables.admittance.mean(axis=0)) @ mean
    direction = response / np.linalg.norm(response, axis=1, keepdims=True)
    along = mean / np.linalg.norm(mean)
    sd = np.sqrt(along @ whole.covariance[0] @ along)
    shifts = np.empty((count, len(steps)))
    for s in range(count):
        moved = moved_tables(tables, np.full(len(steps), s), steps[:, None] * direction[s])
        kept = np.tile(np.arange(count + len(steps)) < count, (len(steps), 1))
        kept[:, s] = False
        kept[np.arange(len(steps)), count + np.arange(len(steps))] = True
        shifts[s] = (subset_posteriors(moved, kept).mean - mean) @ along / sd
        if progress is not None:
            progress(s + 1, count)
    offset = np.insert(steps, len(offsets), 0.0)
    shifts = np.insert(shifts, len(offsets), 0.0, axis=1)
    return Pull(offset, shifts, np.array([_first_crossing(offset, row) for row in shifts]))


def _first_crossing(offset: Floats, shift: Floats) -> float:
    """Offset nearest to zero at which the shift reaches one either way, along straight lines; NaN where none does."""
    crossings = [
        offset[i] + (level - shift[i]) / (shift[i + 1] - shift[i]) * (offset[i + 1] - offset[i])
        for i in range(len(offset) - 1)
        for level in (-1.0, 1.0)
        if (shift[i] - level) * (shift[i + 1] - level) <= 0 and shift[i] != shift[i + 1]
    ]
    return float(min(crossings, key=abs)) if crossings else float("nan")
