"""Moves of emcee over the scales: one that learns while it goes, one that has learnt; and the axes they move along.

The last coordinate is the number of the walker and stays. Ensembles that run side by side know nothing of each other.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import emcee
import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

_FREEDOM = 5.0  # of the Student proposal: heavier tails than the target's
_STEPPING = 0.1  # share of the proposals that step from where the walker is


def ensemble_of(coordinates: Floats, ensembles: int) -> NDArray[np.int64]:
    """Ensemble (n,) of each walker: pairs of walkers, one of each half, take turns."""
    return np.asarray(coordinates[:, -1].astype(np.int64) // 2 % ensembles)


class ComplementMove(emcee.moves.RedBlueMove):  # type: ignore[misc]
    """Propose from a Student distribution fitted to the other half of the ensemble; one walker in ten by a difference.

    The proposal does not depend on the walkers it moves, so the acceptance ratio of
    Hastings (1970, Biometrika 57, 97-109) holds with the two proposal densities; the
    difference of two of the others (ter Braak 2006, Statistics and Computing 16, 239-249) is symmetric.

    Parameters
    ----------
    ensembles : int
        Ensembles that run side by side.
    """

    def __init__(self, ensembles: int) -> None:
        super().__init__(randomize_split=False)
        self._ensembles = ensembles

    def get_proposal(
        self, sample: Floats, complement: list[Floats], random: np.random.RandomState
    ) -> tuple[Floats, Floats]:
        """Proposals for one half of the walkers, with the log ratio of their densities."""
        moved, ratio = sample.copy(), np.empty(len(sample))
        others = complement[0]
        for ensemble in range(self._ensembles):
            own = ensemble_of(sample, self._ensembles) == ensemble
            rest = others[ensemble_of(others, self._ensembles) == ensemble, :-1]
            student = StudentProposal.fit(rest[None])
            here = sample[own, :-1]
            moved[own, :-1], ratio[own] = student.draw(here, np.zeros(len(here), dtype=np.int64), random)
            by_difference = own.nonzero()[0][random.random_sample(len(here)) < _STEPPING]
            first, second = random.randint(len(rest), size=(2, len(by_difference)))
            step = 2.38 / np.sqrt(2.0 * rest.shape[1]) * (rest[first] - rest[second])
            moved[by_difference, :-1] = sample[by_difference, :-1] + step
            ratio[by_difference] = 0.0
        return moved, ratio


class LearntMove(emcee.moves.MHMove):  # type: ignore[misc]
    """Propose from a Student distribution that is learnt and fixed; one walker in ten by a random step of its shape.

    Nothing is learnt any more, so that this is a plain Markov chain (Hastings 1970).

    Parameters
    ----------
    history : (n_ensemble, n, n_coordinate) array
        What each ensemble visited, without the numbers of the walkers.
    """

    def __init__(self, history: Floats) -> None:
        self._student = StudentProposal.fit(history)
        super().__init__(self._propose)

    def _propose(self, coordinates: Floats, random: np.random.RandomState) -> tuple[Floats, Floats]:
        here = coordinates[:, :-1]
        ensemble = ensemble_of(coordinates, len(self._student.centre))
        proposal, ratio = self._student.draw(here, ensemble, random)
        stepping = np.asarray(random.random_sample(len(here))) < _STEPPING
        size = here.shape[1]
        step = 2.38 / np.sqrt(size) * self._student.shaped(random.standard_normal(here.shape), ensemble)
        proposal = np.where(stepping[:, None], here + step, proposal)
        return np.column_stack([proposal, coordinates[:, -1]]), np.where(stepping, 0.0, ratio)


@dataclass(frozen=True)
class StudentProposal:
    """One Student distribution an ensemble.

    Parameters
    ----------
    centre : (n_ensemble, n_coordinate) array
    root : (n_ensemble, n_coordinate, n_coordinate) array
        Cholesky factors of the scale matrices.
    inverse : (n_ensemble, n_coordinate, n_coordinate) array
        Of the roots.
    """

    centre: Floats
    root: Floats
    inverse: Floats

    @classmethod
    def fit(cls, points: Floats) -> "StudentProposal":
        """Mean and covariance of points (n_ensemble, n, n_coordinate)."""
        centre = points.mean(axis=1)
        shift = points - centre[:, None]
        covariance = np.swapaxes(shift, 1, 2) @ shift / points.shape[1]
        root = np.linalg.cholesky(covariance + 1e-12 * np.eye(points.shape[2]))
        return cls(centre, root, np.linalg.inv(root))

    def shaped(self, noise: Floats, ensemble: NDArray[np.int64]) -> Floats:
        """Give standard normal noise (n, n_coordinate) the shape of each point's ensemble."""
        return np.asarray((self.root[ensemble] @ noise[:, :, None])[:, :, 0])

    def draw(self, here: Floats, ensemble: NDArray[np.int64], random: np.random.RandomState) -> tuple[Floats, Floats]:
        """Draw points like `here` (n, n_coordinate); the log density there less that of the draws."""
        count, size = here.shape
        stretch = np.sqrt(_FREEDOM / random.chisquare(_FREEDOM, size=(count, 1)))
        noise = stretch * random.standard_normal((count, size))
        turned = (self.inverse[ensemble] @ (here - self.centre[ensemble])[:, :, None])[:, :, 0]
        squares = np.stack([(turned**2).sum(axis=1), (noise**2).sum(axis=1)])
        density = -0.5 * (_FREEDOM + size) * np.log1p(squares / _FREEDOM)
        return self.centre[ensemble] + self.shaped(noise, ensemble), density[0] - density[1]


@dataclass(frozen=True)
class ScaleAxes:
    """Coordinates in which the scales are explored.

    The density of a scale whose size is not seen is flat towards zero. In its logarithm that is a long tail on one
    side, in the scale itself an edge; the density of its root is close to a normal one in either case.

    Parameters
    ----------
    has_contrasts : bool
        Whether some site carries more than one model. With contrasts the coordinates are the roots of the scales.
        Without, the data see hardly more than s_site^2 + s_local^2, and the first two coordinates
        are the fourth root of that sum and the logarithm of s_local^2 / s_site^2.
    """

    has_contrasts: bool

    def log_scales(self, coordinates: Floats) -> Floats:
        """From coordinates (..., n_scale) to log scales; -inf beyond the edge."""
        logs = self._logs(coordinates)
        if self.has_contrasts:
            return logs
        total, ratio = logs[..., 0], logs[..., 1]
        site = total - 0.5 * np.logaddexp(0.0, ratio)
        return np.concatenate([np.stack([site, site + 0.5 * ratio], axis=-1), logs[..., 2:]], axis=-1)

    def coordinates(self, log_scales: Floats) -> Floats:
        """From log scales (..., n_scale) to coordinates."""
        logs = self._sums(log_scales)
        return np.where(self._rooted(logs.shape[-1]), np.exp(0.5 * logs), logs)

    def log_jacobian(self, log_scales: Floats) -> Floats:
        """Log density per unit of the coordinates less that per unit of the log scales, up to a constant."""
        logs = self._sums(log_scales)
        return np.asarray(-0.5 * logs @ self._rooted(logs.shape[-1]).astype(float))

    def _rooted(self, size: int) -> NDArray[np.bool_]:
        return np.array([self.has_contrasts or k != 1 for k in range(size)])

    def _logs(self, coordinates: Floats) -> Floats:
        rooted = self._rooted(coordinates.shape[-1])
        inside = np.where(rooted & (coordinates > 0.0), coordinates, 1.0)
        logs = np.where(rooted, 2.0 * np.log(inside), coordinates)
        return np.where(rooted & (coordinates <= 0.0), -np.inf, logs)

    def _sums(self, log_scales: Floats) -> Floats:
        if self.has_contrasts:
            return np.asarray(log_scales, dtype=float)
        site, local = log_scales[..., 0], log_scales[..., 1]
        total = 0.5 * np.logaddexp(2.0 * site, 2.0 * local)
        return np.concatenate([np.stack([total, 2.0 * (local - site)], axis=-1), log_scales[..., 2:]], axis=-1)


def side_by_side(coordinates: Sequence[Floats], ensembles: int) -> Floats:
    """Sort what walkers visited, a list over the steps of (n, n_coordinate + 1), by ensemble: (n_ensemble, ...)."""
    own = ensemble_of(coordinates[0], ensembles)
    return np.stack([np.concatenate([each[own == k, :-1] for each in coordinates]) for k in range(ensembles)])
