"""The search for the mode of the noise and of the drift grids."""

import numpy as np
import pytest

from massfit.annual.design import build_design
from massfit.annual.evidence import DriftBasis
from massfit.annual.families import noise_families
from massfit.annual.grid import refine_grid
from massfit.annual.mode import NEWTON_TOLERANCE, joint_mode, minimise
from massfit.annual.noise import NoiseModel
from massfit.settings import Priors

SCALES = np.array([2.0, 20.0, 200.0])


def test_minimum_of_a_bent_valley():
    # closed form: the minimum is at (1, 1), where the Hessian is [[802, -400], [-400, 200]] (Rosenbrock 1960)
    found = minimise(lambda x: float((1 - x[0]) ** 2 + 100 * (x[1] - x[0] ** 2) ** 2), np.array([-0.5, 0.2]))
    assert found.value < NEWTON_TOLERANCE
    # within a third of a standard deviation, sqrt(0.5)
    assert found.scores[0] == pytest.approx(1.0, abs=0.24)


def test_spread_is_the_inverse_hessian_where_third_derivatives_are_large():
    # closed form: x^2 + 2 y^2 + x y + x^2 y + x y^2 has the Hessian [[2, 1], [1, 4]] at its minimum in the origin;
    # one-sided mixed differences would be off by the step times 4
    found = minimise(
        lambda x: float(x[0] ** 2 + 2 * x[1] ** 2 + x[0] * x[1] + 2 * x[0] ** 2 * x[1] + 2 * x[0] * x[1] ** 2),
        np.zeros(2),
    )
    np.testing.assert_allclose(found.spread, np.linalg.inv([[2.0, 1.0], [1.0, 4.0]]), rtol=0.01)


@pytest.fixture(scope="module")
def basis(make_record, make_red):
    rng = np.random.default_rng(4)
    ocean = make_red(rng, 800, 30.0, 15.0)
    parts = [
        make_record(rng, count=400, first=first, size=1500.0, ocean=ocean[start : start + 400], label=str(start))
        for first, start in ((0.5, 0), (400.5, 400))
    ]
    return DriftBasis(build_design(parts, reference_year=2016, priors=Priors()))


def test_grid_begun_elsewhere_ends_alike(basis):
    # invariant: masses in turn do not depend on the noise that the first nodes were found with
    noise = [
        basis.design.covariance(NoiseModel(np.array([0.07]), np.array([var]), np.full(2, 10.0))) for var in (9e2, 9e4)
    ]
    fresh = refine_grid(noise[0], basis)
    begun = refine_grid(noise[0], basis, refine_grid(noise[1], basis))
    for place in range(2):
        moments = []
        for grid in (fresh, begun):
            logs, mass = grid.nodes[place].log_time, grid.mass[place]
            moments.append([mass @ logs, np.sqrt(mass @ (logs - mass @ logs) ** 2)])
        assert moments[0][0] == pytest.approx(moments[1][0], abs=0.05 * moments[0][1])
        assert moments[0][1] == pytest.approx(moments[1][1], rel=0.05)


@pytest.mark.parametrize("form", ["exponential", "smooth", "power-law"])
def test_every_form_finds_the_mode_it_finds_alone(basis, form, monkeypatch):
    # invariant: where the search begins, here at the mode of another form, does not decide where it ends
    monkeypatch.setattr("massfit.annual.mode.NEGLIGIBLE_FORM", 1e-300)  # none is left out
    alone = joint_mode(basis, noise_families(Priors(noise_forms=(form,)))).families[0]
    other = "sum" if form == "exponential" else "exponential"
    beside = joint_mode(basis, noise_families(Priors(noise_forms=(other, form))))
    (found,) = [mode for mode in beside.families if mode.family.form == form]
    away = (found.scores - alone.scores) / np.sqrt(np.diag(alone.spread))
    assert np.abs(away).max() < 0.6
