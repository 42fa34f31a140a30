"""The satellites' ocean mean against the truth of invented networks, with the errors that it states."""

import numpy as np
import pytest
from scipy.stats import chi2

from massfit.earth.love import love_numbers
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import prepare_operator
from massfit.gravity.compare import together
from massfit.gravity.predicted import predicted_mass
from massfit.gravity.satellite import Context, satellite_mean
from massfit.phasor import as_components
from massfit.pipeline.fingerprints import network_vapour
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions

OPTIONS = SimulationOptions(
    sites=1, years=4, models=0, load_members=5, sampling="daily", incidents=False, bad_site=False, satellites=2
)


@pytest.mark.slow
def test_two_centres_together_hold_the_truth_and_are_cautious() -> None:
    ocean, love = OceanFunction.builtin(), love_numbers(max_degree=60)
    operator = prepare_operator(ocean, love, max_degree=60)
    together_at, alone_at = [], []
    for seed in range(100, 116):
        invented = simulate_network(OPTIONS, seed=seed)
        assert invented.gravity is not None
        network, vapour = invented.network, network_vapour(invented.network)
        predicted = predicted_mass(operator, network.loads, water_vapour=vapour, max_degree=40)
        context = Context(ocean, love, predicted, vapour, None, network.settings.frame.reference_year)
        means = [satellite_mean(invented.gravity, each, context) for each in invented.gravity.solutions]
        truth = 100.0 * complex(invented.truth["in_phase_hpa"], invented.truth["quadrature_hpa"])
        both = together(means)
        together_at.append(distance(both.phasor - truth, both.covariance))
        alone_at += [distance(each.phasor - truth, each.covariance) for each in means]
    # chi-square with 2 degrees of freedom has the mean 2
    print(f"\nmean chi-square: one centre {np.mean(alone_at):.2f}, two together {np.mean(together_at):.2f}")
    assert np.all(chi2.sf(together_at, 2) > 0.01)
    assert 0.4 < np.mean(together_at) < 2.0
    # one centre does not see its own annual error
    assert np.mean(alone_at) > np.mean(together_at)


def distance(step: complex, covariance: np.ndarray) -> float:
    z = as_components(step)
    return float(z @ np.linalg.solve(covariance, z))
