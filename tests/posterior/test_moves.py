import emcee
import numpy as np
import pytest
from scipy.stats import multivariate_t

from massfit.posterior.moves import ComplementMove, LearntMove, ScaleAxes, StudentProposal, side_by_side


def log_gamma_like(x):
    """Density of the logarithms of three independent gamma variables with shapes 1, 3 and 8."""
    return (np.array([1.0, 3.0, 8.0]) * x[:, :3] - np.exp(x[:, :3])).sum(axis=1)


def run_move(move, seed=1):
    sampler = emcee.EnsembleSampler(96, 4, log_gamma_like, moves=move, vectorize=True)
    rng = np.random.default_rng(seed)
    coordinates = np.hstack([rng.standard_normal((96, 3)), np.arange(96.0)[:, None]])
    start = emcee.State(coordinates, random_state=np.random.RandomState(seed).get_state())
    for _ in sampler.sample(start, iterations=1200, skip_initial_state_check=True):
        pass
    return sampler.get_chain(discard=200)


def test_the_complement_move_leaves_a_known_density_as_it_is():
    chain = run_move(ComplementMove(2))
    np.testing.assert_array_equal(chain[-1, :, 3], np.arange(96.0))
    draws = np.exp(chain[..., :3])
    # gamma(k): mean k, variance k; about 20,000 effective draws, four standard errors
    np.testing.assert_allclose(draws.mean(axis=(0, 1)), [1.0, 3.0, 8.0], atol=0.08)
    np.testing.assert_allclose(draws.var(axis=(0, 1)), [1.0, 3.0, 8.0], rtol=0.08)


def test_without_its_factor_the_move_would_not():
    class Forgetful(ComplementMove):
        def get_proposal(self, sample, complement, random):
            proposal, factors = super().get_proposal(sample, complement, random)
            return proposal, np.zeros_like(factors)

    draws = np.exp(run_move(Forgetful(2))[..., :3])
    assert draws.var(axis=(0, 1))[2] < 0.8 * 8.0


def test_ensembles_side_by_side_know_nothing_of_each_other():
    move = ComplementMove(2)
    walkers = np.hstack([np.random.default_rng(1).standard_normal((40, 3)), np.arange(40.0)[:, None]])
    first, others = walkers[::2], walkers[1::2]
    moved, _ = move.get_proposal(first, [others], np.random.RandomState(5))
    shifted = others.copy()
    shifted[others[:, 3] // 2 % 2 == 1, :3] += 100.0
    again, _ = move.get_proposal(first, [shifted], np.random.RandomState(5))
    of_first = first[:, 3] // 2 % 2 == 0
    np.testing.assert_array_equal(again[of_first], moved[of_first])
    assert np.abs(again[~of_first, :3] - moved[~of_first, :3]).max() > 50.0


def learnt_elsewhere():
    """A history that fits the density poorly: the draws must not depend on it."""
    rng = np.random.default_rng(9)
    return np.array([0.5, 1.0, 2.0]) + 1.2 * rng.standard_normal((2, 500, 3))


def test_the_learnt_move_leaves_a_known_density_as_it_is():
    chain = run_move(LearntMove(learnt_elsewhere()))
    np.testing.assert_array_equal(chain[-1, :, 3], np.arange(96.0))
    draws = np.exp(chain[..., :3])
    # gamma(k): mean k, variance k; some 10,000 effective draws, four standard errors
    np.testing.assert_allclose(draws.mean(axis=(0, 1)), [1.0, 3.0, 8.0], atol=0.11)
    np.testing.assert_allclose(draws.var(axis=(0, 1)), [1.0, 3.0, 8.0], rtol=0.1)


def test_the_learnt_move_would_not_without_its_factor():
    move = LearntMove(learnt_elsewhere())
    whole = move.get_proposal
    move.get_proposal = lambda coordinates, random: (whole(coordinates, random)[0], np.zeros(len(coordinates)))
    draws = np.exp(run_move(move)[..., :3])
    assert draws.mean(axis=(0, 1))[0] > 1.2


def test_every_ensemble_has_learnt_for_itself():
    rng = np.random.default_rng(1)
    history = rng.standard_normal((2, 400, 3)) + np.array([0.0, 100.0])[:, None, None]
    student = StudentProposal.fit(history)
    here = np.zeros((40, 3))
    drawn, _ = student.draw(here, np.arange(40) % 2, np.random.RandomState(1))
    assert np.abs(drawn[::2]).max() < 50.0 < drawn[1::2].min()


def test_the_ratio_is_that_of_the_density_of_the_draws():
    rng = np.random.default_rng(2)
    student = StudentProposal.fit(rng.standard_normal((1, 300, 2)) @ np.array([[1.0, 0.6], [0.0, 0.5]]) + 3.0)
    here = rng.standard_normal((50, 2)) + 3.0
    drawn, ratio = student.draw(here, np.zeros(50, dtype=int), np.random.RandomState(1))
    shape = student.root[0] @ student.root[0].T
    density = multivariate_t(student.centre[0], shape, df=5)
    np.testing.assert_allclose(ratio, density.logpdf(here) - density.logpdf(drawn), atol=1e-9)


def test_what_was_visited_is_sorted_by_ensemble():
    number = np.arange(12.0)
    steps = [np.column_stack([number // 2 % 3, number + 100.0 * k, number]) for k in range(4)]
    sorted_ = side_by_side(steps, 3)
    assert sorted_.shape == (3, 16, 2)
    for ensemble in range(3):
        assert (sorted_[ensemble, :, 0] == ensemble).all()


@pytest.mark.parametrize("has_contrasts", [True, False], ids=["contrasts", "no contrasts"])
def test_axes_have_an_inverse_and_the_jacobian_they_claim(has_contrasts):
    axes = ScaleAxes(has_contrasts)
    points = np.array([[1.3, 0.4, 1.0, 0.2], [2.0, 1.0, 3.0, 1.0], [1.0, 7.0, 0.5, 3.0]])
    volumes = []
    for point in points:
        step = 1e-6
        columns = [
            (axes.log_scales(point + step * e) - axes.log_scales(point - step * e)) / (2 * step) for e in np.eye(4)
        ]
        volumes.append(np.log(abs(np.linalg.det(np.array(columns)))) - axes.log_jacobian(axes.log_scales(point)))
        np.testing.assert_allclose(axes.coordinates(axes.log_scales(point)), point, rtol=1e-12)
    # the same constant everywhere
    np.testing.assert_allclose(volumes, volumes[0], atol=1e-7)


def test_axes_of_the_sum_hold_the_sum_and_the_ratio():
    site, local, common = ScaleAxes(False).log_scales(np.array([1.5, -0.7, 2.0]))
    assert np.exp(2 * site) + np.exp(2 * local) == pytest.approx(1.5**4, rel=1e-12)
    assert 2 * (local - site) == pytest.approx(-0.7, abs=1e-12)
    assert common == pytest.approx(2 * np.log(2.0), abs=1e-12)


def test_beyond_the_edge_there_is_no_scale():
    assert np.isneginf(ScaleAxes(True).log_scales(np.array([[1.0, -0.1, 0.0]]))).tolist() == [[False, True, True]]
