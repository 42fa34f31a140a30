"""What each choice in the processing of satellite gravity does to its answer."""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

from massfit.errors import InputError
from massfit.gravity.inputs import GravityInputs, Solution
from massfit.gravity.model import used_degree
from massfit.gravity.satellite import Context, replaced_names, satellite_mean


@dataclass(frozen=True)
class Choice:
    """The answer with one switch flipped.

    Parameters
    ----------
    name : str
    kernel_phasor, phasor : complex or None
        As the kernel sees it, and over the whole ocean, Pa; None where it could not be computed.
    problem : str
        Why not.
    """

    name: str
    kernel_phasor: complex | None
    phasor: complex | None
    problem: str = ""


def choice_table(inputs: GravityInputs, solution: Solution, context: Context) -> tuple[Choice, ...]:
    """Flip each switch of the processing in turn.

    Parameters
    ----------
    inputs : GravityInputs
    solution : Solution
    context : Context

    Returns
    -------
    tuple of Choice
        As it was done first.
    """
    return tuple(
        _choice(name, changed, solution, where) for name, changed, where in _flipped(inputs, solution, context)
    )


def _choice(name: str, inputs: GravityInputs, solution: Solution, context: Context) -> Choice:
    try:
        found = satellite_mean(inputs, solution, context)
    except InputError as error:
        return Choice(name, None, None, error.faults[0].problem)
    return Choice(name, found.kernel_phasor, found.phasor)


def _flipped(
    inputs: GravityInputs, solution: Solution, context: Context
) -> Iterator[tuple[str, GravityInputs, Context]]:
    chosen = inputs.settings

    def with_(**changes: Any) -> GravityInputs:
        return replace(inputs, settings=replace(chosen, **changes))

    yield "as it was done", inputs, context
    if inputs.low_degree is not None:
        yield _turned(chosen.c20, "C20"), with_(c20="own" if chosen.c20 == "replaced" else "replaced"), context
        if chosen.c30 == "own" or ("C", 3, 0) in replaced_names(inputs, solution, context):
            yield _turned(chosen.c30, "C30"), with_(c30="own" if chosen.c30 == "replaced" else "replaced"), context
    if inputs.degree_one is not None:
        yield "without degree 1, on either side", replace(inputs, degree_one=None), context
        yield "degree 1 missing from the fields only", _without_degree_one(inputs), context
    yield from ((f"degree 0: {name}", with_(degree_zero=name), context) for name in _other_degree_zero(inputs))
    for kilometres in (0.0, 150.0, 300.0, 500.0):
        if kilometres != chosen.buffer_km:
            yield f"{kilometres:g} km from land", with_(buffer_km=kilometres), context
    yield (
        ("not smoothed", with_(smoothing_km=0.0), context)
        if chosen.smoothing_km
        else ("smoothed, half at 300 km", with_(smoothing_km=300.0), context)
    )
    if used_degree(solution, chosen.max_degree) > 40:
        yield "degrees to 40", with_(max_degree=40), context
    name = "no alias lines" if chosen.alias_lines else "with alias lines"
    yield name, with_(alias_lines=not chosen.alias_lines), context
    if context.window is not None and not solution.models:
        yield "all months there are", inputs, replace(context, window=None)
    if inputs.dealiasing:
        name = "dealiasing product not restored" if chosen.restore_dealiasing else "dealiasing product restored"
        yield name, with_(restore_dealiasing=not chosen.restore_dealiasing), context


def _turned(state: str, name: str) -> str:
    return f"{name} of the fields" if state == "replaced" else f"{name} replaced"


def _without_degree_one(inputs: GravityInputs) -> GravityInputs:
    """Set degree 1 to zero but take it as seen: the classical fault."""
    assert inputs.degree_one is not None
    rows = tuple(replace(row, values=dict.fromkeys(row.values, 0.0)) for row in inputs.degree_one.rows)
    return replace(inputs, degree_one=replace(inputs.degree_one, rows=rows))


def _other_degree_zero(inputs: GravityInputs) -> list[str]:
    from_products = ["atmosphere"] if inputs.atmosphere else []
    current = inputs.settings.degree_zero
    used = (
        from_products[0] if current == "best" and from_products else ("water-vapour" if current == "best" else current)
    )
    return [name for name in (*from_products, "water-vapour", "none") if name != used]
