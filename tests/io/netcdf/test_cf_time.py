"""Arithmetic on counts of time gives the instants of a general decoder, and leaves to it what it cannot hold."""

from typing import Any

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.netcdf import cf_time
from massfit.io.netcdf.cf_time import cf_instants


def general(values: np.ndarray, attributes: dict[str, Any]) -> np.ndarray:
    decoded = xr.decode_cf(xr.Dataset({"t": ("x", values, dict(attributes))}))["t"].values
    return np.asarray(decoded, dtype="datetime64[ns]")


UNITS = {
    "days since 1950-01-01": (20_000.0, 30_000.0),
    "hours since 2015-06-01 00:00:00": (-5e4, 5e4),
    "minutes since 1950-01-01 12:00 +02:00": (1e6, 4e7),
    "seconds since 1970-01-01T00:00:00Z": (0.0, 2e9),
    "milliseconds since 2000-01-01": (0.0, 6e11),
    "days since 1858-11-17": (50_000.0, 60_000.0),
}


@pytest.mark.parametrize("kind", ["f8", "f4", "i4", "i8", "u4"])
@pytest.mark.parametrize("units", UNITS)
def test_instants_are_those_of_the_general_decoder(units: str, kind: str, monkeypatch: pytest.MonkeyPatch) -> None:
    low, high = UNITS[units]
    rng = np.random.default_rng(4)
    if kind[0] in "iu":
        limits = np.iinfo(kind)
        low, high = max(low, limits.min), min(high, limits.max)
    values = rng.uniform(low, high, 500).astype(kind)
    attributes: dict[str, Any] = {"units": units, "calendar": "standard"}
    expected = general(values, attributes)
    calls = []
    really = cf_time._decoded
    monkeypatch.setattr(cf_time, "_decoded", lambda v, a: calls.append(v.size) or really(v, a))
    found = cf_instants(values, attributes, source="a.nc")
    assert calls == [3]
    # both round decimals of a count, to the resolution of a double of ns
    apart = np.abs((found - expected).astype(np.int64)).max()
    assert apart <= (1_000 if kind[0] == "f" else 0)


def test_whole_counts_are_kept_to_the_nanosecond() -> None:
    # a double holds ns since 1970 to 256 only
    stamps = np.array(["2016-02-29T12:34:56.123456789", "2016-03-01T00:00:00.000000001"], dtype="datetime64[ns]")
    found = cf_instants(stamps.astype(np.int64), {"units": "nanoseconds since 1970-01-01"}, source="a.nc")
    np.testing.assert_array_equal(found, stamps)


def test_either_byte_order_is_read() -> None:
    values = np.linspace(0.0, 1e9, 50)
    attributes = {"units": "seconds since 1990-01-01", "_FillValue": -1.0}
    expected = cf_instants(values, attributes, source="a.nc")
    for order in "<>":
        np.testing.assert_array_equal(cf_instants(values.astype(f"{order}f8"), attributes, source="a.nc"), expected)


def test_missing_counts_are_no_instants() -> None:
    values = np.array([1.0, np.nan, -999.0, 4.0])
    attributes = {"units": "days since 2016-01-01", "_FillValue": -999.0}
    found = cf_instants(values, attributes, source="a.nc")
    assert np.isnat(found).tolist() == [False, True, True, False]
    np.testing.assert_array_equal(found, general(values, attributes))
    whole = np.array([1, -1, 4], dtype=np.int32)
    again = cf_instants(whole, {"units": "days since 2016-01-01", "missing_value": np.int32(-1)}, source="a.nc")
    assert np.isnat(again).tolist() == [False, True, False]


@pytest.mark.parametrize(
    ("units", "value"),
    [
        ("days since 2016-01-01", 2e5),
        ("days since 2016-01-01", 1e300),
        ("days since 0001-01-01", 10.0),
        ("fortnights since 2016-01-01", 1.0),
        ("days since the flood", 1.0),
    ],
)
def test_what_64_bits_do_not_hold_is_refused(units: str, value: float) -> None:
    with pytest.raises(InputError, match="cannot be decoded"):
        cf_instants(np.array([0.0, value]), {"units": units}, source="a.nc")
