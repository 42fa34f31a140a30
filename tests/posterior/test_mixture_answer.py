import numpy as np
import pytest

from massfit.posterior.mixture_answer import Mixture, amplitude_and_day, pooled_mixture
from massfit.posterior.network_model import Choices, inflation, network_model, pooled_moments, scale_priors
from massfit.posterior.scale_grid import integrate_on_grid
from massfit.settings import PosteriorSettings, Priors


def single(mean, covariance):
    return Mixture(np.ones(1), np.array([mean]), np.array([covariance]))


def test_about_zero_the_amplitude_is_rayleighs():
    # quantiles sigma sqrt(-2 log(1 - p)), mean sigma sqrt(pi / 2): closed forms
    amplitude, day = amplitude_and_day(single([0.0, 0.0], [[4.0, 0.0], [0.0, 4.0]]))
    assert amplitude["median"] == pytest.approx(2.0 * np.sqrt(2.0 * np.log(2.0)), rel=2e-3)
    assert amplitude["mean"] == pytest.approx(2.0 * np.sqrt(np.pi / 2.0), rel=5e-4)
    assert amplitude["region95"] == pytest.approx([2.0 * np.sqrt(-2.0 * np.log(p)) for p in (0.975, 0.025)], rel=5e-3)
    # and every day of the year is as likely
    assert day["region95"][1] - day["region95"][0] == pytest.approx(0.95 * 365.2422, rel=1e-3)


def test_far_from_zero_both_are_normal():
    sd = 0.5
    amplitude, day = amplitude_and_day(single([0.0, -80.0], [[sd**2, 0.0], [0.0, sd**2]]))
    assert amplitude["sd"] == pytest.approx(sd, rel=1e-4)
    # Rice's distribution lies sd^2 / 2 amplitude farther out
    centre = 80.0 + sd**2 / 160.0
    assert amplitude["region95"] == pytest.approx([centre - 1.95996 * sd, centre + 1.95996 * sd], abs=1e-3 * sd)
    assert day["median"] == pytest.approx(0.75 * 365.2422, abs=1e-6)
    in_days = sd / 80.0 * 365.2422 / (2.0 * np.pi)
    assert day["region50"] == pytest.approx(0.75 * 365.2422 + 0.67449 * in_days * np.array([-1.0, 1.0]), abs=1e-3)


def test_a_peak_at_new_year_does_not_wrap():
    _, day = amplitude_and_day(single([50.0, -0.5], [[25.0, 0.0], [0.0, 25.0]]))
    assert 0.0 <= day["median"] < 365.2422
    assert day["region95"][0] < day["median"] < day["region95"][1]


@pytest.fixture
def members(invent):
    network = invent(seed=3, sites=4, members=3)
    choices = Choices(PosteriorSettings(site_scatter="normal"), Priors(), 0.04)
    model = network_model(network.observations, network.admittance, choices)
    return integrate_on_grid(model, scale_priors(choices.priors, model.scale_count))


def test_the_components_keep_mean_and_covariance(members):
    mean, covariance = pooled_mixture(members).moments()
    expected = pooled_moments(members)
    np.testing.assert_allclose(mean, expected[0], rtol=1e-9)
    np.testing.assert_allclose(covariance, expected[1], rtol=1e-6)


def test_the_regions_are_those_of_draws_from_the_nodes(members):
    """Draws from all nodes, heavy tails and all: within their own error of the 24 components a member."""
    rng, count = np.random.default_rng(1), 200_000
    means = np.array([member.mean for member in members])
    apart = (np.sqrt(inflation(3)) - 1.0) * (means - means.mean(axis=0))
    draws = []
    for member, shift in zip(members, apart, strict=True):
        chosen = rng.choice(len(member.weight), count, p=member.weight)
        noise = np.einsum(
            "nij,nj->ni", np.linalg.cholesky(member.node_covariance[chosen]), rng.standard_normal((count, 2))
        )
        draws.append(member.node_mean[chosen] + shift + noise)
    sizes = np.hypot(*np.concatenate(draws).T)
    amplitude, _ = amplitude_and_day(pooled_mixture(members))
    found = [
        amplitude["region95"][0],
        amplitude["region50"][0],
        amplitude["median"],
        amplitude["region50"][1],
        amplitude["region95"][1],
    ]
    np.testing.assert_allclose(found, np.quantile(sizes, [0.025, 0.25, 0.5, 0.75, 0.975]), atol=0.015 * sizes.std())
