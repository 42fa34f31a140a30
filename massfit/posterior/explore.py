"""The first route: emcee explores the scales of one load member."""

from dataclasses import dataclass

import emcee
import numpy as np
from numpy.typing import NDArray

from massfit.posterior.convergence import autocorrelation_steps
from massfit.posterior.likelihood import LinearModel, log_likelihood, log_scale_prior
from massfit.posterior.quadrature import scale_axes

ENSEMBLES = 4
"""Independent ensembles of walkers; these are the chains of every diagnostic."""

WALKERS = 48
"""Walkers of each ensemble."""

STEPS, MAX_STEPS = 240, 1920
"""Steps kept of each ensemble, a third as many before them being thrown away; and the cap of a run that is extended."""

_FREEDOM = 5.0  # of the Student proposal: heavier tails than the target's


class ComplementMove(emcee.moves.RedBlueMove):  # type: ignore[misc]
    """Propose from a Student distribution fitted to the other half of the ensemble.

    The proposal does not depend on the walkers it moves, so the acceptance ratio of
    Hastings (1970, Biometrika 57, 97-109) holds with the two proposal densities; halves
    take turns as in Goodman & Weare (2010, Comm. App. Math. Comp. Sci. 5, 65-80).
    """

    def get_proposal(
        self, sample: NDArray[np.float64], complement: list[NDArray[np.float64]], random: np.random.RandomState
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Proposals for one half of the walkers, with the log ratio of their densities."""
        others = np.concatenate(complement)
        count, size = sample.shape
        centre = others.mean(axis=0)
        shift = others - centre
        root = np.linalg.cholesky(shift.T @ shift / len(others) + 1e-12 * np.eye(size))
        stretch = np.sqrt(_FREEDOM / random.chisquare(_FREEDOM, size=(count, 1)))
        proposal = centre + (stretch * random.standard_normal((count, size))) @ root.T
        both = np.linalg.solve(root, (np.concatenate([sample, proposal]) - centre).T)
        density = -0.5 * (_FREEDOM + size) * np.log1p((both**2).sum(axis=0) / _FREEDOM)
        return proposal, density[:count] - density[count:]


@dataclass(frozen=True)
class ScaleChains:
    """Scales that the ensembles visited.

    Parameters
    ----------
    log_scales : (n_ensemble, n_step, n_walker, 3) array
        Natural logarithms of the scales in Pa.
    log_posterior : (n_ensemble, n_step, n_walker) array
    length : float
        Length of the run in autocorrelation times.
    acceptance : float
        Mean fraction of proposals accepted.
    """

    log_scales: NDArray[np.float64]
    log_posterior: NDArray[np.float64]
    length: float
    acceptance: float

    def thinned(self, steps: int) -> "ScaleChains":
        """Chains with `steps` equally spaced steps of every ensemble."""
        chosen = np.linspace(0, self.log_scales.shape[1] - 1, steps).round().astype(int)
        return ScaleChains(self.log_scales[:, chosen], self.log_posterior[:, chosen], self.length, self.acceptance)


class ScaleExplorer:
    """Ensembles over the scales of one load member, which can be run on.

    Parameters
    ----------
    model : LinearModel
    prior_scales : (3,) array
        Pa.
    rng : numpy.random.Generator
        Each ensemble is seeded from it, starts and all.
    """

    def __init__(self, model: LinearModel, prior_scales: NDArray[np.float64], rng: np.random.Generator) -> None:
        self._model, self._prior_scales = model, prior_scales
        self._to_log_scales = scale_axes(model.has_contrasts)
        moves = [(ComplementMove(), 0.9), (emcee.moves.DEMove(), 0.1)]
        self._samplers = [
            emcee.EnsembleSampler(WALKERS, 3, self._log_posterior, moves=moves, vectorize=True)
            for _ in range(ENSEMBLES)
        ]
        self._states = [self._start(rng) for _ in range(ENSEMBLES)]

    def _log_posterior(self, coordinates: NDArray[np.float64]) -> NDArray[np.float64]:
        log_scales = self._to_log_scales(coordinates)
        density = log_scale_prior(log_scales, self._prior_scales)
        ratio = log_scales - np.log(self._prior_scales)
        # no mass lies beyond (the prior leaves 1e-13 above), but the solves lose their digits there
        inside = (ratio.max(axis=1) < 8.0) & (ratio.min(axis=1) > -30.0)
        density[inside] += log_likelihood(self._model, log_scales[inside])
        return np.where(inside, density, -np.inf)

    def _start(self, rng: np.random.Generator) -> emcee.State:
        # scattered about the prior: wider than the posterior, as split R-hat wants its starts
        start = np.log(self._prior_scales) + rng.standard_normal((WALKERS, 3))
        if not self._model.has_contrasts:
            start[:, 1] = 3.0 * rng.standard_normal(WALKERS)
        # emcee ignores a seed given as a number: its generator is set through the state
        return emcee.State(start, random_state=np.random.RandomState(rng.integers(2**32)).get_state())

    def run(self, steps: int) -> ScaleChains:
        """Run every ensemble on until `steps` are kept after the warm-up.

        Parameters
        ----------
        steps : int

        Returns
        -------
        ScaleChains
        """
        warm_up = steps // 3
        for i, sampler in enumerate(self._samplers):
            self._states[i] = sampler.run_mcmc(self._states[i], steps + warm_up - sampler.iteration)
        chains = np.stack([s.get_chain(discard=warm_up) for s in self._samplers])
        density = np.stack([s.get_log_prob(discard=warm_up) for s in self._samplers])
        acceptance = float(np.mean([s.acceptance_fraction for s in self._samplers]))
        return ScaleChains(self._to_log_scales(chains), density, steps / autocorrelation_steps(chains), acceptance)
