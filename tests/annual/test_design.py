"""Columns and rows of the linear model."""

import numpy as np

from massfit.annual.design import build_design
from massfit.settings import Priors

DAY = np.timedelta64(1, "D")


def test_overlapping_deployments_are_merged_in_time(make_record):
    rng = np.random.default_rng(1)
    late = make_record(rng, count=100, first=50.5, label="late")
    early = make_record(rng, count=100, label="early")
    design = build_design([late, early], reference_year=2016, priors=Priors())
    assert np.all(np.diff(design.days) >= 0)
    assert np.sum(np.diff(design.days) == 0) == 50
    for record, drift in zip((late, early), design.drifts, strict=True):
        np.testing.assert_allclose(design.data[drift.rows], record.pressure - record.pressure.mean())
        np.testing.assert_allclose(design.elapsed[drift.rows], np.arange(100) + 0.5)
        # its level is its own rows and nothing else
        assert set(np.flatnonzero(design.fixed[:, drift.offset])) == set(drift.rows)


def test_steps_without_data_of_their_own_are_dropped_with_a_note(make_record):
    rng = np.random.default_rng(1)
    plain = make_record(rng, count=100)
    middle, twin = plain.time[40], plain.time[40] - np.timedelta64(6, "h")
    steps = (plain.time[0] - DAY, middle, twin, plain.time[-1] + DAY)
    record = make_record(rng, count=100, steps=steps)
    design = build_design([record], reference_year=2016, priors=Priors())
    assert len(design.drifts[0].steps) == 1
    assert len(design.notes) == 3
    column = design.fixed[:, design.drifts[0].steps[0]]
    assert column.sum() == 60


def test_forms_of_drift(make_record):
    rng = np.random.default_rng(1)
    records = [
        make_record(rng, count=100, label="a", drift="none"),
        make_record(rng, count=100, first=100.5, label="b", drift="linear"),
        make_record(rng, count=100, first=200.5, label="c"),
        make_record(rng, count=5, first=300.5, label="d"),
    ]
    design = build_design(records, reference_year=2016, priors=Priors())
    assert [drift.slope is None for drift in design.drifts] == [True, False, False, False]
    assert [drift.decay for drift in design.drifts] == [None, None, 0, None]
    assert "d" in design.notes[0]
    # priors of the settings: slope 10 hPa per year, all else flat
    assert set(design.precision) == {0.0, 1000.0**-2}
    # slopes are per year: one year of days raises the column by one
    slope = design.fixed[design.drifts[1].rows, design.drifts[1].slope]
    np.testing.assert_allclose(np.diff(slope), 1 / 365.25)
