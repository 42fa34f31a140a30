"""Site admittances of every load member, and the known response to air pressure on land."""

from collections import Counter
from collections.abc import Sequence
from datetime import datetime

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import STANDARD_GRAVITY
from massfit.errors import Fault, InputError
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.rotation import RotationalFeedback, with_rotation
from massfit.phasor import COMPONENTS, as_components, days_since, phasor_from_peak
from massfit.site import Site

LEAST_MEAN_PA = 1.0
"""Members that move the ocean mean by less than this have no admittance, Pa (0.01 hPa)."""

REFERENCE_CASES = ("uniform over land", "uniform ocean")
"""Cases shown beside the members: the same water on all land, and F = 1."""


def site_fingerprints(
    operator: SeaLevelOperator,
    sites: Sequence[Site],
    loads: Sequence[LoadPattern],
    *,
    water_vapour: complex = 0j,
    air_load: LoadPattern | None = None,
    ocean_mean_air: complex | None = None,
    footprints: xr.Dataset | None = None,
    rotation: RotationalFeedback | None = None,
) -> xr.Dataset:
    """Complex admittance F_s = S(site) / (mean of S over the ocean) of every member.

    Loads are brought conservatively onto the operator's grid and used as given
    there, on ocean cells too.

    Parameters
    ----------
    operator : SeaLevelOperator
    sites : sequence of Site
    loads : sequence of LoadPattern
        Members of the ensemble, kg m-2.
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg, positive in the
        air, in the phase convention of the loads; see :func:`water_vapour_phasor`.
    air_load : LoadPattern, optional
        Annual phasor of the air pressure at the surface, Pa; only its values over
        land count, and they are not to be multiplied by the land fraction.
    ocean_mean_air : complex, optional
        Annual phasor of the ocean-mean air pressure, Pa; needed with `air_load`.
    footprints : xarray.Dataset, optional
        From :func:`massfit.fingerprint.footprint.site_footprints` for the same sites
        and operator, when they are at hand.
    rotation : RotationalFeedback, optional
        Of this operator; the annual wobble that loads and air cause is then fed back.

    Returns
    -------
    xarray.Dataset
        `massfit.contracts.FINGERPRINTS`, with the ocean mean of each member as
        `ocean_mean` (member, component), m of sea water.

    Raises
    ------
    InputError
        No member, members that share a name or leave the ocean mean as it is, or
        an air load without the ocean mean of the air pressure.

    Examples
    --------
    >>> from massfit.earth.love import love_numbers
    >>> from massfit.fingerprint.loads import builtin_loads
    >>> from massfit.fingerprint.ocean import OceanFunction
    >>> from massfit.fingerprint.operator import prepare_operator
    >>> operator = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20)
    >>> prints = site_fingerprints(operator, [Site("A1", -11.25, 205.5)], builtin_loads(("nominal",)))
    >>> prints.admittance.sel(member="nominal", site="A1", component="in_phase").item() > 1.05
    True
    """
    _check(sites, loads, air_load, ocean_mean_air, footprints)
    if footprints is None:
        footprints = site_footprints(operator, sites)
    if rotation is not None:
        footprints = with_rotation(footprints, operator, sites, rotation)
    uniform = (1.0 - operator.ocean).astype(complex)
    fields = np.stack([*(regrid(load.values, _cells(load), operator.cells) for load in loads), uniform])
    vapour = np.append(np.full(len(loads), water_vapour, dtype=complex), 0.0)
    mean = _ocean_mean(operator, fields, vapour)
    _check_means(operator, loads, mean[:-1])
    admittance = _sea_level(operator, footprints, fields, vapour) / mean[:, None]
    reference = np.stack([admittance[-1], np.ones(len(sites), dtype=complex)])
    variables = {
        "admittance": _labelled(("member", "site"), admittance[:-1], "1"),
        "reference_admittance": _labelled(("case", "site"), reference, "1"),
        "ocean_mean": _labelled(("member",), mean[:-1], "m"),
    }
    if air_load is not None and ocean_mean_air is not None:
        response = air_load_response(operator, footprints, air_load, ocean_mean_air)
        variables["air_load_response"] = _labelled(("site",), response, "Pa")
    return xr.Dataset(
        variables,
        coords={
            "member": [load.name for load in loads],
            "site": [site.id for site in sites],
            "case": list(REFERENCE_CASES),
            "component": list(COMPONENTS),
        },
        attrs={
            "earth_model": operator.earth_model,
            "max_degree": operator.max_degree,
            "ocean_area_m2": operator.ocean_area_m2,
            "sea_water_density_kg_m3": operator.sea_water_density,
            "rotational_feedback": "none" if rotation is None else "annual",
        },
    )


def air_load_response(
    operator: SeaLevelOperator, footprints: xr.Dataset, air_load: LoadPattern, ocean_mean_air: complex
) -> NDArray[np.complex128]:
    """Pressure at the sites from the attraction and load of the air, without any exchange of water.

    The load is p_a/g on land and <p_a>/g on the ocean, where the inverted barometer
    leaves nothing else; its degree 0 is dropped, so that the mean of the response
    over the ocean is zero.

    Parameters
    ----------
    operator : SeaLevelOperator
    footprints : xarray.Dataset
        Of the sites, from the same operator.
    air_load : LoadPattern
        Annual phasor of the air pressure, Pa; only the values over land count.
    ocean_mean_air : complex
        Annual phasor of the ocean-mean air pressure, Pa.

    Returns
    -------
    (n_site,) array of complex
        G_s, Pa.
    """
    pressure = regrid(air_load.values, _cells(air_load), operator.cells)
    load = ((1.0 - operator.ocean) * pressure + operator.ocean * ocean_mean_air) / STANDARD_GRAVITY
    area = np.broadcast_to(operator.cell_area_m2, load.shape)
    varying = load - np.average(load, weights=area)
    height = _sea_level(operator, footprints, varying[None], np.zeros(1, dtype=complex))[0]
    return np.asarray(operator.sea_water_density * STANDARD_GRAVITY * height)


def water_vapour_phasor(half_range_kg: float, peak: str, reference_year: int) -> complex:
    """Annual phasor of the mass of water vapour in the air.

    Parameters
    ----------
    half_range_kg : float
        Half of the annual range, kg; 0.6 to 0.75e15 (Trenberth & Smith 2005).
    peak : str
        Month and day of the maximum, "MM-DD"; its noon is meant.
    reference_year : int
        Phases count from 1 January 00:00 UTC of this year.

    Returns
    -------
    complex
        kg.

    Raises
    ------
    InputError
        There is no such day in the reference year.

    Examples
    --------
    >>> from massfit.phasor import peak_days
    >>> float(peak_days(water_vapour_phasor(0.65e15, "07-15", 2015))).__round__(3)
    195.5
    """
    try:
        day = datetime.strptime(f"{reference_year:04d}-{peak}T12", "%Y-%m-%dT%H")
    except ValueError:
        problem = f"there is no {peak!r} in {reference_year}"
        raise InputError(Fault("fingerprint", "water_vapour_peak", problem, "Must be a date MM-DD")) from None
    days = days_since(np.array([day], dtype="datetime64[ns]"), reference_year)
    return phasor_from_peak(half_range_kg, float(days[0]))


def _cells(pattern: LoadPattern) -> CellGrid:
    return CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg)


def _sea_level(
    operator: SeaLevelOperator,
    footprints: xr.Dataset,
    fields: NDArray[np.complex128],
    vapour: NDArray[np.complex128],
) -> NDArray[np.complex128]:
    """Sea level of each field at each site, (n_field, n_site) m."""
    footprint = footprints["footprint"].to_numpy().reshape(footprints.sizes["site"], -1)
    mass = (fields * operator.cell_area_m2).reshape(len(fields), -1)
    height = mass.real @ footprint.T + 1j * (mass.imag @ footprint.T)
    return np.asarray(height + np.outer(vapour, footprints["constant"].to_numpy()))


def _ocean_mean(
    operator: SeaLevelOperator, fields: NDArray[np.complex128], vapour: NDArray[np.complex128]
) -> NDArray[np.complex128]:
    mass = np.sum(fields * operator.cell_area_m2, axis=(1, 2)) + vapour
    return np.asarray(-mass / (operator.sea_water_density * operator.ocean_area_m2))


def _labelled(dims: tuple[str, ...], values: NDArray[np.complex128], units: str) -> xr.Variable:
    return xr.Variable((*dims, "component"), as_components(values), {"units": units})


def _check(
    sites: Sequence[Site],
    loads: Sequence[LoadPattern],
    air_load: LoadPattern | None,
    ocean_mean_air: complex | None,
    footprints: xr.Dataset | None,
) -> None:
    place, faults = "fingerprint", []
    if not loads:
        faults.append(Fault(place, "loads", "there is no member", "At least one", 'Add "builtin:all"'))
    for name, count in Counter(load.name for load in loads).items():
        if count > 1:
            faults.append(Fault(place, name, f"{count} members have this name", "Names must be unique"))
    if (air_load is None) != (ocean_mean_air is None):
        problem = "one of air load and ocean-mean air pressure is missing"
        faults.append(Fault(place, "air_load", problem, "Both or neither", "Give the ocean-mean annual phasor too"))
    if footprints is not None and [site.id for site in sites] != footprints["site"].to_numpy().tolist():
        faults.append(Fault(place, "footprints", "they belong to other sites", "The same sites in the same order"))
    if faults:
        raise InputError(faults)


def _check_means(operator: SeaLevelOperator, loads: Sequence[LoadPattern], mean: NDArray[np.complex128]) -> None:
    pressure = np.abs(mean) * operator.sea_water_density * STANDARD_GRAVITY
    faults = [
        Fault("fingerprint", load.name, f"it moves the ocean mean by {value:.3g} Pa", f"At least {LEAST_MEAN_PA} Pa")
        for load, value in zip(loads, pressure, strict=True)
        if not value >= LEAST_MEAN_PA
    ]
    if faults:
        raise InputError(faults)
