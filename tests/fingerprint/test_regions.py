"""Regions add up, perturbed members are what their spreads say, and draws are members by another road."""

import doctest
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.constants import ANNUAL_RATE
from massfit.errors import InputError
from massfit.fingerprint.admittance import site_fingerprints, water_vapour_phasor
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.grid import CellGrid
from massfit.fingerprint.loads import REGIONS, builtin_loads
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.regions import REGION_NAMES, draw_admittances, perturbed_loads, regional_responses
from massfit.phasor import as_complex
from massfit.site import Site

SITES = [Site("P1", -11.25, 205.5), Site("A1", 10.0, -45.0), Site("S1", -55.0, 100.0)]
VAPOUR = water_vapour_phasor(0.65e15, "07-15", 2015)
NOMINAL, SNOW = builtin_loads(("nominal", "snow-rich"))
SPREAD = {"amplitude_sd": 0.2, "delay_sd_days": 10.0}


@pytest.fixture(scope="module")
def footprints(coarse: SeaLevelOperator) -> xr.Dataset:
    return site_footprints(coarse, SITES)


@pytest.fixture(scope="module")
def responses(coarse: SeaLevelOperator, footprints: xr.Dataset) -> xr.Dataset:
    return regional_responses(coarse, footprints, NOMINAL, water_vapour=VAPOUR)


def test_without_spread_a_draw_is_the_member(
    coarse: SeaLevelOperator, footprints: xr.Dataset, responses: xr.Dataset, rng: np.random.Generator
) -> None:
    whole = site_fingerprints(coarse, SITES, [NOMINAL], water_vapour=VAPOUR, footprints=footprints)
    drawn = draw_admittances(responses, rng=rng, draws=3, amplitude_sd=0.0, delay_sd_days=0.0)
    np.testing.assert_allclose(drawn, np.repeat(as_complex(whole.admittance.to_numpy()), 3, axis=0), rtol=1e-12)
    (same,) = perturbed_loads([NOMINAL], 1, amplitude_sd=0.0, delay_sd_days=0.0, seed=1)
    np.testing.assert_allclose(same.values, NOMINAL.values, rtol=1e-12)


def test_a_draw_is_the_forward_answer_to_its_own_pattern(
    coarse: SeaLevelOperator, footprints: xr.Dataset, responses: xr.Dataset
) -> None:
    # one region delayed and enlarged by hand, through the whole pattern
    factor = 1.7 * np.exp(1j * ANNUAL_RATE * 25.0)
    amazon = REGION_NAMES.index("Amazon")
    table = {name: as_complex(responses[name].to_numpy()) for name in ("height", "ocean_mean")}
    height = table["height"].sum(0) + (factor - 1) * table["height"][amazon]
    mean = table["ocean_mean"].sum() + (factor - 1) * table["ocean_mean"][amazon]
    vapour = as_complex(responses.vapour_height.to_numpy()), as_complex(responses.vapour_ocean_mean.to_numpy())
    by_regions = (height + vapour[0]) / (mean + vapour[1])
    # shares of the Amazon by a plain loop over cells
    values = NOMINAL.values.copy()
    for i, latitude in enumerate(NOMINAL.latitude_deg):
        for j in np.flatnonzero(values[i]):
            turns = [(NOMINAL.longitude_deg[j] - r.longitude + 180.0) % 360.0 - 180.0 for r in REGIONS]
            near = np.exp(
                [
                    -0.5 * (((latitude - r.latitude) / r.half_height) ** 2 + (turn / r.half_width) ** 2)
                    for r, turn in zip(REGIONS, turns, strict=True)
                ]
            )
            if near.sum() > 0.0:
                values[i, j] *= 1.0 + (factor - 1.0) * near[amazon] / near.sum()
    changed = LoadPattern("by hand", NOMINAL.latitude_deg, NOMINAL.longitude_deg, values)
    whole = site_fingerprints(coarse, SITES, [changed], water_vapour=VAPOUR, footprints=footprints)
    # shares are taken on this grid there, on the finer one of the pattern here
    np.testing.assert_allclose(by_regions, as_complex(whole.admittance.to_numpy())[0], atol=2e-4)


def test_spreads_are_what_was_asked() -> None:
    # the Amazon's heart belongs to it almost wholly: its phasors over many members show both spreads
    members = perturbed_loads([NOMINAL], 100, seed=3, **SPREAD)
    row, column = (int(np.argmin(np.abs(a - b))) for a, b in ((NOMINAL.latitude_deg, -5), (NOMINAL.longitude_deg, -61)))
    ratio = np.array([member.values[row, column] for member in members]) / NOMINAL.values[row, column]
    # standard errors of a spread from 100 members are 7 %; of a mean 0.02: three of each
    assert np.std(np.log(np.abs(ratio))) == pytest.approx(0.2, rel=0.25)
    assert np.std(np.angle(ratio)) / ANNUAL_RATE == pytest.approx(10.0, rel=0.25)
    assert np.mean(np.abs(ratio)) == pytest.approx(1.0, abs=0.06)


def test_seeds_and_counts() -> None:
    few, many = (perturbed_loads([NOMINAL, SNOW], count, seed=5, **SPREAD) for count in (3, 5))
    assert [member.name for member in many[:3]] == [
        "perturbed 1 of nominal",
        "perturbed 2 of snow-rich",
        "perturbed 3 of nominal",
    ]
    for one, other in zip(few, many[:3], strict=True):
        np.testing.assert_allclose(one.values, other.values, rtol=1e-12)
    (other_seed,) = perturbed_loads([NOMINAL], 1, seed=6, **SPREAD)
    assert not np.allclose(other_seed.values, few[0].values)


def test_any_grid_in_any_order_can_be_perturbed() -> None:
    latitude, longitude = np.arange(88.0, -90.0, -4.0), np.arange(2.5, 360.0, 5.0)
    area = CellGrid.from_centres(latitude, longitude).cell_area_m2
    even = LoadPattern("even", latitude, longitude, np.ones(area.shape, dtype=complex))
    flipped = LoadPattern("even", latitude[::-1], longitude - 360.0, np.ones(area.shape, dtype=complex))
    (one,), (two,) = (perturbed_loads([each], 1, seed=1, **SPREAD) for each in (even, flipped))
    np.testing.assert_allclose(one.values, two.values[::-1], rtol=1e-12)
    # neighbours across the date line and the meridian of Greenwich belong together
    steps = np.abs(np.diff(np.column_stack([one.values, one.values[:, 0]]), axis=1))
    assert steps[:, -1].max() <= steps[:, :-1].max()


def test_chunks_do_not_change_the_distribution(responses: xr.Dataset) -> None:
    whole, parts = (
        draw_admittances(responses, rng=np.random.default_rng(7), draws=4000, chunk=chunk) for chunk in (4000, 999)
    )
    assert whole.shape == parts.shape == (4000, 3)
    # standard errors of means and spreads of 4000 draws: 1.6 and 1.1 % of the spread
    scale = whole.std(axis=0)
    assert np.all(np.abs(whole.mean(axis=0) - parts.mean(axis=0)) < 0.1 * scale)
    np.testing.assert_allclose(parts.std(axis=0), scale, rtol=0.07)
    again = draw_admittances(responses, rng=np.random.default_rng(7), draws=4000, chunk=999)
    np.testing.assert_array_equal(again, parts)


def test_every_fault_is_named(responses: xr.Dataset, rng: np.random.Generator) -> None:
    with pytest.raises(InputError) as caught:
        perturbed_loads([], 101, amplitude_sd=-0.1, delay_sd_days=np.nan, seed=1)
    assert [fault.name for fault in caught.value.faults] == ["bases", "count", "amplitude_sd", "delay_sd_days"]
    fine = LoadPattern("fine", np.arange(720.0), np.arange(1440.0), np.zeros((720, 1440), dtype=complex))
    with pytest.raises(InputError, match=r"40 members of 1036800 cells take 0.7 GB. Must be at most 0.5 GB"):
        perturbed_loads([fine], 40, seed=1, **SPREAD)
    with pytest.raises(InputError, match="0 in chunks of 10000 were asked"):
        draw_admittances(responses, rng=rng, draws=0)


def test_the_examples_of_the_page_run() -> None:
    page = Path(__file__).parents[2] / "docs" / "theory" / "sea_level.md"
    result = doctest.testfile(str(page), module_relative=False, optionflags=doctest.NORMALIZE_WHITESPACE)
    assert result.failed == 0
    assert result.attempted >= 8
