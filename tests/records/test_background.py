import numpy as np
import pytest
from scipy.interpolate import BSpline

from massfit.records.background import background_design


def fitted(days: np.ndarray, values: np.ndarray, breaks: tuple[float, ...] = ()) -> np.ndarray:
    design = background_design(days, np.array(breaks)).toarray()
    return design @ np.linalg.lstsq(design, values, rcond=None)[0]


def test_rows_are_the_cubic_b_splines_of_a_general_library() -> None:
    days = np.linspace(0.0, 10.0, 101)
    # five cells of two days: uniform knots from three cells before to three after
    knots = np.arange(-6.0, 16.5, 2.0)
    expected = BSpline.design_matrix(days, knots, 3).toarray()
    np.testing.assert_allclose(background_design(days, np.array([])).toarray(), expected, rtol=0, atol=1e-14)


def test_cubics_are_followed_exactly() -> None:
    days = np.sort(np.random.default_rng(1).uniform(0, 30, 400))
    values = 1.0 - 2.0 * days + 0.3 * days**2 - 0.01 * days**3
    np.testing.assert_allclose(fitted(days, values), values, rtol=0, atol=1e-9)


@pytest.mark.parametrize(("period_days", "share"), [(365.2422, 0.0), (12.0, 0.01), (1.0, 0.99)])
def test_slow_change_is_followed_and_a_tide_is_not(period_days: float, share: float) -> None:
    days = np.arange(0, 60, 1 / 24)
    wave = np.cos(2 * np.pi * days / period_days)
    left = np.std(wave - fitted(days, wave)) / np.std(wave)
    assert left == pytest.approx(share, abs=0.01)


def test_a_break_parts_two_levels() -> None:
    days = np.arange(0, 20, 1 / 24)
    values = np.where(days < 7.3, 0.0, 50.0)
    np.testing.assert_allclose(fitted(days, values, (7.3,)), values, rtol=0, atol=1e-9)
    # without the break the splines ring on both sides
    assert np.abs(fitted(days, values) - values).max() > 10.0


def test_breaks_outside_the_record_change_nothing() -> None:
    days = np.arange(0, 9, 0.25)
    plain = background_design(days, np.array([]))
    np.testing.assert_array_equal(background_design(days, np.array([-5.0, 90.0])).toarray(), plain.toarray())
