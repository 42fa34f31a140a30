"""Whether two determinations agree: calibrated on invented pairs."""

import numpy as np
import pytest
from scipy.stats import kstest

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.gravity.comparison import agreement
from massfit.gravity.definitions import TEXTBOOK_OCEAN_M2, in_units
from massfit.phasor import phasor_from_peak


def random_covariance(rng: np.random.Generator) -> np.ndarray:
    root = rng.standard_normal((2, 2)) * 0.1 + 0.05 * np.eye(2)
    return np.asarray(root @ root.T + 1e-4 * np.eye(2))


def pairs(count: int, offset: complex = 0j, scale: float = 1.0) -> np.ndarray:
    rng = np.random.default_rng(8)
    found = []
    for _ in range(count):
        truth = phasor_from_peak(0.85, 280.0)
        first, second = scale**2 * random_covariance(rng), scale**2 * random_covariance(rng)
        draws = [np.linalg.cholesky(each) @ rng.standard_normal(2) for each in (first, second)]
        z = [truth + complex(*draw) for draw in draws]
        found.append(agreement(z[0], first, z[1] + offset, second).probability)
    return np.array(found)


def test_probabilities_are_uniform_over_500_pairs() -> None:
    assert kstest(pairs(500), "uniform").pvalue > 0.01


def test_it_fires_when_degree_one_is_missing_from_one_side() -> None:
    # a fifth of the amplitude, beside errors of some 0.05 in each component of each side
    found = pairs(500, offset=-0.2 * phasor_from_peak(0.85, 280.0), scale=0.4)
    assert np.mean(found < 0.05) > 0.5
    assert np.mean(pairs(500, scale=0.4) < 0.05) == pytest.approx(0.05, abs=0.03)


def test_the_joint_estimate_is_that_of_generalised_least_squares() -> None:
    rng = np.random.default_rng(3)
    first, second = random_covariance(rng), random_covariance(rng)
    z = np.array([[0.80, -0.30], [0.82, -0.28]])
    found = agreement(complex(*z[0]), first, complex(*z[1]), second)
    design = np.vstack([np.eye(2), np.eye(2)])
    weight = np.linalg.inv(np.block([[first, np.zeros((2, 2))], [np.zeros((2, 2)), second]]))
    covariance = np.linalg.inv(design.T @ weight @ design)
    expected = covariance @ design.T @ weight @ z.ravel()
    assert found.joint_phasor == pytest.approx(complex(*expected))
    assert found.joint_covariance is not None
    np.testing.assert_allclose(found.joint_covariance, covariance)


def test_days_go_the_shorter_way_round() -> None:
    small = 1e-4 * np.eye(2)
    found = agreement(phasor_from_peak(1.0, 3.0), small, phasor_from_peak(1.0, 360.0), small)
    assert found.day_difference == pytest.approx(3.0 + TROPICAL_YEAR_DAYS - 360.0)
    # 0.01 rad is 0.58 days, twice
    assert found.day_difference_sd == pytest.approx(np.sqrt(2.0) * 0.01 * TROPICAL_YEAR_DAYS / (2 * np.pi))


def test_units_by_hand() -> None:
    found = in_units(100.0 + 0j, TEXTBOOK_OCEAN_M2)
    assert found["mass_gt"] == pytest.approx(3689.7, abs=0.05)  # 1 hPa over 3.6184e14 m2
    assert found["water_mm"] == pytest.approx(10.197, abs=5e-4)
    assert found["sea_water_mm"] == pytest.approx(9.948, abs=1e-3)
    assert found["water_peak_to_trough_mm"] == 2.0 * found["water_mm"]
