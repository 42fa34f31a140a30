"""Polar motion from the shipped tables."""

from pathlib import Path

import astropy_iers_data
import numpy as np
import pytest

from massfit.errors import InputError
from massfit.tables.polar_motion import (
    RADIAN_PER_ARCSECOND,
    PolarMotion,
    join,
    observed_polar_motion,
    parse_final,
    parse_rapid,
    polar_motion_at,
)

# three lines in the layout that the file descriptions give (IERS C04 20 and finals2000A)
FINAL = """# comment
1962   1   1   0  37665.00   -0.012700    0.213000   0.0326338    0.000000    0.000000
1962   1   2   0  37666.00   -0.015900    0.214100   0.0320547    0.000000    0.000000
"""
RAPID = """62 1 2 37666.00 I  0.500000 0.009786  0.500000 0.015902  I 0.8084178 0.0002710
62 1 3 37667.00 I -0.020000 0.009786  0.215000 0.015902  I 0.8084178 0.0002710
62 1 4 37668.00 P -0.030000 0.009786  0.216000 0.015902  P 0.8084178 0.0002710
62 1 5 37669.00
"""


def small_table() -> PolarMotion:
    return join(parse_final(FINAL), *parse_rapid(RAPID))


def test_final_values_go_before_rapid_ones_and_blank_days_are_left_out() -> None:
    table = small_table()
    assert [str(day)[:10] for day in table.time] == ["1962-01-01", "1962-01-02", "1962-01-03", "1962-01-04"]
    np.testing.assert_allclose(table.x / RADIAN_PER_ARCSECOND, [-0.0127, -0.0159, -0.02, -0.03])
    np.testing.assert_allclose(table.y / RADIAN_PER_ARCSECOND, [0.213, 0.2141, 0.215, 0.216])
    np.testing.assert_array_equal(table.predicted, [False, False, False, True])


def test_noon_is_the_mean_of_two_midnights_and_predictions_are_flagged() -> None:
    noons = np.array(["1962-01-01T12", "1962-01-03T00", "1962-01-03T12"], dtype="datetime64[ns]")
    x, y, predicted = polar_motion_at(noons, table=small_table())
    np.testing.assert_allclose(x / RADIAN_PER_ARCSECOND, [-0.0143, -0.02, -0.025])
    np.testing.assert_allclose(y / RADIAN_PER_ARCSECOND, [0.21355, 0.215, 0.2155])
    np.testing.assert_array_equal(predicted, [False, False, True])


def test_a_missing_day_is_refused() -> None:
    rapid, predicted = parse_rapid(RAPID)
    with pytest.raises(InputError, match="not consecutive"):
        join(parse_final(FINAL), rapid[2:], predicted[2:])


@pytest.mark.parametrize("day", ["1961-12-31", "1962-01-04T12"])
def test_a_span_that_is_not_covered_names_both_spans_and_the_remedy(day: str) -> None:
    asked = np.array(["1962-01-02", day], dtype="datetime64[ns]")
    with pytest.raises(InputError) as caught:
        polar_motion_at(asked, table=small_table())
    message = str(caught.value)
    assert day[:10] in message
    assert "1962-01-01 to 1962-01-04" in message
    assert "Update the package astropy-iers-data" in message


def test_mean_pole_of_december_2015() -> None:
    # published with the satellite-gravity background model of that month: 84.906 and 252.310 mas
    table = observed_polar_motion()
    month = (table.time >= np.datetime64("2015-12-01")) & (table.time < np.datetime64("2016-01-01"))
    mean = np.array([table.x[month].mean(), table.y[month].mean()]) / RADIAN_PER_ARCSECOND
    np.testing.assert_allclose(mean, [0.084906, 0.252310], atol=5e-7)


def test_shipped_predictions_are_at_the_end_only() -> None:
    table = observed_polar_motion()
    assert 0 < table.predicted.sum() < 500
    assert not np.any(np.diff(table.predicted.astype(int)) < 0)
    assert (
        np.abs(np.concatenate([table.x, table.y])).max() / RADIAN_PER_ARCSECOND < 0.7
    )  # wobble of the last sixty years


def test_two_published_series_agree() -> None:
    # the final series and the rapid one come from different centres and combinations; both state errors below 0.1 mas
    # for the years since 2000
    final = parse_final(Path(astropy_iers_data.IERS_B_FILE).read_text(encoding="ascii"))
    rapid, predicted = parse_rapid(Path(astropy_iers_data.IERS_A_FILE).read_text(encoding="ascii"))
    rapid = rapid[~predicted]
    _, own, other = np.intersect1d(final[:, 0], rapid[:, 0], return_indices=True)
    since = final[own, 0] > 51544.0  # 1 January 2000
    apart = (final[own] - rapid[other])[since, 1:3]
    assert len(apart) > 5000
    assert np.sqrt(np.mean(apart**2)) < 2e-4
    # the control: exchanged components would be far apart
    assert np.abs(final[own, 1] - rapid[other, 2]).mean() > 0.1
