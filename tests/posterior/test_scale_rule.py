import numpy as np
import pytest
from scipy import integrate, stats

from massfit.posterior.scale_rule import scale_rule


def exact(function, prior_scale):
    """Integral under the half-t prior by adaptive quadrature in the logarithm of the scale."""

    def integrand(x):
        return function(np.exp(x)) * 2.0 * stats.t.pdf(np.exp(x) / prior_scale, 4) * np.exp(x) / prior_scale

    centre = np.log(prior_scale)
    return integrate.quad(integrand, centre - 15.0, centre + 9.0, limit=500, points=[centre - 2.0, centre, centre + 2])[
        0
    ]


@pytest.mark.parametrize("narrow", [True, False])
def test_moments_of_the_prior(narrow):
    rule = scale_rule(30.0, 1.0, 6, narrow=narrow)
    weight = rule.mass @ rule.spline
    # closed form: Student's variance is nu / (nu - 2) = 2; beyond the last knot lies 0.4 % of it
    assert weight @ np.exp(2.0 * rule.knot) == pytest.approx(2.0 * 30.0**2, rel=0.03)
    assert weight.sum() == pytest.approx(1.0, abs=1e-12)
    assert weight.min() > -1e-3


@pytest.mark.parametrize("count", [1, 3, 10, 40, 200])
@pytest.mark.parametrize("scatter", [3.0, 15.0, 60.0])
def test_a_scale_of_many_data_is_integrated(count, scatter):
    """Evidence and mean variance of `count` residuals of error 12 Pa whose mean square is what the scatter gives."""
    rule, error = scale_rule(30.0, 0.5 * 12.0 / np.sqrt(count), count), 12.0**2
    square = count * (error + scatter**2)

    def log_density(scale):
        return -0.5 * count * np.log(error + scale**2) - 0.5 * square / (error + scale**2)

    top = log_density(scatter)
    cells = rule.mass * np.exp(rule.spline @ log_density(np.exp(rule.knot)) - top)
    evidence = exact(lambda s: np.exp(log_density(s) - top), 30.0)
    variance = exact(lambda s: (error + s**2) * np.exp(log_density(s) - top), 30.0) / evidence
    assert cells.sum() == pytest.approx(evidence, rel=0.1)
    found = cells @ rule.spline @ (error + np.exp(2.0 * rule.knot)) / cells.sum()
    # 1.5 % of a standard deviation is 3 % of a variance
    assert found == pytest.approx(variance, rel=0.03)


@pytest.mark.parametrize("count", [2, 6])
def test_the_knots_alone_serve_a_scale_of_few_effects(count):
    rule = scale_rule(15.0, 0.75, count, narrow=False)

    def density(scale):
        return (25.0 + scale**2) ** (-0.5 * count) * np.exp(-0.5 * count * 200.0 / (25.0 + scale**2))

    evidence = exact(density, 15.0)
    variance = exact(lambda s: s**2 * density(s), 15.0) / evidence
    mass = rule.mass * density(np.exp(rule.knot))
    assert mass.sum() == pytest.approx(evidence, rel=0.03)
    assert mass @ np.exp(2.0 * rule.knot) / mass.sum() == pytest.approx(variance, rel=0.03)


def test_the_knots_alone_do_not_serve_many_effects():
    """Control: 200 residuals tell the scale to 5 %, and the knots stand 50 % apart."""
    rule = scale_rule(30.0, 1.0, 6, narrow=False)
    scatter = np.exp(rule.knot[6:8].mean())

    def density(scale):
        ratio = (144.0 + scatter**2) / (144.0 + scale**2)
        return np.exp(100.0 * (np.log(ratio) - ratio + 1.0))

    evidence = exact(density, 30.0)
    assert evidence > 0.01
    assert abs(rule.mass @ density(np.exp(rule.knot)) / evidence - 1.0) > 0.5
