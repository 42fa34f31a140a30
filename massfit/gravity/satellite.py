"""The annual cycle of ocean mass from satellite gravity, in the network's own terms."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_RADIUS, PASCAL_PER_HPA, STANDARD_GRAVITY
from massfit.earth.love import LoveNumbers
from massfit.errors import Fault, InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.gravity.annual import ALIAS_DAYS, MonthlyAnnual, fit_monthly
from massfit.gravity.field import Span
from massfit.gravity.inputs import GravityInputs, Solution
from massfit.gravity.kernel import OceanKernel, ocean_kernel
from massfit.gravity.mass import mass_per_coefficient
from massfit.gravity.model import calendar_months, formal_covariance, solution_fields, used_degree
from massfit.gravity.monthly import Addition, MonthlyMass, Replacement, monthly_mass
from massfit.gravity.predicted import PredictedMass, land_leakage, whole_ocean_factors
from massfit.gravity.tables import Name
from massfit.phasor import admittance_matrix, as_complex, as_components
from massfit.posterior.network_model import inflation

_DEGREE_ONE = (("C", 1, 0), ("C", 1, 1), ("S", 1, 1))
_C20, _C30 = ("C", 2, 0), ("C", 3, 0)

ErrorSource = Literal["residuals", "formal", "settings", "nothing"]
_ERROR_WORDS = {
    "formal": "error of the model: the formal errors of its annual terms, as if independent, which is mostly too small",
    "settings": "error of the model: model_sd_hpa of the settings",
    "nothing": "error of the model: its file states none, so that it is not weighed; model_sd_hpa may state it",
}


@dataclass(frozen=True)
class Context:
    """What a comparison is made in, the same for every solution and choice.

    Parameters
    ----------
    ocean : OceanFunction
    love : LoveNumbers
    predicted : PredictedMass
        To the highest degree of any choice.
    water_vapour : complex
        Annual phasor of the mass of water vapour in the air, kg.
    window : Span or None
    reference_year : int
    """

    ocean: OceanFunction
    love: LoveNumbers
    predicted: PredictedMass
    water_vapour: complex
    window: Span | None
    reference_year: int


@dataclass(frozen=True, eq=False)
class SatelliteMean:
    """Annual phasor of the ocean's water mass from one solution.

    Parameters
    ----------
    name : str
    kernel_phasor : complex
        As the kernel sees it, Pa.
    kernel_covariance : (2, 2) array
        Pa2.
    phasor : complex
        Mean over the whole ocean, mean over the load members, Pa.
    covariance : (2, 2) array
        With the spread of the members, Pa2.
    factors : (K,) array of complex
        Whole ocean over kernel, for each member.
    leakage : (K,) array of complex
        Kernel mean of the land's own water over the whole-ocean mean.
    fit : MonthlyAnnual
        Of the series, kg m-2.
    series : (n,) array
        Kernel means, kg m-2, less their mean.
    monthly : MonthlyMass
    actions : tuple of str
        What was done, in order.
    kind : str
        "months", or "model" where annual terms of a file stand in for them.
    error_from : str
        Where the error of the kernel phasor is from: "residuals", "formal" errors of the file, "settings", or
        "nothing", where the covariance lacks it.
    """

    name: str
    kernel_phasor: complex
    kernel_covariance: NDArray[np.float64]
    phasor: complex
    covariance: NDArray[np.float64]
    factors: NDArray[np.complex128]
    leakage: NDArray[np.complex128]
    fit: MonthlyAnnual
    series: NDArray[np.float64]
    monthly: MonthlyMass
    actions: tuple[str, ...]
    kind: Literal["months", "model"] = "months"
    error_from: ErrorSource = "residuals"

    @property
    def error_stated(self) -> bool:
        """Whether the covariance holds the error of the measurement."""
        return self.error_from != "nothing"

    @property
    def by_member(self) -> NDArray[np.complex128]:
        """Whole-ocean phasor as each load member converts it, (K,), Pa."""
        return np.asarray(self.kernel_phasor * self.factors)


def satellite_mean(inputs: GravityInputs, solution: Solution, context: Context) -> SatelliteMean:
    """Carry one solution from its fields to the mean over the whole ocean.

    Parameters
    ----------
    inputs : GravityInputs
    solution : Solution
    context : Context

    Returns
    -------
    SatelliteMean

    Raises
    ------
    InputError
        Products that a choice needs are not there, or too few months are left.
    """
    chosen = inputs.settings
    monthly = assembled(inputs, solution, context)
    kernel = ocean_kernel(
        context.ocean, max_degree=monthly.max_degree, buffer_km=chosen.buffer_km, smoothing_km=chosen.smoothing_km
    )
    seen, unseen = visible(inputs, kernel)
    series = seen.mean(monthly.mass)
    fit = fit_monthly(
        monthly.spans,
        series,
        reference_year=context.reference_year,
        alias_days=ALIAS_DAYS if chosen.alias_lines else (),
    )
    constant = vapour_degree_zero(inputs, context)
    observed = STANDARD_GRAVITY * (fit.phasor + constant)
    own, error_from = _own_error(inputs, solution, context, seen)
    covariance = STANDARD_GRAVITY**2 * fit.covariance + own
    factors = whole_ocean_factors(context.predicted, seen)
    whole, spread = converted(observed, covariance, factors)
    actions = (
        *monthly.actions,
        *unseen,
        *_circulation_action(inputs),
        *_kernel_actions(kernel, fit, constant, error_from),
    )
    return SatelliteMean(
        solution.name, observed, covariance, whole, spread, factors,
        land_leakage(context.predicted, kernel), fit, series, monthly, actions,
        "model" if solution.models else "months", error_from,
    )  # fmt: skip


def assembled(inputs: GravityInputs, solution: Solution, context: Context) -> MonthlyMass:
    """Make the surface mass of each month as the settings ask."""
    chosen = inputs.settings
    top = used_degree(solution, chosen.max_degree)
    fields = solution_fields(solution, context.window, top)
    replacements, notes = _replacements(inputs, solution, context)
    added = []
    if chosen.restore_dealiasing:
        _need(inputs.dealiasing, "dealiasing", "restore_dealiasing")
        # over the whole ocean the circulation has no mean: what the product has is the air's
        whole = ocean_kernel(context.ocean, max_degree=top)
        name = "the dealiasing product put back, less its mean over the whole ocean"
        added.append(Addition(name, inputs.dealiasing, centred=whole))
    if degree_zero(inputs) == "atmosphere":
        _need(inputs.atmosphere, "atmosphere", "degree_zero")
        name = "degree 0 from the mass of the atmosphere, with its sign turned"
        added.append(Addition(name, inputs.atmosphere, factor=-1.0, degrees=(0,)))
    made = monthly_mass(
        fields, context.love, max_degree=top, replacements=replacements, added=added, window=context.window,
    )  # fmt: skip
    return replace(made, actions=(*_model_actions(solution, len(fields), top, context.window), *made.actions, *notes))


def degree_zero(inputs: GravityInputs) -> str:
    """Say where the global mean of the water comes from."""
    chosen = inputs.settings.degree_zero
    if chosen == "best":
        return "atmosphere" if inputs.atmosphere else "water-vapour"
    return chosen


def vapour_degree_zero(inputs: GravityInputs, context: Context) -> complex:
    """Global mean of the water that the vapour in the air leaves, kg m-2; 0 where it comes from elsewhere."""
    if degree_zero(inputs) != "water-vapour":
        return 0j
    return -context.water_vapour / (4.0 * np.pi * EARTH_RADIUS**2)


def unseen_degrees(inputs: GravityInputs) -> tuple[int, ...]:
    """Degrees that the fields do not hold."""
    blind = [0] if degree_zero(inputs) == "none" else []
    return (*blind, 1) if inputs.degree_one is None else tuple(blind)


def visible(inputs: GravityInputs, kernel: OceanKernel) -> tuple[OceanKernel, tuple[str, ...]]:
    """Return the kernel of what the fields hold, used for the prediction too, and what that leaves out."""
    blind = unseen_degrees(inputs)
    notes = tuple(f"degree {n} is seen by neither side: the load members carry it" for n in blind)
    return kernel.without_degrees(*blind) if blind else kernel, notes


def replaced_names(inputs: GravityInputs, solution: Solution, context: Context) -> tuple[Name, ...]:
    """Coefficients that the table of low degrees replaces: C20, and C30 where it has one for every month."""
    table, chosen = inputs.low_degree, inputs.settings
    if table is None:
        return ()
    wanted = [name for name, how in ((_C20, chosen.c20), (_C30, chosen.c30)) if how == "replaced"]
    names = [name for name in wanted if name in table.coefficients]
    if _C30 in names and any(table.value(_C30, span) is None for span in _spans(solution, context)):
        names.remove(_C30)
    return tuple(names)


def degree_one_names(inputs: GravityInputs) -> tuple[Name, ...]:
    """Coefficients that the table of degree 1 gives."""
    return () if inputs.degree_one is None else _DEGREE_ONE


def _spans(solution: Solution, context: Context) -> list[Span]:
    window = context.window
    fields = solution_fields(solution, window, 0)
    spans = [field.span for field in fields if field.span is not None]
    return [span for span in spans if window is None or window.start <= span.middle < window.end]


def _replacements(
    inputs: GravityInputs, solution: Solution, context: Context
) -> tuple[list[Replacement], tuple[str, ...]]:
    found, table = [], inputs.low_degree
    if inputs.degree_one is not None:
        found.append(Replacement(inputs.degree_one, _DEGREE_ONE))
    names = replaced_names(inputs, solution, context)
    if table is not None and names:
        found.append(Replacement(table, names))
    notes = [] if _C20 in names else ["C20 of the fields is kept"]
    if _C30 not in names:
        lacks = table is not None and _C30 in table.coefficients and inputs.settings.c30 == "replaced"
        notes.append("C30 of the fields is kept" + (": the table has none for some months" if lacks else ""))
    return found, tuple(notes)


def _need(product: Sequence[object], key: str, asked: str) -> None:
    if not product:
        problem = f"{asked} asks for it, and it is not given"
        raise InputError(
            Fault("[gravity]", key, problem, "Must name the monthly products", f"Give it or change {asked}")
        )


def converted(
    observed: complex, covariance: NDArray[np.float64], factors: NDArray[np.complex128]
) -> tuple[complex, NDArray[np.float64]]:
    """Convert a phasor by the factor of each member: their mean, with its own error and the spread between them.

    Parameters
    ----------
    observed : complex
    covariance : (2, 2) array
    factors : (K,) array of complex

    Returns
    -------
    phasor : complex
    covariance : (2, 2) array
    """
    each = as_components(observed * factors)
    turns = admittance_matrix(factors)
    within = np.mean(turns @ covariance @ np.swapaxes(turns, -1, -2), axis=0)
    count = len(factors)
    spread = np.zeros((2, 2))
    if count > 1:
        departures = each - each.mean(axis=0)
        # from the spread of K members about their mean to the error of that mean for one more member
        spread = departures.T @ departures / count * inflation(count)
    return complex(as_complex(each.mean(axis=0))), within + spread


def _own_error(
    inputs: GravityInputs, solution: Solution, context: Context, seen: OceanKernel
) -> tuple[NDArray[np.float64], ErrorSource]:
    """Error of the kernel phasor that the residuals of a fit do not hold, Pa2: none of months, a model's own."""
    if not solution.models:
        return np.zeros((2, 2)), "residuals"
    stated = inputs.settings.model_sd_hpa
    if stated is not None:
        return (PASCAL_PER_HPA * stated) ** 2 * np.eye(2), "settings"
    assert context.window is not None  # solution_fields has refused a model without
    radius = solution.models[0].field.conventions.radius_m
    layer = mass_per_coefficient(context.love, seen.max_degree, radius_m=radius)
    replaced = (*replaced_names(inputs, solution, context), *degree_one_names(inputs))
    formal = formal_covariance(
        solution, context.window, seen.weights * layer[None, :, None],
        replaced=replaced, reference_year=context.reference_year,
    )  # fmt: skip
    return (np.zeros((2, 2)), "nothing") if formal is None else (STANDARD_GRAVITY**2 * formal, "formal")


def _circulation_action(inputs: GravityInputs) -> list[str]:
    """Say what a buffer leaves of the circulation that the makers of the fields took off."""
    chosen = inputs.settings
    if chosen.restore_dealiasing or not chosen.buffer_km:
        return []
    left = "among the choices" if inputs.dealiasing else "not known without a dealiasing product"
    return [
        "the circulation that was taken off the fields averages to nothing over the whole ocean, not beyond a buffer: "
        f"what that leaves is {left}"
    ]


def _model_actions(solution: Solution, count: int, top: int, window: Span | None) -> list[str]:
    if not solution.models or window is None:
        return []
    timed = any(each.field.span is not None for each in solution.models)
    wanted = len(calendar_months(window))
    return [
        f"annual terms of a model, to degree {top}, written out as {count} of {wanted} months; its trend, steps and "
        "other periods are left out",
        f"{len(solution.models)} stretches of time, each with its own terms" if timed
        else "the file states no time that it holds for: taken to hold for the whole comparison",
    ]  # fmt: skip


def _kernel_actions(kernel: OceanKernel, fit: MonthlyAnnual, constant: complex, error_from: ErrorSource) -> list[str]:
    actions = [
        f"averaged over {kernel.area_m2:.4e} m2 of ocean at least {kernel.buffer_km:g} km from land"
        if kernel.buffer_km
        else f"averaged over the whole ocean, {kernel.area_m2:.4e} m2",
        f"smoothed by a Gaussian that falls to one half at {kernel.smoothing_km:g} km"
        if kernel.smoothing_km
        else "not smoothed",
        f"annual cycle fitted to {fit.months} months beside {', '.join(fit.lines)}; each averaged over its own span",
    ]
    if error_from != "residuals":
        actions.append(_ERROR_WORDS[error_from])
    if constant:
        # kg m-2 are mm of fresh water
        size = abs(constant)
        actions.append(f"degree 0: less the water vapour of the fingerprint, {size:.2f} mm of water on the whole Earth")
    return actions
