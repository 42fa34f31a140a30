"""From satellite gravity to mass."""

import numpy as np
from scipy.special import eval_legendre

from massfit.constants import ANNUAL_RATE, EARTH_RADIUS, TROPICAL_YEAR_DAYS
from massfit.earth.love import love_numbers
from massfit.gravity.annual import average_over
from massfit.gravity.kernel import gaussian_weights
from massfit.gravity.mass import mass_per_coefficient
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


GROUPS = (
    Group("Degree 1", "closed form", "a rho_e (2n + 1) / (3 (1 + k'_n)), Wahr et al. (1998), eq. 14, with 5517 kg m⁻³",
          "three decimals are written", degree_one),
    Group("Attraction of a layer", "closed form", "Newton's potential of a layer on the sphere, summed by quadrature",
          "rounding", attraction_of_a_layer),
    Group("Gaussian smoothing", "slow twin", "Jekeli (1981): the kernel against Legendre polynomials by quadrature",
          "rounding of sums of exponentials", smoothing),
    Group("Means over months", "closed form", "sin(x) / x with x = pi / 12", "five decimals are written", calendar),
)  # fmt: skip
