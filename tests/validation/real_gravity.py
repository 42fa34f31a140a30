"""Real monthly fields, where the open data are at hand."""

from dataclasses import replace
from pathlib import Path

import numpy as np

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
from massfit.phasor import peak_days
from massfit.settings import Gravity
from validation.registry import OPEN_DATA, Group, Row

AREA = "Real monthly fields"
NEEDS_OPEN_DATA = True


def ocean_mean() -> list[Row]:
    folder = Path(str(OPEN_DATA))
    fields = read_gravity_files(folder / "csr_rl06_gsm_ba01_60x60_ddk3_200204_201608.tar.xz", source="fields")
    months = tuple(each for each in fields if isinstance(each, GravityField))
    own = GravityInputs(
        Gravity(fields=("fields",), buffer_km=333.6, degree_zero="none", c20="own", c30="own"),
        (Solution("open", months),),
    )
    replaced = replace(
        own,
        settings=replace(own.settings, c20="replaced"),
        low_degree=read_coefficient_table(folder / "TN14_C20_C30_GSFC_SLR.txt", source="low"),
        degree_one=read_coefficient_table(folder / "deg1_coef_CSR_RL05_2002_2016.txt", source="one"),
    )
    love, ocean = love_numbers(max_degree=60), OceanFunction.builtin()
    operator = prepare_operator(ocean, love, max_degree=60)
    predicted = predicted_mass(operator, builtin_loads(("nominal",)), water_vapour=0j, max_degree=60)
    window = Span(np.datetime64("2003-01-01", "s"), np.datetime64("2015-01-01", "s"))
    context = Context(ocean, love, predicted, 0j, window, 2003)
    rows = []
    for given, name, millimetres, day in (
        (own, "own C20, no degree 1", 8.3, 283.0),
        (replaced, "C20 replaced, with degree 1", 9.9, 281.0),
    ):
        found = satellite_mean(given, given.solutions[0], context).fit.phasor
        rows.append(Row(f"mm, {name}", millimetres, abs(found), 0.7, ".1f"))
        rows.append(Row(f"peak day, {name}", day, float(peak_days(found)), 5.0, ".0f"))
    return rows


GROUPS = (
    Group("Ocean mean of 2003 to 2014", "independent computation",
          "156 monthly fields, coast eroded by 3 degrees, as the kernel sees it; a rough computation without our code",
          "0.7 mm and 5 days: the fields were filtered by their makers with a filter that is not at hand", ocean_mean),
)  # fmt: skip
