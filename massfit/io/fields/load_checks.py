"""What a load file may hold over the ocean, and how much anywhere."""

import numpy as np

from massfit.constants import KG_PER_GT
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern

_OPEN_OCEAN = 0.999  # ocean fraction of a cell without land to speak of
_STRAY = 0.05  # share of the load that another land mask, or snow on ice shelves, may leave on the open ocean
_CLOSED_WITHIN = 0.05  # of the load on land: about 0.04 hPa of ocean mean, the error of the air-pressure correction
_LARGEST = 5e3  # kg m-2: five metres of water once a year


def land_load(pattern: LoadPattern, *, water_vapour: complex, source: str) -> LoadPattern:
    """Take the water on land out of a pattern that also covers the ocean.

    Cells with any land keep all their load, and so does the little (5 %) that another mask leaves
    on the open ocean. A pattern with more than that on the ocean claims the whole water of the Earth. Its
    integral must then be minus that of the water vapour; its ocean is left out, because the sea-level equation
    finds it, and the ocean part of a coast cell is taken to hold what the open ocean holds on average.

    Parameters
    ----------
    pattern : LoadPattern
        kg m-2 of whole-cell area.
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    LoadPattern

    Raises
    ------
    InputError
        More load in a cell than there can be, or a water budget that does not close.
    """
    with np.errstate(over="ignore", invalid="ignore"):
        largest = float(np.abs(pattern.values).max())
    if not largest <= _LARGEST:
        problem = f"the load reaches {largest:.3g} kg m-2, {largest / 1e3:.3g} m of water"
        allowed, action = f"Must be at most {_LARGEST:g}", "Check units and fill value"
        raise InputError(Fault(source, pattern.name, problem, allowed, action))
    ocean = OceanFunction.builtin()
    cells = CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)
    fraction = regrid(ocean.fraction, ocean.cells, cells)
    open_ocean, area = fraction >= _OPEN_OCEAN, cells.cell_area_m2
    mass = pattern.values * area
    stray = float(np.abs(mass[open_ocean]).sum() / np.abs(mass).sum())
    if stray <= _STRAY:
        return pattern
    mean = complex(mass[open_ocean].sum() / area[open_ocean].sum())
    values = np.where(open_ocean, 0.0, pattern.values - fraction * mean)
    left = complex(mass.sum() + water_vapour)
    if abs(left) > _CLOSED_WITHIN * abs(complex((values * area).sum())):
        raise InputError(_open_budget(pattern.name, source, stray, complex(mass.sum()), water_vapour))
    return LoadPattern(pattern.name, pattern.latitude_deg, pattern.longitude_deg, values, pattern.reference)


def _open_budget(name: str, source: str, stray: float, total: complex, water_vapour: complex) -> Fault:
    found, wanted = (_in_gt(each) for each in (total, -water_vapour))
    problem = (
        f"{stray:.0%} of the load lies on the open ocean, so the file claims all the water of the Earth, but its "
        f"global integral is {found} Gt (in phase, quadrature) where minus the water vapour is {wanted} Gt: "
        f"{abs(total + water_vapour) / KG_PER_GT:.0f} Gt are left over"
    )
    allowed = f"Must close within {_CLOSED_WITHIN:.0%} of the load on land"
    action = "Set the ocean to NaN where the file is water on land; otherwise correct it, or water_vapour_kg"
    return Fault(source, name, problem, allowed, action)


def _in_gt(mass: complex) -> str:
    return f"({round(mass.real / KG_PER_GT)}, {round(mass.imag / KG_PER_GT)})"
