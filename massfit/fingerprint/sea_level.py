"""The elastic sea-level equation for a load, a potential forcing, or both."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from massfit.constants import EARTH_RADIUS, KG_PER_GT
from massfit.display import Described, Description, counted, shown_number
from massfit.errors import Fault, InputError
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.rotation import RotationalFeedback


@dataclass(frozen=True, eq=False, repr=False)
class SeaLevel(Described):
    """Relative sea level in response to a load or a forcing.

    Made by :func:`solve_sea_level`. Values are complex when an input is.

    Parameters
    ----------
    operator : SeaLevelOperator
    coefficients : (n_part, n_coefficient) array of complex
        Harmonics of the height (m) in the order of
        :mod:`massfit.fingerprint.transforms`; one row, or one each for the real and
        the imaginary part.
    constant : float or complex
        The constant c of the equation, m.
    load_mass : float or complex
        Mass of the load, kg.
    water_vapour : float or complex
        Mass of water vapour taken from the surface, kg.
    iterations : int
        Conjugate-gradient steps.
    """

    operator: SeaLevelOperator
    coefficients: NDArray[np.complex128]
    constant: complex
    load_mass: complex
    water_vapour: complex
    iterations: int

    def describe(self) -> Description:
        """Ocean mean and masses."""
        return "Relative sea level", {
            "ocean mean": f"{shown_number(1000.0 * self.ocean_mean)} mm of sea water",
            "load": f"{shown_number(self.load_mass / KG_PER_GT, '.4g')} Gt",
            "water vapour": f"{shown_number(self.water_vapour / KG_PER_GT, '.4g')} Gt",
            "solved": f"to degree {self.operator.max_degree} in {counted(self.iterations, 'step')}",
        }

    @property
    def height(self) -> NDArray[np.float64] | NDArray[np.complex128]:
        """Height on the operator's grid, over land too, (n_lat, n_lon) m."""
        return _joined(self.operator.grid.synthesise(self.coefficients))

    def at(self, latitude_deg: ArrayLike, longitude_deg: ArrayLike) -> NDArray[np.float64] | NDArray[np.complex128]:
        """Height at points, the full sum over harmonics.

        Parameters
        ----------
        latitude_deg, longitude_deg : array_like
            Degrees north and east, of shapes that broadcast.

        Returns
        -------
        array
            m.
        """
        latitude, longitude = np.broadcast_arrays(latitude_deg, longitude_deg)
        grid = self.operator.grid
        values = _joined(grid.synthesise_at(self.coefficients, latitude.ravel(), longitude.ravel()))
        return values.reshape(latitude.shape)

    @property
    def ocean_mean(self) -> float | complex:
        """Mean height over the ocean, m; follows from the masses alone up to rounding."""
        integral = self.operator.ocean_integral(self.coefficients)
        mean = _joined(integral) * EARTH_RADIUS**2 / self.operator.ocean_area_m2
        return mean.item()

    @property
    def mass_closure(self) -> float:
        """Mass that ocean, load and water vapour leave over, kg, from a sum over the grid."""
        operator = self.operator
        ocean_mass = operator.sea_water_density * np.sum(operator.ocean * self.height * operator.cell_area_m2)
        return float(abs(ocean_mass + self.load_mass + self.water_vapour))


def solve_sea_level(
    operator: SeaLevelOperator,
    *,
    load: NDArray[np.float64] | NDArray[np.complex128] | None = None,
    forcing: NDArray[np.float64] | NDArray[np.complex128] | None = None,
    water_vapour: complex = 0.0,
    rotation: RotationalFeedback | None = None,
    tolerance: float = 1e-12,
) -> SeaLevel:
    """Solve the elastic sea-level equation with a self-consistent, mass-conserving ocean.

    S = sum_n { K_n [rho_w O S + W]_n + Phi_n } + c, with c from
    integral (rho_w O S + W) = -M_v (Farrell & Clark 1976; tides: Agnew & Farrell 1978).

    Parameters
    ----------
    operator : SeaLevelOperator
        From :func:`massfit.fingerprint.operator.prepare_operator`.
    load : (n_lat, n_lon) array, optional
        W on the operator's grid, kg m-2 of whole-cell area, real or complex; load on
        ocean cells is used as given, besides the ocean's own response.
    forcing : (n_lat, n_lon) array, optional
        Phi on the operator's grid, m: the equilibrium height, solid-Earth response
        included; its mean drops out.
    water_vapour : complex
        M_v, mass of water vapour in the air, kg; positive mass lowers the sea.
    rotation : RotationalFeedback, optional
        Of this operator: the inputs are then annual phasors, and the wobble that they cause is fed back. None by
        default, as where the pole tide is taken off with observed polar motion.
    tolerance : float
        Residual of the solve relative to its right side.

    Returns
    -------
    SeaLevel

    Raises
    ------
    InputError
        Neither load nor forcing nor water vapour, wrong shapes, or values that are not finite.
    ConvergenceError
        The tolerance is not reached.

    Examples
    --------
    >>> from massfit.earth.love import love_numbers
    >>> from massfit.fingerprint.operator import prepare_operator
    >>> from massfit.fingerprint.ocean import OceanFunction
    >>> operator = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20)
    >>> sea = solve_sea_level(operator, load=1.0 - operator.ocean)  # 1 mm of water on all land
    >>> round(1000 * sea.ocean_mean, 4)  # mm of sea water
    -0.3967
    """
    _check(operator, load, forcing, water_vapour)
    given = [value for value in (load, forcing, water_vapour) if value is not None]
    complex_valued = rotation is not None or any(np.iscomplexobj(value) for value in given)
    w = _coefficients(operator, load, complex_valued)
    phi = _coefficients(operator, forcing, complex_valued)
    vapour = _parts(np.asarray(water_vapour), complex_valued)
    height, constant, steps = operator.solve(w, phi, vapour, tolerance=tolerance)
    if rotation is not None:
        whole = w + operator.sea_water_density * operator.on_ocean(height)
        turned = _parts(rotation.wobble(operator, whole), True)  # in-phase and quadrature parts of m_1 and m_2
        height, constant = height + turned @ rotation.response, constant + turned @ rotation.constant
    joined = [_joined(value).item() for value in (constant, operator.mass(w))]
    return SeaLevel(operator, height, joined[0], joined[1], water_vapour, steps)


def _check(
    operator: SeaLevelOperator,
    load: NDArray[np.float64] | NDArray[np.complex128] | None,
    forcing: NDArray[np.float64] | NDArray[np.complex128] | None,
    water_vapour: complex,
) -> None:
    place, faults = "sea level", []
    if load is None and forcing is None and water_vapour == 0.0:
        faults.append(Fault(place, "load", "nothing forces the sea", action="Give a load or a forcing"))
    for name, value in {"load": load, "forcing": forcing}.items():
        if value is None:
            continue
        if value.shape != operator.cells.shape:
            allowed = f"Must be {operator.cells.shape} as the operator's grid"
            faults.append(Fault(place, name, f"the shape is {value.shape}", allowed, "Use massfit.fingerprint.grid"))
        elif not np.all(np.isfinite(value)):
            count = np.count_nonzero(~np.isfinite(value))
            faults.append(Fault(place, name, f"{count} values are not finite", "Finite numbers", "Fill them with 0"))
    if faults:
        raise InputError(faults)


def _parts(value: NDArray[np.float64] | NDArray[np.complex128], complex_valued: bool) -> NDArray[np.float64]:
    """Real part, or real and imaginary part, on a new first axis."""
    return np.stack([value.real, value.imag]) if complex_valued else np.asarray(value.real, dtype=float)[None]


def _joined(parts: NDArray[np.float64]) -> NDArray[np.float64] | NDArray[np.complex128]:
    return parts[0] if len(parts) == 1 else np.asarray(parts[0] + 1j * parts[1])


def _coefficients(
    operator: SeaLevelOperator,
    field: NDArray[np.float64] | NDArray[np.complex128] | None,
    complex_valued: bool,
) -> NDArray[np.complex128]:
    if field is None:
        return np.zeros((2 if complex_valued else 1, operator.grid.degree.size), dtype=complex)
    return operator.grid.analyse(_parts(field, complex_valued))
