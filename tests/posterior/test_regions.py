import numpy as np
import pytest
from scipy import stats

from massfit.posterior.regions import density_regions, scalar_summary


def correlated_draws(n=40_000):
    rng = np.random.default_rng(1)
    root = np.array([[0.1, 0.0], [0.03, 0.02]])
    return np.array([0.2, 0.8]) + rng.standard_normal((n, 2)) @ root.T, root


def test_the_levels_of_a_normal_are_known():
    draws, root = correlated_draws()
    # the kernel widens the variances by 1 + h^2, h = n^(-1/6) (Scott 1992); the draws keep theirs, so that the squared
    # radius that holds P of them stays -2 ln(1 - P) [closed form]
    wider = 1.0 + len(draws) ** (-1.0 / 3.0)
    for probability, level in density_regions(draws).levels.items():
        expected = (1 - probability) ** (1 / wider) / (2 * np.pi * np.linalg.det(root) * wider)
        # the quantile of 40,000 draws: 1.5 % (half) and 2 % (95 %), one standard error
        assert level == pytest.approx(expected, rel=0.04)


def test_the_regions_hold_their_probability_on_the_grid():
    draws, _ = correlated_draws()
    regions = density_regions(draws)
    cell = np.diff(regions.in_phase[:2])[0] * np.diff(regions.quadrature[:2])[0]
    assert regions.density.sum() * cell == pytest.approx(1.0, abs=0.005)
    for probability, level in regions.levels.items():
        inside = regions.density[regions.density >= level].sum() * cell
        assert inside == pytest.approx(probability, abs=0.02)


def test_two_separate_lumps_give_two_separate_regions():
    rng = np.random.default_rng(2)
    draws = rng.standard_normal((20_000, 2)) + np.where(rng.random(20_000) < 0.5, -8.0, 8.0)[:, None]
    regions = density_regions(draws)
    middle = np.abs(regions.in_phase).argmin(), np.abs(regions.quadrature).argmin()
    assert regions.density[middle[::-1]] < regions.levels[0.95]


def test_scalar_regions_are_equal_tailed():
    draws = stats.gamma(3.0).ppf((np.arange(100_000) + 0.5) / 100_000)
    summary = scalar_summary(draws)
    assert summary["mean"] == pytest.approx(3.0, rel=1e-3)
    assert summary["sd"] == pytest.approx(np.sqrt(3.0), rel=1e-3)
    assert summary["median"] == pytest.approx(stats.gamma(3.0).median(), rel=1e-4)
    np.testing.assert_allclose(summary["region95"], stats.gamma(3.0).ppf([0.025, 0.975]), rtol=1e-3)
    np.testing.assert_allclose(summary["region50"], stats.gamma(3.0).ppf([0.25, 0.75]), rtol=1e-3)
