"""Models with annual terms: against months made from the same model, and against closed forms."""

import importlib.util
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from massfit.constants import STANDARD_GRAVITY, TROPICAL_YEAR_DAYS
from massfit.errors import InputError
from massfit.gravity.compare import together
from massfit.gravity.field import Conventions, GravityField, GravityModel, Span
from massfit.gravity.inputs import GravityInputs, Solution, gravity_sentence
from massfit.gravity.kernel import ocean_kernel
from massfit.gravity.mass import mass_per_coefficient
from massfit.gravity.predicted import predicted_mass
from massfit.gravity.satellite import Context, SatelliteMean, satellite_mean
from massfit.io.gravity.icgem import parse_icgem
from massfit.phasor import peak_days
from massfit.settings import Gravity

TOP, YEAR = 40, 2015
EPOCH = np.datetime64("2012-03-11", "s")
WINDOW = Span(np.datetime64("2015-01-01", "s"), np.datetime64("2020-01-01", "s"))
CONVENTIONS = Conventions(3.986004415e14, 6378136.3, "zero_tide")
EXACT = TROPICAL_YEAR_DAYS / 365.25  # of the file's years
HEAD = """begin_of_head ====
product_type           gravity_field
modelname              invented_{kind}
radius                 6.3781363000E+06
earth_gravity_constant 3.9860044150E+14
max_degree             {top}
norm                   fully_normalized
tide_system            zero_tide
errors                 {errors}
{format}
end_of_head ====
"""


@pytest.fixture(scope="module")
def earth() -> Any:
    spec = importlib.util.spec_from_file_location("invented_earth", Path(__file__).with_name("invented_earth.py"))
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.make_earth()


@pytest.fixture(scope="module")
def context(earth: Any) -> Context:
    loads = [each for each in earth.loads if each.name != "nominal"]  # the truth is none of the members
    predicted = predicted_mass(earth.operator, loads, water_vapour=earth.vapour, max_degree=TOP)
    return Context(earth.ocean, earth.love, predicted, earth.vapour, WINDOW, YEAR)


def at_epoch(phasor: np.ndarray, epoch: np.datetime64 = EPOCH) -> np.ndarray:
    """A phasor that counts from the epoch of a file: cosine and sine terms are its parts."""
    days = (epoch - np.datetime64(f"{YEAR}-01-01", "s")) / np.timedelta64(86400, "s")
    return np.asarray(phasor * np.exp(-2j * np.pi * days / TROPICAL_YEAR_DAYS))


def file_of(
    phasor: np.ndarray,
    *,
    sd: float | None = None,
    stretches: tuple[tuple[str, str, float], ...] = (),
    period: float = EXACT,
    trend: float = 3e-11,
) -> str:
    """A model as text: of format 2.0 where stretches (start, end, factor on annual terms) are given, else of 1.0."""
    top, errors = phasor.shape[-1] - 1, "no" if sd is None else "formal"
    tail = "" if sd is None else f" {sd:.6e} {sd:.6e}"
    version = "format icgem2.0" if stretches else "format icgem1.0"
    rows = []
    for n in range(2, top + 1):
        for m in range(n + 1):
            static = -4.84169417e-4 if (n, m) == (2, 0) else 1e-5 / n**2
            for start, end, factor in stretches or (("20120311", "", 1.0),):
                dates = f" {start}.0000 {end}.0000" if stretches else ""
                first = dates or f" {start}"
                epoch = np.datetime64(f"{start[:4]}-{start[4:6]}-{start[6:]}", "s")
                c, s = factor * at_epoch(phasor[:, n, m], epoch)
                rows += [
                    f"gfct {n} {m} {static:.12e} {0.0:.1f}{tail}{first}",
                    f"trnd {n} {m} {trend / n:.12e} {trend / n:.12e}{tail}{dates}",
                    f"acos {n} {m} {c.real:.12e} {s.real:.12e}{tail}{dates} {period:.10f}",
                    f"asin {n} {m} {c.imag:.12e} {s.imag:.12e}{tail}{dates} {period:.10f}",
                    f"acos {n} {m} {2e-12 / n:.12e} {1e-12 / n:.12e}{tail}{dates} 0.5",
                ]
    return HEAD.format(kind="model", top=top, errors=errors, format=version) + "\n".join(rows) + "\n"


def models(text: str) -> tuple[GravityModel, ...]:
    found = parse_icgem(text.encode(), name="invented.gfc", source="invented.gfc")
    assert isinstance(found, tuple)
    return found


def inputs(earth: Any, *solutions: Solution, **changes: Any) -> GravityInputs:
    settings = Gravity(**{"fields": ("invented",), "max_degree": TOP, "degree_zero": "none", **changes})
    return GravityInputs(settings, solutions, degree_one=earth.degree_one)


def mean(given: GravityInputs, context: Context) -> SatelliteMean:
    return satellite_mean(given, given.solutions[0], context)


def months_of(phasor: np.ndarray) -> tuple[GravityField, ...]:
    """What satellites see of that model: every day of it summed, trend and semi-annual cycle included."""
    edges = np.arange(np.datetime64("2015-01", "M"), np.datetime64("2020-02", "M")).astype("datetime64[s]")
    n = np.maximum(np.arange(TOP + 1), 1)[None, :, None]
    fields = []
    for start, end in pairwise(edges):
        days = (
            np.arange(start, end, np.timedelta64(86400, "s")) + np.timedelta64(43200, "s") - EPOCH
        ) / np.timedelta64(86400, "s")
        wave = np.exp(-2j * np.pi * days / TROPICAL_YEAR_DAYS).mean()
        half = np.cos(2.0 * np.pi * days / (0.5 * 365.25)).mean()
        values = (at_epoch(phasor) * wave).real + 3e-11 / n * days.mean() / 365.25
        values[0] += (np.tril(np.ones((TOP + 1, TOP + 1))) * (1e-5 / n**2 + 2e-12 / n * half))[0]
        values[:, :2] = 0.0
        values[0, 2, 0] += -4.84169417e-4 - 1e-5 / 4
        fields.append(GravityField("invented", values, CONVENTIONS, Span(start, end)))
    return tuple(fields)


def test_a_model_gives_what_its_months_give_and_both_the_truth(earth: Any, context: Context) -> None:
    model = Solution("model", (), models(file_of(earth.water)))
    direct = mean(inputs(earth, model), context)
    by_month = mean(inputs(earth, Solution("months", months_of(earth.water))), context)
    assert abs(direct.phasor - by_month.phasor) < 5e-4 * abs(earth.answer)  # days summed for hours
    assert abs(direct.phasor - earth.answer) < 0.01 * abs(earth.answer)
    assert (direct.kind, by_month.kind) == ("model", "months")
    # degree 1 left out of the fields but not of the kernel: the classical fault is as large as with months
    without = replace(inputs(earth, model), degree_one=None)
    assert abs(mean(without, context).kernel_phasor) < 0.8 * abs(direct.kernel_phasor)


def test_a_year_of_365_25_days_is_met_in_the_middle_of_the_window(earth: Any, context: Context) -> None:
    # the file's year is 0.0078 d longer than ours: 0.04 d late after 5.3 years, from its epoch to the middle
    days = [
        peak_days(mean(replace(given, degree_one=None), context).kernel_phasor)
        for period in (EXACT, 1.0)
        if (given := inputs(earth, Solution("m", (), models(file_of(earth.water, period=period)))))
    ]
    assert days[1] - days[0] == pytest.approx(0.0078 * 5.3, abs=0.002)


def test_one_coefficient_by_hand(earth: Any, context: Context) -> None:
    phasor = np.zeros((2, TOP + 1, TOP + 1), dtype=complex)
    phasor[0, 5, 2] = 3e-11 * np.exp(0.7j)
    given = replace(inputs(earth, Solution("m", (), models(file_of(phasor)))), degree_one=None)
    found = mean(given, context)
    kernel = ocean_kernel(earth.ocean, max_degree=5, buffer_km=300.0)
    layer = mass_per_coefficient(earth.love, 5, radius_m=6378136.3)[5]
    expected = STANDARD_GRAVITY * kernel.weights[0, 5, 2] * layer * phasor[0, 5, 2]
    assert found.kernel_phasor == pytest.approx(expected, rel=2e-5)
    assert found.monthly.max_degree == 5  # the prediction ends where the model does
    assert found.monthly.actions[0].startswith("annual terms of a model, to degree 5, written out as 60 of 60 months")


def test_stretches_count_by_their_months(earth: Any, context: Context) -> None:
    stretches = (("20100101", "20160101", 1.0), ("20160101", "20180101", 0.4), ("20180101", "20200101", 0.9))
    text = file_of(earth.water, stretches=stretches)
    found = mean(inputs(earth, Solution("m", (), models(text))), context).fit.phasor
    whole = mean(inputs(earth, Solution("m", (), models(file_of(earth.water)))), context).fit.phasor
    # degree 1 is from the table and does not change
    table = mean(inputs(earth, Solution("m", (), models(file_of(1e-9 * earth.water)))), context).fit.phasor
    ratio = (found - table) / (whole - table)
    assert ratio == pytest.approx(
        (1.0 + 2 * 0.4 + 2 * 0.9) / 5, abs=0.02
    )  # least squares weighs the ends a little less
    outside = replace(context, window=Span(np.datetime64("2021-01-01", "s"), np.datetime64("2024-01-01", "s")))
    with pytest.raises(InputError) as error:
        mean(inputs(earth, Solution("m", (), models(text))), outside)
    assert str(error.value) == (
        "invented.gfc: acos, asin: the model has no annual term from 2021-01-01T00:00:00 to 2024-01-01T00:00:00. "
        "Must have some. Choose start and end of [gravity] within its time."
    )


def test_formal_errors_are_carried_through_the_kernel(earth: Any, context: Context) -> None:
    phasor = np.zeros((2, TOP + 1, TOP + 1), dtype=complex)
    places = [(0, 2, 0), (0, 4, 1), (1, 7, 3)]
    for place in places:
        phasor[place] = 2e-11
    sd = 5e-12
    given = inputs(earth, Solution("m", (), models(file_of(phasor, sd=sd))), c20="own")
    found = mean(given, context)
    assert found.error_from == "formal"
    # by finite differences: every term of the file moved by its error, one after the other
    moved = np.zeros((2, 2))
    for n in range(2, 8):
        for m in range(n + 1):
            for part in (0, 1):
                for step in (sd, 1j * sd):
                    other = phasor.copy()
                    other[part, n, m] += step * np.exp(2j * np.pi * _days(EPOCH) / TROPICAL_YEAR_DAYS)
                    shift = _kernel_mean(earth, other - phasor)
                    z = np.array([shift.real, shift.imag])
                    moved += np.outer(z, z)
    np.testing.assert_allclose(
        found.kernel_covariance - _table_noise(found), moved, rtol=1e-3, atol=1e-12 * moved[0, 0]
    )
    assert any("formal errors" in action for action in found.actions)


def _days(epoch: np.datetime64) -> float:
    return float((epoch - np.datetime64(f"{YEAR}-01-01", "s")) / np.timedelta64(86400, "s"))


def _kernel_mean(earth: Any, coefficients: np.ndarray) -> complex:
    kernel = ocean_kernel(earth.ocean, max_degree=7, buffer_km=300.0)
    layer = mass_per_coefficient(earth.love, 7, radius_m=6378136.3)
    return complex(STANDARD_GRAVITY * kernel.mean(coefficients[:, :8, :8] * layer[None, :, None]))


def _table_noise(found: SatelliteMean) -> np.ndarray:
    return np.asarray(STANDARD_GRAVITY**2 * found.fit.covariance)


def test_an_error_that_nobody_states_is_not_weighed(earth: Any, context: Context) -> None:
    model = Solution("silent", (), models(file_of(earth.water)))
    silent = mean(inputs(earth, model), context)
    assert silent.error_from == "nothing"
    zeros = mean(inputs(earth, Solution("zeros", (), models(file_of(earth.water, sd=0.0)))), context)
    assert zeros.error_from == "nothing"  # a column of zeros states none either
    stated = mean(inputs(earth, model, model_sd_hpa=0.05), context)
    assert stated.error_from == "settings"
    np.testing.assert_allclose(stated.kernel_covariance - silent.kernel_covariance, 25.0 * np.eye(2), atol=1e-9)
    formal = mean(inputs(earth, Solution("formal", (), models(file_of(earth.water, sd=1e-12)))), context)
    assert together([formal, silent]).phasor == formal.phasor
    assert together([formal, silent]).error_stated
    assert not together([silent]).error_stated


def test_what_would_be_used_is_said(earth: Any) -> None:
    stretches = (("20100101", "20160101", 1.0), ("20160101", "20200101", 0.4))
    given = inputs(earth, Solution("m", (), models(file_of(earth.water[:, :6, :6], stretches=stretches))))
    assert "m (a model with annual terms, 2010-01 to 2020-01)" in gravity_sentence(given)


def test_the_fit_adds_nothing_to_a_clean_cycle(earth: Any, context: Context) -> None:
    # the months of a model hold the annual line alone: what the fit finds beside it is rounding
    given = replace(inputs(earth, Solution("m", (), models(file_of(earth.water)))), degree_one=None)
    found = mean(given, context)
    assert found.fit.residual_sd < 1e-6 * abs(found.fit.phasor)
