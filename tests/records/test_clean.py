from datetime import date

import numpy as np
import pytest
from scipy.ndimage import median_filter

from massfit.records.clean import find_spikes, usable_samples
from massfit.site import Interval

HOURS = np.datetime64("2016-01-01", "ns") + np.arange(240) * np.timedelta64(1, "h")


def test_order_of_rows_does_not_matter(rng: np.random.Generator) -> None:
    values = rng.normal(size=HOURS.size)
    mixed = rng.permutation(HOURS.size)
    time, pressure, actions = usable_samples(HOURS[mixed], values[mixed])
    np.testing.assert_array_equal(time, HOURS)
    np.testing.assert_array_equal(pressure, values)
    assert [action.what for action in actions] == ["samples put in order of time"]


def test_missing_values_and_stamps_are_counted() -> None:
    values, stamps = np.arange(240.0), HOURS.copy()
    values[[3, 5]], stamps[7] = np.nan, np.datetime64("NaT")
    time, pressure, actions = usable_samples(stamps, values)
    assert time.size == 237
    assert not np.isin([3.0, 5.0, 7.0], pressure).any()
    assert [(action.what, action.count) for action in actions] == [("samples without a value left out", 3)]


def test_window_is_inclusive_and_exclusion_has_both_ends() -> None:
    gap = Interval(np.datetime64("2016-01-04T05:00"), np.datetime64("2016-01-04T07:00"), "ship overhead")
    time, _, actions = usable_samples(HOURS, np.zeros(240), exclude=[gap], start=date(2016, 1, 3), end=date(2016, 1, 4))
    assert time[0] == np.datetime64("2016-01-03T00:00")
    assert time[-1] == np.datetime64("2016-01-04T23:00")
    assert time.size == 48 - 3
    assert [action.count for action in actions] == [240 - 48, 3]
    assert "ship overhead" in actions[1].detail


def test_inputs_are_left_alone() -> None:
    stamps, values = HOURS[::-1].copy(), np.arange(240.0)
    usable_samples(stamps, values)
    np.testing.assert_array_equal(stamps, HOURS[::-1])
    np.testing.assert_array_equal(values, np.arange(240.0))


def test_single_and_paired_spikes_are_found_and_noise_is_not(rng: np.random.Generator) -> None:
    values = rng.normal(scale=20.0, size=20_000)
    planted = np.arange(50, 20_000, 400)
    values[planted] += 1000.0
    values[planted[::2] + 1] += 900.0
    np.testing.assert_array_equal(np.flatnonzero(find_spikes(values)), np.sort(np.append(planted, planted[::2] + 1)))


def test_first_and_last_sample_can_be_spikes(rng: np.random.Generator) -> None:
    values = rng.normal(size=200)
    values[[0, -1]] = 1e8
    assert np.flatnonzero(find_spikes(values)).tolist() == [0, 199]


@pytest.mark.parametrize("shape", ["step", "ramp", "burst"])
def test_steps_are_no_spikes(rng: np.random.Generator, shape: str) -> None:
    # a quiet record, then a change of level, a fast ramp, three bad samples
    after = np.arange(-2000, 2000)
    event = {
        "step": 5000.0 * (after > 0),
        "ramp": 5000.0 * np.clip(after / 20.0, 0, 1),
        "burst": 5000.0 * ((after > 0) & (after < 4)),
    }[shape]
    assert not find_spikes(event + rng.normal(scale=3.0, size=4000))[1990:2010].any()


def test_a_tsunami_is_not_eaten(rng: np.random.Generator) -> None:
    # 0.8 m of water, 15 minutes, sampled every 15 s, over a noise of 0.3 mm: hours of energy, sharp crests
    after = np.clip(np.arange(-2000, 2000), 0, None)
    wave = 8000.0 * np.sin(2 * np.pi * after / 60.0) * np.exp(-after / 400)
    spikes = find_spikes(wave + rng.normal(scale=3.0, size=4000))
    assert np.mean(spikes[2000:2600]) < 0.05
    assert np.std(wave[2000:2600][~spikes[2000:2600]]) == pytest.approx(np.std(wave[2000:2600]), rel=0.03)


def test_no_more_than_one_sample_in_a_hundred(rng: np.random.Generator) -> None:
    # a Cauchy error has no scale: the cap, not the threshold, decides
    spikes = find_spikes(20.0 * rng.standard_cauchy(10_000))
    assert 90 <= np.count_nonzero(spikes) <= 100


def test_a_coarse_counting_step_is_no_spike() -> None:
    # counts of 100 Pa (1 cm of water): most neighbours are equal
    values = 100.0 * np.round(np.sin(np.arange(5000) / 200.0) * 3)
    assert not find_spikes(values).any()


@pytest.mark.parametrize("size", [5, 6, 13, 95, 96, 97, 1000])
@pytest.mark.parametrize("error", ["normal", "cauchy", "counts"])
def test_spikes_are_those_of_plain_filters(
    size: int, error: str, rng: np.random.Generator, monkeypatch: pytest.MonkeyPatch
) -> None:
    # slow twin: a general median filter, the scale of every block, nothing skipped and no stretches
    values = {"normal": rng.normal, "cauchy": rng.standard_cauchy, "counts": rng.normal}[error](size=size) * 20.0
    if error == "counts":
        values = np.round(values, -1)
    values[:: max(size // 7, 3)] += 400.0
    apart = np.abs(values - median_filter(values, size=5, mode="mirror"))
    blocks = np.minimum(np.arange(size) // 96, max(1, size // 96) - 1)

    def scale(some: np.ndarray) -> float:
        above = np.sort(some[some > 0.0])
        return 1.4826 * float(above[above.size // 2]) if above.size else 0.0

    whole_blocks = apart[: size - size % 96 if size >= 96 else size]  # the last one counts for what is left over
    of_blocks = np.array([scale(part) for part in np.split(whole_blocks, max(1, size // 96))])
    ratio = apart / np.maximum(np.maximum(of_blocks[blocks], scale(apart)), 1.0)
    expected = ratio > 8.0
    most = max(1, size // 100)
    if np.count_nonzero(expected) > most:
        expected &= ratio > np.sort(ratio)[-most - 1]
    monkeypatch.setattr("massfit.records.stretches.AT_ONCE", 7)
    np.testing.assert_array_equal(find_spikes(values), expected)


def test_short_stretches_are_left_alone() -> None:
    assert not find_spikes(np.array([0.0, 1e9, 0.0, 0.0])).any()


def test_repeats_of_a_sample_are_dropped_and_those_that_differ_averaged() -> None:
    time = np.datetime64("2016-01-01", "ns") + np.array([0, 1, 1, 2, 2, 2, 3, 4, 4]) * np.timedelta64(1, "h")
    pressure = np.array([1.0, 5.0, 5.0, 7.0, 9.0, 11.0, 2.0, 0.1, 0.1])
    kept, values, actions = usable_samples(time, pressure)
    assert kept.size == 5
    # 0.1 stays what it is: the mean of two equal numbers is not taken
    assert values.tolist() == [1.0, 5.0, 9.0, 2.0, 0.1]
    assert [(action.what, action.count, action.detail) for action in actions] == [
        ("repeated samples left out", 2, "the same stamp and the same value"),
        ("repeated stamps averaged", 2, "the same stamp and other values, up to 0.04 hPa apart"),
    ]
