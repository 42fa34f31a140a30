"""How much the admittances depend on the Earth model: the table of docs/theory/earth.md, made anew.

pytest -s tests/fingerprint/test_earth_sensitivity.py prints it.
"""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.earth.love import love_numbers
from massfit.earth.profile import EarthProfile, Layer, homogeneous_sphere, prem
from massfit.fingerprint.admittance import site_fingerprints, water_vapour_phasor
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import prepare_operator
from massfit.phasor import as_complex
from massfit.site import Site

PAGE = Path(__file__).parents[2] / "docs" / "theory" / "earth.md"
SITES = [
    Site("11 S 205 E", -11.25, 205.5),
    Site("10 N 165 E", 10.0, 165.0),
    Site("30 S 80 E", -30.0, 80.0),
    Site("3 N 332 E", 3.0, 332.0),
    Site("55 S 100 E", -55.0, 100.0),
    Site("45 N 180 E", 45.0, 180.0),
]
MANTLE = (3480e3, 6346.6e3)
UPPER_MANTLE = (5701e3, 6346.6e3)


def softened(name: str, between: tuple[float, float], rigidity: float) -> EarthProfile:
    """PREM with the rigidity of some layers multiplied, their compressional speed kept."""
    layers = tuple(
        replace(layer, shear_speed=tuple(float(np.sqrt(rigidity)) * c for c in layer.shear_speed))
        if between[0] <= layer.bottom and layer.top <= between[1]
        else layer
        for layer in prem().layers
    )
    return EarthProfile(name, "", layers)


def continental() -> EarthProfile:
    """PREM under 35 km of crust everywhere: 15 km upper, 20 km lower, as the crust of PREM in speed and density."""
    *below, mantle, lower, upper = prem().layers
    moho, conrad, top = 6336e3, 6356e3, 6371e3
    return EarthProfile(
        "PREM, crust of 35 km",
        "",
        (*below, Layer(mantle.bottom, moho, mantle.density, mantle.compressional_speed, mantle.shear_speed),
         replace(lower, bottom=moho, top=conrad), replace(upper, bottom=conrad, top=top)),
    )  # fmt: skip


PROFILES = (
    softened("PREM, upper mantle 10 % less rigid", UPPER_MANTLE, 0.9),
    softened("PREM, whole mantle 5 % less rigid", MANTLE, 0.95),
    continental(),
    homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1.5e11, bulk_modulus=4e11),
    homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1e18, bulk_modulus=4e18),
)
NAMES = (*(profile.name for profile in PROFILES[:3]), "homogeneous sphere, 150 GPa", "rigid")


def admittances(profile: EarthProfile | None) -> NDArray[np.complex128]:
    operator = prepare_operator(OceanFunction.builtin(), love_numbers(profile, max_degree=90), max_degree=90)
    vapour = water_vapour_phasor(0.65e15, "07-15", 2016)
    found = site_fingerprints(operator, SITES, builtin_loads(("nominal",)), water_vapour=vapour)
    return as_complex(found.admittance.to_numpy())[0]


@pytest.fixture(scope="module")
def changes() -> dict[str, NDArray[np.complex128]]:
    """Quotients of the admittances and those of PREM."""
    reference = admittances(None)
    return {name: admittances(profile) / reference for name, profile in zip(NAMES, PROFILES, strict=True)}


def table(changes: dict[str, NDArray[np.complex128]]) -> str:
    lines = [
        "| Earth instead of PREM | " + " | ".join(site.id for site in SITES) + " |",
        "|---|" + "---|" * len(SITES),
    ]
    for name, ratio in changes.items():
        days = np.angle(ratio) * TROPICAL_YEAR_DAYS / (2.0 * np.pi)
        cells = [f"{100 * (abs(r) - 1):.2f} %, {d:.2f} d" for r, d in zip(ratio, days, strict=True)]
        cells = [cell.replace("-0.00", "0.00").replace("-", "\u2212") for cell in cells]
        lines.append(f"| {name} | " + " | ".join(cells) + " |")
    return "\n".join(lines)


def test_the_table_of_the_page_is_this_one(changes: dict[str, NDArray[np.complex128]]) -> None:
    made = table(changes)
    print(made)
    assert made in PAGE.read_text(encoding="utf-8")


def test_plausible_earths_agree_and_a_rigid_one_does_not(changes: dict[str, NDArray[np.complex128]]) -> None:
    # the members of the load ensemble differ by a per cent and more; the Earth is a tenth of that
    assert max(np.abs(changes[name] - 1.0).max() for name in NAMES[:3]) < 3e-3
    assert np.abs(changes["rigid"] - 1.0).max() > 5e-3
