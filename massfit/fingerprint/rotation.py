"""Rotational feedback: the annual wobble that the load causes, and the sea's answer to it.

A load L (kg m-2, the ocean's own included) moves the mass products of inertia by
c_1 = -(a^2 / 2) integral L sin(2 lat) cos(lon) dA, and c_2 with sin(lon). The wobble (m_1, m_2) follows from the
linearised Liouville equation of a mantle with a decoupled fluid core (Munk & MacDonald 1960; Gross 2015)::

    m_1 - (dm_2/dt) / sigma = chi_1,   m_2 + (dm_1/dt) / sigma = chi_2,   chi = f (1 + k'_2) c / (C - A)

with the observed Chandler rate sigma, and changes the equilibrium height of the sea by

    Phi = -(1 + k'_2) (Omega^2 a^2 / 2 g) sin(2 lat) (m_1 cos(lon) + m_2 sin(lon)),

because 1 + k_2 - h_2 = 1 + k'_2 (Saito 1978). Hence chi_j = beta <L, Phi_j> with beta = f g / (Omega^2 (C - A)) and
Phi_j the height per unit of m_j. The equilibrium pole tide of the ocean is part of the 433 days and of f
already, so L is the load without it. With P_j the sea's self-consistent answer to Phi_j, and c_j its constant,
reciprocity gives <L, Phi_j> = integral W P_j dA + c_j M_v: two more solves serve every load.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import (
    EARTH_RADIUS,
    EARTH_ROTATION_RATE,
    GRAVITATIONAL_CONSTANT,
    STANDARD_GRAVITY,
    TROPICAL_YEAR_DAYS,
)
from massfit.contracts import FOOTPRINTS, require
from massfit.fingerprint.operator import ElasticResponse, SeaLevelOperator
from massfit.site import Site

CHANDLER_PERIOD_DAYS = 433.0
"""Observed period of the free wobble (Gross 2015, after Wilson & Vicente 1990)."""

EFFECTIVE_FACTOR = 1.608
"""f: what the yielding mantle and ocean and the decoupled core make of an excitation (Gross 2015)."""

POLAR_EXCESS = 1.0826359e-3 * 3.986004418e14 / GRAVITATIONAL_CONSTANT * 6_378_136.6**2
"""C - A = J_2 M a^2, kg m2, from J_2, G M and the equatorial radius of IERS Conventions (2010), table 1.1."""

_PERIODS = CHANDLER_PERIOD_DAYS / TROPICAL_YEAR_DAYS


@dataclass(frozen=True, eq=False)
class RotationalFeedback:
    """What the wobble adds to the sea level of any annual load.

    Made by :func:`prepare_rotation`.

    Parameters
    ----------
    forcing : (2, n_coefficient) array of complex
        Harmonics of Phi_j, m per rad.
    response : (2, n_coefficient) array of complex
        Harmonics of P_j, m per rad.
    constant : (2,) array
        c_j, m per rad.
    transfer : (2, 2) array of complex
        Wobble phasors per <L, Phi_j>, rad per kg m.
    """

    forcing: NDArray[np.complex128]
    response: NDArray[np.complex128]
    constant: NDArray[np.float64]
    transfer: NDArray[np.complex128]

    def wobble(self, operator: SeaLevelOperator, load: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """Annual wobble phasors under the harmonics of a load.

        Parameters
        ----------
        operator : SeaLevelOperator
        load : (2, n_coefficient) array of complex
            Harmonics of the in-phase and the quadrature part of the whole load, ocean included, kg m-2.

        Returns
        -------
        (2,) array of complex
            m_1 and m_2, rad.
        """
        in_phase, quadrature = operator.inner(self.forcing[:, None], load[None]).T * EARTH_RADIUS**2
        return np.asarray(self.transfer @ (in_phase + 1j * quadrature))


def prepare_rotation(operator: SeaLevelOperator, love: ElasticResponse) -> RotationalFeedback:
    """Solve for the sea's answer to a unit wobble about each axis.

    Parameters
    ----------
    operator : SeaLevelOperator
        To degree 2 at least.
    love : LoveNumbers or any ElasticResponse
        Of the operator's Earth; only k'_2 is used.

    Returns
    -------
    RotationalFeedback

    Raises
    ------
    ConvergenceError
        The solve does not reach its tolerance.

    Notes
    -----
    Munk & MacDonald (1960), Milne & Mitrovica (1998), Wahr (1985), Gross (2015). Damping of the free wobble (Q of
    100 to 200) turns the annual prograde part by a degree or two and is left out, and so is the 1 in 366 between the
    pole of rotation and the one that is reported.

    Examples
    --------
    What 1 mm of water on the land of each hemisphere in its own winter does to the pole, in milliarcseconds:

    >>> from massfit.earth.love import love_numbers
    >>> from massfit.fingerprint.ocean import OceanFunction
    >>> from massfit.fingerprint.operator import prepare_operator
    >>> from massfit.fingerprint.sea_level import solve_sea_level
    >>> love = love_numbers(max_degree=20)
    >>> operator = prepare_operator(OceanFunction.builtin(), love, max_degree=20)
    >>> rotation = prepare_rotation(operator, love)
    >>> load = (1.0 - operator.ocean) * np.sign(operator.latitude_deg)[:, None]
    >>> sea = solve_sea_level(operator, load=load)
    >>> whole = operator.grid.analyse(load[None]) + operator.sea_water_density * operator.on_ocean(sea.coefficients)
    >>> wobble = rotation.wobble(operator, np.concatenate([whole, 0.0 * whole]))
    >>> np.abs(wobble / np.radians(1 / 3.6e6)).round(2)
    array([1.43, 1.41])
    """
    response = 1.0 + float(love.k[2])
    scale = -response * (EARTH_ROTATION_RATE * EARTH_RADIUS) ** 2 / (2.0 * STANDARD_GRAVITY)
    latitude, longitude = np.radians(operator.latitude_deg)[:, None], np.radians(operator.longitude_deg)
    shapes = np.stack([np.cos(longitude), np.sin(longitude)])[:, None] * np.sin(2.0 * latitude)
    forcing = operator.grid.analyse(scale * shapes)
    height, constant, _ = operator.solve(np.zeros_like(forcing), forcing, np.zeros(2))
    excitation = EFFECTIVE_FACTOR * STANDARD_GRAVITY / (EARTH_ROTATION_RATE**2 * POLAR_EXCESS)
    return RotationalFeedback(forcing, height, constant, excitation * annual_transfer())


def annual_transfer() -> NDArray[np.complex128]:
    """Annual wobble phasors (m_1, m_2) per excitation phasors (chi_1, chi_2).

    Returns
    -------
    (2, 2) array of complex
        In the phasor convention of the package, Re[Z exp(-i w t)].

    Examples
    --------
    Once a year eastward the wobble goes against its excitation, 5.4 times as large; westward along with it, 0.46 times:

    >>> eastward, westward = np.array([1.0, 1.0j]), np.array([1.0, -1.0j])
    >>> (annual_transfer() @ eastward / eastward).round(2).real, (annual_transfer() @ westward / westward).round(2).real
    (array([-5.39, -5.39]), array([0.46, 0.46]))
    """
    return np.asarray(np.array([[1.0, -1j * _PERIODS], [1j * _PERIODS, 1.0]]) / (1.0 - _PERIODS**2), dtype=complex)


def with_rotation(
    footprints: xr.Dataset, operator: SeaLevelOperator, sites: Sequence[Site], rotation: RotationalFeedback
) -> xr.Dataset:
    """Footprints that hold the rotational feedback, for annual phasors of loads.

    Parameters
    ----------
    footprints : xarray.Dataset
        contracts.FOOTPRINTS of these sites, without rotation.
    operator : SeaLevelOperator
        The one that made them.
    sites : sequence of Site
    rotation : RotationalFeedback

    Returns
    -------
    xarray.Dataset
        contracts.FOOTPRINTS, complex: T_s(y) + P_j(s) transfer_jk P_k(y), and the same with c_k. The equation with
        rotation is not symmetric any more; this is its true adjoint, to be used without conjugation.
    """
    require(footprints, FOOTPRINTS)
    latitude, longitude = ([getattr(site, name) for site in sites] for name in ("latitude_deg", "longitude_deg"))
    at_sites = operator.grid.synthesise_at(rotation.response, latitude, longitude).T @ rotation.transfer
    patterns = operator.grid.synthesise(rotation.response)
    added = np.tensordot(at_sites, patterns, 1)
    constant = at_sites @ rotation.constant
    return footprints.assign(
        footprint=footprints["footprint"].copy(data=footprints["footprint"].to_numpy() + added),
        constant=footprints["constant"].copy(data=footprints["constant"].to_numpy() + constant),
    ).assign_attrs(rotational_feedback="annual")
