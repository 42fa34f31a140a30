"""Earth profile and load Love numbers."""

from functools import cache

import numpy as np

from massfit.constants import GRAVITATIONAL_CONSTANT
from massfit.earth.love import FRAMES, LoveNumbers, half_space_limits, love_numbers
from massfit.earth.profile import homogeneous_sphere, prem
from validation.registry import Group, Row, published, vanishing

AREA = "Earth model and load Love numbers"


@cache
def love() -> LoveNumbers:
    return love_numbers(max_degree=200)


@cache
def high() -> LoveNumbers:
    return love_numbers(max_degree=10_000, integrate_to=10_000)


def prem_mass_and_inertia() -> list[Row]:
    ocean = prem(with_ocean=True)
    return [
        Row("mass / 10²⁴ kg", 5.974, ocean.mass / 1e24, 0.0012, ".4f"),
        Row("I / M R², with its ocean", 0.3308, ocean.inertia_factor, 5e-5, ".4f"),
        Row("I / M R², ocean replaced by crust", 0.3309, prem().inertia_factor, 5e-5, ".4f"),
    ]


def kelvin_sphere() -> list[Row]:
    rigidity, density, radius = 1e11, 5514.0, 6.371e6
    sphere = homogeneous_sphere(radius=radius, density=density, shear_modulus=rigidity)
    found = love_numbers(sphere, max_degree=100)
    gravity = 4.0 / 3.0 * np.pi * GRAVITATIONAL_CONSTANT * density * radius
    rows = []
    for n in (2, 3, 10, 100):
        share = 1.0 / (1.0 + (2.0 * n**2 + 4.0 * n + 3.0) / n * rigidity / (density * gravity * radius))
        for name, number, exact in (
            ("h'", found.h[n], -(2 * n + 1) / 3 * share), ("l'", found.l[n], -share / n), ("k'", found.k[n], -share),
        ):  # fmt: skip
            rows.append(Row(f"{name} of degree {n}", exact, float(number), 3e-8 * abs(exact), ".7f"))
    return rows


def table_of_k(name: str, tolerance: float, first: int, form: str) -> list[Row]:
    return [
        Row(f"k' of degree {row['degree']}", float(row["k"]), float(love().k[int(row["degree"])]), tolerance, form)
        for row in published(name)
        if int(row["degree"]) >= first
    ]


def degree_one() -> list[Row]:
    rows = []
    for entry in published("degree_one_blewitt_2003.csv"):
        moved = love().in_frame(entry["frame"])  # type: ignore[arg-type]
        for name in "hlk":
            number = float(getattr(moved, name)[1])
            rows.append(Row(f"{name}' of degree 1 in {entry['frame']}", float(entry[name]), number, 0.01, ".3f"))
    return rows


def sea_level_factor() -> list[Row]:
    factors = [1.0 + moved.k[1] - moved.h[1] for moved in map(love().in_frame, FRAMES)]
    return [vanishing("1 + k' - h' of degree 1, largest difference of CE, CM and CF", float(np.ptp(factors)), 1e-13)]


def half_space() -> list[Row]:
    degrees = np.arange(10_001)
    numbers = {"h'": high().h, "n l'": degrees * high().l, "n k'": degrees * high().k}
    return [
        Row(name, limit, float(2.0 * values[10_000] - values[5_000]), 2e-6 * abs(limit), ".6f")
        for (name, values), limit in zip(numbers.items(), half_space_limits(prem()), strict=True)
    ]


GROUPS = (
    Group("PREM as a body", "published", "Dziewonski & Anderson (1981), Phys. Earth Planet. Int. 25, 297-356",
          "the digits given; the replaced ocean is denser and far out, which is worth one in the fourth digit",
          prem_mass_and_inertia),
    Group("Kelvin's incompressible sphere", "closed form",
          "Thomson (1863); Munk & MacDonald (1960), section 5.6, with k' = k - h and l'/h' = 3 / (n (2n + 1))",
          "3e-8 of the number: what the steps of the integration leave at degree 2", kelvin_sphere),
    Group("k' of Wahr, Molenaar & Bryan", "published", "Wahr et al. (1998), J. Geophys. Res. 103, 30205-30229, table 1",
          "three decimals, and an Earth model whose details the table does not state",
          lambda: table_of_k("load_love_k_wahr_1998.csv", 0.003, 1, ".3f")),
    Group("k' of the IERS Conventions", "published", "IERS Conventions (2010), Technical Note 36, chapter 6",
          "another computation with an Earth that is not stated in detail",
          lambda: table_of_k("load_love_k_iers_2010.csv", 0.0025, 2, ".4f")),
    Group("Degree 1 in three frames", "published (typed from memory)",
          "Blewitt (2003), J. Geophys. Res. 108(B2), 2103, table 1",
          "another Earth model; a number in a wrong frame is off by 0.02 and more", degree_one),
    Group("The sea-level factor of degree 1", "invariant", "Blewitt (2003): frames move h', l' and 1 + k' alike",
          "rounding", sea_level_factor),
    Group("Limits of high degree", "closed form", "Farrell (1972), Rev. Geophys. 10, 761-797: Boussinesq's half-space",
          "degrees 5000 and 10000 with the 1/n term taken out; 1/n² is left", half_space),
)  # fmt: skip
