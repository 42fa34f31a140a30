"""What is read at once, digit by digit, is what general parsers read one by one."""

import numpy as np
import pandas as pd
import pytest

from massfit.io.records.text_stamps import fixed_decimals, fixed_iso, fixed_parts


def letters(texts: list[str]) -> np.ndarray:
    return np.frombuffer("".join(texts).encode(), dtype=np.uint8).reshape(len(texts), -1)


@pytest.mark.parametrize("form", ["{:015.7f}", "{:08.3f}", "{:07.0f}.", "{:09.0f}"])
def test_decimals_are_those_of_the_exact_reader(form: str) -> None:
    rng = np.random.default_rng(2)
    texts = [form.format(value) for value in rng.uniform(0.0, 9e3, 2000)]
    assert fixed_decimals(letters(texts)).tolist() == [float(text) for text in texts]


@pytest.mark.parametrize("texts", [["1.50", "-1.5"], ["1.50", "15.0"], ["1e05", "2e05"], ["....", "1234"],
    ["1 50", "2 50"], ["0" * 20, "1" * 20], ["12/3", "12:3"], [".", "."]])  # fmt: skip
def test_other_numbers_are_left_to_a_general_reader(texts: list[str]) -> None:
    assert fixed_decimals(letters(texts)) is None


@pytest.mark.parametrize("unit", ["D", "m", "s", "ms", "us", "ns"])
@pytest.mark.parametrize("suffix", ["", "Z"])
def test_stamps_are_those_of_the_general_reader(unit: str, suffix: str) -> None:
    rng = np.random.default_rng(3)
    seconds = rng.integers(-2_208_988_800, 7_258_118_399, 3000)  # 1900 to 2199
    times = (seconds * 10**9 + rng.integers(0, 10**9, 3000)).astype("datetime64[ns]")
    if unit == "D":
        suffix = ""
    texts = [text + suffix for text in np.datetime_as_string(times, unit=unit).tolist()]
    expected = pd.to_datetime(pd.Series(texts), format="ISO8601", utc=True).dt.tz_localize(None).to_numpy()
    np.testing.assert_array_equal(fixed_iso(letters(texts)), expected.astype("datetime64[ns]"))
    assert fixed_iso(letters([text.replace("T", " ") for text in texts])) is not None


@pytest.mark.parametrize("bad", ["2015-02-29", "2016-02-30", "2016-13-01", "2016-00-10", "2016-04-31", "2016-01-00",
    "1899-12-31", "2201-01-01", "2016/01/01", "2016-1-011", "2016-01-1x"])  # fmt: skip
def test_what_is_no_date_is_left_to_a_reader_that_says_so(bad: str) -> None:
    assert fixed_iso(letters(["2016-02-29"])) is not None
    assert fixed_iso(letters(["2016-02-29", bad])) is None
    assert fixed_iso(letters([bad])) is None


@pytest.mark.parametrize("clock", ["24:00:00", "23:60:00", "23:59:60", "23:59-00"])
def test_what_is_no_clock_is_left_to_a_reader_that_says_so(clock: str) -> None:
    assert fixed_iso(letters([f"2016-02-29T{clock}"])) is None


def test_parts_of_a_date_in_columns() -> None:
    columns = {"year": letters(["2016", "2015"]), "month": letters(["2", "1"]), "day": letters(["29", "01"])}
    assert fixed_parts(columns).astype("datetime64[D]").astype(str).tolist() == ["2016-02-29", "2015-01-01"]
    clock = {"hour": letters(["23", "00"]), "minute": letters(["59", "00"]), "second": letters(["59", "07"])}
    assert str(fixed_parts(columns | clock)[1]) == "2015-01-01T00:00:07.000000000"
    assert fixed_parts(columns | {"second": letters(["9.5", "0.5"])}) is None
    assert fixed_parts({"year": letters(["2016"]), "day_of_year": letters(["060"])}) is None
    assert fixed_parts(columns | {"day": letters(["30", "01"])}) is None
