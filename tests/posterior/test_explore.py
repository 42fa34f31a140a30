import emcee
import numpy as np
import pytest

from massfit.posterior.explore import ENSEMBLES, WALKERS, ComplementMove, ScaleExplorer

PRIOR = np.array([30.0, 30.0, 15.0])


def log_gamma_like(x):
    """Density of the logarithms of three independent gamma variables with shapes 1, 3 and 8."""
    return (np.array([1.0, 3.0, 8.0]) * x - np.exp(x)).sum(axis=1)


def run_complement_move(move, seed=1):
    sampler = emcee.EnsembleSampler(48, 3, log_gamma_like, moves=move, vectorize=True)
    rng = np.random.default_rng(seed)
    start = emcee.State(rng.standard_normal((48, 3)), random_state=np.random.RandomState(seed).get_state())
    sampler.run_mcmc(start, 2000)
    return np.exp(sampler.get_chain(discard=200))


def test_the_complement_move_leaves_a_known_density_as_it_is():
    draws = run_complement_move(ComplementMove())
    # gamma(k): mean k, variance k; about 30,000 effective draws, four standard errors
    np.testing.assert_allclose(draws.mean(axis=(0, 1)), [1.0, 3.0, 8.0], atol=0.07)
    np.testing.assert_allclose(draws.var(axis=(0, 1)), [1.0, 3.0, 8.0], rtol=0.08)


def test_without_its_factor_the_move_would_not():
    class Forgetful(ComplementMove):
        def get_proposal(self, sample, complement, random):
            proposal, factors = super().get_proposal(sample, complement, random)
            return proposal, np.zeros_like(factors)

    draws = run_complement_move(Forgetful())
    assert draws.var(axis=(0, 1))[2] < 0.8 * 8.0


def test_a_run_can_be_extended_and_repeated(invent, regression):
    model = regression(invent())
    explorer = ScaleExplorer(model, PRIOR, np.random.default_rng(4))
    short, long = explorer.run(30), explorer.run(60)
    again = ScaleExplorer(model, PRIOR, np.random.default_rng(4)).run(60)
    assert short.log_scales.shape == (ENSEMBLES, 30, WALKERS, 3)
    np.testing.assert_array_equal(long.log_scales, again.log_scales)
    np.testing.assert_array_equal(long.log_scales[:, :20], short.log_scales[:, 10:])
    assert len(np.unique(long.log_scales[:, -1].reshape(-1, 3), axis=0)) > 0.9 * ENSEMBLES * WALKERS


def test_thinned_steps_are_spread_over_the_run(invent, regression):
    chains = ScaleExplorer(regression(invent()), PRIOR, np.random.default_rng(4)).run(40)
    kept = chains.thinned(5)
    np.testing.assert_array_equal(kept.log_posterior[:, [0, -1]], chains.log_posterior[:, [0, -1]])
    assert kept.log_scales.shape[1] == 5


def test_scales_that_nothing_was_said_about_follow_their_prior(invent, regression):
    # one phasor says nothing on s_common: half-t with 4 degrees of freedom has median 0.741 of its scale (scipy)
    chains = ScaleExplorer(regression(invent(sites=1, models=1)), PRIOR, np.random.default_rng(4)).run(300)
    median = np.exp(np.median(chains.log_scales[..., 2]))
    assert median / 15.0 == pytest.approx(0.741, rel=0.05)


def test_absurd_scales_are_refused_and_not_computed(invent, regression):
    explorer = ScaleExplorer(regression(invent()), PRIOR, np.random.default_rng(4))
    density = explorer._log_posterior(np.array([[3.0, 3.0, 60.0], [3.0, -90.0, 3.0], [3.0, 3.0, 3.0]]))
    assert np.isneginf(density[:2]).all()
    assert np.isfinite(density[2])
