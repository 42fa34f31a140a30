import numpy as np
import pytest

from massfit.records.daily import reduce_to_daily
from massfit.records.nodal import nodal_modulation
from massfit.records.record import Record
from massfit.records.tidal_lines import SHORT_TIDES, greenwich_argument
from massfit.results.tidal_table import tidal_table


def test_rows_give_the_tide_back() -> None:
    # M2 of 20 hPa and K1 of 15 hPa with lags of 40 and 300 degrees, in the year 2016
    hours = np.arange(366 * 24)
    time = np.datetime64("2016-01-01T00:30", "ns") + hours * np.timedelta64(1, "h")
    days = (time - np.datetime64("2000-01-01", "ns")) / np.timedelta64(1, "D")
    truth = {"M2": (20.0, 40.0), "K1": (15.0, 300.0)}
    pressure = sum(
        100.0 * size * np.cos(2 * np.pi * SHORT_TIDES[name] * days + greenwich_argument(name) - np.radians(lag))
        for name, (size, lag) in truth.items()
    )
    rows = {row["line"]: row for row in tidal_table([reduce_to_daily(Record("A", "A/1", time, pressure))])}
    for name, (size, lag) in truth.items():
        row = rows[name]
        assert (row["site"], row["deployment"]) == ("A", "A/1")
        assert row["amplitude_hpa"] == pytest.approx(size, abs=1e-3)
        assert row["greenwich_lag_deg"] == pytest.approx(lag, abs=0.01)
        factor, angle = nodal_modulation(name, days.mean())
        assert (row["nodal_factor"], np.radians(row["nodal_angle_deg"])) == pytest.approx((factor, angle), abs=1e-5)
    assert rows["NO1"]["nodal_factor"] is None
    # a line that is not there: its lag says nothing
    assert rows["M3"]["amplitude_hpa"] < 1e-3


def test_a_record_without_tides_has_no_rows() -> None:
    time = np.datetime64("2016-01-01T12", "ns") + np.arange(300) * np.timedelta64(1, "D")
    assert tidal_table([reduce_to_daily(Record("A", "A/1", time, np.zeros(300)))]) == []
