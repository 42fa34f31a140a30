import numpy as np
import pytest

from massfit.simulate.tides import _RATE, LINES, short_tides

# degrees per mean solar hour (Schureman 1958, table 2)
SPEEDS = {
    "M2": 28.9841042, "S2": 30.0, "N2": 28.4397295, "K2": 30.0821373, "2N2": 27.8953548, "NU2": 28.5125831,
    "T2": 29.9589333, "K1": 15.0410686, "O1": 13.9430356, "P1": 14.9589314, "Q1": 13.3986609, "S1": 15.0,
    "M4": 57.9682084,
}  # fmt: skip


@pytest.mark.parametrize("line", LINES, ids=lambda line: line.name)
def test_speeds_are_the_published_ones(line) -> None:
    moon, sun, perigee, _ = _RATE
    rates = np.array([360.0 + sun - moon, moon, sun, perigee])  # degrees a day
    # T2 is taken without the motion of the solar perigee, 0.00005 degrees a day; the rest agree to the last digit
    assert np.dot(line.multiples, rates) / 24.0 == pytest.approx(SPEEDS[line.name], abs=4e-6)


def amplitudes(start: str) -> dict[str, float]:
    """Amplitudes of the main lines fitted to 200 days, that the same site shows at another time."""
    time = np.datetime64(start) + np.timedelta64(1, "h") * np.arange(200 * 24)
    hours = (time - np.datetime64("2000-01-01")) / np.timedelta64(1, "h")
    height = short_tides(np.random.default_rng(5), time)
    names = [name for name in SPEEDS if name not in ("T2", "S1")]  # these need a year
    angle = np.deg2rad(np.outer(hours, [SPEEDS[name] for name in names]))
    fit = np.linalg.lstsq(np.hstack([np.cos(angle), np.sin(angle)]), height, rcond=None)[0]
    return dict(zip(names, np.hypot(*fit.reshape(2, -1)), strict=True))


def test_nodal_modulation_has_the_published_size_and_time() -> None:
    # the Moon's node passed the equinox in June 2006 and the opposite point in October 2015 (major and minor
    # standstill); factors of Pugh (1987), table 4.3: M2 1 -+ 0.037, O1 1.009 +- 0.187
    major, minor = amplitudes("2006-03-10"), amplitudes("2015-07-01")
    assert minor["M2"] / major["M2"] == pytest.approx(1.037 / 0.963, abs=0.01)
    assert major["O1"] / minor["O1"] == pytest.approx(1.196 / 0.822, abs=0.02)


def test_nothing_is_slower_than_a_day() -> None:
    time = np.datetime64("2015-01-01T00:30") + np.timedelta64(1, "h") * np.arange(365 * 24)
    height = short_tides(np.random.default_rng(5), time)
    monthly = height[: 360 * 24].reshape(12, -1).mean(axis=1)
    assert np.abs(monthly).max() < 0.01 * height.std()
