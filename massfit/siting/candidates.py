"""Where one more recorder would help most: what the network model knows of a place before anything is laid there."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.constants import ANNUAL_RATE, PASCAL_PER_HPA
from massfit.posterior.network_model import Choices
from massfit.posterior.observations import Observations
from massfit.posterior.sharing import SAME_PLACE_KM, UNMODELLED_KM, Sharing, distances_km, find_sharing
from massfit.siting.candidate_gain import CandidateRows

Floats = NDArray[np.float64]


def candidate_rows(
    observations: Observations,
    choices: Choices,
    position: Floats,
    admittance: NDArray[np.complex128],
    *,
    record: Floats,
    unrest: Floats | float = 1.0,
    years: float = 2.0,
    group: Sequence[str] | None = None,
) -> CandidateRows:
    """Describe places in the network model's terms.

    Parameters
    ----------
    observations : Observations
        Of the network, with positions.
    choices : Choices
    position : (c, 2) array
        Latitude and longitude, radians.
    admittance : (n_member, c) array of complex
    record : (c, 2, 2) or (2, 2) array
        Covariance of the phasor of the record, Pa2.
    unrest : (c,) array or float
        Factor on the standard deviations of the dynamics that the models miss and of what they differ by.
    years : float
        Length of the record; it is made after the period that the answer is the mean of.
    group : sequence of str, optional
        Label of each place; by default :func:`group_of_places`.

    Returns
    -------
    CandidateRows
    """
    count = len(position)
    near, distance = nearest_site(observations, position)
    twin = np.where(distance < SAME_PLACE_KM, near, -1)
    labels = group_of_places(observations, position) if group is None else list(group)
    scatter = choices.settings.group_scatter
    sharing = find_sharing(observations, scatter)
    loadings, alone = _group_loadings(observations, sharing, scatter, position, labels)
    models = np.array([name != NO_MODEL for name in observations.models])
    modelled = bool(models.any())
    unmodelled, unmodelled_alone = _unmodelled(observations, sharing, position, modelled=modelled)
    told = len(observations.years) > 1
    return CandidateRows(
        admittance=admittance,
        record=np.broadcast_to(record, (count, 2, 2)),
        # at the place of a site the dynamics are those of the site
        unrest=np.where(twin >= 0, 1.0, np.broadcast_to(unrest, count)),
        group=loadings,
        alone=alone,
        unmodelled=unmodelled,
        unmodelled_alone=unmodelled_alone,
        unmodelled_sd=choices.priors.unmodelled_annual_hpa * PASCAL_PER_HPA,
        year=-observations.period_share if told else np.zeros(0),
        new_year=years_apart(years) if told else 0.0,
        model_weight=models / models.sum() if modelled else np.ones(len(models)),
        twin=twin,
    )


def years_apart(years: float) -> float:
    """Sum of the squared shares of the years of a record that begins with one: 1 / years for whole ones.

    Examples
    --------
    >>> years_apart(2.0), round(years_apart(1.5), 4)
    (0.5, 0.5556)
    """
    whole = np.floor(years)
    return float((whole + (years - whole) ** 2) / years**2)


def nearest_site(observations: Observations, position: Floats) -> tuple[NDArray[np.int64], Floats]:
    """Index of the nearest site of the network to each place, and the distance, km."""
    away = distances_km(position, _known_positions(observations))
    return away.argmin(axis=1), away.min(axis=1)


def group_of_places(observations: Observations, position: Floats) -> list[str]:
    """Label of the nearest site where it is as near as the sites of its group are to each other; empty elsewhere.

    Parameters
    ----------
    observations : Observations
    position : (c, 2) array
        Radians.

    Returns
    -------
    list of str
    """
    if not observations.group:
        return [""] * len(position)
    labels, away = np.array(observations.group), distances_km(_known_positions(observations))
    np.fill_diagonal(away, np.inf)
    reach = np.zeros(len(labels))
    for label in dict.fromkeys(labels):
        own = np.flatnonzero(labels == label)
        if label and len(own) > 1:
            # the farthest that a member of the group is from its nearest fellow
            reach[own] = away[np.ix_(own, own)].min(axis=1).max()
    near, distance = nearest_site(observations, position)
    inside = distance <= np.maximum(reach, SAME_PLACE_KM)[near]
    return [str(labels[s]) if ok else "" for s, ok in zip(near, inside, strict=True)]


def _known_positions(observations: Observations) -> Floats:
    if observations.position is None:
        raise ValueError("the sites have no positions")
    return observations.position


def _group_loadings(
    observations: Observations, sharing: Sharing, group_scatter: bool | float, position: Floats, labels: Sequence[str]
) -> tuple[Floats, Floats]:
    """Give loadings (c, n_group_column) as the columns of the sites stand, and what of the variance nobody shares."""
    if not sharing.has_group:
        return np.zeros((len(position), 0)), np.zeros(len(position))
    if isinstance(group_scatter, bool):
        shared = [observations.group[int(column.argmax())] for column in sharing.group.T]
        loadings = (np.array(labels)[:, None] == np.array(shared)).astype(float)
        return loadings, 1.0 - loadings.sum(axis=1)
    _, first = np.unique(sharing.place, return_index=True)
    return _correlated(_known_positions(observations)[first], sharing.group[first], position, group_scatter)


def _unmodelled(
    observations: Observations, sharing: Sharing, position: Floats, *, modelled: bool
) -> tuple[Floats, Floats]:
    """Give the same of the circulation where no model was subtracted."""
    nothing = np.zeros((len(position), sharing.unmodelled.shape[1]))
    if modelled or not nothing.shape[1]:
        return nothing, np.full(len(position), float(not modelled))
    bare = sharing.unmodelled.any(axis=1)
    return _correlated(_known_positions(observations)[bare], sharing.unmodelled[bare], position, UNMODELLED_KM)


def _correlated(sites: Floats, root: Floats, position: Floats, length_km: float) -> tuple[Floats, Floats]:
    """Give loadings (c, s) on columns whose loadings at the sites are a root of exp(-distance/length), and the rest."""
    correlation = np.exp(-distances_km(position, sites) / length_km)
    loadings = np.asarray(np.linalg.solve(root, correlation.T).T)
    return loadings, np.maximum(1.0 - (loadings**2).sum(axis=1), 0.0)


def spread_apart(score: Floats, position: Floats, *, count: int, apart_km: float) -> list[int]:
    """Find the best places, each at least so far from all better ones.

    Parameters
    ----------
    score : (c,) array
        Lower is better; NaN is no place.
    position : (c, 2) array
        Radians.
    count : int
    apart_km : float

    Returns
    -------
    list of int
        Best first.

    Examples
    --------
    >>> position = np.radians([[0.0, 0.0], [0.0, 1.0], [0.0, 90.0]])
    >>> spread_apart(np.array([0.7, 0.6, 0.9]), position, count=2, apart_km=1000.0)
    [1, 2]
    """
    left = np.where(np.isfinite(score), score, np.inf)
    chosen: list[int] = []
    while len(chosen) < count and np.isfinite(left).any():
        best = int(left.argmin())
        chosen.append(best)
        left = np.where(distances_km(position, position[[best]])[:, 0] < apart_km, np.inf, left)
    return chosen


@dataclass(frozen=True)
class Widths:
    """Errors of an answer, of any shape.

    Parameters
    ----------
    component_sd : array
        Root mean square of the standard deviations of the two components, Pa.
    amplitude_sd : array
        Pa.
    day_sd : array
        Days.
    """

    component_sd: Floats
    amplitude_sd: Floats
    day_sd: Floats


def widths(phasor: Floats, covariance: Floats) -> Widths:
    """Errors of components, amplitude and day, to first order about a phasor.

    Parameters
    ----------
    phasor : (2,) array
        Pa.
    covariance : (..., 2, 2) array
        Pa2.

    Returns
    -------
    Widths
    """
    size = float(np.hypot(*phasor))
    along = np.asarray(phasor) / size
    across = np.array([-along[1], along[0]])
    radial, turned = (np.einsum("i,...ij,j->...", axis, covariance, axis) for axis in (along, across))
    trace = np.trace(covariance, axis1=-2, axis2=-1)
    return Widths(np.sqrt(0.5 * trace), np.sqrt(radial), np.sqrt(turned) / size / ANNUAL_RATE)


def reduction(before: Floats, after: Floats) -> tuple[Floats, Floats]:
    """Give the ratios of errors after and before by trace (A-criterion) and by determinant (D-criterion).

    Parameters
    ----------
    before : (2, 2) array
    after : (..., 2, 2) array

    Returns
    -------
    by_trace, by_determinant : array
        Root of the ratio of traces; fourth root of that of determinants, so that both are ratios of lengths.
    """
    by_trace = np.sqrt(np.trace(after, axis1=-2, axis2=-1) / np.trace(before))
    return by_trace, (np.linalg.det(after) / np.linalg.det(before)) ** 0.25
