"""Static deformation of a layered sphere under surface loads, integrated from below.

The six equations of Alterman, Jarosch & Pekeris (1959) in their static form, with the variables of
Farrell (1972): y1 and y3 the radial and tangential displacement, y2 and y4 the radial and tangential
traction, y5 the potential and y6 = dy5/dr - 4 pi G rho y1 + (n + 1) y5 / r. In a fluid only y5 and
y7 = y6 + 4 pi G y2 / g remain (Saito 1974).

The independent variable is ln r, and the unknowns are scaled so that every coefficient is of the
order of the degree n: with L = sqrt(n (n + 1)), g the surface gravity and M the typical rigidity,

    z = (y1, r y2 / (L M), L y3, r y4 / M, y5 / g, r y6 / (L g)).

Of the three solutions that are regular below, only the space they span matters: they are made
orthonormal again and again, so that they stay independent whatever the degree.
"""

import numpy as np
from numpy.typing import NDArray

from massfit.constants import GRAVITATIONAL_CONSTANT
from massfit.earth.profile import EarthProfile
from massfit.errors import ConvergenceError

FloatArray = NDArray[np.float64]

_FOUR_PI_G = 4.0 * np.pi * GRAVITATIONAL_CONSTANT
# solutions that are singular at the centre fade by exp(-this) between the floor and the surface
_FADING = 38.0
# the exponential series ends where its terms, beside an orthonormal basis, are lost in rounding;
# some 15 terms in rock, and no number of them for a rock that cannot bear its own weight
_SERIES_END = 1.0e-16
_MOST_TERMS = 80
# the polynomials of a layer are not constant, whatever the degree: at most this step in ln r, and 16 steps
_LONGEST_STEP = 0.0025
_FEWEST_STEPS = 16
_STEPS_BETWEEN_ORTHONORMALISATIONS = 6
# the three Gauss points, counted from the middle of a step in steps
_GAUSS_NODES = (-np.sqrt(0.15), 0.0, np.sqrt(0.15))


def load_response(profile: EarthProfile, degrees: FloatArray, *, step: float) -> tuple[FloatArray, ...]:
    """Integrate the load Love numbers h', l', k' of the given degrees.

    Parameters
    ----------
    profile : EarthProfile
        Its surface must be solid.
    degrees : (n,) array
        Ascending, from 1.
    step : float
        Largest step in (n + 2) ln r: solutions go as r^n, and gravity against rigidity as r^2.

    Returns
    -------
    h, l, k : (n,) arrays
        Degree 1 in the frame of the centre of mass of the solid Earth, where k'_1 = 0.
    """
    space = surface_space(profile, degrees, step=step)
    root = np.sqrt(degrees * (degrees + 1.0))
    gravity = profile.surface_gravity
    wanted = np.stack(
        [
            -(2.0 * degrees + 1.0) * gravity**2 / (_FOUR_PI_G * root * profile.typical_rigidity),
            np.zeros_like(degrees),
            (2.0 * degrees + 1.0) / root,
        ],
        axis=-1,
    )
    rows = space[:, [1, 3, 5], :].copy()
    # A shift of the whole Earth needs no force: at degree 1 the three conditions depend on each
    # other, and the place of the origin (total potential = that of the load) replaces the first.
    first = degrees == 1
    rows[first, 0], wanted[first, 0] = space[first, 4], 1.0
    surface = (space @ np.linalg.solve(rows, wanted[..., None]))[..., 0]
    return surface[:, 0], surface[:, 2] / root, surface[:, 4] - 1.0


def surface_space(profile: EarthProfile, degrees: FloatArray, *, step: float) -> FloatArray:
    """Carry the regular solutions of each degree from its floor to the surface.

    A degree begins where the solutions that are singular at the centre have a factor
    exp(-38) left to fade: below, the sphere is held rigid.

    Returns
    -------
    (n, 6, 3) array
        Orthonormal basis of the scaled variables at the surface.
    """
    floor = np.log(profile.radius) - _FADING / (2.0 * degrees - 1.0)
    space = np.empty((0, 0, 0))
    for index, layer in enumerate(profile.layers):
        active = degrees[floor < np.log(layer.top)]
        if not active.size:
            continue
        carried = len(space)
        begin = np.maximum(floor[: active.size], np.log(layer.bottom) if layer.bottom else -np.inf)
        if carried and layer.is_fluid != profile.layers[index - 1].is_fluid:
            cross = _into_fluid if layer.is_fluid else _into_solid
            space = cross(profile, index, active[:carried], space)
        fresh = _floor_space(active[carried:], fluid=layer.is_fluid)
        space = np.concatenate([space, fresh]) if carried else fresh
        space = _through_layer(profile, index, active, begin, space, step)
    return space


def _through_layer(
    profile: EarthProfile, index: int, degrees: FloatArray, begin: FloatArray, space: FloatArray, step: float
) -> FloatArray:
    """Step a basis from ln r = `begin` to the top of a layer, by the Magnus expansion of sixth order."""
    matrix = _fluid_matrix if profile.layers[index].is_fluid else _solid_matrix
    span = np.log(profile.layers[index].top) - begin
    fewest = min(_FEWEST_STEPS, int(np.ceil(np.max(span) / _LONGEST_STEP)))
    count = max(fewest, int(np.ceil(np.max((degrees + 2.0) * span) / step)))
    width = span / count
    for number in range(count):
        middle = begin + (number + 0.5) * width
        if number % _STEPS_BETWEEN_ORTHONORMALISATIONS == 0:
            space = np.linalg.qr(space)[0]
        at_nodes = [matrix(profile, index, degrees, np.exp(middle + node * width)) for node in _GAUSS_NODES]
        exponent = _magnus_exponent(width[:, None, None], *at_nodes)
        space = _exponential_times(exponent, space)
    return np.linalg.qr(space)[0]


def _magnus_exponent(width: FloatArray, lower: FloatArray, middle: FloatArray, upper: FloatArray) -> FloatArray:
    """Logarithm of the propagator of one step from the matrices at its Gauss points (Blanes, Casas & Ros 2000)."""
    mean = width * middle
    slope = np.sqrt(15.0) / 3.0 * width * (upper - lower)
    bend = 10.0 / 3.0 * width * (upper - 2.0 * middle + lower)
    first = _commutator(mean, slope)
    second = -_commutator(mean, 2.0 * bend + first) / 60.0
    return mean + bend / 12.0 + _commutator(first - 20.0 * mean - bend, slope + second) / 240.0


def _commutator(a: FloatArray, b: FloatArray) -> FloatArray:
    return a @ b - b @ a


def _exponential_times(exponent: FloatArray, space: FloatArray) -> FloatArray:
    """Multiply exp(exponent) by an orthonormal basis through the exponential series."""
    total = term = space
    size = 1.0
    for order in range(1, _MOST_TERMS + 1):
        term = exponent @ term / order
        total = total + term
        size = float(np.abs(term).max())
        if size < _SERIES_END:
            return total
    raise ConvergenceError("the exponential series of an Earth layer", size, _SERIES_END)


def _solid_matrix(profile: EarthProfile, index: int, n: FloatArray, r: FloatArray) -> FloatArray:
    """Coefficients of dz / d ln r in a solid layer (Alterman, Jarosch & Pekeris 1959, static)."""
    root = np.sqrt(n * (n + 1.0))
    density = profile.layer_density(index, r)
    longitudinal, shear = profile.layer_moduli(index, r)
    ratio = shear / longitudinal
    side = 1.0 - 2.0 * ratio  # lambda / (lambda + 2 mu)
    rigidity = shear / profile.typical_rigidity
    stretch = 2.0 * rigidity * (3.0 - 4.0 * ratio)  # 2 mu (3 lambda + 2 mu) / (lambda + 2 mu)
    weight = density * profile.layer_gravity(index, r) * r / profile.typical_rigidity
    pull = density * profile.surface_gravity * r / profile.typical_rigidity
    attraction = _FOUR_PI_G * density * r / profile.surface_gravity

    a = np.zeros((n.size, 6, 6))
    a[:, 0, 0] = -2.0 * side
    a[:, 0, 1] = root * profile.typical_rigidity / longitudinal
    a[:, 0, 2] = root * side
    a[:, 1, 0] = (2.0 * stretch - 4.0 * weight) / root
    a[:, 1, 1] = 1.0 - 4.0 * ratio
    a[:, 1, 2] = weight - stretch
    a[:, 1, 3] = root
    a[:, 1, 4] = pull * (n + 1.0) / root
    a[:, 1, 5] = -pull
    a[:, 2, 0] = -root
    a[:, 2, 2] = 1.0
    a[:, 2, 3] = root / rigidity
    a[:, 3, 0] = weight - stretch
    a[:, 3, 1] = -root * side
    a[:, 3, 2] = 2.0 * rigidity * (2.0 * root * (1.0 - ratio) - 1.0 / root)
    a[:, 3, 3] = -2.0
    a[:, 3, 4] = -pull
    a[:, 4, 0] = attraction
    a[:, 4, 4] = -(n + 1.0)
    a[:, 4, 5] = root
    a[:, 5, 0] = attraction * (n + 1.0) / root
    a[:, 5, 2] = -attraction
    a[:, 5, 5] = n
    return a


def _fluid_matrix(profile: EarthProfile, index: int, n: FloatArray, r: FloatArray) -> FloatArray:
    """Coefficients of d(y5 / g, r y7 / (L g)) / d ln r in a static fluid (Saito 1974)."""
    root = np.sqrt(n * (n + 1.0))
    attraction = _FOUR_PI_G * profile.layer_density(index, r) * r / profile.layer_gravity(index, r)
    a = np.empty((n.size, 2, 2))
    a[:, 0, 0] = attraction - (n + 1.0)
    a[:, 0, 1] = root
    a[:, 1, 0] = 2.0 * (n - 1.0) * attraction / root
    a[:, 1, 1] = n - attraction
    return a


def _floor_space(n: FloatArray, *, fluid: bool) -> FloatArray:
    """Begin the solutions above a rigid floor in whose inside the potential goes as r^n."""
    root = np.sqrt(n * (n + 1.0))
    if fluid:
        return np.stack([np.ones_like(n), 2.0 * (n - 1.0) / root], axis=-1)[..., None]
    space = np.zeros((n.size, 6, 3))
    space[:, 1, 0] = space[:, 3, 1] = space[:, 4, 2] = 1.0
    space[:, 5, 2] = (2.0 * n + 1.0) / root
    return space


def _boundary(profile: EarthProfile, index: int, fluid: int) -> tuple[float, float, float]:
    """Radius and gravity at the bottom of a layer, and the density of the fluid at it."""
    radius = np.array(profile.layers[index].bottom)
    return (
        float(radius),
        float(profile.layer_gravity(index, radius)),
        float(profile.layer_density(fluid, radius)),
    )


def _into_fluid(profile: EarthProfile, index: int, n: FloatArray, space: FloatArray) -> FloatArray:
    """Keep the solution without tangential traction whose pressure the static fluid can bear (Saito 1974)."""
    radius, gravity, density = _boundary(profile, index, index)
    load = (radius * density / (np.sqrt(n * (n + 1.0)) * profile.typical_rigidity))[:, None]
    bearing = space[:, 1] - load * (gravity * space[:, 0] - profile.surface_gravity * space[:, 4])
    solution = (space @ np.cross(bearing, space[:, 3])[..., None])[..., 0]
    flux = solution[:, 5] + _FOUR_PI_G * profile.typical_rigidity / (gravity * profile.surface_gravity) * solution[:, 1]
    return np.stack([solution[:, 4], flux], axis=-1)[..., None]


def _into_solid(profile: EarthProfile, index: int, n: FloatArray, space: FloatArray) -> FloatArray:
    """Join the fluid's solution, a radial and a tangential shift of the boundary (Saito 1974)."""
    radius, gravity, density = _boundary(profile, index, index - 1)
    load = radius * density / (np.sqrt(n * (n + 1.0)) * profile.typical_rigidity)
    relation = _FOUR_PI_G * profile.typical_rigidity / (gravity * profile.surface_gravity)
    solid = np.zeros((n.size, 6, 3))
    solid[:, 1, 0] = -load * profile.surface_gravity * space[:, 0, 0]
    solid[:, 4, 0] = space[:, 0, 0]
    solid[:, 5, 0] = space[:, 1, 0] - relation * solid[:, 1, 0]
    solid[:, 0, 1] = 1.0
    solid[:, 1, 1] = load * gravity
    solid[:, 5, 1] = -relation * solid[:, 1, 1]
    solid[:, 2, 2] = 1.0
    return solid
