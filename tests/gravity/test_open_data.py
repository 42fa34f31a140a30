"""The real monthly fields, against a rough computation that shares no code with this one."""

import os
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from massfit.earth.love import love_numbers
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import prepare_operator
from massfit.gravity.field import GravityField, Span
from massfit.gravity.inputs import GravityInputs, Solution
from massfit.gravity.predicted import predicted_mass
from massfit.gravity.satellite import Context, satellite_mean
from massfit.io.gravity.coefficient_table import read_coefficient_table
from massfit.io.gravity.gravity_files import read_gravity_files
from massfit.settings import Gravity

OPEN_DATA = os.environ.get("MASSFIT_OPEN_DATA")
pytestmark = pytest.mark.skipif(not OPEN_DATA, reason="MASSFIT_OPEN_DATA names no folder of open data")
THREE_DEGREES_KM = 333.6


@pytest.fixture(scope="module")
def given() -> GravityInputs:
    folder = Path(str(OPEN_DATA))
    fields = read_gravity_files(folder / "csr_rl06_gsm_ba01_60x60_ddk3_200204_201608.tar.xz", source="fields")
    months = tuple(each for each in fields if isinstance(each, GravityField))
    assert len(months) == len(fields) == 156
    return GravityInputs(
        Gravity(fields=("fields",), buffer_km=THREE_DEGREES_KM, degree_zero="none", c20="own", c30="own"),
        (Solution("open", months),),
        low_degree=read_coefficient_table(folder / "TN14_C20_C30_GSFC_SLR.txt", source="low"),
    )


@pytest.fixture(scope="module")
def context() -> Context:
    love, ocean = love_numbers(max_degree=60), OceanFunction.builtin()
    operator = prepare_operator(ocean, love, max_degree=60)
    predicted = predicted_mass(operator, builtin_loads(("nominal",)), water_vapour=0j, max_degree=60)
    window = Span(np.datetime64("2003-01-01", "s"), np.datetime64("2015-01-01", "s"))
    return Context(ocean, love, predicted, 0j, window, 2003)


def size_and_day(given: GravityInputs, context: Context) -> tuple[float, float]:
    found = satellite_mean(given, given.solutions[0], context).fit.phasor
    return abs(found), float(np.degrees(np.angle(found)) / 360.0 * 365.2422 % 365.2422)


def test_own_c20_and_no_degree_one(given: GravityInputs, context: Context) -> None:
    # rough independent computation: 8.3 mm, day 283
    millimetres, day = size_and_day(given, context)
    assert millimetres == pytest.approx(8.3, abs=0.7)
    assert day == pytest.approx(283.0, abs=5.0)


def test_replaced_c20_and_degree_one(given: GravityInputs, context: Context) -> None:
    # rough independent computation: 9.9 mm, day 281
    table = read_coefficient_table(Path(str(OPEN_DATA)) / "deg1_coef_CSR_RL05_2002_2016.txt", source="one")
    full = replace(given, degree_one=table, settings=replace(given.settings, c20="replaced"))
    millimetres, day = size_and_day(full, context)
    assert millimetres == pytest.approx(9.9, abs=0.7)
    assert day == pytest.approx(281.0, abs=5.0)


def test_the_result_says_what_cannot_be_matched(given: GravityInputs, context: Context) -> None:
    assert all(field.filtered for field in given.solutions[0].fields)
    actions = satellite_mean(given, given.solutions[0], context).actions
    assert any("the files say tide_free, but their C20" in action and "zero_tide" in action for action in actions)
