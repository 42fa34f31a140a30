"""Monthly fields made ready: one reference, low degrees replaced, degrees one and zero put in, all of it listed."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from massfit.earth.love import LoveNumbers
from massfit.errors import Fault, InputError
from massfit.gravity.field import Conventions, GravityField, Span
from massfit.gravity.kernel import OceanKernel
from massfit.gravity.mass import PERMANENT_TIDE_C20, apparent_tide_system, cut, mass_per_coefficient, referred
from massfit.gravity.tables import CoefficientTable, Name


@dataclass(frozen=True)
class Replacement:
    """Coefficients of a table that take the place of the field's own, or fill what it leaves at zero.

    Parameters
    ----------
    table : CoefficientTable
    names : tuple of (kind, degree, order)
        Which of the table's coefficients are used.
    """

    table: CoefficientTable
    names: tuple[Name, ...]


@dataclass(frozen=True)
class Addition:
    """Products that are added month by month.

    Parameters
    ----------
    name : str
    fields : sequence of GravityField
    factor : float
    degrees : tuple of int, optional
        Only these; all by default.
    centred : OceanKernel, optional
        The product's mean over this kernel's ocean is taken off as a uniform layer.
    """

    name: str
    fields: Sequence[GravityField]
    factor: float = 1.0
    degrees: tuple[int, ...] | None = None
    centred: OceanKernel | None = None


@dataclass(frozen=True, eq=False)
class MonthlyMass:
    """Surface mass of each month as coefficients, less their mean.

    Parameters
    ----------
    spans : tuple of Span
        In order of time.
    mass : (n, 2, N + 1, N + 1) array
        4-pi-normalised coefficients, kg m-2.
    actions : tuple of str
        What was done, in the order it was done.
    left_out : tuple of str
        Months that were not used, each with its reason.
    """

    spans: tuple[Span, ...]
    mass: NDArray[np.float64]
    actions: tuple[str, ...]
    left_out: tuple[str, ...]

    @property
    def max_degree(self) -> int:
        """Highest degree."""
        return int(self.mass.shape[-1]) - 1


def monthly_mass(
    fields: Sequence[GravityField],
    love: LoveNumbers,
    *,
    max_degree: int,
    replacements: Sequence[Replacement] = (),
    added: Sequence[Addition] = (),
    window: Span | None = None,
) -> MonthlyMass:
    """Turn monthly gravity fields into surface mass.

    Parameters
    ----------
    fields : sequence of GravityField
        With spans, in any order.
    love : LoveNumbers
        Degree 1 in the frame of the degree-1 coefficients.
    max_degree : int
        Degrees above it are left out.
    replacements : sequence of Replacement
        A month without the value in the table is left out, never mixed.
    added : sequence of Addition
        A month without its product is left out.
    window : Span, optional
        Months whose middle lies outside are left out.

    Returns
    -------
    MonthlyMass

    Raises
    ------
    InputError
        Fields without a span or of too low a degree, no month left, tide systems that do not fit.
    """
    conventions = _common_conventions(fields, max_degree)
    ordered = sorted(fields, key=lambda field: field.span.middle)  # type: ignore[union-attr]
    actions, left_out = _first_actions(ordered, conventions, max_degree), Counter[str]()
    months: list[tuple[Span, NDArray[np.float64]]] = []
    layer = mass_per_coefficient(love, max_degree, radius_m=conventions.radius_m)
    for field in ordered:
        span = field.span
        assert span is not None  # _common_conventions has refused such fields
        if window is not None and not window.start <= span.middle < window.end:
            left_out["outside the window"] += 1
            continue
        coefficients = referred(cut(field, max_degree), conventions).coefficients.copy()
        problem = _replace(coefficients, replacements, span, conventions) or _add(
            coefficients, added, span, conventions, layer
        )
        if problem:
            left_out[f"{str(span.middle)[:7]}: {problem}"] += 1
        else:
            months.append((span, coefficients))
    if len(months) < 2:
        allowed = "At least two must be left"
        reasons = "; ".join(f"{reason} ({count})" for reason, count in left_out.most_common(5))
        raise InputError(Fault("gravity", "fields", f"{len(months)} months are left: {reasons}", allowed))
    stack = np.stack([coefficients for _, coefficients in months])
    # the potential of the Earth itself goes out with the mean
    anomaly = stack - stack.mean(axis=0)
    actions += _replaced_actions(replacements) + [each.name for each in added]
    listed = tuple(reason if count == 1 else f"{reason} ({count})" for reason, count in left_out.items())
    return MonthlyMass(tuple(span for span, _ in months), anomaly * layer[None, None, :, None], tuple(actions), listed)


def _common_conventions(fields: Sequence[GravityField], max_degree: int) -> Conventions:
    faults = []
    for field in fields:
        if field.span is None:
            action = "Name the file after its month, or give time_coverage_start and _end in its header"
            faults.append(Fault(field.source or field.name, "span", "the field says no month", "", action))
        if field.max_degree < max_degree:
            problem, allowed = f"the highest degree is {field.max_degree}", f"Must be at least max_degree {max_degree}"
            faults.append(Fault(field.source or field.name, "max_degree", problem, allowed, "Lower max_degree"))
    if not fields:
        faults.append(Fault("gravity", "fields", "there is none", "At least two months", "Give monthly fields"))
    if faults:
        raise InputError(faults[:20])
    return Counter(field.conventions for field in fields).most_common(1)[0][0]


def _first_actions(fields: Sequence[GravityField], conventions: Conventions, max_degree: int) -> list[str]:
    others = sum(field.conventions != conventions for field in fields)
    actions = [
        f"{len(fields)} fields referred to GM {conventions.gm:.10e} m3 s-2, radius {conventions.radius_m:.2f} m, "
        f"{conventions.tide_system} ({others} of them were given otherwise)",
        f"degrees above {max_degree} left out" if fields[0].max_degree > max_degree else f"degrees to {max_degree}",
    ]
    c20 = float(np.mean([field.coefficients[0, 2, 0] for field in fields]))
    seems = apparent_tide_system(c20)
    if "unknown" not in (seems, conventions.tide_system) and seems != conventions.tide_system:
        actions.append(
            f"the files say {conventions.tide_system}, but their C20 of {c20:.9e} is that of {seems}: a constant, "
            "without effect on the annual cycle where no month is mixed with another"
        )
    return actions


def _replace(
    coefficients: NDArray[np.float64], replacements: Sequence[Replacement], span: Span, conventions: Conventions
) -> str | None:
    for replacement in replacements:
        for kind, degree, order in replacement.names:
            value = replacement.table.value((kind, degree, order), span)
            if value is None:
                return f"no {kind}{degree}{order} in {replacement.table.source}"
            if (degree, order) == (2, 0) and replacement.table.tide_system == "zero_tide":
                # a constant as far as the annual cycle goes, put right all the same
                value -= PERMANENT_TIDE_C20 if conventions.tide_system == "tide_free" else 0.0
            coefficients["CS".index(kind), degree, order] = value
    return None


def _add(
    coefficients: NDArray[np.float64],
    added: Sequence[Addition],
    span: Span,
    conventions: Conventions,
    layer: NDArray[np.float64],
) -> str | None:
    top = coefficients.shape[-1] - 1
    for each in added:
        dated = [product for product in each.fields if product.span is not None]
        best = max(dated, key=lambda product: span.overlap_days(product.span), default=None)  # type: ignore[arg-type]
        if best is None or best.span is None or span.overlap_days(best.span) < 0.8 * span.days:
            return f"without {each.name}"
        same = replace(conventions, tide_system=best.conventions.tide_system)  # no permanent tide in a product
        values = np.zeros_like(coefficients)
        size = min(top, best.max_degree) + 1
        values[:, :size, :size] = referred(cut(best, size - 1), same).coefficients
        if each.degrees is not None:
            values[:, [n for n in range(top + 1) if n not in each.degrees]] = 0.0
        if each.centred is not None:
            values[0, 0, 0] -= each.centred.mean(values * layer[:, None]) / layer[0]
        coefficients += each.factor * values
    return None


def _replaced_actions(replacements: Sequence[Replacement]) -> list[str]:
    listed = []
    for replacement in replacements:
        names = ", ".join(f"{kind}{degree}{order}" for kind, degree, order in replacement.names)
        listed.append(f"{names} from {replacement.table.source}")
        listed += [f"{replacement.table.source}: {note}" for note in replacement.table.notes]
    return listed
