"""From monthly fields to the mean over the whole ocean, on an Earth that keeps its mass."""

import importlib.util
from dataclasses import replace
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.gravity.compare import NetworkAnswer, compare_with_gravity, implied_geocentre
from massfit.gravity.definitions import Part
from massfit.gravity.inputs import GravityInputs, Solution
from massfit.gravity.predicted import predicted_mass
from massfit.gravity.satellite import Context, satellite_mean
from massfit.settings import Gravity
from massfit.site import Site

PARTS = {"air": Part("water and air", -60.0 + 0j), "Sa": Part("water and tide", 2.0 + 0j, at_recorders=True)}


def _load() -> ModuleType:
    spec = importlib.util.spec_from_file_location("invented_earth", Path(__file__).with_name("invented_earth.py"))
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def earth() -> Any:
    return _load().make_earth(drop_months=(7, 8, *range(30, 41)))


@pytest.fixture(scope="module")
def context(earth: Any) -> Context:
    # the truth is none of the members
    loads = [each for each in earth.loads if each.name != "nominal"]
    predicted = predicted_mass(earth.operator, loads, water_vapour=earth.vapour, max_degree=40)
    return Context(earth.ocean, earth.love, predicted, earth.vapour, None, 2015)


def inputs(earth: Any, **changes: Any) -> GravityInputs:
    settings = Gravity(**{"fields": ("invented",), "max_degree": 40, **changes})
    return GravityInputs(
        settings, (Solution("invented", earth.fields),), degree_one=earth.degree_one,
        atmosphere=earth.atmosphere, dealiasing=earth.dealiasing,
    )  # fmt: skip


def mean(given: GravityInputs, context: Context) -> complex:
    return satellite_mean(given, given.solutions[0], context).phasor


@pytest.mark.parametrize("buffer_km", [0.0, 300.0])
@pytest.mark.parametrize("degree_zero", ["atmosphere", "water-vapour", "none"])
def test_the_answer_comes_back_within_one_per_cent(
    earth: Any, context: Context, buffer_km: float, degree_zero: str
) -> None:
    found = mean(inputs(earth, buffer_km=buffer_km, degree_zero=degree_zero), context)
    assert abs(found - earth.answer) < 0.01 * abs(earth.answer)


def test_the_kernel_mean_alone_is_biased(earth: Any, context: Context) -> None:
    given = inputs(earth, buffer_km=300.0)
    found = satellite_mean(given, given.solutions[0], context)
    assert abs(found.kernel_phasor - earth.answer) > 0.03 * abs(earth.answer)
    whole = inputs(earth, buffer_km=0.0)
    leaky = satellite_mean(whole, whole.solutions[0], context)
    assert abs(leaky.kernel_phasor) < 0.96 * abs(earth.answer)  # land beside the ocean leaks in and takes some off


def test_degree_one_left_out_of_one_side_takes_a_fifth(earth: Any, context: Context) -> None:
    rows = tuple(replace(row, values=dict.fromkeys(row.values, 0.0)) for row in earth.degree_one.rows)
    given = replace(inputs(earth), degree_one=replace(earth.degree_one, rows=rows))
    ratio = abs(mean(given, context)) / abs(earth.answer)
    assert 0.7 < ratio < 0.9
    # left out of both sides the members fill it, less exactly
    filled = replace(inputs(earth), degree_one=None)
    assert abs(mean(filled, context) - earth.answer) < 0.06 * abs(earth.answer)


def test_the_circulation_averages_to_nothing_over_the_whole_ocean_only(earth: Any, context: Context) -> None:
    whole, restored = (
        mean(inputs(earth, buffer_km=0.0, restore_dealiasing=switch), context) for switch in (False, True)
    )
    assert abs(restored - whole) < 0.002 * abs(earth.answer)
    near, far = (mean(inputs(earth, buffer_km=500.0, restore_dealiasing=switch), context) for switch in (False, True))
    assert abs(far - near) > 0.01 * abs(earth.answer)


def test_tables_in_another_order_and_fields_shuffled_change_nothing(earth: Any, context: Context) -> None:
    given = inputs(earth)
    shuffled = replace(given, solutions=(Solution("invented", tuple(reversed(earth.fields))),))
    assert mean(shuffled, context) == mean(given, context)


def test_every_recorder_sees_its_own_fingerprint(earth: Any, context: Context) -> None:
    sites = [Site("P", -5.0, 215.0), Site("Q", 10.0, 325.0), Site("R", -25.0, 75.0)]
    from massfit.fingerprint.admittance import site_fingerprints
    from massfit.phasor import as_complex

    def admittance(names: list[str]) -> np.ndarray:
        loads = [each for each in earth.loads if each.name in names]
        found = site_fingerprints(earth.operator, sites, loads, water_vapour=earth.vapour)
        return np.asarray(as_complex(found["admittance"].values))

    truth = earth.answer * admittance(["nominal"])[0]
    answer = NetworkAnswer(
        earth.answer, 25.0 * np.eye(2), sites, truth, np.repeat(16.0 * np.eye(2)[None], 3, 0),
        admittance(list(context.predicted.members)), PARTS,
    )  # fmt: skip
    found = compare_with_gravity(inputs(earth, smoothing_km=500.0), answer, context)
    for each, expected in zip(found.sites, truth, strict=True):
        assert abs(each.satellite - expected) < 0.02 * abs(expected)
        assert each.probability > 0.8
    assert found.agreement.compatible
    assert abs(found.agreement.difference) < 0.01 * abs(earth.answer)
    names = [choice.name for choice in found.choices]
    assert names[0] == "as it was done"
    assert len(names) == len(set(names))
    off = next(choice for choice in found.choices if choice.name == "degree 1 missing from the fields only")
    assert off.phasor is not None
    assert abs(off.phasor) < 0.9 * abs(earth.answer)
    assert [(each.determination, each.name) for each in found.definitions] == [
        ("network", "as it is"), ("network", "with air"), ("network", "with Sa"),
        ("satellite gravity", "as it is"), ("satellite gravity", "with air"),
    ]  # fmt: skip


def test_the_geocentre_is_that_of_the_water(earth: Any) -> None:
    loads = [each for each in earth.loads if each.name == "nominal"]
    predicted = predicted_mass(earth.operator, loads, water_vapour=earth.vapour, max_degree=2)
    context = Context(earth.ocean, earth.love, predicted, earth.vapour, None, 2015)
    found = implied_geocentre(earth.answer, 4.0 * np.eye(2), context)
    # centre of mass from degree 1 of the potential itself: sqrt(3) a C, seen the other way round
    expected = -np.sqrt(3.0) * 6378136.3 * earth.geocentre_one
    np.testing.assert_allclose([found[axis][0] for axis in "XYZ"], expected, rtol=1e-10)
    # one member only: the error of the answer, 2 Pa, in the same proportion
    assert np.sqrt(found["Z"][1][0, 0]) == pytest.approx(2.0 * abs(expected[2] / earth.answer))


def test_products_that_are_asked_for_must_be_there(earth: Any, context: Context) -> None:
    given = replace(inputs(earth, degree_zero="atmosphere"), atmosphere=())
    with pytest.raises(InputError) as error:
        mean(given, context)
    assert str(error.value) == (
        "[gravity]: atmosphere: degree_zero asks for it, and it is not given. Must name the monthly products. "
        "Give it or change degree_zero."
    )


def test_months_without_a_product_are_left_out_and_said(earth: Any, context: Context) -> None:
    given = replace(inputs(earth, degree_zero="atmosphere"), atmosphere=earth.atmosphere[:-2])
    found = satellite_mean(given, given.solutions[0], context)
    assert len(found.monthly.spans) == len(earth.fields) - 2
    reason = "without degree 0 from the mass of the atmosphere, with its sign turned"
    assert found.monthly.left_out == (f"2019-11: {reason}", f"2019-12: {reason}")
