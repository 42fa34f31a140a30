"""Whether two determinations agree: calibrated on invented pairs."""

import numpy as np
import pytest
from scipy.stats import kstest

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.gravity.comparison import agreement, shared_covariance
from massfit.gravity.definitions import TEXTBOOK_OCEAN_M2, in_units
from massfit.phasor import as_components, peak_days, phasor_from_peak


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


def converted_pairs(count: int, *, shared: bool) -> tuple[np.ndarray, np.ndarray]:
    """Probabilities, and joint estimates in units of their errors, of pairs that the same load members convert.

    The truth is one more member of the population that the members are drawn from: what it makes of the ocean is in
    both observations, and each side divides by what its members make of it.
    """
    rng = np.random.default_rng(21)
    truth, members = phasor_from_peak(0.85, 280.0), 40
    noise = np.diag([0.03, 0.02]) ** 2

    def population(size: int) -> np.ndarray:
        """Factors of the two sides, alike by 0.8."""
        own = 0.08 * (rng.standard_normal((3, size)) + 1j * rng.standard_normal((3, size)))
        return np.asarray(1.0 + np.stack([0.8 * own[0] + 0.6 * own[1], 0.8 * own[0] + 0.6 * own[2]]))

    probabilities, standardised = [], []
    for _ in range(count):
        factors, true_factors = population(members), population(1)[:, 0]
        sides = []
        for side in (0, 1):
            error = complex(*(np.linalg.cholesky(noise) @ rng.standard_normal(2)))
            by_member = (truth / true_factors[side] + error) * factors[side]
            sides.append((by_member, noise + shared_covariance(by_member, by_member)))
        (one, own), (other, others) = sides
        both = shared_covariance(one, other) if shared else None
        found = agreement(complex(one.mean()), own, complex(other.mean()), others, shared=both)
        probabilities.append(found.probability)
        if found.joint_phasor is not None and found.joint_covariance is not None:
            step = as_components(found.joint_phasor - truth)
            standardised.append(step @ np.linalg.solve(found.joint_covariance, step))
    return np.array(probabilities), np.array(standardised)


def test_members_that_convert_both_sides_are_counted_once() -> None:
    probabilities, standardised = converted_pairs(500, shared=True)
    assert kstest(probabilities, "uniform").pvalue > 0.01
    # the joint estimate covers the truth as often as it says: 95 % of a chi-square with 2 degrees of freedom
    assert np.mean(standardised < 5.99) == pytest.approx(0.95, abs=0.03)


def test_taken_as_independent_they_agree_too_well_and_claim_too_much() -> None:
    probabilities, standardised = converted_pairs(500, shared=False)
    assert kstest(probabilities, "uniform").pvalue < 1e-6
    assert np.mean(probabilities) > 0.55
    assert np.mean(standardised < 5.99) < 0.91


def test_the_joint_estimate_is_that_of_generalised_least_squares() -> None:
    rng = np.random.default_rng(3)
    first, second = random_covariance(rng), random_covariance(rng)
    z = np.array([[0.80, -0.30], [0.82, -0.28]])
    design = np.vstack([np.eye(2), np.eye(2)])
    shared = 0.3 * first @ second / np.trace(second)
    for both in (None, shared):
        found = agreement(complex(*z[0]), first, complex(*z[1]), second, shared=both)
        cross = np.zeros((2, 2)) if both is None else both
        weight = np.linalg.inv(np.block([[first, cross], [cross.T, second]]))
        covariance = np.linalg.inv(design.T @ weight @ design)
        expected = covariance @ design.T @ weight @ z.ravel()
        assert found.joint_phasor == pytest.approx(complex(*expected))
        assert found.joint_covariance is not None
        np.testing.assert_allclose(found.joint_covariance, covariance)


def test_errors_of_amplitude_and_day_are_those_of_many_draws() -> None:
    rng = np.random.default_rng(5)
    first, second = 0.02**2 * np.eye(2), 0.03**2 * np.array([[1.0, 0.4], [0.4, 0.6]])
    shared = 0.02 * 0.015 * np.array([[0.8, 0.2], [0.0, 0.7]])
    z = phasor_from_peak(0.9, 280.0), phasor_from_peak(0.8, 270.0)
    found = agreement(z[0], first, z[1], second, shared=shared)
    draws = rng.multivariate_normal(np.zeros(4), np.block([[first, shared], [shared.T, second]]), 40_000)
    ones, others = z[0] + draws[:, 0] + 1j * draws[:, 1], z[1] + draws[:, 2] + 1j * draws[:, 3]
    # 40,000 draws give a standard deviation to 0.35 %
    assert found.amplitude_difference_sd == pytest.approx(np.std(np.abs(ones) - np.abs(others)), rel=0.02)
    assert found.day_difference_sd == pytest.approx(np.std(peak_days(ones) - peak_days(others)), rel=0.02)


def test_without_an_error_only_the_difference_is_given() -> None:
    found = agreement(1.0 + 0j, np.eye(2), 0.8 + 0j, np.zeros((2, 2)), weighed=False)
    assert found.difference == pytest.approx(0.2)
    assert np.isnan(found.probability)
    assert found.compatible is None


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
