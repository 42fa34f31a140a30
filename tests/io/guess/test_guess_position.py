"""Positions of headers: right, or left open; never another place. The degrees are arithmetic on what is written."""

import pytest

from massfit.io.guess.guess_words import place_of_prose

SOUTH = [
    "Latitude: 12 30.6 S",
    "# Latitude: 12 30 36 S",
    "latitude = -12 30.6",
    "Latitude (S): 12.51",
    "Lat: S 12 30.6",
    "lat 12,51 S",
    "Latitude: 12 deg 30.6 min S",
    "Latitude: 12.51 degrees south",
    "Latitude: 12:30.6 S",
    "Latitude: 12.51 S",
    "LAT 12°30.6'S",
    "Latitude: 12-30.6S",
    "Latitude [deg]: -12.51",
    "latitude in degrees: -12.51",
    "Latitude 12°30'36\" S (WGS 84)",
    "Latitude: 12.51S, Longitude: 140.25W",
    "Lat. 12.51 S depth 4300 m",
    "latitude degrees north: -12.51",
]
UNCLEAR = [
    "Latitude: 12.51 30 S",
    "Latitude: 12 75.0 S",
    "Latitude: 12.51 E",
    "Latitude: 12.51 or 13.2",
    "Latitude: 95.0",
    "Latitude (S): 12.51 N",
    "Latitude: 12 30.6 x 7 S",
    "Latitude: unknown",
    "Latitude: 12.51 x S",
]
PAIRS = [
    "Position: 12.51S, 140.25W",
    "POSITION 12-30.6S 140-15.0W",
    "at 12 30.6 S 140 15.0 W",
    '"Q7","12.51 S","140.25 W"',
    "12°30.6'S 140°15'W",
]


@pytest.mark.parametrize("line", SOUTH)
def test_every_spelling_is_read_whole(line: str) -> None:
    assert place_of_prose([line])["latitude"][0] == pytest.approx(-12.51, abs=1e-9)


@pytest.mark.parametrize("line", UNCLEAR)
def test_what_is_not_understood_whole_is_left_open(line: str) -> None:
    assert "latitude" not in place_of_prose([line])


@pytest.mark.parametrize("line", PAIRS)
def test_two_sides_make_a_position(line: str) -> None:
    found = place_of_prose([line])
    assert (found["latitude"][0], found["longitude"][0]) == pytest.approx((-12.51, -140.25), abs=1e-9)


@pytest.mark.parametrize(
    ("line", "east"), [("Lon: 140 15.0 W", -140.25), ("longitude = 232.4 E", 232.4), ("Long 158.1", 158.1)]
)
def test_longitudes_take_either_convention(line: str, east: float) -> None:
    assert place_of_prose([line])["longitude"][0] == pytest.approx(east)
