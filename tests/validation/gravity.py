"""From satellite gravity to mass."""

import itertools

import numpy as np
from gravity.invented_earth import make_earth
from scipy.special import eval_legendre

from massfit.constants import ANNUAL_RATE, EARTH_RADIUS, PASCAL_PER_HPA, TROPICAL_YEAR_DAYS
from massfit.earth.love import love_numbers
from massfit.gravity.annual import alias_leakage, average_over
from massfit.gravity.compare import GEOCENTRE_ITRF2020, implied_geocentre
from massfit.gravity.field import Span
from massfit.gravity.inputs import GravityInputs, Solution
from massfit.gravity.kernel import gaussian_weights
from massfit.gravity.mass import mass_per_coefficient
from massfit.gravity.predicted import predicted_mass
from massfit.gravity.satellite import Context, satellite_mean
from massfit.phasor import peak_days
from massfit.settings import Gravity
from validation.registry import Group, Row, vanishing

AREA = "Satellite gravity"


def degree_one() -> list[Row]:
    love = love_numbers(max_degree=2)
    layer = mass_per_coefficient(love, 1, radius_m=6378136.3, earth_density=5517.0)
    # the closed form is that of k'_1 = 0.021
    water = 1e-10 * float(layer[1] * (1.0 + love.k[1])) / 1.021
    return [Row("mm of water for C10 of 10⁻¹⁰", 3.446, water, 5e-4, ".3f")]


def attraction_of_a_layer() -> list[Row]:
    radius, rows = 6378136.3, []
    mass = 5514.0 * 4.0 / 3.0 * np.pi * radius**3
    love = love_numbers(max_degree=10)
    x, weight = np.polynomial.legendre.leggauss(40)
    for n in (2, 10):
        attraction = 2.0 * np.pi * radius**2 * float(np.sum(weight * eval_legendre(n, x) ** 2)) / mass
        layer = float(mass_per_coefficient(love, n, radius_m=radius)[n] * (1.0 + love.k[n]))
        left = abs(attraction * layer - 1.0)
        rows.append(vanishing(f"layer of degree {n}: Newton's sum times ours, less 1", left, 1e-12))
    return rows


def smoothing() -> list[Row]:
    weights, rows = gaussian_weights(60, 300.0), []
    decay = np.log(2.0) / (1.0 - np.cos(3e5 / EARTH_RADIUS))
    x, weight = np.polynomial.legendre.leggauss(2000)
    kernel = weight * np.exp(-decay * (1.0 - x))
    for n in (5, 20, 60):
        exact = float(np.sum(kernel * eval_legendre(n, x)) / np.sum(kernel))
        rows.append(Row(f"weight of degree {n}, 300 km", exact, float(weights[n]), 1e-10, ".6f"))
    return rows


def calendar() -> list[Row]:
    month = TROPICAL_YEAR_DAYS / 12.0
    mean = complex(average_over(ANNUAL_RATE, np.array([0.0]), np.array([month]))[0])
    return [Row("annual line in a mean over a month", 0.98862, abs(mean), 5e-6, ".5f")]


def invented_earth() -> list[Row]:
    earth = make_earth(drop_months=(7, 8, *range(30, 41)))
    members = [each for each in earth.loads if each.name != "nominal"]  # the truth is none of them
    predicted = predicted_mass(earth.operator, members, water_vapour=earth.vapour, max_degree=40)
    context = Context(earth.ocean, earth.love, predicted, earth.vapour, None, 2015)
    true_hpa, true_day = abs(earth.answer) / PASCAL_PER_HPA, float(peak_days(earth.answer))
    rows = []
    for buffer_km in (0.0, 300.0):
        settings = Gravity(fields=("invented",), max_degree=40, buffer_km=buffer_km)
        given = GravityInputs(
            settings, (Solution("invented", earth.fields),), degree_one=earth.degree_one, atmosphere=earth.atmosphere
        )
        found = satellite_mean(given, given.solutions[0], context).phasor
        name = f"{buffer_km:g} km from land"
        rows.append(Row(f"hPa, {name}", true_hpa, abs(found) / PASCAL_PER_HPA, 0.01 * true_hpa))
        # one per cent of the amplitude across the phasor
        rows.append(Row(f"peak day, {name}", true_day, float(peak_days(found)), 0.01 * 365.2422 / (2 * np.pi), ".2f"))
    return rows


def geocentre() -> list[Row]:
    earth = make_earth()
    loads = [each for each in earth.loads if each.name == "nominal"]
    predicted = predicted_mass(earth.operator, loads, water_vapour=earth.vapour, max_degree=2)
    context = Context(earth.ocean, earth.love, predicted, earth.vapour, None, 2015)
    found = implied_geocentre(earth.answer, np.zeros((2, 2)), context)
    rows = []
    for axis, (amplitude, _, phase) in GEOCENTRE_ITRF2020.items():
        water, frame = 1000.0 * found[axis][0], amplitude * np.exp(1j * np.radians(phase))
        days = [float(peak_days(each)) for each in (water, frame)]
        name = f"{axis}: {abs(water):.2f} mm, day {days[0]:.0f}, against {amplitude:.2f} mm, day {days[1]:.0f}"
        rows.append(Row(name, 0.0, float(abs(water - frame) / abs(water + frame)), 1.0, ".2f"))
    return rows


def leakage() -> list[Row]:
    rows = []
    for years, day in ((2, 161.0), (5, 161.0), (15, 161.0), (5, 322.1)):
        edges = np.arange(np.datetime64("2003-01", "M"), np.datetime64("2003-01", "M") + 12 * years + 1)
        spans = [
            Span(start, end) for start, end in itertools.pairwise(edges.astype("datetime64[s]"))
        ]  # fmt: skip
        name = f"of {day:g} d in {years} years"
        rows.append(Row(name, _worst(spans, day), alias_leakage(spans, day), 2e-4))
    return rows


def _worst(spans: list[Span], period: float) -> float:
    """Days summed, least squares, every phase tried."""
    origin = spans[0].start
    days = [
        (np.arange(s.start, s.end, np.timedelta64(86400, "s")) - origin) / np.timedelta64(86400, "s") for s in spans
    ]

    def monthly(rate: float, shift: float) -> np.ndarray:
        return np.array([np.cos(rate * (each + 0.5) - shift).mean() for each in days])

    year = 2 * np.pi / TROPICAL_YEAR_DAYS
    columns = [monthly(rate, shift) for rate in (year, 2 * year) for shift in (0.0, np.pi / 2)]
    design = np.column_stack([*columns, np.ones(len(days)), np.arange(len(days))])
    lines = np.column_stack([monthly(2 * np.pi / period, shift) for shift in np.radians(np.arange(0.0, 180.0, 2.0))])
    fitted = np.linalg.lstsq(design, lines, rcond=None)[0][:2]
    return float(np.hypot(*fitted).max())


GROUPS = (
    Group("Degree 1", "closed form", "a rho_e (2n + 1) / (3 (1 + k'_n)), Wahr et al. (1998), eq. 14, with 5517 kg m⁻³",
          "three decimals are written", degree_one),
    Group("Attraction of a layer", "closed form", "Newton's potential of a layer on the sphere, summed by quadrature",
          "rounding", attraction_of_a_layer),
    Group("Gaussian smoothing", "slow twin", "Jekeli (1981): the kernel against Legendre polynomials by quadrature",
          "rounding of sums of exponentials", smoothing),
    Group("Means over months", "closed form", "sin(x) / x with x = pi / 12", "five decimals are written", calendar),
    Group("Leakage of a line that is not fitted", "slow twin",
          "largest share of a line that lands in the annual cycle of calendar months: days summed, every phase tried",
          "phases 2 degrees apart", leakage),
    Group("An invented Earth that keeps its mass", "known truth",
          "water, air and circulation written as months with gaps, and a product of the atmosphere; the load members "
          "do not hold the truth", "1 % of the amplitude", invented_earth),
    Group("Geocentre", "published",
          "annual motion of the centre of figure in the centre of mass: nominal water alone against ITRF2020 (Altamimi "
          "et al. 2023), as their distance over that with the sign turned",
          "1 where the two are unrelated, more where a sign is wrong. No closer: ITRF2020 holds the loads of air and "
          "circulation too, a good part of Y", geocentre),
)  # fmt: skip
