"""From gravity coefficients to the mass on the Earth's surface.

A layer of mass sigma on a sphere of the reference radius a, with the elastic yielding of the Earth under it, has the
potential coefficients C_nm = 3 (1 + k'_n) sigma_nm / (rho_e a (2 n + 1)) (Wahr, Molenaar & Bryan 1998, eq. 13).
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_DENSITY
from massfit.earth.love import LoveNumbers
from massfit.errors import Fault, InputError
from massfit.gravity.field import Conventions, GravityField, TideSystem

PERMANENT_TIDE_C20 = 4.4228e-8 * -0.31460 * 0.30190
"""Zero-tide C20 less tide-free C20: A_0 H_0 k_20 (IERS Conventions 2010, eq. 6.14 and table 6.3, anelastic k_20)."""

_ZERO_TIDE_C20 = -4.84169417e-4
"""Zero-tide C20 of the Earth (from memory: a static field of 2014); it has drifted by less than 5e-10 since 2002."""


def mass_per_coefficient(
    love: LoveNumbers, max_degree: int, *, radius_m: float, earth_density: float = EARTH_DENSITY
) -> NDArray[np.float64]:
    """Surface mass of a unit potential coefficient, by degree.

    Parameters
    ----------
    love : LoveNumbers
        Degree 1 in the frame of the degree-1 coefficients: the centre of figure for tables of geocentre motion.
    max_degree : int
    radius_m : float
        Reference radius of the coefficients, m.
    earth_density : float
        Mean density of the Earth, kg m-3.

    Returns
    -------
    (N + 1,) array
        kg m-2. Degree 0 has no yielding.

    Examples
    --------
    C10 of 1e-10 is a layer of 3.446 mm of water (times sqrt(3) times the sine of latitude):

    >>> from massfit.earth.love import love_numbers
    >>> love = love_numbers(max_degree=2)
    >>> layer = mass_per_coefficient(love, 1, radius_m=6378136.3, earth_density=5517.0)
    >>> round(1e-10 * float(layer[1] * (1.0 + love.k[1])) / 1.021, 3)
    3.446
    """
    n = np.arange(max_degree + 1)
    return earth_density * radius_m / 3.0 * (2 * n + 1) / (1.0 + love.k[: max_degree + 1])


def cut(field: GravityField, max_degree: int) -> GravityField:
    """Leave out the degrees above one."""
    if field.max_degree <= max_degree:
        return field
    size = max_degree + 1
    sd = None if field.sd is None else field.sd[:, :size, :size]
    return replace(field, coefficients=field.coefficients[:, :size, :size], sd=sd)


def referred(field: GravityField, conventions: Conventions) -> GravityField:
    """Refer a field to another gravitational constant, radius and tide system.

    Parameters
    ----------
    field : GravityField
    conventions : Conventions

    Returns
    -------
    GravityField
        The same potential.

    Raises
    ------
    InputError
        Tide systems that cannot be turned into one another: mean tide, or one of them unknown.
    """
    degree = np.arange(field.max_degree + 1)
    old = field.conventions
    if old == conventions:
        return field
    factor = old.gm / conventions.gm * (old.radius_m / conventions.radius_m) ** degree
    coefficients = field.coefficients * factor[None, :, None]
    coefficients[0, 2, 0] += _tide_step(old.tide_system, conventions.tide_system, field.source)
    sd = None if field.sd is None else field.sd * factor[None, :, None]
    return replace(field, coefficients=coefficients, sd=sd, conventions=conventions)


def _tide_step(old: TideSystem, new: TideSystem, source: str) -> float:
    steps = {"tide_free": 0.0, "zero_tide": PERMANENT_TIDE_C20}
    if old == new:
        return 0.0
    if old not in steps or new not in steps:
        problem = f"the tide system is {old!r} and {new!r} is wanted"
        raise InputError(Fault(source, "tide_system", problem, "Only tide_free and zero_tide turn into one another"))
    return steps[new] - steps[old]


def apparent_tide_system(c20: float) -> TideSystem:
    """Tell the tide system from the size of C20.

    The two differ by 4.2e-9, the Earth's own changes since 2002 are below 5e-10.

    Parameters
    ----------
    c20 : float
        At the reference radius 6378136.3 m or within metres of it.

    Returns
    -------
    str
        "unknown" where it is nearer to neither than 1e-9.

    Examples
    --------
    >>> apparent_tide_system(-4.84169457e-4), apparent_tide_system(-4.84165217e-4)
    ('zero_tide', 'tide_free')
    """
    departure = c20 - _ZERO_TIDE_C20
    if abs(departure) < 1e-9:
        return "zero_tide"
    return "tide_free" if abs(departure + PERMANENT_TIDE_C20) < 1e-9 else "unknown"
