"""Tables of degree one, C20 and C30: real ones, and what bad ones are told."""

import os
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.gravity.field import Span
from massfit.io.gravity.coefficient_table import read_coefficient_table

OPEN_DATA = os.environ.get("MASSFIT_OPEN_DATA")
with_open_data = pytest.mark.skipif(not OPEN_DATA, reason="MASSFIT_OPEN_DATA names no folder of open data")


def month(text: str) -> Span:
    start = np.datetime64(text, "M")
    return Span(start.astype("datetime64[s]"), (start + 1).astype("datetime64[s]"))


@with_open_data
def test_the_table_of_c20_and_c30() -> None:
    path = Path(str(OPEN_DATA)) / "TN14_C20_C30_GSFC_SLR.txt"
    table = read_coefficient_table(path, source="low")
    # counted and read off in the file itself
    assert len(table.rows) == 245
    assert table.tide_system == "zero_tide"
    assert table.value(("C", 2, 0), month("2003-01")) == -4.8416937381752e-4
    assert table.value(("C", 3, 0), month("2003-01")) is None
    assert table.value(("C", 3, 0), month("2015-03")) is not None
    assert table.value(("C", 2, 0), month("1999-01")) is None


@with_open_data
def test_the_table_of_c20_with_its_dealiasing_model_taken_off() -> None:
    table = read_coefficient_table(Path(str(OPEN_DATA)) / "C20_RL05_CSR_SLR_2002_2016.txt", source="low")
    assert len(table.rows) == 177
    assert table.notes == ("the mean of the dealiasing model that the table holds was taken off again",)
    # January 2002: -4.8416940601E-04 less 0.6149e-10
    assert table.value(("C", 2, 0), month("2002-01")) == pytest.approx(-4.8416940601e-4 - 0.6149e-10, abs=1e-18)


@with_open_data
def test_the_table_of_degree_one() -> None:
    table = read_coefficient_table(Path(str(OPEN_DATA)) / "deg1_coef_CSR_RL05_2002_2016.txt", source="one")
    assert len(table.rows) == 152
    assert table.coefficients == (("C", 1, 0), ("C", 1, 1), ("S", 1, 1))
    assert table.value(("C", 1, 0), month("2002-09")) == -0.214456574008e-9
    assert table.value(("S", 1, 1), month("2002-09")) == 0.152036398799e-9
    assert table.value(("C", 1, 0), month("2004-01")) is None  # the header says that it is not useful


TWO = """Title: invented, C20 is zero tide
Product:
52640.0 2003.0000 -4.8416937381752E-04 0.8350 0.1576 NaN NaN NaN 52671.0 2003.0849
52671.0 2003.0849 -4.8416939590675E-04 0.6141 0.1597 9.5719E-07 0.1 0.1 52699.0 2003.1616
"""
ONE = """An invented table
GRCOF2 1 0 -0.1E-09 0.0 0.3E-10 0.3E-10 20030101.0000 20030201.0000
GRCOF2 1 1 -0.2E-09 0.3D-09 0.3E-10 0.3E-10 20030101.0000 20030201.0000
"""
C20 = " 2003.04 -4.8416936293E-04 1.0938 0.4176 0.6770 20030101.0000 20030201.0000\n"
KNOWN = "Must be a table of degree one, of C20, or of C20 and C30 as the centres print them. Check the file."
LAYOUT = "As the layout of the other rows. Mend or remove it."


def write(folder: Path, text: str) -> Path:
    path = folder / "table.txt"
    path.write_text(text)
    return path


def test_invented_tables(tmp_path: Path) -> None:
    two = read_coefficient_table(write(tmp_path, TWO), source="t")
    assert two.value(("C", 3, 0), month("2003-02")) == 9.5719e-7
    assert two.value(("C", 3, 0), month("2003-01")) is None
    one = read_coefficient_table(write(tmp_path, ONE), source="t")
    assert one.rows[0].values == {("C", 1, 0): -1e-10, ("C", 1, 1): -2e-10, ("S", 1, 1): 3e-10}
    plain = read_coefficient_table(write(tmp_path, C20), source="t")
    assert plain.rows[0].values == {("C", 2, 0): -4.8416936293e-4}
    assert plain.notes == ()


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("no numbers\n", f"t: 0 rows of numbers, of no known layout. {KNOWN}"),
        ("1 2 3 4 5 6 7\n", f"t: 1 rows of numbers, of no known layout. {KNOWN}"),
        (C20 + C20.replace("-4.84", "-4.12"),
         f"t:2: row: C20 is -0.000412169; that of the Earth is within -0.000485 and -0.000483. {LAYOUT}"),
        (C20 + C20.replace("20030201", "20031301"), f"t:2: row: the date is 2.00313e+07. {LAYOUT}"),
        (C20 + C20.replace("20030201", "20020201"),
         f"t:2: row: the span runs from 2003-01-01T00:00:00 to 2002-02-01T00:00:00. {LAYOUT}"),
        (ONE + ONE.splitlines()[1].replace("1 0 -0.1E-09", "2 0 -0.1E-09"),
         f"t:4: row: degree and order are 2 and 0. {LAYOUT}"),
        (ONE.replace("-0.2E-09", "-0.2"), f"t:3: row: the coefficient is -0.2. {LAYOUT}"),
        (TWO + "99999.0 2003.0849 -4.84E-04 0.6 0.1 9.5719E-07 0.1 0.1 52699.0 2003.1616\n",
         f"t:5: row: the modified Julian date is 99999. {LAYOUT}"),
    ],
    ids=["no rows", "no layout", "no C20 of the Earth", "no date", "backwards", "degree two", "too large", "no MJD"],
)  # fmt: skip
def test_bad_tables(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(InputError) as error:
        read_coefficient_table(write(tmp_path, text), source="t")
    assert str(error.value) == message
