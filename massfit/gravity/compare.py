"""Network and satellites side by side: same quantity, same ocean, same years, same conventions."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_DENSITY, STANDARD_GRAVITY
from massfit.gravity.at_sites import geocentre_of
from massfit.gravity.bridge import BridgePart, BridgeStep, bridge_step, bridged, largest_gap
from massfit.gravity.choices import Choice, choice_table
from massfit.gravity.comparison import Agreement, agreement, shared_covariance
from massfit.gravity.definitions import Definition, Part, redefined
from massfit.gravity.field import GravityField
from massfit.gravity.inputs import Determination, GravityInputs, Solution
from massfit.gravity.satellite import Context, SatelliteMean, converted, satellite_mean
from massfit.gravity.site_comparison import SiteComparison, compare_sites
from massfit.phasor import as_complex, as_components
from massfit.posterior.network_model import inflation
from massfit.site import Site

GEOCENTRE_ITRF2020 = {"X": (1.23, 0.16, -123.0), "Y": (3.48, 0.15, 153.0), "Z": (2.76, 0.33, -140.0)}
"""Annual motion of the centre of figure in the centre of mass: amplitude and error, mm, and phase phi of
A cos(2 pi t - phi), degrees, t in decimal years (Altamimi et al. 2023, ITRF2020). It holds the loads of air and of the
ocean's circulation too."""


@dataclass(frozen=True, eq=False)
class NetworkAnswer:
    """What the recorders say.

    Parameters
    ----------
    phasor : complex
        Of the whole-ocean mean, Pa.
    covariance : (2, 2) array
        Pa2.
    sites : sequence of Site
    site_phasors : (n_site,) array of complex
        Mean over the ocean models, less the known response to air over land, Pa; NaN where there is none.
    site_covariances : (n_site, 2, 2) array
        Of the record, and of the circulation that no model has.
    admittance : (K, n_site) array of complex
        F of each load member.
    parts : mapping of str to Part
        Of :func:`massfit.gravity.definitions.redefined`.
    year_draws : (n, n_year, 2) array, optional
        Draws of the phasor of each year, Pa.
    years : tuple of int
    year_sd : float
        Standard deviation of a year's phasor about the mean that the model assumes, Pa.
    by_member : (K,) array of complex, optional
        The phasor under each load member, Pa; without it errors of the load members count as independent of those
        on the side of the satellites.
    """

    phasor: complex
    covariance: NDArray[np.float64]
    sites: Sequence[Site]
    site_phasors: NDArray[np.complex128]
    site_covariances: NDArray[np.float64]
    admittance: NDArray[np.complex128]
    parts: Mapping[str, Part]
    year_draws: NDArray[np.float64] | None = None
    years: tuple[int, ...] = ()
    year_sd: float = 0.0
    by_member: NDArray[np.complex128] | None = None


@dataclass(frozen=True, eq=False)
class GravityComparison:
    """Everything a comparison with satellite gravity makes.

    Parameters
    ----------
    solutions : tuple of SatelliteMean
    satellite : Determination
        Mean over the solutions, with the spread between them.
    network : Determination
    agreement : Agreement
        Network less satellites.
    others : tuple of (Determination, Agreement)
        Models that state no error beside solutions that do, the analyst's other determinations, and network less each.
    choices_of : str
        The first solution that is weighed.
    choices : tuple of Choice
        Of its processing.
    sites : tuple of SiteComparison
    geocentre : mapping of str to (complex, (2, 2) array)
        X, Y, Z of the centre of figure in the centre of mass that the water of the answer implies, m, and their
        covariances, m2.
    definitions : tuple of Definition
        Of the network, the satellites and the analyst's other determinations.
    bridge : tuple of BridgePart
        The network's own cycle before, in and after the longest gap of the first solution; empty where there is none or
        the years are not told apart.
    step : BridgeStep or None
        Its cycle in the gap less that of the other months.
    warnings : tuple of str
    """

    solutions: tuple[SatelliteMean, ...]
    satellite: Determination
    network: Determination
    agreement: Agreement
    others: tuple[tuple[Determination, Agreement], ...]
    choices_of: str
    choices: tuple[Choice, ...]
    sites: tuple[SiteComparison, ...]
    geocentre: Mapping[str, tuple[complex, NDArray[np.float64]]]
    definitions: tuple[Definition, ...]
    bridge: tuple[BridgePart, ...]
    step: BridgeStep | None
    warnings: tuple[str, ...]


def compare_with_gravity(inputs: GravityInputs, answer: NetworkAnswer, context: Context) -> GravityComparison:
    """Compare the recorders' answer with satellite gravity.

    Parameters
    ----------
    inputs : GravityInputs
    answer : NetworkAnswer
    context : Context

    Returns
    -------
    GravityComparison

    Raises
    ------
    InputError
        Fields that do not fit the settings, or too few months.
    """
    solutions = tuple(satellite_mean(inputs, solution, context) for solution in inputs.solutions)
    satellite = together(solutions)
    network = Determination("network", "sea-floor pressure recorders", answer.phasor, answer.covariance)
    return GravityComparison(
        solutions,
        satellite,
        network,
        _agree(network, satellite, _shared(answer, solutions)),
        tuple((each, _agree(network, each)) for each in (*_unweighed(solutions), *inputs.determinations)),
        *_choices(inputs, weighed_solutions(solutions)[0].name, context),
        compare_sites(
            inputs,
            weighed_solutions(solutions),
            answer.sites,
            answer.site_phasors,
            answer.site_covariances,
            answer.admittance,
            context,
        ),
        implied_geocentre(answer.phasor, answer.covariance, context),
        _definitions(network, satellite, inputs.determinations, answer.parts),
        *_bridge(solutions[0], answer, context),
        (*inputs.warnings, *_warnings(inputs, solutions, context)),
    )


def together(solutions: Sequence[SatelliteMean]) -> Determination:
    """Put the solutions together: their mean, the mean of their covariances and the spread between them.

    Parameters
    ----------
    solutions : sequence of SatelliteMean

    Returns
    -------
    Determination
        The covariances are averaged, not reduced by the count: the solutions share the satellites. Models that state no
        error are in it only where there is nothing else.
    """
    weighed = weighed_solutions(solutions)
    phasors = as_components(np.array([each.phasor for each in weighed]))
    centre = phasors.mean(axis=0)
    covariance = np.mean([each.covariance for each in weighed], axis=0)
    count = len(weighed)
    if count > 1:
        departures = phasors - centre
        covariance = covariance + departures.T @ departures / count * inflation(count)
    names = ", ".join(each.name for each in weighed)
    stated = all(each.error_stated for each in weighed)
    return Determination("satellite gravity", names, complex(as_complex(centre)), covariance, stated)


def weighed_solutions(solutions: Sequence[SatelliteMean]) -> tuple[SatelliteMean, ...]:
    """Solutions that state an error; all where none does."""
    return tuple(each for each in solutions if each.error_stated) or tuple(solutions)


def _choices(inputs: GravityInputs, name: str, context: Context) -> tuple[str, tuple[Choice, ...]]:
    solution = next(each for each in inputs.solutions if each.name == name)
    return name, choice_table(inputs, solution, context)


def _unweighed(solutions: Sequence[SatelliteMean]) -> list[Determination]:
    weighed = weighed_solutions(solutions)
    method = "annual terms of a model, whose file states no error"
    return [
        Determination(each.name, method, each.phasor, each.covariance, False)
        for each in solutions if each not in weighed
    ]  # fmt: skip


def _shared(answer: NetworkAnswer, solutions: Sequence[SatelliteMean]) -> NDArray[np.float64] | None:
    if answer.by_member is None:
        return None
    satellites = np.mean([each.by_member for each in weighed_solutions(solutions)], axis=0)
    return shared_covariance(answer.by_member, satellites)


def implied_geocentre(
    phasor: complex, covariance: NDArray[np.float64], context: Context
) -> dict[str, tuple[complex, NDArray[np.float64]]]:
    """Annual motion of the geocentre that the water of an answer implies, mean over the load members.

    Parameters
    ----------
    phasor : complex
        Of the whole-ocean mean, Pa.
    covariance : (2, 2) array
        Pa2.
    context : Context

    Returns
    -------
    dict of str to (complex, (2, 2) array)
        X, Y, Z, m, in the phase convention of the phasor, with the error of the answer and the spread of the
        members, m2. The load of air is not in it.
    """
    total = context.predicted.total
    degree_one = np.stack([total[:, 0, 1, 1], total[:, 1, 1, 1], total[:, 0, 1, 0]], axis=-1)
    per_water = degree_one / context.predicted.ocean_mean[:, None] / STANDARD_GRAVITY
    motion = geocentre_of(per_water, float(context.love.k[1]), EARTH_DENSITY)
    return {axis: converted(phasor, covariance, factors) for axis, factors in zip("XYZ", motion.T, strict=True)}


def _definitions(
    network: Determination, satellite: Determination, others: Sequence[Determination], parts: Mapping[str, Part]
) -> tuple[Definition, ...]:
    every = [(network, True), (satellite, False), *((other, False) for other in others)]
    return tuple(
        definition
        for each, recorders in every
        for definition in redefined(each.label, each.phasor, parts, recorders=recorders)
    )


def _bridge(
    solution: SatelliteMean, answer: NetworkAnswer, context: Context
) -> tuple[tuple[BridgePart, ...], BridgeStep | None]:
    gap = largest_gap(solution.monthly.spans)
    if gap is None or answer.year_draws is None or context.window is None:
        return (), None
    given = answer.year_draws, answer.years, context.window, gap
    return bridged(*given), bridge_step(*given, year_sd=answer.year_sd)


def _agree(first: Determination, second: Determination, shared: NDArray[np.float64] | None = None) -> Agreement:
    stated = first.error_stated and second.error_stated
    return agreement(first.phasor, first.covariance, second.phasor, second.covariance, shared=shared, weighed=stated)


def _warnings(inputs: GravityInputs, solutions: Sequence[SatelliteMean], context: Context) -> list[str]:
    found = []
    weighed = weighed_solutions(solutions)
    found += [
        f"{each.name}: its file states no errors, so that it is shown and not weighed. model_sd_hpa may state one."
        for each in solutions if not each.error_stated
    ]  # fmt: skip
    found += [
        f"{each.name}: its error is from the formal errors of its file, which are mostly too small: network and "
        "satellites may look further apart than they are." for each in solutions if each.error_from == "formal"
    ]  # fmt: skip
    if len(weighed) == 1:
        found.append("One solution only: the disagreement between centres is not in the error of the satellites.")
    if inputs.degree_one is None:
        found.append(
            "No table of degree 1: what the satellites cannot see, about a fifth, is filled by the load members."
        )
    if len(context.predicted.members) == 1:
        found.append("One load member only: the error of the conversion to the whole ocean is not seen.")
    if any(field.filtered for solution in inputs.solutions for field in _files(solution)):
        found.append(
            "The fields were filtered by their makers, with a filter that is not at hand: the kernel of the load "
            "members does not hold it, and the conversion to the whole ocean is not exact."
        )
    return found


def _files(solution: Solution) -> tuple[GravityField, ...]:
    return (*solution.fields, *(model.field for model in solution.models))
