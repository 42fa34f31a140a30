"""What invented satellites see of the invented water, as two centres and two tables would give it."""

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE, EARTH_DENSITY, PASCAL_PER_HPA
from massfit.gravity.field import Conventions, GravityField, Span
from massfit.gravity.inputs import Determination, GravityInputs, Solution
from massfit.gravity.tables import CoefficientTable, Name, TableRow
from massfit.phasor import peak_days, phasor_from_peak, polar_covariance
from massfit.settings import Gravity
from massfit.simulate.clock import Clock
from massfit.simulate.names import centre_names
from massfit.simulate.sea_level import true_mass
from massfit.simulate.world import World

TOP_DEGREE = 40
CONVENTIONS = Conventions(3.986004415e14, 6378136.3, "zero_tide")
GAP_MONTHS = 11
"""Months between the first and the second pair of satellites; only periods of three years and more have them."""

_ALIAS_DAYS = 161.0
_NOISE = 2.5e-12  # of a coefficient and one month: the scatter of real months about degree 14
_NOISE_DEGREE = 40.0  # where it has doubled
_CENTRE_ERROR = 3e-12  # annual, of a coefficient of degree 2 to 6
_C20, _C30 = ("C", 2, 0), ("C", 3, 0)
_DEGREE_ONE: tuple[Name, ...] = (("C", 1, 0), ("C", 1, 1), ("S", 1, 1))


def draw_satellites(rng: np.random.Generator, world: World, clock: Clock, centres: int) -> GravityInputs:
    """Draw monthly fields of some centres, a table of degree 1 and one of C20 and C30.

    The truth is that of the recorders: the same load, solved to a higher degree, with the same year-to-year changes.
    Centres share a static field and differ in noise and in annual errors of low degree; C20 and C30 are poor in the
    fields, and C20 has a line at 161 days; degrees 0 and 1 are zero in them.

    Parameters
    ----------
    rng : numpy.random.Generator
    world : World
    clock : Clock
    centres : int

    Returns
    -------
    GravityInputs
    """
    spans = calendar_months(clock)
    spans = _with_gap(spans) if len(spans) >= 36 else spans
    water = _water(world, clock, spans)
    static = _static_field(rng)
    wave = np.array([_mean_of(ANNUAL_RATE, span, clock) for span in spans])
    names = centre_names(centres)
    solutions = tuple(Solution(name, _fields(rng, name, water, static, wave, spans, clock)) for name in names)
    files = tuple(f"gravity/{name.lower()}.tar.xz" for name in names)
    settings = Gravity(
        fields=files,
        degree_one="gravity/degree_one.txt",
        low_degree="gravity/c20_c30.txt",
        determinations="gravity/others.csv",
        max_degree=TOP_DEGREE,
    )
    shared = 1e-11 * (rng.standard_normal(3) + 1j * rng.standard_normal(3))
    one = {
        name: _coefficient(water, name) + (error * wave).real + 2.5e-11 * rng.standard_normal(len(spans))
        for name, error in zip(_DEGREE_ONE, shared, strict=True)
    }
    low = {name: _coefficient(water + static, name) + 2e-11 * rng.standard_normal(len(spans)) for name in (_C20, _C30)}
    return GravityInputs(
        settings, solutions, degree_one=_table(one, spans, settings.degree_one),
        low_degree=_table(low, spans, settings.low_degree), determinations=_others(rng, world.annual),
    )  # fmt: skip


def calendar_months(clock: Clock) -> list[Span]:
    """Whole calendar months of a period."""
    first, end = clock.first_day.astype("datetime64[M]"), (clock.first_day + clock.n_days).astype("datetime64[M]")
    starts = np.arange(first, end)
    return [Span(start.astype("datetime64[s]"), (start + 1).astype("datetime64[s]")) for start in starts]


def satellite_truth(inputs: GravityInputs) -> Mapping[str, Any]:
    """Say what is known of the invention beside the answer itself."""
    first = inputs.solutions[0].fields
    return {
        "centres": [solution.name for solution in inputs.solutions],
        "months": len(first),
        "max_degree": TOP_DEGREE,
        "alias_days": _ALIAS_DAYS,
    }


def _with_gap(spans: list[Span]) -> list[Span]:
    first = round(0.45 * len(spans))
    return spans[:first] + spans[first + GAP_MONTHS :]


def _water(world: World, clock: Clock, spans: list[Span]) -> NDArray[np.float64]:
    """Potential coefficients of the water of each month, (n, 2, N + 1, N + 1); degrees 0 and 1 are in them."""
    mass, love = true_mass(world, TOP_DEGREE)
    n = np.arange(TOP_DEGREE + 1)
    layer = EARTH_DENSITY * CONVENTIONS.radius_m * (2 * n + 1) / (3.0 * (1.0 + love.k[: TOP_DEGREE + 1]))
    pattern = mass / world.annual / layer[:, None]
    day = clock.by_day
    turn = np.exp(-1j * ANNUAL_RATE * day.days)
    changes = clock.daily(world.year_changes.real) + 1j * clock.daily(world.year_changes.imag)
    running = (world.annual + changes) * turn + world.semiannual * turn**2
    means = np.array([running[_inside(span, day)].mean() for span in spans])
    return np.asarray((pattern[None] * means[:, None, None, None]).real)


def _inside(span: Span, day: Clock) -> NDArray[np.bool_]:
    return np.asarray((day.time >= span.start) & (day.time < span.end))


def _mean_of(rate: float, span: Span, clock: Clock) -> complex:
    day = clock.by_day
    return complex(np.exp(-1j * rate * day.days[_inside(span, day)]).mean())


def _static_field(rng: np.random.Generator) -> NDArray[np.float64]:
    """Invent a static field: the Earth's flattening and pear shape, the rest by Kaula's rule (Kaula 1966)."""
    n = np.maximum(np.arange(TOP_DEGREE + 1), 1)
    values = np.tril(rng.standard_normal((2, TOP_DEGREE + 1, TOP_DEGREE + 1))) * (1e-5 / n**2)[None, :, None]
    values[:, :2] = 0.0
    values[1, :, 0] = 0.0
    values[0, 2:4, 0] = -4.84169417e-4, 9.5717e-7
    values[:, 2, 1] = -2.1e-10, 1.4e-9
    return np.asarray(values)


def _fields(
    rng: np.random.Generator,
    name: str,
    water: NDArray[np.float64],
    static: NDArray[np.float64],
    wave: NDArray[np.complex128],
    spans: list[Span],
    clock: Clock,
) -> tuple[GravityField, ...]:
    n = np.arange(TOP_DEGREE + 1)
    shape = (2, TOP_DEGREE + 1, TOP_DEGREE + 1)
    # annual errors of low degree, the centre's own
    size = np.where((n >= 2) & (n <= 6), _CENTRE_ERROR, 0.0)[None, :, None]
    own = size * np.tril(rng.standard_normal(shape) + 1j * rng.standard_normal(shape))
    fields = []
    for month, span, phase in zip(water, spans, wave, strict=True):
        noise = _NOISE * (1.0 + (n / _NOISE_DEGREE) ** 2)[None, :, None] * np.tril(rng.standard_normal(shape))
        noise[0, 2, 0] += (
            1.2e-10 * rng.standard_normal() + 1.5e-10 * _mean_of(2 * np.pi / _ALIAS_DAYS, span, clock).real
        )
        noise[0, 3, 0] += 4e-11 * rng.standard_normal()
        coefficients = static + month + noise + (own * phase).real
        coefficients[:, :2] = 0.0  # the satellites fall with the Earth, and keep the mass they were told
        coefficients[1, :, 0] = 0.0
        label = str(span.start)[:7]
        fields.append(
            GravityField(f"{name} {label}", np.round(coefficients, 15), CONVENTIONS, span, source=f"{name}_{label}.gfc")
        )
    return tuple(fields)


def _coefficient(values: NDArray[np.float64], name: Name) -> NDArray[np.float64]:
    kind, degree, order = name
    return np.asarray(values[:, "CS".index(kind), degree, order])


def _table(columns: Mapping[Name, NDArray[np.float64]], spans: list[Span], source: str | None) -> CoefficientTable:
    rows = tuple(
        TableRow(span, {name: float(np.round(values[i], 15)) for name, values in columns.items()})
        for i, span in enumerate(spans)
    )
    return CoefficientTable(rows, "zero_tide", source=source or "")


def _others(rng: np.random.Generator, annual: complex) -> tuple[Determination, ...]:
    """Two more determinations, scattered about the truth by the errors they state."""
    found = []
    for label, method, sd_hpa, sd_days in (
        ("Sea level less heat", "invented altimetry less invented steric height", 0.06, 6.0),
        ("Land water budget", "invented storage on land, with its sign turned", 0.10, 12.0),
    ):
        amplitude = abs(annual) / PASCAL_PER_HPA + sd_hpa * rng.standard_normal()
        day = float(peak_days(annual)) + sd_days * rng.standard_normal()
        amplitude, day = float(np.round(amplitude, 2)), float(np.round(day, 1))
        phasor = phasor_from_peak(PASCAL_PER_HPA * amplitude, day)
        covariance = polar_covariance(phasor, PASCAL_PER_HPA * sd_hpa, sd_days)
        found.append(Determination(label, method, phasor, covariance))
    return tuple(found)
