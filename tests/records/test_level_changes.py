import numpy as np
import pytest

from massfit.records.level_changes import (
    between_levels,
    declared_changes,
    find_level_changes,
    flattened,
    in_order,
    level_breaks,
)
from massfit.records.record import LevelChange, Record

EPOCH = np.datetime64("2000-01-01T00:00", "ns")
DAY = np.timedelta64(1, "D")
HOURS = (np.arange(24 * 300) + 0.5) / 24


def noise(rng: np.random.Generator) -> np.ndarray:
    return 60.0 * np.sin(HOURS / 3.0) + rng.normal(scale=20.0, size=HOURS.size)


def test_declared_changes_in_order_of_time() -> None:
    steps, ramps = (EPOCH + 9 * DAY, EPOCH + 2 * DAY), ((EPOCH + 4 * DAY, EPOCH + 6 * DAY),)
    record = Record("A", "A/1", np.empty(0, "datetime64[ns]"), np.empty(0), steps=steps, ramps=ramps)
    changes = declared_changes(record)
    assert [change.kind for change in changes] == ["step", "ramp", "step"]
    # a new level begins at a step and at the end of a ramp
    assert level_breaks(changes).tolist() == [2.0, 6.0, 9.0]
    assert between_levels(np.array([3.9, 4.0, 5.0, 6.0, 9.0]), changes).tolist() == [False, True, True, False, False]


def test_a_step_with_a_slow_end_is_both(rng: np.random.Generator) -> None:
    level = noise(rng) + 6000.0 * (HOURS >= 100.25) + 3000.0 * np.clip((HOURS - 100.25) / 5.0, 0, 1)
    found, action = find_level_changes(HOURS, level, (), coarse=False)
    assert [change.kind for change in found] == ["step", "ramp"]
    assert sum(change.size for change in found) == pytest.approx(9000.0, rel=0.05)
    assert action.count == 2
    assert "ramp 2000-04-1" in action.detail


@pytest.mark.parametrize("coarse", [False, True])
def test_a_ramp_and_a_gap_by_hours_and_by_days(rng: np.random.Generator, coarse: bool) -> None:
    level = noise(rng) + 4000.0 * np.clip((HOURS - 100) / 3.0, 0, 1) - 2500.0 * (HOURS > 200)
    kept = (HOURS < 199) | (HOURS > 204)
    days, level = HOURS[kept], level[kept]
    if coarse:
        day = np.unique(np.floor(days))
        level = np.array([level[np.floor(days) == one].mean() for one in day])
        days = day + 0.5
    found, _ = find_level_changes(days, level, (), coarse=coarse)
    assert [change.kind for change in found] == ["ramp", "change across a gap"]
    np.testing.assert_allclose([change.size for change in found], [4000.0, -2500.0], atol=250.0)
    assert abs(found[0].start - (EPOCH + 100 * DAY)) <= DAY
    assert (found[1].start, found[1].end) == (EPOCH + 199 * DAY, EPOCH + 204 * DAY)


@pytest.mark.parametrize("coarse", [False, True])
def test_declared_changes_are_not_found_again(rng: np.random.Generator, coarse: bool) -> None:
    declared = LevelChange(EPOCH + 100 * DAY, EPOCH + 103 * DAY, found=False)
    level = noise(rng) + 4000.0 * np.clip((HOURS - 100) / 3.0, 0, 1)
    kept = ~between_levels(HOURS, [declared])
    days, level = (each[kept][:: 24 if coarse else 1] for each in (HOURS, level))
    assert find_level_changes(days, level, [declared], coarse=coarse)[0] == ()
    # control: undeclared it is found, as a change that happened unseen
    assert [change.kind for change in find_level_changes(days, level, (), coarse=coarse)[0]] == ["change across a gap"]


def test_changes_are_taken_out() -> None:
    level = 500.0 * (HOURS >= 50) - 900.0 * (HOURS >= 120)
    np.testing.assert_allclose(flattened(HOURS, level, np.array([50.0, 120.0])), 0.0, atol=1e-9)


def test_order_of_changes_at_one_instant() -> None:
    step, ramp = LevelChange(EPOCH, EPOCH, found=True), LevelChange(EPOCH, EPOCH + DAY, found=False)
    assert in_order([step, ramp]) == (ramp, step)
