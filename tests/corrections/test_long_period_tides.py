"""Lines, arguments and signs of the long-period tides."""

import csv
from pathlib import Path

import erfa
import numpy as np
import pytest

from massfit.corrections.long_period_tides import (
    LINES,
    NORMALISATION,
    line_table,
    mean_longitudes,
    zonal_function,
    zonal_height,
)

REFERENCE = Path(__file__).parents[1] / "reference" / "long_period_tides_cartwright.csv"

# lines that stand beside those of the package, so that the fit to the bodies can tell them apart
OTHERS = [
    *((1, 0, -1, 1, 0), (1, 0, -1, -1, 0), (1, 0, 1, 0, 0), (1, 0, 1, 1, 0), (3, 0, -1, 1, 0), (3, -2, 1, 0, 0)),
    *((2, 0, 0, 2, 0), (2, 0, -2, 0, 0), (4, -2, 0, 0, 0), (4, 0, -2, 0, 0), (0, 0, 0, 2, 0), (0, 3, 0, 0, -1)),
]


def published() -> list[dict[str, str]]:
    return list(csv.DictReader(row for row in REFERENCE.read_text().splitlines() if not row.startswith("#")))


def days(start: str, end: str) -> np.ndarray:
    return np.arange(start, end, dtype="datetime64[D]").astype("datetime64[ns]")


def test_lines_are_the_published_ones() -> None:
    rows = {row["line"]: row for row in published()}
    assert [line.name for line in LINES] == list(rows)
    for line in LINES:
        row = rows[line.name]
        assert line.multipliers == tuple(int(row[key]) for key in ("s", "h", "p", "n", "ps"))
        assert line.height_m == pytest.approx(float(row["height_cm"]) / 100.0, abs=1e-12)


@pytest.mark.parametrize("row", published(), ids=lambda row: row["line"])
def test_height_of_each_line_on_the_equator(row: dict[str, str]) -> None:
    # the classical height: the self-consistent one is larger there (tests/corrections/test_responses.py)
    line = next(line for line in LINES if line.name == row["line"])
    largest = np.abs(zonal_height(days("2000-01-01", "2019-01-01"), lines=(line,)) * zonal_function(0.0)).max()
    assert 1000.0 * largest == pytest.approx(float(row["equator_mm"]), abs=0.05)


def test_mean_longitudes_are_those_of_the_standard() -> None:
    # the same polynomials in the library ERFA (Essential Routines for Fundamental Astronomy)
    time = days("1990-01-01", "2040-01-01")[::97]
    t = (time - np.datetime64("2000-01-01T12:00:00", "ns")) / np.timedelta64(36525 * 24, "h")
    anomaly, sun_anomaly, latitude = erfa.fal03(t), erfa.falp03(t), erfa.faf03(t)
    elongation, node = erfa.fad03(t), erfa.faom03(t)
    moon, sun = latitude + node, latitude + node - elongation
    expected = np.stack([moon, sun, moon - anomaly, -node, sun - sun_anomaly], axis=-1)
    # the library reduces its angles to one turn: compare directions
    np.testing.assert_allclose(np.exp(1j * mean_longitudes(time)), np.exp(1j * expected), atol=1e-9)


def degree_two_zonal_height(time: np.ndarray) -> np.ndarray:
    """Sum of H cos(argument), m, from where Moon and Sun are: positions and the equator of date from ERFA."""
    date = 2451544.5 + (time - np.datetime64("2000-01-01", "ns")) / np.timedelta64(1, "D")
    nothing = np.zeros_like(date)
    moon, sun = erfa.moon98(date, nothing)["p"], -erfa.epv00(date, nothing)[0]["p"]
    to_date = erfa.pnm06a(date, nothing)
    radius, gm_earth, gravity = 6378136.6, 3.986004418e14, 9.798  # IERS Conventions 2010; mean gravity of the surface
    height = np.zeros(len(time))
    for body, gm in ((moon, 0.0123000371 * gm_earth), (sun, 1.32712442099e20)):
        position = np.einsum("nij,nj->ni", to_date, body) * erfa.DAU
        distance = np.linalg.norm(position, axis=1)
        sine = position[:, 2] / distance
        height += gm / (gravity * radius) * (radius / distance) ** 3 * (1.5 * sine**2 - 0.5)
    return height / NORMALISATION


def test_lines_are_what_moon_and_sun_do() -> None:
    time = days("1990-01-01", "2027-03-16")[::2]  # two turns of the node; no line aliases at two days
    longitudes = mean_longitudes(time)
    arguments = longitudes @ np.array([line.multipliers for line in LINES] + OTHERS, dtype=float).T
    design = np.concatenate([np.ones((len(time), 1)), np.cos(arguments), np.sin(arguments)], axis=1)
    height = degree_two_zonal_height(time)
    fitted = np.linalg.lstsq(design, height, rcond=None)[0]
    in_phase = dict(zip([line.name for line in LINES], fitted[1:], strict=False))
    out_of_phase = dict(zip([line.name for line in LINES], fitted[1 + arguments.shape[1] :], strict=False))
    for line in LINES:
        # tables are rounded to 0.01 cm, gravity is good to 0.3 %; h + p_s (0.03 cm) cannot be told from Sa in 37 years
        tolerance = 3e-4 if line.name == "Sa" else 1.5e-4
        assert in_phase[line.name] == pytest.approx(line.height_m, abs=tolerance), line.name
        assert out_of_phase[line.name] == pytest.approx(0.0, abs=1.5e-4), line.name


def test_the_nine_lines_are_nearly_all_of_the_zonal_tide() -> None:
    time = days("2010-01-01", "2016-01-01")
    whole, ours = degree_two_zonal_height(time), zonal_height(time) / (0.6928 * NORMALISATION)
    left = np.std((whole - whole.mean()) - (ours - ours.mean()))
    assert left < 0.12 * np.std(whole)
    # control: the wrong sign of the node's argument or of the heights would leave more than the tide itself
    assert np.std((whole - whole.mean()) + (ours - ours.mean())) > np.std(whole)


def test_zonal_function_has_no_mean_on_the_sphere() -> None:
    nodes, weights = np.polynomial.legendre.leggauss(8)
    assert float(weights @ zonal_function(np.degrees(np.arcsin(nodes)))) == pytest.approx(0.0, abs=1e-14)


# days; Doodson (1921) and every table of tidal speeds since
PERIODS = {
    **{"node": 6798.4, "Sa": 365.26, "Ssa": 182.621, "MSm": 31.812, "Mm": 27.5546, "MSf": 14.7653, "Mf": 13.6608},
    "Mtm": 9.1329,
}


def test_periods_are_the_published_ones() -> None:
    table = {row["line"]: row["period_days"] for row in line_table(1.0)}
    for name, period in PERIODS.items():
        assert table[name] == pytest.approx(period, rel=2e-5), name


def test_the_nodal_side_line_modulates_mf_as_published() -> None:
    # node factor of Mf: 1.043 + 0.414 cos N (Schureman 1958, from memory); the 0.043 is a line we leave out
    time = days("2000-01-01", "2019-01-01")
    pair = tuple(line for line in LINES if line.name in {"Mf", "2s+N'"})
    arguments = mean_longitudes(time)
    turning = sum(line.height_m * np.exp(1j * (arguments @ np.array(line.multipliers, float))) for line in pair)
    factor = np.abs(turning) / 0.0666
    assert factor.max() == pytest.approx(1.043 + 0.414, abs=0.05)
    assert factor.min() == pytest.approx(1.043 - 0.414, abs=0.05)
    shares = {row["line"]: row["nodal_share"] for row in line_table(1.0)}
    assert shares["Mf"] == pytest.approx(0.5 * (factor.max() - factor.min()), abs=1e-3)
    assert [name for name, share in shares.items() if share] == ["Mf"]


def test_amplitudes_of_the_lines_are_what_the_series_holds() -> None:
    # a slow twin: least squares of every line in the series of a site over two turns of the node
    time = days("1990-01-01", "2027-03-16")[::3]
    response = -4321.0
    arguments = mean_longitudes(time) @ np.array([line.multipliers for line in LINES], dtype=float).T
    design = np.concatenate([np.cos(arguments), np.sin(arguments)], axis=1)
    fitted = np.linalg.lstsq(design, response * zonal_height(time), rcond=None)[0].reshape(2, -1)
    np.testing.assert_allclose([row["amplitude"] for row in line_table(response)], np.hypot(*fitted), rtol=1e-6)
