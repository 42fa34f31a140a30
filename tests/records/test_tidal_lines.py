import csv
from pathlib import Path

import pytest

from massfit.records.tidal_lines import SHORT_TIDES, parted_lines

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
