"""The fingerprint of a network on one page: from places and loads to maps and footprints, without a record."""

from collections.abc import Iterator

import xarray as xr

from massfit.earth.love import love_numbers
from massfit.errors import Fault, InputError
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.maps import admittance_by_degree, admittance_maps, footprint_maps
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator
from massfit.fingerprint.rotation import RotationalFeedback
from massfit.network import Network
from massfit.pipeline.air import network_air
from massfit.pipeline.fingerprints import network_fingerprints, network_operator, network_rotation, network_vapour
from massfit.pipeline.progress import Progress, ignore
from massfit.pipeline.provenance import provenance
from massfit.results.assumptions import fingerprint_assumptions
from massfit.results.fingerprint import FingerprintStudy, compared_degrees, fingerprint_dataset, unsettled_sites
from massfit.results.finished import plain_settings
from massfit.site import Site

COARSEST_DEGREE = 45
"""First degree at which the admittance is looked at; it is doubled up to the finest."""

FINEST_DEGREE = 360
"""Finest degree unless another is asked for: 720 costs five times as much."""


def study_fingerprint(
    network: Network, *, finest_degree: int = FINEST_DEGREE, progress: Progress = ignore, threads: int = 1
) -> FingerprintStudy:
    """Say how every site of a network, and every place, sees the annual cycle of ocean mass.

    Parameters
    ----------
    network : Network
        Its sites, loads, settings and air pressure; records and models are not looked at. Sites that are left out
        as a whole stay out.
    finest_degree : int
        Highest degree at which the admittance is looked at; that of the settings where it is higher.
    progress : callable, optional
    threads : int
        Threads of the transforms; the numbers do not depend on it.

    Returns
    -------
    FingerprintStudy

    Raises
    ------
    InputError
        No site is left or two have one name, or the loads have a fault.

    Examples
    --------
    >>> from massfit.fingerprint.loads import builtin_loads
    >>> from massfit.settings import make_settings
    >>> settings = make_settings(
    ...     network={"name": "One site", "reference_year": 2016},
    ...     corrections={"ocean_mean_atmosphere": "already-removed"},
    ...     fingerprint={"max_degree": 20},
    ... )
    >>> network = Network(settings, (Site("A3", -11.25, 205.5),), records=(), loads=builtin_loads())
    >>> study = study_fingerprint(network, finest_degree=45)
    >>> 1.05 < study.dataset["amplitude_ratio"].item() < 1.2
    True
    """
    sites = _sites(network)
    progress("sea-level equation", 0, 1)
    ocean = OceanFunction.builtin()
    operator = network_operator(network, ocean, threads=threads)
    footprints = site_footprints(operator, sites)
    fingerprints = network_fingerprints(network, operator, sites, footprints, network_air(network, ocean))
    progress("maps", 0, 1)
    vapour = network_vapour(network)
    rotation = network_rotation(network, operator)
    maps = admittance_maps(operator, network.loads, water_vapour=vapour, rotation=rotation)
    operators = _operators(network, ocean, (operator, rotation), finest_degree, progress, threads)
    by_degree = admittance_by_degree(operators, sites, network.loads, water_vapour=vapour)
    dataset = fingerprint_dataset(
        sites,
        fingerprints,
        maps,
        footprint_maps(operator, footprints),
        by_degree,
        network=network.settings.frame.name,
        reference_year=network.settings.frame.reference_year,
    )
    return FingerprintStudy(
        dataset.assign_attrs(source=f"massfit {provenance(network, processes=1)['massfit']}"),
        network.settings.frame.name,
        fingerprint_assumptions(network),
        (*_warnings(network, dataset), *network.warnings),
        {site.id: site.excluded_because for site in network.sites if site.excluded_because is not None},
        {
            "command": "study_fingerprint(network) in Python",
            **provenance(network, processes=1),
            "finest_degree": int(dataset["degree"].values[-1]),
            "settings": plain_settings(network.settings),
            "inputs": dict(network.inputs),
        },
    )


def degree_ladder(own: int, finest: int) -> list[int]:
    """Degrees at which the admittance is looked at: doubled from 45, with that of the settings and the finest.

    Examples
    --------
    >>> degree_ladder(180, 360), degree_ladder(256, 100), degree_ladder(20, 30)
    ([45, 90, 180, 360], [45, 90, 180, 256], [15, 20, 30])
    """
    finest = max(own, finest)
    doubled = [degree for degree in (COARSEST_DEGREE * 2**k for k in range(6)) if degree < finest]
    # half of the finest where there would be nothing to compare with
    return sorted({*(doubled or [finest // 2]), own, finest})


def _operators(
    network: Network,
    ocean: OceanFunction,
    own: tuple[SeaLevelOperator, RotationalFeedback | None],
    finest: int,
    progress: Progress,
    threads: int,
) -> Iterator[tuple[SeaLevelOperator, RotationalFeedback | None]]:
    degrees = degree_ladder(own[0].max_degree, finest)
    love = love_numbers(network.earth, max_degree=degrees[-1])
    for done, degree in enumerate(degrees):
        progress("degrees", done, len(degrees))
        if degree == own[0].max_degree:
            yield own
        else:
            operator = network_operator(network, ocean, max_degree=degree, love=love, threads=threads)
            yield operator, network_rotation(network, operator)
    progress("degrees", len(degrees), len(degrees))


def _sites(network: Network) -> tuple[Site, ...]:
    used = tuple(site for site in network.sites if site.excluded_because is None)
    source, names = network.source or "network", [site.id for site in used]
    if not used:
        raise InputError(Fault(source, "site", "no site is left", "At least one", "Take back an exclusion"))
    faults = [
        Fault(source, "sites", f'"{name}" stands twice', "Must be unique", "Rename or remove one")
        for name in dict.fromkeys(names)
        if names.count(name) > 1
    ]
    if faults:
        raise InputError(faults)
    return used


def _warnings(network: Network, dataset: xr.Dataset) -> list[str]:
    lower, upper = compared_degrees(dataset)
    found = [
        f"The admittance of {site} moves by {change:.4f} from degree {lower} to {upper}: it lies near a load or a "
        "coast. Raise [fingerprint] max_degree."
        for site, change in unsettled_sites(dataset)
    ]
    if len(network.loads) == 1:
        found.insert(0, "One load member: nothing is known of the uncertainty of the fingerprint. Give more.")
    return found
