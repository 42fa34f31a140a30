"""What the network knows of the air above it: its mean over the ocean, and its load on land."""

from dataclasses import dataclass

from massfit.constants import PASCAL_PER_HPA
from massfit.corrections.atmosphere import air_pressure_pattern, annual_phasor, ocean_mean_air_pressure
from massfit.errors import Fault, InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.network import Network, Series


@dataclass(frozen=True)
class AirPressure:
    """Air pressure as the corrections need it.

    Parameters
    ----------
    ocean_mean : Series or None
        Subtracted from the records; None where that was done before.
    land : LoadPattern or None
        Annual phasor on land, Pa; None where it is not known.
    mean_phasor : complex or None
        Annual phasor of the ocean mean, Pa; needed with `land`.
    """

    ocean_mean: Series | None
    land: LoadPattern | None
    mean_phasor: complex | None


def network_air(network: Network, ocean: OceanFunction) -> AirPressure:
    """Gather the air pressure from whichever of its forms the network gives.

    Parameters
    ----------
    network : Network
    ocean : OceanFunction

    Returns
    -------
    AirPressure

    Raises
    ------
    InputError
        A load on land without the annual phasor of the ocean mean, or a field too short for a phasor.
    """
    year = network.settings.frame.reference_year
    if network.air_pressure is not None:
        mean = ocean_mean_air_pressure(network.air_pressure, ocean)
        return AirPressure(mean, air_pressure_pattern(network.air_pressure, year), annual_phasor(mean, year))
    series, land = network.ocean_mean_atmosphere, network.atmosphere_load
    if land is None:
        return AirPressure(series, None, None)
    if series is not None:
        return AirPressure(series, land, annual_phasor(series, year))
    stated = network.settings.corrections.ocean_mean_phasor_hpa
    if stated is None:
        raise InputError(
            Fault(
                network.source or "network",
                "corrections.ocean_mean_phasor_hpa",
                "the load of air on land is given, the annual phasor of the ocean mean is not",
                "[in phase, quadrature], hPa",
                "State it, or leave atmosphere_load out",
            )
        )
    return AirPressure(None, land, complex(*stated) * PASCAL_PER_HPA)
