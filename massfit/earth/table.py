"""Earth profiles from tables of radius, density and wave speeds."""

from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from massfit.constants import EARTH_MASS
from massfit.earth.profile import EarthProfile, Layer
from massfit.errors import Fault, InputError

WIDEST_STEP = 600e3
"""Rows of a table that are farther apart leave a gap, m."""

_SURFACE = (6.3e6, 6.4e6)  # m: the sea-level equation is on a sphere of 6371 km
_MASS_WITHIN = 0.01  # of the Earth's, which is known to 1e-4
_FLUID_AT = (1.5e6, 3.3e6)  # m: radii that every model of the Earth has in its fluid outer core
_SAMPLES = 9  # of each layer, where what the rock can bear is checked


def tabulated_profile(
    name: str,
    radius: ArrayLike,
    density: ArrayLike,
    compressional_speed: ArrayLike,
    shear_speed: ArrayLike,
    *,
    reference: str = "",
) -> EarthProfile:
    """Make an Earth profile from a table; between two rows everything is linear in the radius.

    Parameters
    ----------
    name : str
        What results call it.
    radius : (n,) array_like
        From the centre to the surface, m. A radius that stands twice is a boundary: first the values beneath it,
        then those above.
    density : (n,) array_like
        kg m-3.
    compressional_speed, shear_speed : (n,) array_like
        m s-1; a shear speed of zero is a fluid.
    reference : str
        Publication of its numbers.

    Returns
    -------
    EarthProfile

    Raises
    ------
    InputError
        Radii that do not rise from zero without gaps, or a rigidity that begins without a boundary.

    Examples
    --------
    >>> rock = {"density": [5514.0] * 3, "compressional_speed": [1e4] * 3, "shear_speed": [5e3] * 3}
    >>> tabulated_profile("even", [0.0, 500e3, 1000e3], **rock).mean_density.__round__(6)
    5514.0
    """
    columns = [np.asarray(each, dtype=float) for each in (radius, density, compressional_speed, shear_speed)]
    if any(column.shape != columns[0].shape or column.ndim != 1 for column in columns):
        shapes = ", ".join(str(column.shape) for column in columns)
        raise InputError(Fault(name, "table", f"the columns have the shapes {shapes}", "Must be of one length"))
    rows = np.stack(columns, axis=1)
    if faults := table_faults(name, rows):
        raise InputError(faults)
    surface = rows[-1, 0]
    layers = tuple(_layer(low, high, surface) for low, high in pairwise(rows) if high[0] > low[0])
    return EarthProfile(name, reference, layers)


def table_faults(source: str, rows: NDArray[np.float64], lines: NDArray[np.intp] | None = None) -> list[Fault]:
    """Find what keeps a table from being a profile.

    Parameters
    ----------
    source : str
        File or name, for the faults.
    rows : (n, 4) array
        Radius (m), density (kg m-3), compressional and shear speed (m s-1), from the centre up.
    lines : (n,) array of int, optional
        Line of each row in its file.

    Returns
    -------
    list of Fault
    """
    if len(rows) < 2:
        return [Fault(source, "table", f"there are {len(rows)} rows", "At least two, the centre and the surface")]
    faults = []
    if not np.isfinite(rows).all():
        faults.append(Fault(source, "table", "some values are not finite", "Finite numbers"))
    if rows[0, 0] != 0.0:
        problem = f"the lowest radius is {rows[0, 0] / 1e3:g} km"
        faults.append(Fault(source, "radius", problem, "Must be 0, the centre", "Add the rows beneath", _at(lines, 0)))
    steps = np.diff(rows[:, 0])
    for index in np.flatnonzero(steps < 0.0)[:1]:
        problem = f"radius {rows[index + 1, 0] / 1e3:g} km follows {rows[index, 0] / 1e3:g} km"
        faults.append(
            Fault(source, "radius", problem, "Must rise (or fall) from row to row", "Sort", _at(lines, index + 1))
        )
    for index in np.flatnonzero((steps[1:] == 0.0) & (steps[:-1] == 0.0))[:1]:
        problem = f"radius {rows[index, 0] / 1e3:g} km stands more than twice"
        faults.append(Fault(source, "radius", problem, "Once, or twice at a boundary", "", _at(lines, index + 2)))
    for index in np.flatnonzero((steps > WIDEST_STEP) & np.all(steps >= 0.0))[:1]:
        problem = f"no row between {rows[index, 0] / 1e3:g} and {rows[index + 1, 0] / 1e3:g} km"
        allowed = f"Rows at most {WIDEST_STEP / 1e3:g} km apart"
        faults.append(Fault(source, "radius", problem, allowed, "Fill the gap", _at(lines, index + 1)))
    begins = (steps > 0.0) & ((rows[1:, 3] == 0.0) != (rows[:-1, 3] == 0.0))
    for index in np.flatnonzero(begins)[:1]:
        problem = f"the shear speed begins or ends between {rows[index, 0] / 1e3:g} and {rows[index + 1, 0] / 1e3:g} km"
        action = "Give the radius of the boundary twice, with the values on either side"
        faults.append(Fault(source, "shear speed", problem, "At a boundary only", action, _at(lines, index + 1)))
    return faults


def earth_faults(profile: EarthProfile, source: str) -> list[Fault]:
    """Find what keeps a profile from being one of the Earth that can carry loads.

    Parameters
    ----------
    profile : EarthProfile
    source : str
        File or name, for the faults.

    Returns
    -------
    list of Fault

    Examples
    --------
    >>> from massfit.earth.profile import homogeneous_sphere, prem
    >>> earth_faults(prem(), "prem")
    []
    >>> sphere = homogeneous_sphere(radius=6.371e6, density=5514.0, shear_modulus=1e11)
    >>> [fault.name for fault in earth_faults(sphere, "sphere")]
    ['fluid core']
    """
    faults = []
    low, high = _SURFACE
    if not low <= profile.radius <= high:
        problem, allowed = f"the surface is at {profile.radius / 1e3:g} km", f"{low / 1e3:g} to {high / 1e3:g} km"
        faults.append(Fault(source, "radius", problem, f"Must be within {allowed}", "Check the units"))
    elif abs(profile.mass / EARTH_MASS - 1.0) > _MASS_WITHIN:
        problem = f"the mass is {profile.mass:.4g} kg"
        allowed = f"Must be within {_MASS_WITHIN:.0%} of {EARTH_MASS:.4g} kg"
        faults.append(Fault(source, "density", problem, allowed, "Check the densities"))
    faults += [fault for index in range(len(profile.layers)) for fault in _layer_faults(profile, index, source)]
    low, high = _FLUID_AT
    inside = [layer for layer in profile.layers if layer.top > low and layer.bottom < high]
    if not all(layer.is_fluid for layer in inside):
        problem = f"rock between {low / 1e3:g} and {high / 1e3:g} km carries shear"
        faults.append(
            Fault(source, "fluid core", problem, "The outer core must be fluid", "Set its shear speed to zero")
        )
    if profile.layers[-1].is_fluid:
        action = "Replace the ocean: let the layer beneath reach the surface"
        faults.append(Fault(source, "surface", "the surface is fluid", "A load needs a solid surface", action))
    return faults


def _layer_faults(profile: EarthProfile, index: int, source: str) -> list[Fault]:
    """Density, rigidity and incompressibility at some radii of one layer."""
    layer = profile.layers[index]
    radii = np.linspace(layer.bottom, layer.top, _SAMPLES)
    density = profile.layer_density(index, radii)
    shear_speed = np.polynomial.polynomial.polyval(radii / profile.radius, layer.shear_speed)
    longitudinal, shear = profile.layer_moduli(index, radii)
    place = f"{layer.bottom / 1e3:g} to {layer.top / 1e3:g} km"
    if not np.all(density > 0.0):
        problem = f"from {place} the density falls to {density.min():g} kg m-3"
        return [Fault(source, "density", problem, "More than 0")]
    if not np.all((shear_speed > 0.0) | layer.is_fluid):
        problem = f"from {place} the shear speed falls to {shear_speed.min():g} m s-1"
        return [Fault(source, "rigidity", problem, "Above 0 throughout a layer, or 0 throughout it")]
    if not np.all(3.0 * longitudinal > 4.0 * shear):
        worst = float((longitudinal - 4.0 / 3.0 * shear).min())
        problem = f"from {place} the bulk modulus falls to {worst:.3g} Pa"
        return [Fault(source, "bulk modulus", problem, "Above 0: vp^2 > 4/3 vs^2", "Check both speeds")]
    return []


def _layer(low: NDArray[np.float64], high: NDArray[np.float64], surface: float) -> Layer:
    """Straight lines between two rows, as polynomials of r over the surface radius."""
    x = (low[0] / surface, high[0] / surface)
    slope = (high[1:] - low[1:]) / (x[1] - x[0])
    lines = [
        (float(value),) if change == 0.0 else (float(value - change * x[0]), float(change))
        for value, change in zip(low[1:], slope, strict=True)
    ]
    return Layer(float(low[0]), float(high[0]), *lines)


def _at(lines: NDArray[np.intp] | None, index: int) -> int | None:
    return None if lines is None else int(lines[index])
