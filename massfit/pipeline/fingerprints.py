"""Fingerprints of the network's own load ensemble, in its own phase convention."""

from collections.abc import Sequence

import xarray as xr

from massfit.earth.love import LoveNumbers, love_numbers
from massfit.fingerprint.admittance import site_fingerprints, water_vapour_phasor
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.rotation import RotationalFeedback, prepare_rotation
from massfit.network import Network
from massfit.pipeline.air import AirPressure
from massfit.site import Site


def network_operator(
    network: Network,
    ocean: OceanFunction,
    *,
    max_degree: int | None = None,
    love: LoveNumbers | None = None,
    threads: int = 1,
) -> SeaLevelOperator:
    """Sea-level equation of the network's settings.

    Parameters
    ----------
    network : Network
    ocean : OceanFunction
    max_degree : int, optional
        Instead of that of the settings.
    love : LoveNumbers, optional
        Of the network's Earth, to this degree at least, when they are at hand.
    threads : int
        Threads of the transforms; the numbers do not depend on it.

    Returns
    -------
    SeaLevelOperator
    """
    chosen = network.settings.fingerprint
    degree = chosen.max_degree if max_degree is None else max_degree
    return prepare_operator(
        ocean,
        love_numbers(network.earth, max_degree=degree) if love is None else love,
        max_degree=degree,
        sea_water_density=chosen.sea_water_density,
        threads=threads,
    )


def network_rotation(network: Network, operator: SeaLevelOperator) -> RotationalFeedback | None:
    """Rotational feedback of the annual loads, where the network asks for it.

    Parameters
    ----------
    network : Network
    operator : SeaLevelOperator

    Returns
    -------
    RotationalFeedback or None
    """
    if not network.settings.fingerprint.rotational_feedback:
        return None
    return prepare_rotation(operator, love_numbers(network.earth, max_degree=2))


def network_vapour(network: Network) -> complex:
    """Annual phasor of the mass of water vapour in the air, kg, in the network's phase convention."""
    chosen = network.settings.fingerprint
    return water_vapour_phasor(chosen.water_vapour_kg, chosen.water_vapour_peak, network.settings.frame.reference_year)


def network_fingerprints(
    network: Network, operator: SeaLevelOperator, sites: Sequence[Site], footprints: xr.Dataset, air: AirPressure
) -> xr.Dataset:
    """Fingerprints of every load member at the sites.

    Parameters
    ----------
    network : Network
    operator : SeaLevelOperator
    sites : sequence of Site
    footprints : xarray.Dataset
    air : AirPressure

    Returns
    -------
    xarray.Dataset
        contracts.FINGERPRINTS.
    """
    return site_fingerprints(
        operator,
        sites,
        network.loads,
        water_vapour=network_vapour(network),
        air_load=air.land,
        ocean_mean_air=air.mean_phasor,
        footprints=footprints,
        rotation=network_rotation(network, operator),
    )
