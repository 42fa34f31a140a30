"""An Earth that keeps its mass, written as months of gravity: water, air and the ocean's circulation.

Everything is an annual phasor of surface mass; a month is its mean over the month, by the integral written out.
"""

from dataclasses import dataclass

import numpy as np

from massfit.constants import ANNUAL_RATE, EARTH_DENSITY, EARTH_RADIUS, STANDARD_GRAVITY
from massfit.earth.love import LoveNumbers, love_numbers
from massfit.fingerprint.grid import CellGrid, regrid
from massfit.fingerprint.loads import builtin_loads
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.operator import SeaLevelOperator, prepare_operator
from massfit.fingerprint.pattern import LoadPattern
from massfit.fingerprint.sea_level import solve_sea_level
from massfit.fingerprint.transforms import as_cilm
from massfit.gravity.field import Conventions, GravityField, Span
from massfit.gravity.tables import CoefficientTable, TableRow

YEAR = 2015
CONVENTIONS = Conventions(3.986004415e14, 6378136.3, "zero_tide")
TOP = 40


@dataclass
class InventedEarth:
    """Truth and products."""

    ocean: OceanFunction
    love: LoveNumbers
    operator: SeaLevelOperator
    loads: tuple[LoadPattern, ...]
    vapour: complex
    answer: complex  # ocean-mean pressure of the water, Pa
    spans: tuple[Span, ...]
    fields: tuple[GravityField, ...]
    atmosphere: tuple[GravityField, ...]
    dealiasing: tuple[GravityField, ...]
    degree_one: CoefficientTable
    geocentre_one: np.ndarray
    water: np.ndarray  # annual phasor of the water's coefficients, degrees 0 and 1 included


def make_earth(truth: str = "nominal", years: int = 5, drop_months: tuple[int, ...] = ()) -> InventedEarth:
    ocean, love = OceanFunction.builtin(), love_numbers(max_degree=60)
    operator = prepare_operator(ocean, love, max_degree=60)
    loads = builtin_loads(("all",))
    vapour = 0.65e15 * np.exp(2j * np.pi * 195.0 / 365.2422)
    load = next(each for each in loads if each.name == truth)
    field = regrid(load.values, CellGrid.from_centres(load.latitude_deg, load.longitude_deg), operator.cells)
    sea = solve_sea_level(operator, load=field, water_vapour=vapour)
    water = field + operator.sea_water_density * operator.ocean * sea.height
    latitude = np.radians(0.5 * (operator.cells.latitude_bounds_deg[1:] + operator.cells.latitude_bounds_deg[:-1]))
    longitude = np.radians(0.5 * (operator.cells.longitude_bounds_deg[1:] + operator.cells.longitude_bounds_deg[:-1]))
    air = 30.0 * np.exp(0.3j) * np.sin(latitude)[:, None] * np.cos(longitude) * (1.0 - operator.ocean)
    # the mass of the air changes by its vapour alone: what is over land and not vapour comes from over the ocean
    area = operator.cell_area_m2
    air = air + operator.ocean * (vapour - np.sum(air * area)) / np.sum(operator.ocean * area)
    current = 20.0 * np.exp(2j) * np.sin(2.0 * latitude)[:, None] * np.sin(2.0 * longitude) * operator.ocean
    current = current - operator.ocean * np.sum(current * area) / np.sum(operator.ocean * area)
    months = np.delete(np.arange(years * 12), drop_months)
    starts = np.datetime64(f"{YEAR}-01", "M") + months
    spans = tuple(Span(s.astype("datetime64[s]"), (s + 1).astype("datetime64[s]")) for s in starts)

    def coefficients(mass: np.ndarray) -> np.ndarray:
        parts = [as_cilm(part, 60) for part in operator.grid.analyse(np.stack([mass.real, mass.imag]))]
        full = (parts[0] + 1j * parts[1])[:, : TOP + 1, : TOP + 1]
        n = np.arange(TOP + 1)
        return np.asarray(
            full * 3.0 * (1.0 + love.k[: TOP + 1, None]) / (EARTH_DENSITY * CONVENTIONS.radius_m * (2 * n[:, None] + 1))
        )

    def monthly(mass: np.ndarray, kind: str) -> tuple[GravityField, ...]:
        phasor = coefficients(mass)
        return tuple(
            GravityField(f"{kind} {span.start}", (phasor * wave(span)).real, CONVENTIONS, span, product=kind)
            for span in spans
        )

    observed = monthly(water, "month")
    rows = []
    for one in observed:
        c = one.coefficients
        values = {("C", 1, 0): c[0, 1, 0], ("C", 1, 1): c[0, 1, 1], ("S", 1, 1): c[1, 1, 1]}
        rows.append(TableRow(one.span, {name: float(value) for name, value in values.items()}))  # type: ignore[arg-type]
        c[:, :2] = 0.0  # satellites do not see them
        c[0, 2, 0] -= 4.84169417e-4
    answer = STANDARD_GRAVITY * operator.sea_water_density * sea.ocean_mean
    one = coefficients(water)
    return InventedEarth(
        ocean, love, operator, loads, vapour, answer, spans, observed, monthly(air, "atmosphere"),
        monthly(operator.ocean * (air + current), "dealiasing"),
        CoefficientTable(tuple(rows), source="invented degree one"),
        np.array([one[0, 1, 1], one[1, 1, 1], one[0, 1, 0]]), one,
    )  # fmt: skip


def wave(span: Span) -> complex:
    """Mean of exp(-i w (t - t0)) over a span."""
    start, end = (
        float((edge - np.datetime64(f"{YEAR}-01-01", "s")) / np.timedelta64(86400, "s"))
        for edge in (span.start, span.end)
    )
    return complex(
        (np.exp(-1j * ANNUAL_RATE * end) - np.exp(-1j * ANNUAL_RATE * start)) / (-1j * ANNUAL_RATE * (end - start))
    )


EARTH_AREA = 4.0 * np.pi * EARTH_RADIUS**2
