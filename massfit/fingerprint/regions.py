"""Regions of a load pattern: perturbed members, and admittances of a great many draws.

The land (and whatever else carries load) is shared among the regions of the built-in patterns: each place belongs to
the regions about it by weights that sum to one and fall as the square of the distance in half widths. A pattern of any
origin is thus the sum of its regions; amplitude and timing of each are then varied on their own.
"""

from collections.abc import Iterator, Sequence

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE
from massfit.contracts import FOOTPRINTS, require
from massfit.errors import Fault, InputError
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.loads import REGIONS
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.pattern import LoadPattern
from massfit.phasor import COMPONENTS, as_complex, as_components

REGION_NAMES = tuple(region.name for region in REGIONS)
"""Regions that a pattern is shared among."""

MOST_MEMBERS = 100
"""Perturbed members that may be asked for; each has a posterior of its own."""

_PLACE = "perturbed loads"
_MOST_VALUES = 2**25  # of all perturbed members together: half a gigabyte
_BLOCK_CELLS = 20_000  # looked at together: 35 weights each


def perturbed_loads(
    bases: Sequence[LoadPattern], count: int, *, amplitude_sd: float, delay_sd_days: float, seed: int
) -> tuple[LoadPattern, ...]:
    """Members whose regions have other amplitudes and other timing than those they are made from.

    Parameters
    ----------
    bases : sequence of LoadPattern
        Taken in turn.
    count : int
        How many members to make.
    amplitude_sd : float
        Standard deviation of the logarithm of the factor of each region; its mean is one.
    delay_sd_days : float
        Standard deviation of the delay of each region, days.
    seed : int

    Returns
    -------
    tuple of LoadPattern
        On the grids of their bases. But for rounding, members do not change when more are made.

    Raises
    ------
    InputError
        No base, a count outside 1 to 100, a spread below zero, or more than half a gigabyte of members.

    Examples
    --------
    >>> from massfit.fingerprint.loads import builtin_loads
    >>> made = perturbed_loads(builtin_loads(("nominal",)), 2, amplitude_sd=0.2, delay_sd_days=10.0, seed=1)
    >>> [member.name for member in made]
    ['perturbed 1 of nominal', 'perturbed 2 of nominal']
    """
    faults = _perturbation_faults(len(bases), count, amplitude_sd, delay_sd_days)
    largest = max((base.values.size for base in bases), default=0)
    if count * largest > _MOST_VALUES:
        problem = f"{count} members of {largest} cells take {16e-9 * count * largest:.1f} GB"
        action = "Ask for fewer, or give the loads on a coarser grid"
        faults.append(Fault(_PLACE, "count", problem, f"Must be at most {16e-9 * _MOST_VALUES:.1f} GB", action))
    if faults:
        raise InputError(faults)
    factors = np.concatenate(
        [_factors(np.random.default_rng([seed, number]), 1, amplitude_sd, delay_sd_days) for number in range(count)]
    )
    members = {
        number: LoadPattern(
            f"perturbed {number + 1} of {base.name}", base.latitude_deg, base.longitude_deg, values, base.reference
        )
        for first, base in enumerate(bases[:count])
        for number, values in zip(
            range(first, count, len(bases)), _perturbed(base, factors[first :: len(bases)]), strict=True
        )
    }
    return tuple(members[number] for number in range(count))


def _perturbed(base: LoadPattern, factors: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Values of a pattern whose regions are multiplied, (n_member, n_lat, n_lon) for (n_member, n_region) factors."""
    values = np.empty((len(factors), *base.values.shape), dtype=complex)
    for rows, shares in _shares(base.latitude_deg, base.longitude_deg):
        values[:, rows] = base.values[rows] * np.tensordot(factors, shares, 1)
    return values


def regional_responses(
    operator: SeaLevelOperator, footprints: xr.Dataset, pattern: LoadPattern, *, water_vapour: complex = 0j
) -> xr.Dataset:
    """Let the footprints meet each region of a pattern, once.

    Parameters
    ----------
    operator : SeaLevelOperator
    footprints : xarray.Dataset
        contracts.FOOTPRINTS, from the same operator.
    pattern : LoadPattern
        kg m-2.
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg.

    Returns
    -------
    xarray.Dataset
        `height` (region, site, component) and `ocean_mean` (region, component), m of sea water under each region alone;
        `vapour_height` (site, component) and `vapour_ocean_mean` (component), the same of the vapour. Everything
        :func:`draw_admittances` needs.

    Examples
    --------
    >>> from massfit.earth.love import love_numbers
    >>> from massfit.fingerprint.footprint import site_footprints
    >>> from massfit.fingerprint.loads import builtin_loads
    >>> from massfit.fingerprint.ocean import OceanFunction
    >>> from massfit.fingerprint.operator import prepare_operator
    >>> from massfit.site import Site
    >>> operator = prepare_operator(OceanFunction.builtin(), love_numbers(max_degree=20), max_degree=20)
    >>> footprints = site_footprints(operator, [Site("A1", -11.25, 205.5)])
    >>> responses = regional_responses(operator, footprints, builtin_loads(("nominal",))[0])
    >>> dict(responses.height.sizes)
    {'region': 35, 'site': 1, 'component': 2}
    """
    require(footprints, FOOTPRINTS)
    values = regrid(pattern.values, CellGrid.from_centres(pattern.latitude_deg, pattern.longitude_deg), operator.cells)
    mass = values * operator.cell_area_m2
    prints = footprints["footprint"].to_numpy()
    height = np.zeros((len(REGION_NAMES), len(prints)), dtype=complex)
    total = np.zeros(len(REGION_NAMES), dtype=complex)
    for rows, shares in _shares(operator.latitude_deg, operator.longitude_deg):
        own = (shares * mass[rows]).reshape(len(shares), -1)
        height += own @ prints[:, rows].reshape(len(prints), -1).T
        total += own.sum(axis=1)
    per_mass = -1.0 / (operator.sea_water_density * operator.ocean_area_m2)
    variables = {
        "height": (("region", "site"), height),
        "ocean_mean": (("region",), per_mass * total),
        "vapour_height": (("site",), water_vapour * footprints["constant"].to_numpy()),
        "vapour_ocean_mean": ((), np.asarray(per_mass * water_vapour)),
    }
    return xr.Dataset(
        {
            name: xr.Variable((*dims, "component"), as_components(np.asarray(each, dtype=complex)), {"units": "m"})
            for name, (dims, each) in variables.items()
        },
        coords={"region": list(REGION_NAMES), "site": footprints["site"], "component": list(COMPONENTS)},
        attrs={"pattern": pattern.name},
    )


def draw_admittances(
    responses: xr.Dataset,
    *,
    rng: np.random.Generator,
    draws: int = 100_000,
    amplitude_sd: float = 0.2,
    delay_sd_days: float = 10.0,
    chunk: int = 10_000,
) -> NDArray[np.complex128]:
    """Complex admittances of the sites under random amplitudes and timing of every region.

    Parameters
    ----------
    responses : xarray.Dataset
        From :func:`regional_responses`.
    rng : numpy.random.Generator
    draws : int
    amplitude_sd : float
        Standard deviation of the logarithm of the factor of each region; its mean is one.
    delay_sd_days : float
        Standard deviation of the delay of each region, days.
    chunk : int
        Draws made together; 2.8 kB of memory each for 35 regions, besides 16 bytes a draw and site for the result.

    Returns
    -------
    (draws, n_site) array of complex
        S(site) over the mean of S over the ocean. The vapour is not varied.

    Raises
    ------
    InputError
        A spread below zero, or no draw.

    Examples
    --------
    >>> even = xr.Dataset(
    ...     {
    ...         "height": (("region", "site", "component"), np.full((35, 1, 2), [1.0, 0.0])),
    ...         "ocean_mean": (("region", "component"), np.full((35, 2), [1.0, 0.0])),
    ...         "vapour_height": (("site", "component"), [[0.0, 0.0]]),
    ...         "vapour_ocean_mean": (("component",), [0.0, 0.0]),
    ...     }
    ... )
    >>> draw_admittances(even, rng=np.random.default_rng(1), draws=3)[:, 0].round(12)
    array([1.+0.j, 1.+0.j, 1.+0.j])
    """
    if faults := _perturbation_faults(1, 1, amplitude_sd, delay_sd_days):
        raise InputError(faults)
    if draws < 1 or chunk < 1:
        raise InputError(Fault("draws", "draws", f"{draws} in chunks of {chunk} were asked", "At least one"))
    table = np.column_stack([as_complex(responses[name].to_numpy()) for name in ("height", "ocean_mean")])
    fixed = np.append(*(as_complex(responses[f"vapour_{name}"].to_numpy()) for name in ("height", "ocean_mean")))
    result = np.empty((draws, table.shape[1] - 1), dtype=complex)
    for first in range(0, draws, chunk):
        number = min(chunk, draws - first)
        drawn = _factors(rng, number, amplitude_sd, delay_sd_days) @ table + fixed
        np.divide(drawn[:, :-1], drawn[:, -1:], out=result[first : first + number])
    return result


def _factors(rng: np.random.Generator, count: int, amplitude_sd: float, delay_sd_days: float) -> NDArray[np.complex128]:
    """Random factors of the phasors, (count, n_region): lengths of mean one, delays of mean zero."""
    size, turn = rng.standard_normal((2, count, len(REGION_NAMES)))
    size *= amplitude_sd
    size -= 0.5 * amplitude_sd**2
    turn *= ANNUAL_RATE * delay_sd_days
    return np.asarray(np.exp(size + 1j * turn), dtype=complex)


def _shares(
    latitude_deg: NDArray[np.float64], longitude_deg: NDArray[np.float64]
) -> Iterator[tuple[slice, NDArray[np.float64]]]:
    """Weights of the regions, (n_region, rows, n_lon), by blocks of rows; they sum to one everywhere."""
    north, east = (np.array([getattr(region, name) for region in REGIONS]) for name in ("latitude", "longitude"))
    tall, wide = (np.array([getattr(region, name) for region in REGIONS]) for name in ("half_height", "half_width"))
    turn = np.mod(longitude_deg - east[:, None] + 180.0, 360.0) - 180.0
    across = -0.5 * (turn / wide[:, None]) ** 2
    step = max(1, _BLOCK_CELLS // longitude_deg.size)
    for first in range(0, latitude_deg.size, step):
        rows = slice(first, first + step)
        along = -0.5 * ((latitude_deg[rows] - north[:, None]) / tall[:, None]) ** 2
        closeness = along[:, :, None] + across[:, None]
        closeness -= closeness.max(axis=0)
        weights = np.exp(closeness)
        yield rows, weights / weights.sum(axis=0)


def _perturbation_faults(bases: int, count: int, amplitude_sd: float, delay_sd_days: float) -> list[Fault]:
    faults = []
    if bases < 1:
        faults.append(Fault(_PLACE, "bases", "there is no pattern to perturb", "At least one"))
    if not 1 <= count <= MOST_MEMBERS:
        faults.append(Fault(_PLACE, "count", f"{count} members were asked", f"1 to {MOST_MEMBERS}"))
    for name, value in {"amplitude_sd": amplitude_sd, "delay_sd_days": delay_sd_days}.items():
        if not 0.0 <= value < np.inf:
            faults.append(Fault(_PLACE, name, f"the value is {value}", "Finite, and not below 0"))
    return faults
