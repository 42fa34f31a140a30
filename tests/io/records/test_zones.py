"""Zones that headers, attributes and stamps name, and lines that only look like it."""

import pytest

from massfit.io.records.zones import zone_hours, zone_of_stamp, zone_of_text, zones_of_header


@pytest.mark.parametrize(
    ("line", "zone"),
    [
        ("# Time zone: UTC", "UTC"),
        ("% timezone = GMT+9", "GMT+9"),
        ("time (JST) pressure", "JST"),
        ("all times are given in PST", "PST"),
        ("Times in UTC, pressure in dbar", "UTC"),
        ("in local standard time", "local standard time"),
        ("# operator sheet; times HST", "HST"),
        ("date_time_JST;pressure", "JST"),
        ("# Times are UTC-10, on the hour", "UTC-10"),
        ("# date: EST", "EST"),
        ("response time est. 5 s", ""),
        ("sometimes MST 3 was used", ""),
        ("West Est. Laboratory, first in line at times", ""),
        ("deployed by MV Zulu, metres", ""),
        ("#YY MM DD hh mm ss T HEIGHT", ""),
    ],
)
def test_lines_of_a_header(line: str, zone: str) -> None:
    assert zone_of_text(line) == zone


@pytest.mark.parametrize(
    ("zone", "hours"),
    [
        ("UTC", 0.0), ("gmt", 0.0), ("UTC (Z)", 0.0), ("Coordinated Universal Time", 0.0), ("UTC+00:00", 0.0),
        ("UTC-10", -10.0), ("GMT+5:30", 5.5), ("+0930", 9.5), ("-10", -10.0), ("hst", -10.0), ("Etc/GMT+10", None),
        ("Pacific/Honolulu", None), ("local", None),
    ],
)  # fmt: skip
def test_hours_of_a_zone(zone: str, hours: float | None) -> None:
    assert zone_hours(zone) == hours


def test_local_time_beside_utc_may_be_that_of_something_else() -> None:
    lines = [(1, "# deployed at noon local time"), (2, "# time in UTC")]
    assert zones_of_header(lines) == [("UTC", 2)]
    assert zones_of_header(lines[:1]) == [("local time", 1)]


@pytest.mark.parametrize("stamp", ["03/02/2016 04:30 PM", "3 Feb 2016", "2016-02-03T04:30Z", "20160203T0430", "12.5"])
def test_stamps_without_a_zone(stamp: str) -> None:
    assert zone_of_stamp(stamp) == ""
