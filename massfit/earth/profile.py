"""Spherical Earth profiles: layers of cubic polynomials in the relative radius."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache, cached_property

import numpy as np
from numpy.polynomial.polynomial import polyval
from numpy.typing import ArrayLike, NDArray

from massfit.constants import GRAVITATIONAL_CONSTANT
from massfit.errors import Fault, InputError
from massfit.tables.earth_profile import read_prem_polynomials

FloatArray = NDArray[np.float64]
LayerFunction = Callable[[int, FloatArray], FloatArray]


@dataclass(frozen=True)
class Layer:
    """A spherical shell whose properties are polynomials in x = radius / surface radius.

    Parameters
    ----------
    bottom, top : float
        Radii of the shell, m.
    density : tuple of float
        Coefficients of x^0, x^1, ..., kg m-3.
    compressional_speed : tuple of float
        The same for the speed of compressional waves, m s-1; ``(inf,)`` is incompressible.
    shear_speed : tuple of float
        The same for shear waves, m s-1; all zero is a fluid.
    """

    bottom: float
    top: float
    density: tuple[float, ...]
    compressional_speed: tuple[float, ...]
    shear_speed: tuple[float, ...]

    @property
    def is_fluid(self) -> bool:
        """Whether the shell carries no shear."""
        return not any(self.shear_speed)


@dataclass(frozen=True)
class EarthProfile:
    """A spherical, self-gravitating, layered Earth.

    Parameters
    ----------
    name : str
        What results call it.
    reference : str
        Publication of its numbers.
    layers : tuple of Layer
        From the centre to the surface, without gaps.

    Raises
    ------
    InputError
        The layers do not start at the centre or do not join.

    Examples
    --------
    >>> round(prem(with_ocean=True).mass / 1e24, 2)
    5.97
    """

    name: str
    reference: str
    layers: tuple[Layer, ...]

    def __post_init__(self) -> None:
        """Refuse layers that do not fill the sphere."""
        expected = [0.0, *(layer.top for layer in self.layers)]
        faults = [
            Fault(
                self.name,
                f"layers[{index}]",
                f"it reaches from {layer.bottom} to {layer.top} m",
                f"Must begin at {floor} m and end above it",
                "Order the layers from the centre up, without gaps",
            )
            for index, (layer, floor) in enumerate(zip(self.layers, expected, strict=False))
            if layer.bottom != floor or layer.top <= floor
        ]
        if not self.layers:
            faults.append(Fault(self.name, "layers", "there is none", "At least one"))
        if faults:
            raise InputError(faults)

    @property
    def radius(self) -> float:
        """Radius of the surface, m."""
        return self.layers[-1].top

    @cached_property
    def masses_below(self) -> tuple[float, ...]:
        """Mass below the bottom of each layer, and below the surface, kg."""
        shells = (self._shell_moment(layer, 2, layer.top) for layer in self.layers)
        return tuple(np.cumsum([0.0, *(4.0 * np.pi * float(shell) for shell in shells)]).tolist())

    @property
    def mass(self) -> float:
        """Whole mass, kg."""
        return self.masses_below[-1]

    @property
    def mean_density(self) -> float:
        """Mass over volume, kg m-3."""
        return self.mass / (4.0 / 3.0 * np.pi * self.radius**3)

    @property
    def moment_of_inertia(self) -> float:
        """Moment of inertia about a diameter, (8 pi / 3) times the integral of density r^4, kg m2."""
        shells = (self._shell_moment(layer, 4, layer.top) for layer in self.layers)
        return 8.0 * np.pi / 3.0 * sum(float(shell) for shell in shells)

    @property
    def inertia_factor(self) -> float:
        """Moment of inertia over mass times radius squared; 0.4 for a homogeneous sphere."""
        return self.moment_of_inertia / (self.mass * self.radius**2)

    @property
    def surface_gravity(self) -> float:
        """Gravity at the surface, m s-2."""
        return GRAVITATIONAL_CONSTANT * self.mass / self.radius**2

    @cached_property
    def typical_rigidity(self) -> float:
        """Geometric mean of the shear modulus over the tops of the solid layers, Pa."""
        tops = [(index, np.array(layer.top)) for index, layer in enumerate(self.layers) if not layer.is_fluid]
        return float(np.exp(np.mean([np.log(self.layer_moduli(index, top)[1]) for index, top in tops])))

    def density(self, radius: ArrayLike) -> FloatArray:
        """Density at a radius (on a boundary that of the layer beneath), kg m-3.

        Parameters
        ----------
        radius : array_like
            m, of any shape.
        """
        return self._by_layer(radius, self.layer_density)

    def shear_modulus(self, radius: ArrayLike) -> FloatArray:
        """Second Lame parameter, density times shear speed squared, Pa.

        Parameters
        ----------
        radius : array_like
            m, of any shape; on a boundary the layer beneath counts.
        """
        return self._by_layer(radius, lambda index, r: self.layer_moduli(index, r)[1])

    def lame_first(self, radius: ArrayLike) -> FloatArray:
        """First Lame parameter, the longitudinal modulus less twice the shear modulus, Pa.

        Parameters
        ----------
        radius : array_like
            m, of any shape; on a boundary the layer beneath counts.
        """

        def of_layer(index: int, r: FloatArray) -> FloatArray:
            longitudinal, shear = self.layer_moduli(index, r)
            return longitudinal - 2.0 * shear

        return self._by_layer(radius, of_layer)

    def gravity(self, radius: ArrayLike) -> FloatArray:
        """Gravity inside the Earth, m s-2.

        Parameters
        ----------
        radius : array_like
            m, of any shape, above 0 and up to the surface.
        """
        return self._by_layer(radius, self.layer_gravity)

    def layer_density(self, index: int, radius: FloatArray) -> FloatArray:
        """Density by the polynomial of layer `index`, kg m-3; `radius` in m."""
        return np.asarray(polyval(radius / self.radius, self.layers[index].density))

    def layer_moduli(self, index: int, radius: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Longitudinal and shear modulus by the polynomials of layer `index`, Pa; `radius` in m."""
        layer, x = self.layers[index], radius / self.radius
        density = polyval(x, layer.density)
        return density * polyval(x, layer.compressional_speed) ** 2, density * polyval(x, layer.shear_speed) ** 2

    def layer_gravity(self, index: int, radius: FloatArray) -> FloatArray:
        """Gravity inside layer `index`, m s-2; `radius` in m."""
        inside = 4.0 * np.pi * self._shell_moment(self.layers[index], 2, radius)
        return GRAVITATIONAL_CONSTANT * (self.masses_below[index] + inside) / radius**2

    def _by_layer(self, radius: ArrayLike, of_layer: LayerFunction) -> FloatArray:
        radii = np.asarray(radius, dtype=float)
        index = np.searchsorted([layer.top for layer in self.layers[:-1]], radii)
        values = np.empty(radii.shape)
        for which in np.unique(index):
            values[index == which] = of_layer(int(which), radii[index == which])
        return values

    def _shell_moment(self, layer: Layer, power: int, radius: FloatArray | float) -> FloatArray:
        """Integrate density times r^power from the bottom of the layer to a radius."""
        rise = power + 1
        coefficients = [0.0] * rise + [c / (rise + order) for order, c in enumerate(layer.density)]
        upper = polyval(np.asarray(radius) / self.radius, coefficients)
        return np.asarray(self.radius**rise * (upper - polyval(layer.bottom / self.radius, coefficients)))


@cache
def prem(*, with_ocean: bool = False) -> EarthProfile:
    """Return the preliminary reference Earth model.

    Parameters
    ----------
    with_ocean : bool
        Keep the global ocean of 3 km on top; by default the upper crust reaches the surface
        instead, so that the surface carries loads.

    Returns
    -------
    EarthProfile
        Isotropic form at a period of 1 s (Dziewonski & Anderson 1981).

    Examples
    --------
    >>> prem().radius
    6371000.0
    """
    table = read_prem_polynomials()
    rows = table if with_ocean else table[:-1]
    tops = [*rows[:-1, 1], table[-1, 1]]
    layers = tuple(
        Layer(
            1e3 * float(row[0]),
            1e3 * float(top),
            tuple((1e3 * row[2:6]).tolist()),
            tuple((1e3 * row[6:10]).tolist()),
            tuple((1e3 * row[10:14]).tolist()),
        )
        for row, top in zip(rows, tops, strict=True)
    )
    surface = "with its ocean" if with_ocean else "ocean replaced by upper crust"
    return EarthProfile(f"PREM, {surface}", "Dziewonski & Anderson (1981), isotropic, 1 s", layers)


def homogeneous_sphere(
    *, radius: float, density: float, shear_modulus: float, bulk_modulus: float = np.inf
) -> EarthProfile:
    """Return a homogeneous elastic sphere, incompressible unless a bulk modulus is given.

    Parameters
    ----------
    radius : float
        m.
    density : float
        kg m-3.
    shear_modulus, bulk_modulus : float
        Pa.

    Returns
    -------
    EarthProfile

    Examples
    --------
    >>> sphere = homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1e11)
    >>> round(sphere.inertia_factor, 12)
    0.4
    """
    compressional = float(np.sqrt((bulk_modulus + 4.0 / 3.0 * shear_modulus) / density))
    shear = float(np.sqrt(shear_modulus / density))
    return EarthProfile(
        "homogeneous sphere",
        "Thomson (1863)",
        (Layer(0.0, radius, (density,), (compressional,), (shear,)),),
    )
