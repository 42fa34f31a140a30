"""Long-period tides and the pole tide."""

from functools import cache
from pathlib import Path

import astropy_iers_data
import erfa
import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_DENSITY
from massfit.corrections.long_period_tides import LINES, line_table, mean_longitudes, zonal_function, zonal_height
from massfit.corrections.pole_tide import EQUATORIAL_RADIUS, GAMMA_2, observed_wobble, pole_tide_height, wobble_of
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.tables.polar_motion import RADIAN_PER_ARCSECOND, parse_final, parse_rapid
from validation.registry import Group, Row, published, vanishing
from validation.sea_level import operator

AREA = "Tides"

LOVE_K2 = -0.3075  # load Love number k'_2, IERS Conventions (2010), chapter 6
GAMMA_2_IMAGINARY = 0.0036  # IERS Conventions (2010), section 6.5, from memory


def line_heights() -> list[Row]:
    days = np.arange("2000-01-01", "2019-01-01", dtype="datetime64[D]").astype("datetime64[ns]")
    rows = []
    for entry in published("long_period_tides_cartwright.csv"):
        line = next(line for line in LINES if line.name == entry["line"])
        largest = float(np.abs(zonal_height(days, lines=(line,)) * zonal_function(0.0)).max())
        rows.append(Row(f"{line.name} / mm", float(entry["equator_mm"]), 1000.0 * largest, 0.05, ".1f"))
    return rows


PERIODS = {
    **{"node": 6798.4, "Sa": 365.26, "Ssa": 182.621, "MSm": 31.812, "Mm": 27.5546, "MSf": 14.7653, "Mf": 13.6608},
    "Mtm": 9.1329,
}


def periods() -> list[Row]:
    found = {str(row["line"]): row["period_days"] for row in line_table(1.0)}
    return [Row(f"{name} / d", value, float(found[name]), 2e-5 * value, ".3f") for name, value in PERIODS.items()]


def nodal_factor() -> list[Row]:
    days = np.arange("2000-01-01", "2019-01-01", dtype="datetime64[D]").astype("datetime64[ns]")
    pair = [line for line in LINES if line.name in {"Mf", "2s+N'"}]
    angles = mean_longitudes(days) @ np.array([line.multipliers for line in pair], dtype=float).T
    factor = np.abs(np.exp(1j * angles) @ np.array([line.height_m for line in pair])) / 0.0666
    largest, least = float(factor.max()), float(factor.min())
    return [Row("largest", 1.457, largest, 0.05, ".2f"), Row("least", 0.629, least, 0.05, ".2f")]


def polar_motion_series() -> list[Row]:
    final = parse_final(Path(astropy_iers_data.IERS_B_FILE).read_text(encoding="ascii"))
    rapid, predicted = parse_rapid(Path(astropy_iers_data.IERS_A_FILE).read_text(encoding="ascii"))
    rapid = rapid[~predicted]
    _, own, other = np.intersect1d(final[:, 0], rapid[:, 0], return_indices=True)
    since = final[own, 0] > 51544.0  # 1 January 2000
    apart = (final[own] - rapid[other])[since, 1:3]
    return [vanishing("final less rapid series since 2000, rms / mas", 1e3 * float(np.sqrt(np.mean(apart**2))), 0.2)]


def arguments() -> list[Row]:
    time = np.arange("1990-01-01", "2040-01-01", 97, dtype="datetime64[D]").astype("datetime64[ns]")
    t = (time - np.datetime64("2000-01-01T12:00:00", "ns")) / np.timedelta64(36525 * 24, "h")
    node, moon = erfa.faom03(t), erfa.faf03(t) + erfa.faom03(t)
    sun = moon - erfa.fad03(t)
    expected = np.stack([moon, sun, moon - erfa.fal03(t), -node, sun - erfa.falp03(t)], axis=-1)
    difference = np.abs(np.exp(1j * mean_longitudes(time)) - np.exp(1j * expected)).max()
    return [vanishing("mean longitudes 1990 to 2040, largest difference / rad", float(difference), 1e-9)]


def matrix(tide: str) -> NDArray[np.float64]:
    row = next(row for row in published("pole_tide_iers_2010.csv") if row["tide"] == tide)
    return np.array([[row["c21_m1"], row["c21_m2"]], [row["s21_m1"], row["s21_m2"]]], dtype=float)


@cache
def ocean_pole_tide(*, self_consistent: bool) -> NDArray[np.float64]:
    """C21 and S21 per arc second of m1 and m2."""
    sea = operator(90)
    heights = pole_tide_height(sea.latitude_deg[:, None], sea.longitude_deg)
    if self_consistent:
        heights = tuple(np.asarray(solve_sea_level(sea, forcing=height).height) for height in heights)
    area = sea.cell_area_m2 / np.sum(sea.cell_area_m2 * np.ones_like(sea.ocean))
    latitude, longitude = np.radians(sea.latitude_deg)[:, None], np.radians(sea.longitude_deg)
    legendre = np.sqrt(15.0) * np.sin(latitude) * np.cos(latitude)
    factor = 3.0 * sea.sea_water_density * (1.0 + LOVE_K2) / (5.0 * EARTH_DENSITY * EQUATORIAL_RADIUS)
    waters = [sea.ocean * height * area * legendre * factor for height in heights]
    per = [np.array([np.sum(w * np.cos(longitude)), np.sum(w * np.sin(longitude))]) for w in waters]
    per_m1, per_m2 = (each * RADIAN_PER_ARCSECOND for each in per)
    turn = GAMMA_2_IMAGINARY / GAMMA_2
    return np.column_stack([per_m1 - turn * per_m2, per_m2 + turn * per_m1])


def pole_tide_of_the_ocean() -> list[Row]:
    ours, theirs = ocean_pole_tide(self_consistent=True), matrix("ocean")
    largest = float(np.abs(theirs).max())
    return [
        Row(f"{name} / 10⁻¹² per arc second", 1e12 * theirs[place], 1e12 * float(ours[place]), 1e10 * largest, ".1f")
        for name, place in (("C21 by m1", (0, 0)), ("C21 by m2", (0, 1)), ("S21 by m1", (1, 0)), ("S21 by m2", (1, 1)))
    ]


def published_month() -> list[Row]:
    time = np.array(["2015-12-16T12"], dtype="datetime64[ns]")
    x, y = (np.array([value]) * RADIAN_PER_ARCSECOND for value in (0.084906, 0.252310))
    month = np.arange("2015-12-01", "2016-01-01", dtype="datetime64[D]").astype("datetime64[ns]")
    rows = []
    for label, wobble in (("stated pole", wobble_of(time, x, y)), ("observed pole", observed_wobble(month)[:2])):
        found = matrix("solid") @ [float(np.mean(m)) / RADIAN_PER_ARCSECOND for m in wobble]
        for name, value, expected in zip(("C21", "S21"), found, (-6.2775e-12, -1.6462e-10), strict=True):
            rows.append(Row(f"{name} / 10⁻¹², {label}", 1e12 * expected, 1e12 * float(value), 0.5, ".2f"))
    return rows


GROUPS = (
    Group("Lines on the equator", "published; heights common practice",
          "amplitudes of Cartwright & Tayler (1971) and Cartwright & Edden (1973), Geophys. J. R. astr. Soc. 23 and 33",
          "one decimal of a millimetre is written; classical heights, before the ocean's own attraction", line_heights),
    Group("Arguments", "other library", "ERFA, the fundamental arguments of the IERS Conventions (2010), eq. 5.43",
          "rounding of angles of many turns", arguments),
    Group("Periods of the lines", "published", "Doodson (1921), Proc. R. Soc. A 100, 305-329, and every table since",
          "2e-5 of themselves: five digits are printed", periods),
    Group("Node factor of Mf", "published",
          "1.043 + 0.414 cos N: Schureman (1958), from memory",
          "0.05: the line of twice the node (0.26 of 6.66 cm) is left out here", nodal_factor),
    Group("Two series of polar motion", "other program",
          "the final series C04 and the rapid series of Bulletin A, of different centres",
          "both state errors below 0.1 mas", polar_motion_series),
    Group("Ocean pole tide", "published",
          "IERS Conventions (2010), eq. 6.24, the self-consistent model of Desai (2002)",
          "1 % of the largest coefficient: degree 90, our own coasts; the classical tide misses by 17 %",
          pole_tide_of_the_ocean),
    Group("Solid-Earth pole tide of a month", "published",
          "background model of December 2015, mean pole 84.906, 252.310 mas; IERS Conventions (2010), section 6.4",
          "5e-13: the secular pole of the 2018 update against that of the product", published_month),
)  # fmt: skip
