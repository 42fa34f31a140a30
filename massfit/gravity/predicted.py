"""What the load ensemble predicts that satellite gravity sees, through the same kernel."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.fingerprint.transforms import as_cilm
from massfit.gravity.kernel import OceanKernel


@dataclass(frozen=True, eq=False)
class PredictedMass:
    """Annual phasor of the total mass on the surface, for each load member.

    Parameters
    ----------
    members : tuple of str
    land : (K, 2, N + 1, N + 1) array of complex
        The load W, 4-pi-normalised coefficients, kg m-2.
    total : (K, 2, N + 1, N + 1) array of complex
        W + rho_w O S: land and ocean together.
    ocean_mean : (K,) array of complex
        Mean of the ocean's water over the whole ocean, kg m-2.
    """

    members: tuple[str, ...]
    land: NDArray[np.complex128]
    total: NDArray[np.complex128]
    ocean_mean: NDArray[np.complex128]


def predicted_mass(
    operator: SeaLevelOperator, loads: Sequence[LoadPattern], *, water_vapour: complex, max_degree: int
) -> PredictedMass:
    """Solve the sea-level equation for each member and add land and ocean.

    Parameters
    ----------
    operator : SeaLevelOperator
        Of at least `max_degree`.
    loads : sequence of LoadPattern
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg.
    max_degree : int
        Of the coefficients given.

    Returns
    -------
    PredictedMass

    Raises
    ------
    InputError
        The solve has too low a degree, or there is no member.
    """
    if operator.max_degree < max_degree:
        problem = f"the sea-level equation is solved to degree {operator.max_degree}"
        raise InputError(Fault("gravity", "max_degree", problem, f"Must be at least {max_degree}", "Raise it"))
    if not loads:
        raise InputError(Fault("gravity", "loads", "there is no load member", "At least one", "Give loads"))
    land, total, means = [], [], []
    for load in loads:
        cells = CellGrid.from_centres(load.latitude_deg, load.longitude_deg)
        field = regrid(load.values, cells, operator.cells)
        sea = solve_sea_level(operator, load=field, water_vapour=water_vapour)
        water = operator.sea_water_density * operator.ocean * sea.height
        land.append(_coefficients(operator, field, max_degree))
        total.append(_coefficients(operator, field + water, max_degree))
        means.append(operator.sea_water_density * sea.ocean_mean)
    return PredictedMass(tuple(load.name for load in loads), np.stack(land), np.stack(total), np.array(means))


def whole_ocean_factors(predicted: PredictedMass, kernel: OceanKernel) -> NDArray[np.complex128]:
    """Find what turns a kernel mean into the mean over the whole ocean, for each member.

    Parameters
    ----------
    predicted : PredictedMass
    kernel : OceanKernel

    Returns
    -------
    (K,) array of complex
        Whole-ocean mean of the water over the kernel mean of everything the kernel sees, land included.
    """
    return np.asarray(predicted.ocean_mean / kernel.mean(predicted.total))


def land_leakage(predicted: PredictedMass, kernel: OceanKernel) -> NDArray[np.complex128]:
    """Find how much of a kernel mean is water on land.

    Parameters
    ----------
    predicted : PredictedMass
    kernel : OceanKernel
        One that sees every degree.

    Returns
    -------
    (K,) array of complex
        Kernel mean of the land's own water relative to the whole-ocean mean, for each member.
    """
    return np.asarray(kernel.mean(predicted.land) / predicted.ocean_mean)


def _coefficients(
    operator: SeaLevelOperator, field: NDArray[np.complex128] | NDArray[np.float64], max_degree: int
) -> NDArray[np.complex128]:
    parts = operator.grid.analyse(np.stack([np.real(field), np.imag(field)]))
    real, imaginary = (as_cilm(part, operator.max_degree)[:, : max_degree + 1, : max_degree + 1] for part in parts)
    return np.asarray(real + 1j * imaginary)
