"""Sea-floor pressure at the sites per unit of zonal tide and of wobble.

Three right sides of the sea-level equation serve all times: the series of a site are products of its
responses with the height of the zonal tide and with the wobble parameters.
"""

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import STANDARD_GRAVITY
from massfit.contracts import EQUILIBRIUM_RESPONSES, require
from massfit.corrections.long_period_tides import zonal_function, zonal_height
from massfit.corrections.pole_tide import observed_wobble, pole_tide_height
from massfit.errors import Fault, InputError
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.site import Site


def equilibrium_responses(
    operator: SeaLevelOperator,
    sites: Sequence[Site],
    *,
    long_period_tides: str = "equilibrium",
    pole_tide: str = "observed",
) -> xr.Dataset:
    """Pressure at each site per unit of the potentials of tide and wobble.

    Parameters
    ----------
    operator : SeaLevelOperator
    sites : sequence of Site
    long_period_tides : str
        ``"equilibrium"``: the ocean's load and self-attraction included and its mass kept
        (Agnew & Farrell 1978); ``"equilibrium-classical"``: the height of the potential itself; ``"none"``: zero.
    pole_tide : str
        ``"observed"``: self-consistent like the above (Desai 2002); ``"none"``: zero.

    Returns
    -------
    xarray.Dataset
        Over site, contracts.EQUILIBRIUM_RESPONSES: `zonal` (Pa per m of :func:`zonal_height`),
        `wobble_m1` and `wobble_m2` (Pa per rad).

    Raises
    ------
    InputError
        An unknown method.
    """
    latitude = np.array([site.latitude_deg for site in sites], dtype=float)
    longitude = np.array([site.longitude_deg for site in sites], dtype=float)
    pressure_per_metre = operator.sea_water_density * STANDARD_GRAVITY
    zonal = pressure_per_metre * _zonal_response(operator, latitude, longitude, long_period_tides)
    wobble = pressure_per_metre * _wobble_response(operator, latitude, longitude, pole_tide)
    return xr.Dataset(
        {
            "zonal": ("site", zonal, {"units": "Pa m-1"}),
            "wobble_m1": ("site", wobble.real, {"units": "Pa rad-1"}),
            "wobble_m2": ("site", wobble.imag, {"units": "Pa rad-1"}),
        },
        coords={"site": [site.id for site in sites]},
        attrs={"long_period_tides": long_period_tides, "pole_tide": pole_tide},
    )


def long_period_tide_at(responses: xr.Dataset, site: str, time: NDArray[np.datetime64]) -> NDArray[np.float64]:
    """Pressure of the long-period tides at a site.

    Parameters
    ----------
    responses : xarray.Dataset
        From :func:`equilibrium_responses`.
    site : str
        Site id.
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    (n,) array of float
        Pa.
    """
    return _response(responses, "zonal", site) * zonal_height(time)


def pole_tide_at(responses: xr.Dataset, site: str, time: NDArray[np.datetime64]) -> tuple[NDArray[np.float64], int]:
    """Pressure of the pole tide at a site, from observed polar motion.

    Parameters
    ----------
    responses : xarray.Dataset
        From :func:`equilibrium_responses`.
    site : str
        Site id.
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    pressure : (n,) array of float
        Pa; zero, and no polar motion asked for, where the responses were made with ``pole_tide="none"``.
    predicted : int
        Number of the times whose polar motion is a prediction.

    Raises
    ------
    InputError
        The shipped polar motion does not cover the time.
    """
    if responses.attrs["pole_tide"] == "none":
        return np.zeros(len(time)), 0
    m1, m2, predicted = observed_wobble(time)
    return _response(responses, "wobble_m1", site) * m1 + _response(responses, "wobble_m2", site) * m2, predicted


def _response(responses: xr.Dataset, name: str, site: str) -> float:
    require(responses, EQUILIBRIUM_RESPONSES)
    return float(responses[name].sel(site=site))


def _zonal_response(
    operator: SeaLevelOperator, latitude: NDArray[np.float64], longitude: NDArray[np.float64], method: str
) -> NDArray[np.float64]:
    if method == "none":
        return np.zeros(latitude.shape)
    if method == "equilibrium-classical":
        return zonal_function(latitude)
    if method != "equilibrium":
        raise _unknown("long_period_tides", method, ("equilibrium", "equilibrium-classical", "none"))
    forcing = np.repeat(zonal_function(operator.latitude_deg)[:, None], operator.longitude_deg.size, axis=1)
    return np.asarray(solve_sea_level(operator, forcing=forcing).at(latitude, longitude), dtype=float)


def _wobble_response(
    operator: SeaLevelOperator, latitude: NDArray[np.float64], longitude: NDArray[np.float64], method: str
) -> NDArray[np.complex128]:
    """Response to m1 as the real part, to m2 as the imaginary part."""
    if method == "none":
        return np.zeros(latitude.shape, dtype=complex)
    if method != "observed":
        raise _unknown("pole_tide", method, ("observed", "none"))
    per_m1, per_m2 = pole_tide_height(operator.latitude_deg[:, None], operator.longitude_deg)
    return np.asarray(solve_sea_level(operator, forcing=per_m1 + 1j * per_m2).at(latitude, longitude), dtype=complex)


def _unknown(name: str, method: str, allowed: tuple[str, ...]) -> InputError:
    choices = ", ".join(f'"{choice}"' for choice in allowed)
    return InputError(Fault("corrections", name, f"the method is {method!r}", f"Must be one of {choices}"))
