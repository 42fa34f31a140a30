"""What sites share besides the answer: places, scatter of groups or distances, years, unmodelled circulation."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.annual.dataset import NO_MODEL
from massfit.errors import Fault, InputError
from massfit.posterior.observations import Observations

EARTH_RADIUS_KM = 6371.0

SAME_PLACE_KM = 10.0
"""Sites nearer to each other than this lie at one place: the dynamics over them are the same at the annual line."""

UNMODELLED_KM = 3000.0
"""Distance over which the annual cycle of the circulation falls to 1/e of its correlation: the size of a basin's
gyre (common practice)."""

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Sharing:
    """Columns of unit variance that several sites have in common; each acts on both components.

    Parameters
    ----------
    place : (n_site,) array of int
        Place of each site, counted from 0 in the order of the sites; the scatter of a place is one.
    group : (n_site, n_group_column) array
        Loadings of the scatter that groups or neighbours share.
    alone : (n_site,) array of bool
        Sites whose group scatter nobody shares: it stays with the site.
    year : (n_site, n_year) array
        Loadings of the years: share in the site less share in the period.
    period_share : (n_year,) array
    unmodelled : (n_site, n_unmodelled_column) array
        Loadings of the circulation's annual cycle where no model was subtracted.
    """

    place: NDArray[np.int64]
    group: Floats
    alone: NDArray[np.bool_]
    year: Floats
    period_share: Floats
    unmodelled: Floats

    @property
    def has_group(self) -> bool:
        """Whether any scatter is shared, so that its size is a scale of the model."""
        return bool(self.group.shape[1] > 0)


def find_sharing(observations: Observations, group_scatter: bool | float) -> Sharing:
    """Find what the sites of a network share.

    Parameters
    ----------
    observations : Observations
    group_scatter : bool or float
        Whether the sites of a group share scatter; or the distance, km, over which the correlation of that
        scatter falls to 1/e.

    Returns
    -------
    Sharing

    Raises
    ------
    InputError
        A distance is given and the sites have no positions.
    """
    if observations.position is None and not isinstance(group_scatter, bool):
        problem = f"a correlation length of {group_scatter:g} km is asked for, and the sites have no positions"
        raise InputError(Fault("site phasors", "latitude", problem, "Must be there", "Add latitude and longitude"))
    place = places_of(observations)
    group, alone = _group_scatter(observations, place, group_scatter)
    return Sharing(place, group, alone, *_year_loadings(observations), _unmodelled(observations))


def distances_km(position: Floats, others: Floats | None = None) -> Floats:
    """Great-circle distances (n, m), km, between positions (n, 2) and others (m, 2), in radians; themselves by default.

    Examples
    --------
    >>> quarter = distances_km(np.radians([[0.0, 0.0], [90.0, 40.0]]))[0, 1]
    >>> round(float(quarter / (6371.0 * np.pi / 2)), 6)
    1.0
    """
    (latitude, longitude), (latitude2, longitude2) = position.T, (position if others is None else others).T
    east, north = longitude[:, None] - longitude2, latitude[:, None] - latitude2
    # the haversine form keeps its digits for sites that lie close together
    square = np.sin(north / 2) ** 2 + np.cos(latitude[:, None]) * np.cos(latitude2) * np.sin(east / 2) ** 2
    return np.asarray(2.0 * EARTH_RADIUS_KM * np.arcsin(np.sqrt(np.clip(square, 0.0, 1.0))))


def places_of(observations: Observations) -> NDArray[np.int64]:
    """Place of each site, counted from 0 in the order of the sites.

    Parameters
    ----------
    observations : Observations

    Returns
    -------
    (n_site,) array of int
        Sites nearer to each other than `SAME_PLACE_KM`, and chains of such, are one place.
    """
    if observations.position is None:
        return np.arange(len(observations.sites))
    near = distances_km(observations.position) < SAME_PLACE_KM
    label = np.arange(len(near))
    for _ in label:  # a chain of neighbours is one place; the smallest index spreads along it
        label = np.where(near, label, len(near)).min(axis=1)
    return np.unique(label, return_inverse=True)[1].astype(np.int64)


def _group_scatter(
    observations: Observations, place: NDArray[np.int64], group_scatter: bool | float
) -> tuple[Floats, NDArray[np.bool_]]:
    """Find loadings and the sites whose group is theirs alone; nothing where no two places share any."""
    nothing = np.zeros((len(place), 0)), np.zeros(len(place), dtype=bool)
    if isinstance(group_scatter, bool):
        labels = np.array(observations.group) if group_scatter and observations.group else np.full(len(place), "")
        counts = {name: len(np.unique(place[labels == name])) for name in dict.fromkeys(labels) if name}
        shared = [name for name, count in counts.items() if count > 1]
        if not shared:
            return nothing
        return np.column_stack([(labels == name).astype(float) for name in shared]), ~np.isin(labels, shared)
    if place.max() == 0 or observations.position is None:
        return nothing
    _, first = np.unique(place, return_index=True)
    return _correlated(observations.position[first], group_scatter)[place], nothing[1]


def _correlated(position: Floats, length_km: float) -> Floats:
    """Root (n, n) of the correlation exp(-distance/length), valid on the sphere (Gneiting 2013, Bernoulli 19, 1327)."""
    correlation = np.exp(-distances_km(position) / length_km)
    return np.asarray(np.linalg.cholesky(correlation + 1e-9 * np.eye(len(position))), dtype=float)


def _year_loadings(observations: Observations) -> tuple[Floats, Floats]:
    if len(observations.years) < 2:
        return np.zeros((len(observations.sites), 0)), np.zeros(0)
    return observations.year_share - observations.period_share, observations.period_share


def _unmodelled(observations: Observations) -> Floats:
    count = len(observations.sites)
    if NO_MODEL not in observations.models:
        return np.zeros((count, 0))
    bare = observations.present[:, observations.models.index(NO_MODEL)]
    if observations.position is None:
        return bare[:, None].astype(float)  # nothing is known of how far apart they are: they share it all
    loadings = np.zeros((count, int(bare.sum())))
    loadings[bare] = _correlated(observations.position[bare], UNMODELLED_KM)
    return loadings
