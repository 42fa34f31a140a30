"""Fingerprints of the network's own load ensemble, in its own phase convention."""

from collections.abc import Sequence

import xarray as xr

from massfit.fingerprint.admittance import site_fingerprints, water_vapour_phasor
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.network import Network
from massfit.pipeline.air import AirPressure
from massfit.site import Site


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
    chosen = network.settings.fingerprint
    vapour = water_vapour_phasor(
        chosen.water_vapour_kg, chosen.water_vapour_peak, network.settings.frame.reference_year
    )
    return site_fingerprints(
        operator,
        sites,
        network.loads,
        water_vapour=vapour,
        air_load=air.land,
        ocean_mean_air=air.mean_phasor,
        footprints=footprints,
    )
