"""The linear least squares of the package against certified values (published table: NIST StRD)."""

import json
from pathlib import Path

import numpy as np
import pytest

from massfit.annual.evidence import linear_fit
from massfit.annual.nodes import exponential_columns

TABLES = json.loads((Path(__file__).parents[1] / "reference" / "nist_strd.json").read_text())
# certified values have 11 digits, linear parameters at rounded non-linear ones lose a few
DIGITS = 1e-8


def test_annual_line_of_enso():
    table = TABLES["ENSO"]
    data, months = np.array(table["response"]), np.arange(1.0, 169.0)
    assert len(data) == 168
    coefficients = np.array(table["coefficients_b1_then_cosine_sine_of_each_period"])
    angles = [2 * np.pi * months / period for period in table["periods"]]
    columns = np.column_stack([np.ones(168), *(wave(angle) for angle in angles for wave in (np.cos, np.sin))])
    fit = linear_fit(columns, data[:, None], np.zeros(7))
    np.testing.assert_allclose(fit.mean[:, 0], coefficients, rtol=DIGITS)
    assert fit.misfit[0] == pytest.approx(table["residual_sum_of_squares"], rel=1e-10)
    # the certified standard deviations are those of all nine parameters: the two periods add their derivatives
    slopes = [
        (coefficients[2 * i + 1] * np.sin(angles[i]) - coefficients[2 * i + 2] * np.cos(angles[i]))
        * angles[i]
        / table["periods"][i]
        for i in (1, 2)
    ]
    full = linear_fit(np.column_stack([columns, *slopes]), data[:, None], np.zeros(9))
    sd = np.sqrt(np.diag(full.covariance)[1:3] * table["residual_sum_of_squares"] / (168 - 9))
    np.testing.assert_allclose(sd, table["annual_standard_deviations"], rtol=1e-7)


def test_one_exponential_of_boxbod():
    table = TABLES["BoxBOD"]
    decay = exponential_columns(np.array(table["predictor"]), np.array([1 / table["b2"]]))
    fit = linear_fit(1.0 - decay, np.array(table["response"])[:, None], np.zeros(1))
    assert fit.mean[0, 0] == pytest.approx(table["b1"], rel=DIGITS)
    assert fit.misfit[0] == pytest.approx(table["residual_sum_of_squares"], rel=1e-10)


def test_two_exponentials_of_mgh17():
    table = TABLES["MGH17"]
    decays = exponential_columns(np.array(table["predictor"]), 1 / np.array(table["b4_b5"]))
    columns = np.column_stack([np.ones(33), decays])
    fit = linear_fit(columns, np.array(table["response"])[:, None], np.zeros(3))
    np.testing.assert_allclose(fit.mean[:, 0], table["b1_b2_b3"], rtol=DIGITS)
    assert fit.misfit[0] == pytest.approx(table["residual_sum_of_squares"], rel=1e-9)
