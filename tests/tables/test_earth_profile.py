import numpy as np

from massfit.tables.earth_profile import read_prem_polynomials


def test_layers_join_from_the_centre_to_the_surface() -> None:
    table = read_prem_polynomials()
    assert table.shape == (12, 14)
    assert table[0, 0] == 0.0
    assert table[-1, 1] == 6371.0
    np.testing.assert_array_equal(table[1:, 0], table[:-1, 1])


def test_only_the_outer_core_and_the_ocean_are_fluid() -> None:
    table = read_prem_polynomials()
    fluid = np.flatnonzero(~table[:, 10:].any(axis=1))
    np.testing.assert_array_equal(table[fluid, 1], [3480.0, 6371.0])


def test_speeds_join_where_the_model_has_no_jump() -> None:
    # Dziewonski & Anderson 1981: 3630, 5600 and 5771 km separate polynomials, not materials
    table = read_prem_polynomials()
    for radius in (3630.0, 5600.0, 5771.0):
        below = int(np.flatnonzero(table[:, 1] == radius)[0])
        powers = (radius / 6371.0) ** np.arange(4)
        for first in (2, 6, 10):
            values = table[[below, below + 1], first : first + 4] @ powers
            # the table has four decimals, and PREM rounds its coefficients there
            assert abs(values[1] - values[0]) < 2e-3, (radius, first)
