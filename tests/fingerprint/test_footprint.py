import numpy as np
import pytest

from massfit.contracts import FOOTPRINTS, require
from massfit.earth.love import LoveNumbers
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.site import Site

SITES = [Site("P1", -11.25, 205.5), Site("P2", 8.0, -140.0), Site("A1", 3.0, -28.0), Site("S1", -55.0, 100.0)]


def test_adjoint_is_forward_at_full_degree(operator: SeaLevelOperator, rng: np.random.Generator) -> None:
    # complex load on land and ocean, complex water vapour, no conjugation anywhere
    shape = operator.cells.shape
    load = rng.normal(size=shape) + 1j * rng.normal(size=shape) + 30.0 * (1.0 - operator.ocean)
    vapour = -5e14 + 4e14j
    prints = site_footprints(operator, SITES)
    by_adjoint = np.tensordot(prints.footprint.to_numpy(), load * operator.cell_area_m2, 2)
    by_adjoint = by_adjoint + prints.constant.to_numpy() * vapour
    sea = solve_sea_level(operator, load=load, water_vapour=vapour)
    forward = sea.at([site.latitude_deg for site in SITES], [site.longitude_deg for site in SITES])
    np.testing.assert_allclose(by_adjoint, forward, rtol=1e-10)


@pytest.mark.parametrize("degree", [20, 45, 90])
def test_adjoint_is_forward_on_any_grid(degree: int, love: LoveNumbers, rng: np.random.Generator) -> None:
    # the vapour alone, the load alone, and both: each must do by itself
    operator = prepare_operator(OceanFunction.builtin(), love, max_degree=degree)
    prints = site_footprints(operator, SITES)
    load = rng.normal(size=operator.cells.shape) * (1.0 + 1j) + 20.0
    for mass, vapour in ((load, 0j), (0.0 * load, 6.5e14 - 1e14j), (load, 3e14j)):
        by_adjoint = np.tensordot(prints.footprint.to_numpy(), mass * operator.cell_area_m2, 2)
        by_adjoint = by_adjoint + prints.constant.to_numpy() * vapour
        sea = solve_sea_level(operator, load=mass, water_vapour=vapour)
        forward = sea.at([site.latitude_deg for site in SITES], [site.longitude_deg for site in SITES])
        np.testing.assert_allclose(by_adjoint, forward, rtol=1e-10)


def test_water_vapour_lowers_the_sea(coarse: SeaLevelOperator) -> None:
    constant = site_footprints(coarse, SITES).constant.to_numpy()
    uniform = -1.0 / (coarse.sea_water_density * coarse.ocean_area_m2)
    assert np.all(constant < 0.0)
    # the ocean's own attraction changes the uniform fall by tens of per cent at most
    np.testing.assert_allclose(constant, uniform, rtol=0.3)


def test_footprints_of_two_sites_are_reciprocal(coarse: SeaLevelOperator) -> None:
    prints = site_footprints(coarse, SITES)
    coefficients = coarse.grid.analyse(prints.footprint.to_numpy())
    latitudes, longitudes = [s.latitude_deg for s in SITES], [s.longitude_deg for s in SITES]
    crossed = coarse.grid.synthesise_at(coefficients, latitudes, longitudes)
    np.testing.assert_allclose(crossed, crossed.T, rtol=0, atol=1e-10 * np.abs(crossed).max())


def test_the_dataset_keeps_its_contract(coarse: SeaLevelOperator) -> None:
    prints = site_footprints(coarse, SITES[:1])
    require(prints, FOOTPRINTS)
    assert prints.sizes == {"site": 1, "lat": 82, "lon": coarse.longitude_deg.size}
    assert prints.attrs["max_degree"] == 40
