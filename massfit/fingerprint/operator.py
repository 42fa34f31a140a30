"""The sea-level operator: everything about the equation that does not depend on the load.

With B the multiplication by the ocean function between fields of limited degree,
K the kernel per degree (K_0 = 0) and rho the density of sea water, the height
without its constant solves

    (1 - rho K B') s = right side,     B' = B - (B 1)(B 1)' / (1' B 1).

Taking the mean over the ocean out of B keeps the mass closed, leaves B' symmetric,
and makes K^(1/2) B' K^(1/2) rho smaller than one quarter, so that conjugate
gradients gain a digit a step.
"""

from dataclasses import dataclass, field
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_DENSITY, EARTH_RADIUS, SEA_WATER_DENSITY
from massfit.errors import ConvergenceError, Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.transforms import SphereGrid

_MAX_STEPS = 100
_CONSTANT_ONE = np.sqrt(4.0 * np.pi)  # degree 0 of the field that is 1 everywhere


class ElasticResponse(Protocol):
    """What the operator asks of an Earth model: load Love numbers h'_n and k'_n and a name.

    :class:`massfit.earth.love.LoveNumbers` has them; a rigid Earth is two arrays of zeros.
    """

    @property
    def h(self) -> NDArray[np.float64]:
        """Vertical load Love numbers h'_n, indexed by degree."""

    @property
    def k(self) -> NDArray[np.float64]:
        """Potential load Love numbers k'_n, indexed by degree, in the frame of `h`."""

    @property
    def profile(self) -> str:
        """Name of the Earth model."""


@dataclass(frozen=True, eq=False)
class SeaLevelOperator:
    """The sea-level equation for one ocean function and one Earth model.

    Made by :func:`prepare_operator`.

    Parameters
    ----------
    grid : SphereGrid
        Where fields are multiplied, and their transforms.
    ocean : (n_lat, n_lon) array
        Ocean fraction on the cells of `grid`.
    kernel : (max_degree + 1,) array
        K_n, height of the sea per load of degree n, m per kg m-2; K_0 = 0.
    sea_water_density : float
        kg m-3.
    earth_model : str
        Name of the Earth model of the kernel.
    """

    grid: SphereGrid
    ocean: NDArray[np.float64]
    kernel: NDArray[np.float64]
    sea_water_density: float
    earth_model: str
    ocean_coefficients: NDArray[np.complex128] = field(init=False, repr=False)
    root_kernel: NDArray[np.float64] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "ocean_coefficients", self.grid.analyse(self.ocean[None])[0])
        object.__setattr__(self, "root_kernel", np.sqrt(self.kernel)[self.grid.degree])

    @property
    def max_degree(self) -> int:
        """Highest degree of the solve."""
        return self.grid.max_degree

    @property
    def latitude_deg(self) -> NDArray[np.float64]:
        """Latitudes of the grid from south to north, (n_lat,) degrees north."""
        return self.grid.latitude_deg

    @property
    def longitude_deg(self) -> NDArray[np.float64]:
        """Longitudes of the grid, (n_lon,) degrees east."""
        return self.grid.longitude_deg

    @property
    def cells(self) -> CellGrid:
        """Cells of the grid, for conservative regridding."""
        return self.grid.cells

    @property
    def cell_area_m2(self) -> NDArray[np.float64]:
        """Area of a cell in each row, (n_lat, 1) m2, to be broadcast along the row."""
        return EARTH_RADIUS**2 * self.grid.solid_angle[:, None]

    @cached_property
    def ocean_area_m2(self) -> float:
        """Area of the ocean, m2."""
        return float(np.sum(self.ocean * self.cell_area_m2))

    def on_ocean(self, coefficients: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """Coefficients of fields multiplied by the ocean function (B).

        Parameters
        ----------
        coefficients : (n_field, n_coefficient) array of complex
        """
        field = self.grid.synthesise(coefficients)
        field *= self.ocean  # in place: a field is the largest array there is
        return self.grid.analyse(field)

    def inner(self, left: NDArray[np.complex128], right: NDArray[np.complex128]) -> NDArray[np.float64]:
        """Integral over the unit sphere of the product of two real fields.

        Parameters
        ----------
        left, right : (..., n_coefficient) array of complex
        """
        weighted = self.grid.multiplicity * right
        parts = ((left.real, weighted.real), (left.imag, weighted.imag))
        return np.asarray(sum(np.einsum("...i,...i->...", one, other) for one, other in parts))

    def ocean_integral(self, coefficients: NDArray[np.complex128]) -> NDArray[np.float64]:
        """Integral of fields over the ocean of the unit sphere."""
        return self.inner(coefficients, self.ocean_coefficients)

    def solve(
        self,
        load: NDArray[np.complex128],
        forcing: NDArray[np.complex128],
        vapour: NDArray[np.float64],
        *,
        tolerance: float = 1e-12,
    ) -> tuple[NDArray[np.complex128], NDArray[np.float64], int]:
        """Solve the sea-level equation for real fields given by their harmonics.

        Parameters
        ----------
        load, forcing : (n_field, n_coefficient) array of complex
            W, kg m-2, and Phi, m, whose degree 0 drops out.
        vapour : (n_field,) array
            M_v, kg.
        tolerance : float
            Residual relative to the right side.

        Returns
        -------
        height : (n_field, n_coefficient) array of complex
            Of the sea, m.
        constant : (n_field,) array
            The constant c of the equation, m.
        steps : int
            Conjugate-gradient steps.

        Raises
        ------
        ConvergenceError
            The tolerance is not reached.
        """
        # mean height over the ocean, fixed by the masses
        mean = -(self.mass(load) + vapour) / (self.sea_water_density * self.ocean_area_m2)
        root = self.root_kernel
        source = root * (load + self.sea_water_density * mean[:, None] * self.ocean_coefficients)
        source[:, 1:] += forcing[:, 1:] / root[1:]
        u, steps = self.invert(source, tolerance=tolerance)
        height = root * u
        constant = mean - self.ocean_integral(height) * EARTH_RADIUS**2 / self.ocean_area_m2
        height[:, 0] += _CONSTANT_ONE * constant
        return height, constant, steps

    def mass(self, load: NDArray[np.complex128]) -> NDArray[np.float64]:
        """Integral of loads over the Earth, kg.

        Parameters
        ----------
        load : (n_field, n_coefficient) array of complex
            kg m-2.
        """
        return np.asarray(_CONSTANT_ONE * load[:, 0].real * EARTH_RADIUS**2)

    def invert(self, right: NDArray[np.complex128], *, tolerance: float = 1e-12) -> tuple[NDArray[np.complex128], int]:
        """Solve (1 - rho K^(1/2) B' K^(1/2)) u = right by conjugate gradients.

        Parameters
        ----------
        right : (n_field, n_coefficient) array of complex
            Right sides of real fields; their degree 0 must be zero.
        tolerance : float
            Size of the residual, relative to the right side.

        Returns
        -------
        solution : (n_field, n_coefficient) array of complex
        steps : int
            Number of steps.

        Raises
        ------
        ConvergenceError
            The tolerance is not reached in 100 steps.
        """
        solution = right.copy()  # the operator is close to one
        residual = right - self._symmetric(solution)
        direction = residual.copy()
        size, whole = self.inner(residual, residual), self.inner(right, right)
        for step in range(_MAX_STEPS):
            if np.all(size <= tolerance**2 * whole):
                return solution, step
            image = self._symmetric(direction)
            length = _ratio(size, self.inner(direction, image))
            solution += length * direction
            residual -= length * image
            previous, size = size, self.inner(residual, residual)
            direction = residual + _ratio(size, previous) * direction
        reached = np.sqrt(np.max(_ratio(size, whole)))
        raise ConvergenceError("Sea-level equation", float(reached), tolerance)

    def _symmetric(self, coefficients: NDArray[np.complex128]) -> NDArray[np.complex128]:
        product = self.on_ocean(self.root_kernel * coefficients)
        mean = product[:, 0].real / self.ocean_coefficients[0].real
        centred = product - mean[:, None] * self.ocean_coefficients
        return np.asarray(coefficients - self.sea_water_density * self.root_kernel * centred)


def prepare_operator(
    ocean: OceanFunction,
    love: ElasticResponse,
    *,
    max_degree: int = 180,
    sea_water_density: float = SEA_WATER_DENSITY,
    threads: int = 1,
) -> SeaLevelOperator:
    """Prepare the sea-level equation for an ocean function and an Earth model.

    Parameters
    ----------
    ocean : OceanFunction
        Brought conservatively onto the Gauss-Legendre grid of the operator.
    love : LoveNumbers or any ElasticResponse
        Load Love numbers to at least `max_degree`, in any one frame: degree 1
        enters as 1 + k'_1 - h'_1, which is the same in all.
    max_degree : int
        Highest degree of load, ocean response and sea level.
    sea_water_density : float
        kg m-3.
    threads : int
        Threads of the transforms.

    Returns
    -------
    SeaLevelOperator

    Raises
    ------
    InputError
        Love numbers that stop below `max_degree`, or an impossible degree or density.

    Notes
    -----
    K_n = 3 (1 + k'_n - h'_n) / (rho_e (2 n + 1)), Farrell & Clark (1976).

    Examples
    --------
    >>> from massfit.earth.love import love_numbers
    >>> operator = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20)
    >>> f"{operator.ocean_area_m2:.4e}"
    '3.6263e+14'
    """
    faults = []
    if max_degree < 1 or len(love.h) <= max_degree:
        faults.append(Fault("operator", "max_degree", f"degree {max_degree} was asked", f"1 to {len(love.h) - 1}"))
    if not sea_water_density > 0.0:
        faults.append(Fault("operator", "sea_water_density", f"it is {sea_water_density}", "More than 0 kg m-3"))
    if faults:
        raise InputError(faults)
    degree = np.arange(max_degree + 1)
    response = 1.0 + love.k[: max_degree + 1] - love.h[: max_degree + 1]
    kernel = np.where(degree > 0, 3.0 * response / (EARTH_DENSITY * (2 * degree + 1)), 0.0)
    grid = SphereGrid(max_degree, threads)
    fraction = regrid(ocean.fraction, ocean.cells, grid.cells)
    return SeaLevelOperator(grid, fraction, kernel, sea_water_density, love.profile)


def _ratio(above: NDArray[np.float64], below: NDArray[np.float64]) -> NDArray[np.float64]:
    """Quotients as a column, zero where the denominator is: that field is solved."""
    quotient = np.divide(above, below, out=np.zeros_like(above), where=below > 0.0)
    return np.asarray(quotient[:, None])
