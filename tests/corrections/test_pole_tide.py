"""Conventions of the wobble, and the ocean pole tide against the IERS Conventions."""

import csv
from functools import cache
from pathlib import Path

import numpy as np
import pytest

from massfit.constants import EARTH_DENSITY
from massfit.corrections.pole_tide import (
    EQUATORIAL_RADIUS,
    GAMMA_2,
    observed_wobble,
    pole_tide_height,
    secular_pole,
    wobble_of,
)
from massfit.earth.love import love_numbers
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.tables.polar_motion import RADIAN_PER_ARCSECOND

REFERENCE = Path(__file__).parents[1] / "reference" / "pole_tide_iers_2010.csv"
DECEMBER_2015 = np.array(["2015-12-16T12"], dtype="datetime64[ns]")
LOVE_K2 = -0.3075  # IERS Conventions 2010, chapter 6
GAMMA_2_IMAGINARY = 0.0036  # IERS Conventions 2010, section 6.5, from memory


def published(tide: str) -> np.ndarray:
    """Rows (C21, S21) by columns (m1, m2), per arc second."""
    rows = csv.DictReader(row for row in REFERENCE.read_text().splitlines() if not row.startswith("#"))
    row = next(row for row in rows if row["tide"] == tide)
    return np.array([[row["c21_m1"], row["c21_m2"]], [row["s21_m1"], row["s21_m2"]]], dtype=float)


@cache
def operator() -> SeaLevelOperator:
    return prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=90), max_degree=90)


def test_background_of_a_published_month() -> None:
    # the solid-Earth pole tide in the published background model of December 2015, whose mean pole is
    # 84.906, 252.310 mas: C21 -6.2775e-12, S21 -1.6462e-10
    x, y = (np.array([value]) * RADIAN_PER_ARCSECOND for value in (0.084906, 0.252310))
    m1, m2 = (float(m[0]) / RADIAN_PER_ARCSECOND for m in wobble_of(DECEMBER_2015, x, y))
    np.testing.assert_allclose(published("solid") @ [m1, m2], [-6.2775e-12, -1.6462e-10], atol=5e-13)
    # control: the other sign of m2 cannot pass
    assert abs((published("solid") @ [m1, -m2])[1] + 1.6462e-10) > 1e-10


def test_secular_pole_of_2018() -> None:
    x, y = (
        float(value[0]) / RADIAN_PER_ARCSECOND for value in secular_pole(np.array(["2020-01-01"], "datetime64[ns]"))
    )
    assert x == pytest.approx(0.055 + 20 * 0.001677, abs=2e-6)  # a calendar year is not exactly 365.25 days
    assert y == pytest.approx(0.3205 + 20 * 0.003460, abs=4e-6)


def test_observed_wobble_of_the_same_month() -> None:
    month = np.arange("2015-12-01", "2016-01-01", dtype="datetime64[D]").astype("datetime64[ns]")
    m1, m2, predicted = observed_wobble(month)
    mean = np.array([m1.mean(), m2.mean()]) / RADIAN_PER_ARCSECOND
    np.testing.assert_allclose(published("solid") @ mean, [-6.2775e-12, -1.6462e-10], atol=5e-13)
    assert predicted == 0


def coefficients_of(height: np.ndarray) -> tuple[float, float]:
    """C21 and S21 of the potential of a water height (m) over the ocean, IERS Conventions 2010, eq. 6.22-23."""
    area = operator().cell_area_m2 / np.sum(operator().cell_area_m2 * np.ones_like(operator().ocean))
    latitude, longitude = np.radians(operator().latitude_deg)[:, None], np.radians(operator().longitude_deg)
    legendre = np.sqrt(15.0) * np.sin(latitude) * np.cos(latitude)  # 4-pi normalised, without Condon-Shortley phase
    factor = 3.0 * operator().sea_water_density * (1.0 + LOVE_K2) / (5.0 * EARTH_DENSITY * EQUATORIAL_RADIUS)
    water = operator().ocean * height * area * legendre * factor
    return float(np.sum(water * np.cos(longitude))), float(np.sum(water * np.sin(longitude)))


def ocean_matrix(heights: list[np.ndarray]) -> np.ndarray:
    """C21 and S21 per arc second of m1 and m2; the imaginary part of gamma_2 turns the forcing as in eq. 6.23a."""
    per_m1, per_m2 = (np.array(coefficients_of(height)) * RADIAN_PER_ARCSECOND for height in heights)
    turn = GAMMA_2_IMAGINARY / GAMMA_2
    return np.column_stack([per_m1 - turn * per_m2, per_m2 + turn * per_m1])


def test_ocean_pole_tide_is_the_published_self_consistent_one() -> None:
    forcings = pole_tide_height(operator().latitude_deg[:, None], operator().longitude_deg)
    ours = ocean_matrix([np.asarray(solve_sea_level(operator(), forcing=f).height) for f in forcings])
    expected = published("ocean")
    main = np.diag(expected)
    np.testing.assert_allclose(np.diag(ours), main, rtol=0.01)
    np.testing.assert_allclose(ours - np.diag(np.diag(ours)), expected - np.diag(main), atol=0.01 * abs(main).max())


def test_classical_pole_tide_misses_the_published_one() -> None:
    forcings = pole_tide_height(operator().latitude_deg[:, None], operator().longitude_deg)
    short = 1.0 - np.diag(ocean_matrix(list(forcings))) / np.diag(published("ocean"))
    assert short.min() > 0.12
    assert 0.15 < short.max() < 0.2
