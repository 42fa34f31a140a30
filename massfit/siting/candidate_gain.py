"""How much one more recorder would shrink the error of the network's answer, before anybody knows what it will read."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv

from massfit.phasor import admittance_matrix
from massfit.posterior.regression import FREEDOM
from massfit.siting.network_error import NetworkError

Floats = NDArray[np.float64]

_BLOCK = 400  # candidates at a time


@dataclass(frozen=True)
class CandidateRows:
    """What a recorder at each of c places would see, in the network model's terms.

    Parameters
    ----------
    admittance : (n_member, c) array of complex
    record : (c, 2, 2) array
        Covariance of the phasor of its record, Pa2, the models' own weather included.
    unrest : (c,) array
        Factor on the standard deviations of the dynamics that the models miss and of what they differ by.
    group : (c, n_group_column) array
        Loadings of the scatter that groups or neighbours share.
    alone : (c,) array
        Share of the variance of that scatter that nobody shares with it.
    unmodelled : (c, n_unmodelled_column) array
        Loadings of the circulation where no model was subtracted; `unmodelled_alone` is the share of its variance that
        nobody shares.
    unmodelled_alone : (c,) array
    unmodelled_sd : float
        Standard deviation of that circulation, Pa.
    year : (n_year,) array
        Loadings of the network's years; `new_year` is the variance of years beyond, in units of that of a year.
    new_year : float
    model_weight : (n_model,) array
        How the models' phasors would be averaged, as of the sites; sums to 1.
    twin : (c,) array of int
        Site at the same place, whose scatter it shares; -1 where there is none.
    """

    admittance: NDArray[np.complex128]
    record: Floats
    unrest: Floats
    group: Floats
    alone: Floats
    unmodelled: Floats
    unmodelled_alone: Floats
    unmodelled_sd: float
    year: Floats
    new_year: float
    model_weight: Floats
    twin: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.record)

    def take(self, chosen: NDArray[np.int64]) -> "CandidateRows":
        """Candidates of the indices given."""
        own = {name: getattr(self, name)[chosen] for name in _BY_CANDIDATE}
        return replace(self, admittance=self.admittance[:, chosen], **own)


_BY_CANDIDATE = ("record", "unrest", "group", "alone", "unmodelled", "unmodelled_alone", "twin")


def covariance_with(error: NetworkError, rows: CandidateRows) -> Floats:
    """Covariance of the answer to be expected with one of the candidates more.

    Parameters
    ----------
    error : NetworkError
    rows : CandidateRows

    Returns
    -------
    (c, 2, 2) array
        Pa2. What a candidate will read is taken as the mean of what the nodes predict, which settles how far they and
        the load members lie apart afterwards; what its reading would say about the scales is left out.
    """
    found = np.empty((len(rows), 2, 2))
    stretch = _stretches(error)
    kinds = np.column_stack([rows.group, rows.alone, rows.unmodelled, rows.unmodelled_alone, rows.twin])
    _, kind = np.unique(kinds, axis=0, return_inverse=True)
    order = np.argsort(kind.ravel(), kind="stable")
    for own in np.split(order, np.cumsum(np.bincount(kind.ravel()))[:-1]):
        shared = _shared_part(error, rows, int(own[0]), stretch)
        for block in np.split(own, range(_BLOCK, len(own), _BLOCK)):
            found[block] = _gained(error, rows, block, shared)
    return found


@dataclass(frozen=True)
class _Shared:
    """What candidates of one kind have in common, node by node, in units of the columns' scales.

    Parameters
    ----------
    base : (n, 2, n_column) array
        All columns but those that go with the admittance.
    turned : (2, n_column) array
        Those that do, for an admittance of one.
    offset : (n, 2) array
        Known part of the reading, Pa.
    scatter : (n, 2, 2) array
        Variance of the dynamics that no model has, Pa2, without the factor of unrest.
    local, group : (n,) array
        Pa2, by how the models differ, and the scatter of groups that nobody shares.
    unmodelled : float
        Pa2.
    """

    base: Floats
    turned: Floats
    offset: Floats
    scatter: Floats
    local: Floats
    group: Floats
    unmodelled: float


def _stretches(error: NetworkError) -> Floats:
    """Stretch of the scatter of a new place on every node: quantiles of its prior, in an order of their own."""
    count = len(error)
    if not error.model.student:
        return np.ones(count)
    shares = (np.random.default_rng(0).permutation(count) + 0.5) / count
    return np.asarray(0.5 * FREEDOM / gammaincinv(0.5 * FREEDOM, shares))


def _shared_part(error: NetworkError, rows: CandidateRows, at: int, stretch: Floats) -> _Shared:
    model, columns, count = error.model, error.model.columns, len(error)
    squares = np.exp(2.0 * error.condition.log_scales)
    two = np.eye(2)
    base, turned = np.zeros((count, 2, columns.size)), np.zeros((2, columns.size))
    root = np.linalg.cholesky(np.eye(len(rows.model_weight)) + model.truth)
    base[:, :, : columns.common.start] = model.atmosphere_sd * two
    base[:, :, columns.common] = np.kron(rows.model_weight @ root, two)
    base[:, :, columns.group] = np.kron(rows.group[at], two)
    base[:, :, columns.unmodelled] = rows.unmodelled_sd * np.kron(rows.unmodelled[at], two)
    turned[:, columns.year] = model.year_sd * np.kron(rows.year, two)
    turned[:, -2:] = model.annual_sd * two
    base *= error.unit[:, None]
    shared = _Shared(
        base,
        turned,
        np.zeros((count, 2)),
        (squares[:, 0] * stretch)[:, None, None] * two,
        squares[:, 1] * float(rows.model_weight @ rows.model_weight),
        squares[:, 3] * rows.alone[at] if model.scale_count == 4 else np.zeros(count),
        float(rows.unmodelled_sd**2 * rows.unmodelled_alone[at]),
    )
    return shared if rows.twin[at] < 0 else _beside(error, int(rows.twin[at]), shared)


def _beside(error: NetworkError, site: int, shared: _Shared) -> _Shared:
    """Take the scatter of a site's place into account: what the site reads tells of it.

    Where several sites lie at the place its scatter is a column. Otherwise it is the site's own: given the columns and
    the site's reading its mean is a part k = S / (S + B) of the residual, which takes as much of the site's
    columns off the candidate's, and S B / (S + B) of its variance is left.
    """
    model, place = error.model, int(error.model.sharing.place[site])
    if place in model.columns.shared_place:
        first = model.columns.place.start + 2 * int(np.searchsorted(model.columns.shared_place, place))
        own = shared.base.copy()
        own[:, :, first : first + 2] += np.eye(2) * error.unit[:, None, first : first + 2]
        return replace(shared, base=own, scatter=np.zeros_like(shared.scatter))
    rows = error.site_rows(site)
    across = np.swapaxes(rows.axes, 1, 2)
    part = across @ ((rows.scatter / rows.variance)[:, :, None] * rows.axes)
    left = rows.scatter * (1.0 - rows.scatter / rows.variance)
    return replace(
        shared,
        base=shared.base - part @ across @ rows.design,
        scatter=across @ (left[:, :, None] * rows.axes),
        offset=np.einsum("nij,nj->ni", part @ across, rows.value),
    )


def _gained(error: NetworkError, rows: CandidateRows, block: NDArray[np.int64], shared: _Shared) -> Floats:
    """Covariance (c, 2, 2) with each of the candidates of one kind."""
    base, turned, every = shared.base, shared.turned, error.covariance
    of_base, of_turned = every @ np.swapaxes(base, 1, 2), every @ turned.T
    between = base @ of_turned
    matrix = admittance_matrix(rows.admittance[:, block])[error.condition.member]  # (n, c, 2, 2)
    across = np.swapaxes(matrix, 2, 3)
    mixed = between[:, None] @ across
    seen = (
        (base @ of_base)[:, None] + mixed + np.swapaxes(mixed, 2, 3) + matrix @ (turned @ of_turned)[:, None] @ across
    )
    seen += _own_variance(error, rows, block, shared)
    link = error.model.annual_sd * (of_base[:, None, -2:] + of_turned[:, None, -2:] @ across)
    gain = np.swapaxes(np.linalg.solve(seen, np.swapaxes(link, 2, 3)), 2, 3)
    within = error.annual_covariance[:, None] - gain @ np.swapaxes(link, 2, 3)
    known = shared.offset + np.einsum("nip,np->ni", base, error.mean)
    predicted = known[:, None] + np.einsum("ncij,jp,np->nci", matrix, turned, error.mean, optimize=True)
    mean = error.annual_mean[:, None] + np.einsum("ncij,ncj->nci", gain, predicted.mean(axis=0) - predicted)
    return error.changed(np.swapaxes(within, 0, 1), np.swapaxes(mean, 0, 1))


def _own_variance(error: NetworkError, rows: CandidateRows, block: NDArray[np.int64], shared: _Shared) -> Floats:
    """Variance (n, c, 2, 2) of what nobody shares with the candidate, Pa2."""
    two = np.eye(2)
    unrest = rows.unrest[block, None, None] ** 2
    years = rows.new_year * error.model.year_sd**2 * np.abs(rows.admittance[:, block]) ** 2
    isotropic = shared.local[:, None] * unrest[:, 0, 0] + shared.group[:, None] + shared.unmodelled
    isotropic = isotropic + years[error.condition.member]
    return rows.record[block] + shared.scatter[:, None] * unrest + isotropic[:, :, None, None] * two
