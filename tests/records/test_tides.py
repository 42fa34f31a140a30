from pathlib import Path

import numpy as np
import pytest

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.records.hourly import days_from_epoch
from massfit.records.tidal_lines import SHORT_TIDES, greenwich_argument
from massfit.records.tides import TideFit, fit_short_tides

START = float(days_from_epoch(np.datetime64("2014-03-01T00:30", "ns")))
PASCAL_PER_MM = 1025.0 * 9.80665e-3
# amplitudes (Pa) and phases of an invented place
TIDES = {"M2": (4000.0, 1.0), "K1": (2500.0, -2.0), "O1": (1800.0, 0.5), "S2": (1500.0, 3.0), "P1": (800.0, -1.9),
         "N2": (800.0, 0.8), "K2": (400.0, 2.9), "S1": (60.0, 1.5), "M4": (30.0, -0.4)}  # fmt: skip


def hours(count: int) -> np.ndarray:
    return START + np.arange(count) / 24.0


def tide_at(days: np.ndarray) -> np.ndarray:
    lines = [size * np.cos(2 * np.pi * SHORT_TIDES[name] * days - lag) for name, (size, lag) in TIDES.items()]
    return np.sum(lines, axis=0)


def amplitude(fit: TideFit, name: str) -> float:
    return next(constant.amplitude for constant in fit.constants if constant.name == name)


def test_known_constants_come_back_from_a_year() -> None:
    days = hours(8784)
    fit = fit_short_tides(days, tide_at(days))
    found = {constant.name: constant for constant in fit.constants}
    for name, (size, lag) in TIDES.items():
        assert found[name].amplitude == pytest.approx(size, abs=0.01)
        greenwich = lag + greenwich_argument(name)
        assert np.angle(np.exp(1j * (found[name].greenwich_lag - greenwich))) == pytest.approx(0.0, abs=1e-3)
    assert [constant.name for constant in fit.constants[:4]] == ["M2", "K1", "O1", "S2"]
    assert fit.merged == ()
    assert not fit.spikes.any()


def test_constants_within_their_errors_under_red_noise(rng: np.random.Generator) -> None:
    # Ornstein-Uhlenbeck weather of 100 Pa and 5 days with white noise of 30 Pa, over drift and an annual cycle
    size, decay = 8784, np.exp(-1 / 120)
    weather = np.empty(size)
    weather[0] = rng.normal(scale=100.0)
    for step, kick in enumerate(rng.normal(scale=100.0 * np.sqrt(1 - decay**2), size=size - 1)):
        weather[step + 1] = decay * weather[step] + kick
    days = hours(size)
    slow = 3000 * np.exp(-np.arange(size) / 800) + 85 * np.cos(2 * np.pi * days / TROPICAL_YEAR_DAYS)
    fit = fit_short_tides(days, tide_at(days) + slow + weather + rng.normal(scale=30.0, size=size))
    # error of an amplitude: sqrt(2 / n) of the density level at its frequency, white and weather together
    for name, (truth, _) in TIDES.items():
        rate = 2 * np.pi * SHORT_TIDES[name] / 24
        level = 30.0**2 + 100.0**2 * (1 - decay**2) / (1 - 2 * decay * np.cos(rate) + decay**2)
        error = np.sqrt(2 * level / size)
        assert abs(amplitude(fit, name) - truth) < 4 * error
        # and the stated error is that one, from a few dozen bins of the spectrum
        stated = next(constant.amplitude_sd for constant in fit.constants if constant.name == name)
        assert stated == pytest.approx(error, rel=0.4)


def test_hourly_means_give_the_constants_of_the_samples() -> None:
    # the mean over an hour holds 0.989 of M2: sin(x) / x at x = pi / 24 times 1.932
    minutes = START + np.arange(60 * 24 * 120) / 1440.0
    means = tide_at(minutes).reshape(-1, 60).mean(axis=1)
    days = minutes.reshape(-1, 60).mean(axis=1)
    spread = np.var(np.arange(60) / 1440.0)
    # 2 Pa: four months do not part K2 and P1, and what is left of them is not white
    assert amplitude(fit_short_tides(days, means, spread=spread), "M2") == pytest.approx(4000.0, abs=2.0)
    assert amplitude(fit_short_tides(days, means), "M2") == pytest.approx(4000.0 * 0.98935, abs=2.0)


def test_spikes_do_not_pull_the_fit(rng: np.random.Generator) -> None:
    days = hours(8784)
    clean = tide_at(days) + rng.normal(scale=20.0, size=days.size)
    planted = rng.choice(days.size, 40, replace=False)
    spoilt = clean.copy()
    spoilt[planted] += rng.choice([-1.0, 1.0], 40) * rng.uniform(2000.0, 1e7, 40)
    fit = fit_short_tides(days, spoilt)
    assert set(planted) <= set(np.flatnonzero(fit.spikes))
    assert np.count_nonzero(fit.spikes) <= 45
    np.testing.assert_allclose(fit.tide, fit_short_tides(days, clean).tide, rtol=0, atol=10.0)


def test_gaps_and_steps_are_bridged() -> None:
    days = hours(9000)
    days = np.delete(days, slice(3000, 3700))
    step = START + 200.2
    values = tide_at(days) + np.where(days >= step, 4000.0, 0.0)
    fit = fit_short_tides(days, values, breaks=[step])
    np.testing.assert_allclose(fit.tide, tide_at(days), rtol=0, atol=0.05)


def test_segments_follow_the_node() -> None:
    # K1 and O1 with the 18.6-year modulation of the potential, 1.006 + 0.115 cos N and 1.009 + 0.187 cos N
    # (Doodson & Warburg 1941, from memory)
    days = hours(4 * 8766)
    node = 2 * np.pi * days / 6798.4
    modulated = sum(
        2000.0 * (mean + swing * np.cos(node)) * np.cos(2 * np.pi * SHORT_TIDES[name] * days)
        for name, mean, swing in (("K1", 1.006, 0.115), ("O1", 1.009, 0.187))
    )
    fit = fit_short_tides(days, modulated)
    assert fit.segments == 4
    # within a year O1 moves by up to 0.187 * 2 pi / 18.6 = 6.3 %, so by half of that about its mean
    assert np.abs(modulated - fit.tide).max() < 0.04 * 4000.0
    # one set of constants for four years misses by more
    alone = np.column_stack([f(2 * np.pi * SHORT_TIDES[n] * days) for n in ("K1", "O1") for f in (np.cos, np.sin)])
    left = modulated - alone @ np.linalg.lstsq(alone, modulated, rcond=None)[0]
    assert np.abs(left).max() > 2.5 * np.abs(modulated - fit.tide).max()


@pytest.mark.parametrize("count", [1, 5, 30, 24 * 3, 24 * 31])
def test_short_records_are_fitted_with_the_lines_they_part(count: int) -> None:
    days = hours(count)
    fit = fit_short_tides(days, tide_at(days))
    assert np.isfinite(fit.tide).all()
    assert {"P1", "K2"} <= set(fit.merged)
    assert np.std(tide_at(days) - fit.tide) <= 600.0


def test_long_period_lines_pass() -> None:
    days = hours(2 * 8766)
    # Mf, Mm, Ssa and Sa
    slow = sum(100.0 * np.cos(2 * np.pi * days / period) for period in (13.66, 27.55, 182.62, 365.24))
    np.testing.assert_allclose(fit_short_tides(days, slow).tide, 0.0, atol=0.01)


def honolulu(folder: Path) -> tuple[np.ndarray, np.ndarray]:
    table = np.loadtxt(folder / "honolulu_hourly_sealevel_2010.asc")
    first = float(days_from_epoch(np.datetime64("2010-01-01", "ns")))
    # day 113225 after 1700-01-01; seven decimals of a day round the hours by 3 ms
    return first + np.round((table[:, 0] - 113225) * 24) / 24, table[:, 1]


@pytest.mark.parametrize(("name", "millimetres"), [("M2", 176.0), ("K1", 156.0), ("O1", 86.0), ("S2", 52.0)])
def test_tides_of_honolulu(open_data: Path, name: str, millimetres: float) -> None:
    days, height = honolulu(open_data)
    # stated with the data to the millimetre, of the year 2010 without nodal factors
    assert amplitude(fit_short_tides(days, height), name) == pytest.approx(millimetres, abs=0.6)


def test_tides_of_honolulu_by_a_general_tide_library(open_data: Path) -> None:
    utide = pytest.importorskip("utide")
    days, height = honolulu(open_data)
    names = ["M2", "K1", "O1", "S2", "P1", "N2", "K2", "Q1", "M4"]
    time = np.datetime64("2000-01-01", "ns") + (days * 86_400e9).astype("timedelta64[ns]")
    choices = {"constit": "auto", "method": "ols", "conf_int": "none", "verbose": False}
    seen, mean = (utide.solve(time, height, lat=21.3, nodal=nodal, **choices) for nodal in (False, True))
    fit = fit_short_tides(days, height)
    found = {constant.name: constant for constant in fit.constants}
    for name in names:
        ours, theirs = found[name], list(seen.name).index(name)
        # weather of some cm beside a straight line moves their small lines by a millimetre
        assert ours.amplitude == pytest.approx(seen.A[theirs], abs=1.0)
        lag = np.angle(np.exp(1j * (ours.greenwich_lag - np.radians(seen.g[theirs]))))
        assert abs(lag) * ours.amplitude < 1.0
        # over 18.6 years: their modulation has many side lines, ours is that of the node alone (2 %, 1 degree)
        theirs = list(mean.name).index(name)
        if name != "M4":
            assert ours.amplitude / ours.nodal_factor == pytest.approx(mean.A[theirs], abs=1.0, rel=0.025)
            turned = ours.greenwich_lag + ours.nodal_angle - np.radians(mean.g[theirs])
            assert abs(np.angle(np.exp(1j * turned))) < np.radians(1.5) + 1.0 / ours.amplitude


def test_inference_removes_what_two_months_of_a_real_record_do_not_part(
    open_data: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    days, height = honolulu(open_data)
    whole = fit_short_tides(days, height).tide

    def left() -> float:
        """Standard deviation of what pieces of 60 days leave of the tide of the year, mm."""
        pieces = [slice(start, start + 1440) for start in range(0, 8640, 1440)]
        rest = [whole[piece] - fit_short_tides(days[piece], height[piece]).tide for piece in pieces]
        return float(np.std(rest))

    inferred = left()
    monkeypatch.setattr("massfit.records.tides.companions", lambda _names, _days: ())
    # 12 against 21 mm, in a harbour with weather at the tides' frequencies
    assert inferred < 0.65 * left()


def test_greenwich_lags_are_those_of_a_second_real_record_by_the_same_library(open_data: Path) -> None:
    utide = pytest.importorskip("utide")
    table = np.loadtxt(open_data / "deep_recorder_21401_201103.txt")
    table = table[(table[:, 6] == 1) & (table[:, 7] != 9999.0)]
    stamps = np.array(["{:04.0f}-{:02.0f}-{:02.0f}T{:02.0f}:{:02.0f}".format(*row[:5]) for row in table])
    time = stamps.astype("datetime64[ns]")
    order = np.argsort(time)
    time, height = time[order], 1000.0 * table[order, 7]
    choices = {"constit": ["M2", "S2", "N2", "K1", "O1", "Q1"], "method": "ols", "conf_int": "none", "nodal": False}
    theirs = utide.solve(time, height, lat=42.6, trend=True, verbose=False, **choices)
    days = days_from_epoch(time)
    found = {constant.name: constant for constant in fit_short_tides(days, height).constants}
    for name, amplitude_mm, lag_deg in zip(theirs.name, theirs.A, theirs.g, strict=True):
        ours = found[name]
        # six lines and a straight line against 25 over splines, in one month: 5 mm in the plane
        turned = ours.amplitude * np.exp(1j * ours.greenwich_lag) - amplitude_mm * np.exp(1j * np.radians(lag_deg))
        assert abs(turned) < 5.0
