"""What the analyst gives of satellite gravity, in memory."""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from massfit.gravity.field import GravityField, GravityModel
from massfit.gravity.tables import CoefficientTable
from massfit.settings import Gravity


@dataclass(frozen=True)
class Determination:
    """Another determination of the annual cycle of ocean mass, as the analyst found it.

    Parameters
    ----------
    label, method : str
    phasor : complex
        Pa, in the network's phase convention.
    covariance : (2, 2) array
        Of (in phase, quadrature), Pa2.
    error_stated : bool
        False where the covariance lacks the error of the measurement, because nobody states it: such a
        determination is shown, and never weighed.
    """

    label: str
    method: str
    phasor: complex
    covariance: NDArray[np.float64]
    error_stated: bool = True


@dataclass(frozen=True)
class Solution:
    """What one centre gives: monthly fields, or a model with annual terms.

    Parameters
    ----------
    name : str
    fields : tuple of GravityField
        Of single months; empty for a model.
    models : tuple of GravityModel
        One for every stretch of time; empty for months.
    """

    name: str
    fields: tuple[GravityField, ...]
    models: tuple[GravityModel, ...] = ()


@dataclass(frozen=True)
class GravityInputs:
    """Everything of `[gravity]`, read.

    Parameters
    ----------
    settings : Gravity
    solutions : tuple of Solution
    degree_one, low_degree : CoefficientTable, optional
    atmosphere, dealiasing : tuple of GravityField
        Monthly products; empty where not given.
    determinations : tuple of Determination
    assimilating_models : tuple of str
        Ocean models of the network that assimilated satellite gravity.
    inputs : mapping of str to str
        SHA-256 of every file read.
    warnings : tuple of str
    """

    settings: Gravity
    solutions: tuple[Solution, ...]
    degree_one: CoefficientTable | None = None
    low_degree: CoefficientTable | None = None
    atmosphere: tuple[GravityField, ...] = ()
    dealiasing: tuple[GravityField, ...] = ()
    determinations: tuple[Determination, ...] = ()
    assimilating_models: tuple[str, ...] = ()
    inputs: Mapping[str, str] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()


def gravity_sentence(inputs: GravityInputs) -> str:
    """Say what a comparison would use, in one sentence.

    Parameters
    ----------
    inputs : GravityInputs

    Returns
    -------
    str
    """
    chosen = inputs.settings
    solutions = ", ".join(f"{each.name} ({_kind(each)})" for each in inputs.solutions)
    tables = [text for text in (chosen.degree_one, chosen.low_degree) if text is not None]
    beside = f", {', '.join(tables)}" if tables else ", no table of degree 1, C20 or C30"
    return (
        f"Satellite gravity is compared: {solutions}{beside}; degrees to {chosen.max_degree}, ocean at least "
        f"{chosen.buffer_km:g} km from land."
    )


def _kind(solution: Solution) -> str:
    if not solution.models:
        spans = [str(field.span.middle)[:7] for field in solution.fields if field.span is not None]
        return f"{len(spans)} months, {min(spans)} to {max(spans)}" if spans else "no month"
    spans = [str(edge)[:7] for each in solution.models if (span := each.field.span) for edge in (span.start, span.end)]
    return f"a model with annual terms, {min(spans)} to {max(spans)}" if spans else "a model with annual terms"
