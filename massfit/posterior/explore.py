"""The first route: emcee explores the scales of all load members at once.

Everything linear is integrated out exactly. Where the site scatter is Student's, every walker carries the stretches
of the places, which are drawn exactly (Gibbs) after every step of emcee, and where a site enters by its mixture, the
part in use: given these, a step moves the scales alone. Half of the walkers are proposed from the other half as in
Goodman & Weare (2010, Communications in Applied Mathematics and Computational Science 5, 65-80), whatever each walker
carries.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import emcee
import numpy as np
from numpy.typing import NDArray

from massfit.posterior.latents import draw_latents, draw_shared_scales, draw_site_scale
from massfit.posterior.likelihood import Collapsed, collapse, log_latent_prior, log_scale_prior
from massfit.posterior.regression import Condition, LinearModel

Floats = NDArray[np.float64]

ENSEMBLES = 4
"""Independent ensembles of walkers; these are the chains of every diagnostic."""

WALKERS = 40
"""Least number of walkers of an ensemble, over all load members."""

MEMBER_WALKERS = 8
"""Least number of walkers of a load member in an ensemble."""

STEPS, MAX_STEPS = 500, 4000
"""Steps kept of each ensemble, a third as many before them being thrown away; and the cap of a run that is extended."""

KEPT_DRAWS = 1000
"""About as many draws of the phasor are kept of each member and ensemble, equally spaced."""

_FREEDOM = 5.0  # of the Student proposal: heavier tails than the target's


class ComplementMove(emcee.moves.RedBlueMove):  # type: ignore[misc]
    """Propose from a Student distribution fitted to the other half of the ensemble; one walker in ten by a difference.

    The proposal does not depend on the walkers it moves, so the acceptance ratio of
    Hastings (1970, Biometrika 57, 97-109) holds with the two proposal densities; the
    difference of two of the others (ter Braak 2006, Statistics and Computing 16, 239-249) is symmetric. The last
    coordinate is the number of the walker and stays; ensembles that run side by side take turns along it, and know
    nothing of each other.

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
            own = np.asarray(_ensemble_of(sample, self._ensembles) == ensemble)
            rest = np.asarray(_ensemble_of(others, self._ensembles) == ensemble)
            moved[own, :-1], ratio[own] = _propose(sample[own, :-1], others[rest, :-1], random)
        return moved, ratio


def _ensemble_of(coordinates: Floats, ensembles: int) -> NDArray[np.int64]:
    """Ensemble of each walker: pairs of one walker of each half take turns."""
    return np.asarray(coordinates[:, -1].astype(np.int64) // 2 % ensembles)


def _propose(here: Floats, others: Floats, random: np.random.RandomState) -> tuple[Floats, Floats]:
    count, size = here.shape
    centre = others.mean(axis=0)
    shift = others - centre
    root = np.linalg.cholesky(shift.T @ shift / len(others) + 1e-12 * np.eye(size))
    stretch = np.sqrt(_FREEDOM / random.chisquare(_FREEDOM, size=(count, 1)))
    proposal = centre + (stretch * random.standard_normal((count, size))) @ root.T
    both = np.linalg.solve(root, (np.concatenate([here, proposal]) - centre).T)
    density = -0.5 * (_FREEDOM + size) * np.log1p((both**2).sum(axis=0) / _FREEDOM)
    by_difference = np.asarray(random.random_sample(count)) < 0.1
    first, second = random.randint(len(others), size=(2, count))
    step = 2.38 / np.sqrt(2.0 * size) * (others[first] - others[second])
    moved = np.where(by_difference[:, None], here + step, proposal)
    return moved, np.where(by_difference, 0.0, density[:count] - density[count:])


class EnsembleTask(NamedTuple):
    """Ensembles that run side by side over all load members; the task travels to a worker process whole.

    Parameters
    ----------
    model : LinearModel
    prior_scales : (n_scale,) array
        Pa.
    ensembles : int
    steps : int
        Steps kept.
    rng : numpy.random.Generator
    """

    model: LinearModel
    prior_scales: Floats
    ensembles: int
    steps: int
    rng: np.random.Generator


class EnsembleChains(NamedTuple):
    """What ensembles visited, by load member; K is the number of steps at which phasors were drawn.

    Parameters
    ----------
    log_scales : (n_ensemble, n_member, n_step, n_walker, n_scale) array
    node_mean : (n_ensemble, n_member, n_step, n_walker, 2) array
        Conditional mean of the phasor, Pa.
    node_covariance : (n_ensemble, n_member, n_step, n_walker, 2, 2) array
        Pa2.
    kept : (K,) array of int
        Steps at which the rest was drawn.
    log_posterior : (n_ensemble, n_member, K, n_walker) array
    annual : (n_ensemble, n_member, K, n_walker, 2) array
        Drawn phasor, Pa.
    years : (n_ensemble, n_member, K, n_walker, n_year, 2) array
        Drawn cycle of every year less that of the period, Pa.
    """

    log_scales: Floats
    node_mean: Floats
    node_covariance: Floats
    kept: NDArray[np.int64]
    log_posterior: Floats
    annual: Floats
    years: Floats


def run_ensembles(task: EnsembleTask) -> EnsembleChains:
    """Run ensembles.

    Parameters
    ----------
    task : EnsembleTask

    Returns
    -------
    EnsembleChains
    """
    model, steps = task.model, task.steps
    walkers = walkers_of_member(model.member_count)
    kept = np.unique(np.linspace(0, steps - 1, min(steps, KEPT_DRAWS // walkers + 1)).round().astype(int))
    warm_up = steps // 3
    walk = _Walk(task, walkers)
    chain, draws = [], []
    for step, _ in enumerate(walk.steps(warm_up + steps)):
        if step >= warm_up:
            chain.append((walk.condition.log_scales, *walk.moments()))
            if step - warm_up in kept:
                draws.append(walk.draw())
        walk.refresh()
    layout = (model.member_count, walkers // 2, task.ensembles, 2)
    log_scales, mean, covariance = (_arranged(column, layout) for column in zip(*chain, strict=True))
    density, annual, years = (_arranged(column, layout) for column in zip(*draws, strict=True))
    return EnsembleChains(log_scales, mean, covariance, kept, density, annual, years)


def walkers_of_member(member_count: int) -> int:
    """Count the walkers of one load member in an ensemble.

    Examples
    --------
    >>> walkers_of_member(1), walkers_of_member(7)
    (40, 8)
    """
    return max(MEMBER_WALKERS, 2 * int(np.ceil(0.5 * WALKERS / member_count)))


def _arranged(values: Sequence[Floats], layout: tuple[int, int, int, int]) -> Floats:
    """From steps of all walkers to (n_ensemble, n_member, n_step, n_walker, ...)."""
    members, pairs, ensembles, _ = layout
    array = np.stack(values)
    spread = array.reshape(len(array), *layout, *array.shape[2:])
    ordered = np.moveaxis(spread, (3, 1, 0), (0, 1, 2))
    return np.ascontiguousarray(ordered).reshape(ensembles, members, len(array), 2 * pairs, *array.shape[2:])


class _Walk:
    """Walkers of all load members; the state is where emcee left it until it is refreshed."""

    def __init__(self, task: EnsembleTask, walkers: int) -> None:
        model, prior_scales, rng = task.model, task.prior_scales, task.rng
        self._model, self._prior_scales, self._rng = model, prior_scales, rng
        self._ensembles = task.ensembles
        self._axes = ScaleAxes(model.rows.has_contrasts)
        self._has_latents = model.student or model.rows.has_parts
        walkers *= task.ensembles
        count = model.member_count * walkers
        # scattered about the prior: wider than the posterior, as split R-hat wants its starts
        start = np.log(prior_scales) + rng.standard_normal((count, len(prior_scales)))
        condition = model.at(start)
        stretch = 2.0 / rng.standard_gamma(2.0, condition.stretch.shape) if model.student else condition.stretch
        self.condition = Condition(start, stretch, condition.part, np.repeat(np.arange(model.member_count), walkers))
        self._collapsed, self._density = self._evaluate(self.condition)
        self._proposed = self._collapsed.root.copy()
        self._noise: Floats | None = None

    def _evaluate(self, condition: Condition) -> tuple[Collapsed, Floats]:
        collapsed = collapse(self._model, condition)
        density = collapsed.log_likelihood + log_scale_prior(condition.log_scales, self._prior_scales)
        return collapsed, density

    def _log_posterior(self, coordinates: Floats) -> Floats:
        """Log density given what each walker carries, whose number is the last coordinate."""
        walker = coordinates[:, -1].astype(int)
        log_scales = self._axes.log_scales(coordinates[:, :-1])
        ratio = log_scales - np.log(self._prior_scales)
        # no mass lies beyond (the prior leaves 1e-13 above), but the solves lose their digits there
        inside = (ratio.max(axis=1) < 8.0) & (ratio.min(axis=1) > -30.0)
        own = self.condition.take(walker)
        condition = Condition(np.where(inside[:, None], log_scales, own.log_scales), own.stretch, own.part, own.member)
        collapsed, density = self._evaluate(condition)
        self._proposed[walker] = collapsed.root
        return np.where(inside, density, -np.inf)

    def steps(self, count: int) -> Iterator[None]:
        """Take steps of emcee; between them the walkers may be refreshed."""
        number = np.arange(len(self.condition), dtype=float)[:, None]
        coordinates = np.hstack([self._axes.coordinates(self.condition.log_scales), number])
        sampler = emcee.EnsembleSampler(
            *coordinates.shape, self._log_posterior, moves=ComplementMove(self._ensembles), vectorize=True
        )
        # emcee ignores a seed given as a number: its generator is set through the state
        random_state = np.random.RandomState(self._rng.integers(2**32)).get_state()
        start = emcee.State(coordinates, log_prob=self._density, random_state=random_state)
        iterations = sampler.sample(start, iterations=count, store=False, skip_initial_state_check=True)
        before = coordinates.copy()
        for state in iterations:
            moved = (state.coords != before).any(axis=1)
            root = np.where(moved[:, None, None], self._proposed, self._collapsed.root)
            log_scales = self._axes.log_scales(state.coords[:, :-1])
            self.condition = Condition(log_scales, self.condition.stretch, self.condition.part, self.condition.member)
            self._density = state.log_prob.copy()
            self._collapsed = Collapsed(root, self._density, self._model.annual_sd)
            yield
            state.coords[:, :-1] = self._axes.coordinates(self.condition.log_scales)
            state.log_prob[:] = self._density
            before = state.coords.copy()

    def _shared(self) -> Floats:
        """One draw of what the sites share, in prior standard deviations, at the present state."""
        if self._noise is None:
            self._noise = self._rng.standard_normal((len(self.condition), self._model.columns.size))
        return self._collapsed.solution(self._noise)

    def moments(self) -> tuple[Floats, Floats]:
        """Conditional mean and covariance of the phasor at the present state."""
        return self._collapsed.moments()

    def draw(self) -> tuple[Floats, ...]:
        """Log posterior, phasor and years at the present state."""
        model, shared = self._model, self._shared()
        years = shared[:, model.columns.year].reshape(len(shared), len(model.sharing.period_share), 2)
        away = model.year_sd * (years - np.einsum("y,nyc->nc", model.sharing.period_share, years)[:, None])
        density = self._density + log_latent_prior(model, self.condition)
        return density, model.annual_sd * shared[:, -2:], away

    def refresh(self) -> None:
        """Draw what the walkers carry anew."""
        if self._has_latents:
            shared = self._shared()
            condition = draw_latents(self._model, self.condition, shared, self._rng)
            condition = draw_shared_scales(self._model, condition, shared, self._prior_scales, self._rng)
            self.condition = draw_site_scale(self._model, condition, self._prior_scales, self._rng)
            self._collapsed, self._density = self._evaluate(self.condition)
        self._noise = None


@dataclass(frozen=True)
class ScaleAxes:
    """Coordinates in which the scales are explored.

    Parameters
    ----------
    has_contrasts : bool
        Whether some site carries more than one model. With contrasts the coordinates are the
        log scales. Without, the data see hardly more than s_site^2 + s_local^2, and the first two coordinates
        are half the logarithm of that sum and the logarithm of s_local^2 / s_site^2; the Jacobian is constant.
    """

    has_contrasts: bool

    def log_scales(self, coordinates: Floats) -> Floats:
        """From coordinates (..., n_scale) to log scales."""
        if self.has_contrasts:
            return np.array(coordinates)
        total, ratio = coordinates[..., 0], coordinates[..., 1]
        site = total - 0.5 * np.logaddexp(0.0, ratio)
        return np.concatenate([np.stack([site, site + 0.5 * ratio], axis=-1), coordinates[..., 2:]], axis=-1)

    def coordinates(self, log_scales: Floats) -> Floats:
        """From log scales (..., n_scale) to coordinates."""
        if self.has_contrasts:
            return np.array(log_scales)
        site, local = log_scales[..., 0], log_scales[..., 1]
        total = 0.5 * np.logaddexp(2.0 * site, 2.0 * local)
        return np.concatenate([np.stack([total, 2.0 * (local - site)], axis=-1), log_scales[..., 2:]], axis=-1)
