import csv
from pathlib import Path

import numpy as np
import pytest

from massfit.records.nodal import nodal_modulation
from massfit.records.tidal_lines import SHORT_TIDES, greenwich_argument, parted_lines

REFERENCE = Path(__file__).parents[1] / "reference" / "tidal_speeds_schureman.csv"


def published_speeds() -> list[tuple[str, float]]:
    lines = [line for line in REFERENCE.read_text().splitlines() if not line.startswith("#")]
    return [(row["line"], float(row["degrees_per_hour"])) for row in csv.DictReader(lines)]


@pytest.mark.parametrize(("line", "speed"), published_speeds())
def test_speed_is_the_published_one(line: str, speed: float) -> None:
    # printed to 1e-7 deg/h; the perigee and the node of 1900 move 1e-7 deg/h slower or faster than today's.
    # S1 is printed as the solar day and differs from its Doodson number by the solar perigee, 2e-6 deg/h.
    assert SHORT_TIDES[line] * 15.0 == pytest.approx(speed, abs=2.1e-6 if line == "S1" else 2e-7)


def test_every_speed_agrees_with_a_general_tide_library() -> None:
    constants = pytest.importorskip("utide._ut_constants").ut_constants.const
    theirs = dict(zip((name.strip().casefold() for name in constants.name), constants.freq * 24.0, strict=True))
    spelling = {"sigma1": "sig1", "lambda2": "lda2", "theta1": "the1"}
    for name, frequency in SHORT_TIDES.items():
        # cycles per day; 1e-8 turns by a thousandth of a degree in a year
        assert frequency == pytest.approx(theirs[spelling.get(name, name.casefold())], abs=1e-8)


DAYS = [0.0, 2000.5, 4500.25, 6000.0, 9000.75]


def arguments_of_a_general_library(days: float) -> dict[str, tuple[float, float, float]]:
    """Nodal factor, nodal turn and argument (turns) of every line, by Darwin name."""
    harmonics = pytest.importorskip("utide.harmonics")
    names = [name.strip().casefold() for name in harmonics.ut_constants.const.name]
    spelling = {"sigma1": "sig1", "lambda2": "lda2", "theta1": "the1"}
    lines = np.array([names.index(spelling.get(name, name.casefold())) for name in SHORT_TIDES])
    # days of the proleptic calendar; no latitude enters, since the ratios of the node's own side lines do not need it
    time = np.array([float(np.datetime64("2000-01-01").astype(int) + 719_163) + days])
    factor, turn, argument = harmonics.FUV(time, time[0], lines, 21.0, [0, 0, 0, 0])
    rows = zip(factor[0].tolist(), turn[0].tolist(), argument[0].tolist(), strict=True)
    return dict(zip(SHORT_TIDES, rows, strict=True))


@pytest.mark.parametrize("days", DAYS)
def test_greenwich_arguments_are_those_of_a_general_tide_library(days: float) -> None:
    for name, (_, _, theirs) in arguments_of_a_general_library(days).items():
        turns = greenwich_argument(name) / (2 * np.pi) + SHORT_TIDES[name] * days - theirs
        # linear mean longitudes against theirs with squares of time
        assert abs((turns + 0.5) % 1.0 - 0.5) * 360.0 < 0.01, name


@pytest.mark.parametrize("days", DAYS)
def test_modulation_by_the_node_is_that_of_a_general_tide_library(days: float) -> None:
    for name, (factor, turn, _) in arguments_of_a_general_library(days).items():
        ours = nodal_modulation(name, days)
        if ours is not None and name != "S1":  # S1 is theirs with the side lines of its gravity, not of the air
            # the node alone against every side line
            assert ours[0] == pytest.approx(factor, abs=0.035), name
            assert abs(np.degrees(ours[1]) - 360.0 * turn) < 2.5, name


def test_published_modulation_at_the_extremes() -> None:
    # Pugh (1987), section 4.2.2: M2 by 3.7 % either way, K2 by 28.6 %, O1 by 18.7 %, over 18.6 years
    span = np.arange(0.0, 18.7 * 365.25, 10.0)
    for name, swing in {"M2": 0.037, "K2": 0.286, "O1": 0.187, "K1": 0.115}.items():
        factors = [nodal_modulation(name, day)[0] for day in span]
        assert 0.5 * np.ptp(factors) == pytest.approx(swing, abs=0.001)


def test_no_line_is_slower_than_diurnal() -> None:
    # the annual and the semi-annual cycle are the target and are never fitted as tides
    assert min(SHORT_TIDES.values()) > 0.85


@pytest.mark.parametrize(
    ("span_days", "together", "apart"),
    [
        (29.0, [("K1", "P1"), ("S2", "K2"), ("K1", "S1")], [("M2", "S2"), ("K1", "O1"), ("M2", "N2")]),
        (183.0, [("K1", "S1"), ("S2", "T2")], [("K1", "P1"), ("S2", "K2")]),
        (365.0, [], [("K1", "S1"), ("K1", "psi1"), ("S2", "T2"), ("S2", "R2"), ("M2", "H1"), ("P1", "pi1")]),
    ],
)
def test_criterion_of_rayleigh(span_days: float, together: list[tuple[str, str]], apart: list[tuple[str, str]]) -> None:
    # synodic periods: M2-S2 14.8 d, M2-N2 27.6 d, K1-P1 and S2-K2 182.6 d, K1-S1 365.2 d
    names = parted_lines(span_days)
    for major, minor in together:
        assert major in names
        assert minor not in names
    for pair in apart:
        assert set(pair) <= set(names)
