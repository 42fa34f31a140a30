"""The first route: emcee explores the scales of all load members at once.

Everything linear is integrated out exactly. Where the site scatter is Student's, every walker carries the stretches
of the places, which are drawn exactly (Gibbs) after every step of emcee, and where a site enters by its mixture, the
part in use: given these, a step moves the scales alone. In the first part of a run, which is thrown away, half of the
walkers are proposed from the other half as in Goodman & Weare (2010, Communications in Applied Mathematics and
Computational Science 5, 65-80), whatever each walker carries; what they visited last is what later proposals are
fitted to.
"""

from collections.abc import Iterator, Sequence
from typing import NamedTuple

import emcee
import numpy as np
from numpy.typing import NDArray

from massfit.posterior.latents import draw_latents, draw_shared_scales, draw_site_scale
from massfit.posterior.likelihood import Collapsed, collapse, log_latent_prior, log_scale_prior
from massfit.posterior.moves import ComplementMove, LearntMove, ScaleAxes, side_by_side
from massfit.posterior.regression import Condition, LinearModel

Floats = NDArray[np.float64]

ENSEMBLES = 4
"""Independent ensembles of walkers; these are the chains of every diagnostic."""

WALKERS = 20
"""Least number of walkers of an ensemble, over all load members."""

MEMBER_WALKERS = 4
"""Least number of walkers of a load member in an ensemble."""

STEPS, MAX_STEPS = 250, 4000
"""Steps kept of each ensemble, a third as many before them being thrown away; and the cap of a run that is extended."""

KEPT_DRAWS = 1000
"""About as many draws of the phasor are kept of each member and ensemble, equally spaced."""


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
    walk = _Walk(task, walkers)
    visited = [walk.coordinates for _ in walk.steps(steps // 3, ComplementMove(task.ensembles))]
    learnt = side_by_side(visited[len(visited) // 2 :], task.ensembles)
    chain, draws = [], []
    for step, _ in enumerate(walk.steps(steps, LearntMove(learnt))):
        chain.append((walk.condition.log_scales, *walk.moments()))
        if step in kept:
            draws.append(walk.draw())
    layout = (model.member_count, walkers // 2, task.ensembles, 2)
    log_scales, mean, covariance = (_arranged(column, layout) for column in zip(*chain, strict=True))
    density, annual, years = (_arranged(column, layout) for column in zip(*draws, strict=True))
    return EnsembleChains(log_scales, mean, covariance, kept, density, annual, years)


def walkers_of_member(member_count: int) -> int:
    """Count the walkers of one load member in an ensemble.

    Examples
    --------
    >>> walkers_of_member(1), walkers_of_member(7)
    (20, 4)
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
        """Log density of the coordinates given what each walker carries, whose number is the last of them."""
        walker = coordinates[:, -1].astype(int)
        log_scales = self._axes.log_scales(coordinates[:, :-1])
        ratio = log_scales - np.log(self._prior_scales)
        # no mass lies beyond (the prior leaves 1e-13 above), but the solves lose their digits there
        inside = (ratio.max(axis=1) < 8.0) & (ratio.min(axis=1) > -30.0)
        own = self.condition.take(walker)
        condition = Condition(np.where(inside[:, None], log_scales, own.log_scales), own.stretch, own.part, own.member)
        collapsed, density = self._evaluate(condition)
        self._proposed[walker] = collapsed.root
        return np.where(inside, density + self._axes.log_jacobian(condition.log_scales), -np.inf)

    @property
    def coordinates(self) -> Floats:
        """(n, n_scale + 1), with the number of the walker."""
        number = np.arange(len(self.condition), dtype=float)
        return np.column_stack([self._axes.coordinates(self.condition.log_scales), number])

    def steps(self, count: int, move: emcee.moves.Move) -> Iterator[None]:
        """Take steps of emcee; what the walkers carry is drawn anew after each."""
        before = self.coordinates
        sampler = emcee.EnsembleSampler(*before.shape, self._log_posterior, moves=move, vectorize=True)
        # emcee ignores a seed given as a number: its generator is set through the state
        random_state = np.random.RandomState(self._rng.integers(2**32)).get_state()
        start = emcee.State(before.copy(), log_prob=self._coordinate_density(), random_state=random_state)
        for state in sampler.sample(start, iterations=count, store=False, skip_initial_state_check=True):
            moved = (state.coords != before).any(axis=1)
            root = np.where(moved[:, None, None], self._proposed, self._collapsed.root)
            log_scales = np.where(
                moved[:, None], self._axes.log_scales(state.coords[:, :-1]), self.condition.log_scales
            )
            self.condition = Condition(log_scales, self.condition.stretch, self.condition.part, self.condition.member)
            self._density = state.log_prob - self._axes.log_jacobian(log_scales)
            self._collapsed = Collapsed(root, self._density, self._model.annual_sd)
            yield
            self._refresh()
            before = self.coordinates
            state.coords[:] = before
            state.log_prob[:] = self._coordinate_density()

    def _coordinate_density(self) -> Floats:
        return self._density + self._axes.log_jacobian(self.condition.log_scales)

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

    def _refresh(self) -> None:
        """Draw what the walkers carry anew."""
        if self._has_latents:
            shared = self._shared()
            condition = draw_latents(self._model, self.condition, shared, self._rng)
            condition = draw_shared_scales(self._model, condition, shared, self._prior_scales, self._rng)
            self.condition = draw_site_scale(self._model, condition, self._prior_scales, self._rng)
            self._collapsed, self._density = self._evaluate(self.condition)
        self._noise = None
