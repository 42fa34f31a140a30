from dataclasses import replace

import numpy as np
import pytest
from arviz_stats.base import array_stats

from massfit.posterior.convergence import (
    Convergence,
    autocorrelation_steps,
    compare_routes,
    diagnose,
    worse,
    worst,
)
from massfit.posterior.explore import EnsembleChains
from massfit.posterior.importance import integrate_scales

GOOD = Convergence(1.001, 3000.0, 2500.0, 60.0, 0.02, 1.01, 1.3)


def autoregressive(rng, coefficient, shape):
    """Stationary AR(1) along axis 1 of (ensemble, step, walker)."""
    steps = rng.standard_normal(shape)
    series = np.empty(shape)
    series[:, 0] = steps[:, 0]
    for i in range(1, shape[1]):
        series[:, i] = coefficient * series[:, i - 1] + np.sqrt(1 - coefficient**2) * steps[:, i]
    return series


def normal_route(invent, regression):
    return integrate_scales(regression(invent()), np.array([30.0, 30.0, 15.0]))


@pytest.mark.parametrize(
    "change",
    [
        {"rhat_max": 1.02},
        {"ess_bulk_min": 390.0},
        {"ess_tail_min": 390.0},
        {"length_min": 49.0},
        {"second_route_mean_shift_errors": -4.1},
        {"second_route_sd_ratio": 0.96},
    ],
)
def test_each_threshold_stops_a_run(change):
    assert GOOD.converged
    assert len(replace(GOOD, **change).failures()) == 1


def test_the_worst_of_the_members_is_reported():
    other = Convergence(1.004, 5000.0, 900.0, 90.0, -0.05, 0.98, -2.0)
    assert worst([GOOD, other]) == Convergence(1.004, 3000.0, 900.0, 60.0, -0.05, pytest.approx(0.98), -2.0)


def test_the_autocorrelation_time_of_a_known_process():
    # AR(1): (1 + rho) / (1 - rho) = 4 at rho = 0.6 [closed form]
    chain = autoregressive(np.random.default_rng(1), 0.6, (4, 3000, 30))[..., None]
    assert autocorrelation_steps(chain) == pytest.approx(4.0, rel=0.1)


def chains_of(route, annual, log_scales, log_posterior):
    """Chains of one member whose conditional moments are those of the route as a whole."""
    shape = annual.shape[:3]
    mean = np.broadcast_to(route.mean, annual.shape) + 1e-3 * annual
    covariance = np.broadcast_to(route.covariance, (*shape, 2, 2))
    years = np.zeros((*shape, 0, 2))
    kept = np.arange(shape[1])
    columns = [column[:, None] for column in (log_scales, mean, covariance, log_posterior, annual, years)]
    return EnsembleChains(*columns[:3], kept, *columns[3:])


def test_walkers_laid_out_one_after_another_show_their_correlation(invent, regression):
    rng = np.random.default_rng(2)
    slow = autoregressive(rng, 0.9, (4, 200, 48))
    route = normal_route(invent, regression)
    annual = route.mean + np.sqrt(np.diag(route.covariance)) * rng.standard_normal((*slow.shape, 2))
    scales = rng.standard_normal((*slow.shape, 3))
    found = diagnose(chains_of(route, annual, scales, slow), 0, route)
    # effective size of AR(1): n (1 - rho) / (1 + rho) [closed form]
    expected = slow.size * 0.1 / 1.9
    assert found.ess_bulk_min == pytest.approx(expected, rel=0.25)
    # white chains: an autocorrelation time of 1
    assert found.length_min == pytest.approx(200.0, rel=0.1)
    # the control: laid out step by step, the correlation hides at the lag of one ensemble
    naive = array_stats.ess(slow.reshape(4, -1), method="bulk")
    assert naive > 3 * expected


def test_a_drifting_ensemble_fails_split_r_hat(invent, regression):
    rng = np.random.default_rng(3)
    route = normal_route(invent, regression)
    annual = route.mean + np.sqrt(np.diag(route.covariance)) * rng.standard_normal((4, 100, 48, 2))
    still = rng.standard_normal((4, 100, 48))
    scales = rng.standard_normal((4, 100, 48, 3))
    drifting = still + np.linspace(0, 1, 100)[:, None]
    assert diagnose(chains_of(route, annual, scales, still), 0, route).rhat_max < 1.003
    assert diagnose(chains_of(route, annual, scales, drifting), 0, route).rhat_max > 1.01


def test_routes_that_differ_are_seen(invent, regression):
    route = normal_route(invent, regression)
    sd = np.sqrt(np.diag(route.covariance))
    node = np.random.default_rng(4).choice(len(route.weight), size=4 * 250 * 10, p=route.weight)
    mean, covariance = route.node_mean[node].reshape(4, 250, 10, 2), route.node_covariance[node]
    shift, errors, ratio = compare_routes(mean, covariance.reshape(4, 250, 10, 2, 2), route)
    assert abs(errors) < 4
    assert abs(ratio - 1) < 0.02
    stretched = route.mean + 1.2 * (mean - route.mean) - [0.0, 0.3] * sd
    shift, errors, ratio = compare_routes(stretched, 1.44 * covariance.reshape(4, 250, 10, 2, 2), route)
    assert shift == pytest.approx(-0.3, abs=0.03)
    assert errors < -10
    assert ratio == pytest.approx(1.2, abs=0.03)


def test_worse_keeps_the_sign():
    assert worse(np.array([0.1, -0.4, 0.3])) == -0.4
