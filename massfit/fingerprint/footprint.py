"""Footprints: the sea level at a site per unit of load anywhere on Earth."""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import EARTH_RADIUS
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.site import Site


def site_footprints(operator: SeaLevelOperator, sites: Sequence[Site], *, tolerance: float = 1e-12) -> xr.Dataset:
    """Footprint of every site by one adjoint solve each.

    The sea level at site s under any load W (kg m-2) and mass of water vapour M_v
    (kg, positive in the air, so that it lowers the sea: c_s is negative) is

        S_s = integral W T_s dA + c_s M_v

    with no conjugation, for real loads and for phasors alike. It equals the forward
    solve because the operator is symmetric.

    Parameters
    ----------
    operator : SeaLevelOperator
    sites : sequence of Site
    tolerance : float
        Residual of the solves relative to their right sides.

    Returns
    -------
    xarray.Dataset
        `massfit.contracts.FOOTPRINTS`: `footprint` T_s (site, lat, lon) on the
        operator's grid and `constant` c_s (site), m kg-1; `lat` and `lon` are the
        nodes, `operator.cell_area_m2` is the area of each.

    Raises
    ------
    ConvergenceError
        The tolerance is not reached.

    Examples
    --------
    >>> from massfit.earth.love import love_numbers
    >>> from massfit.fingerprint.ocean import OceanFunction
    >>> from massfit.fingerprint.operator import prepare_operator
    >>> operator = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20)
    >>> prints = site_footprints(operator, [Site("A1", -11.25, 205.5)])
    >>> land = (1.0 - operator.ocean) * operator.cell_area_m2  # kg on each cell for 1 mm on all land
    >>> round(1000 * float((prints.footprint[0] * land).sum()), 3)  # mm
    -0.468
    """
    solved = [_solve(operator, site, tolerance) for site in sites]
    units = {"units": "m kg-1"}
    return xr.Dataset(
        {
            "footprint": (("site", "lat", "lon"), np.stack([footprint for footprint, _ in solved]), units),
            "constant": (("site",), [constant for _, constant in solved], units),
        },
        coords={
            "site": [site.id for site in sites],
            "lat": ("lat", operator.latitude_deg, {"units": "degrees_north"}),
            "lon": ("lon", operator.longitude_deg, {"units": "degrees_east"}),
        },
        attrs={"max_degree": operator.max_degree, "earth_model": operator.earth_model},
    )


def _solve(operator: SeaLevelOperator, site: Site, tolerance: float) -> tuple[NDArray[np.float64], float]:
    value_at_site = operator.grid.harmonics_at(site.latitude_deg, site.longitude_deg)
    ocean_angle = operator.ocean_area_m2 / EARTH_RADIUS**2
    # S_s is the value at the site less the mean over the ocean, plus that mean, which the masses fix
    source = operator.root_kernel * (value_at_site - operator.ocean_coefficients / ocean_angle)
    u, _ = operator.invert(source, tolerance=tolerance)
    varying = operator.root_kernel * u
    level = (operator.ocean_integral(varying)[0] + 1.0 / operator.sea_water_density) / operator.ocean_area_m2
    footprint = operator.grid.synthesise(varying)[0] / EARTH_RADIUS**2 - level
    return footprint, -float(level)
