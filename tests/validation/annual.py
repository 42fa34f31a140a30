"""The linear fit behind every site phasor."""

import json

import numpy as np

from massfit.annual.evidence import linear_fit
from validation.registry import REFERENCE, Group, Row

AREA = "Annual fit"

TABLES = json.loads((REFERENCE / "nist_strd.json").read_text("utf-8"))


def enso() -> list[Row]:
    table = TABLES["ENSO"]
    months, certified = np.arange(1.0, 169.0), np.array(table["coefficients_b1_then_cosine_sine_of_each_period"])
    angles = [2 * np.pi * months / period for period in table["periods"]]
    columns = np.column_stack([np.ones(168), *(wave(angle) for angle in angles for wave in (np.cos, np.sin))])
    fit = linear_fit(columns, np.array(table["response"])[:, None], np.zeros(7))
    # the certified standard deviations are those of all nine parameters: the two periods add their derivatives
    slopes = [
        (certified[2 * i + 1] * np.sin(angles[i]) - certified[2 * i + 2] * np.cos(angles[i])) * angles[i]
        / table["periods"][i]
        for i in (1, 2)
    ]  # fmt: skip
    whole = linear_fit(np.column_stack([columns, *slopes]), np.array(table["response"])[:, None], np.zeros(9))
    sd = np.sqrt(np.diag(whole.covariance)[1:3] * table["residual_sum_of_squares"] / (168 - 9))
    rows = [
        Row(f"b{k + 1}", float(certified[k]), float(fit.mean[k, 0]), 1e-8 * abs(certified[k]), ".8f") for k in (1, 2)
    ]
    for name, value, expected in zip(("b2", "b3"), sd, table["annual_standard_deviations"], strict=True):
        rows.append(Row(f"standard deviation of {name}", expected, float(value), 1e-7 * expected, ".8f"))
    squares = table["residual_sum_of_squares"]
    return [*rows, Row("residual sum of squares", squares, float(fit.misfit[0]), 1e-10 * squares, ".6f")]


def exponentials() -> list[Row]:
    table = TABLES["BoxBOD"]
    decay = np.exp(-np.outer(table["predictor"], [table["b2"]]))
    fit = linear_fit(1.0 - decay, np.array(table["response"])[:, None], np.zeros(1))
    squares = table["residual_sum_of_squares"]
    rows = [
        Row("BoxBOD: b1", table["b1"], float(fit.mean[0, 0]), 1e-8 * table["b1"], ".6f"),
        Row("BoxBOD: residual sum of squares", squares, float(fit.misfit[0]), 1e-10 * squares, ".6f"),
    ]
    table = TABLES["MGH17"]
    decays = np.exp(-np.outer(table["predictor"], table["b4_b5"]))
    fit = linear_fit(np.column_stack([np.ones(33), decays]), np.array(table["response"])[:, None], np.zeros(3))
    for k, expected in enumerate(table["b1_b2_b3"]):
        rows.append(Row(f"MGH17: b{k + 1}", expected, float(fit.mean[k, 0]), 1e-8 * abs(expected), ".8f"))
    squares = table["residual_sum_of_squares"]
    return [*rows, Row("MGH17: residual sum of squares / 10⁻⁵", 1e5 * squares, 1e5 * float(fit.misfit[0]),
                       1e-4 * squares, ".8f")]  # fmt: skip


GROUPS = (
    Group("The 12-month line of ENSO", "certified",
          "NIST Statistical Reference Datasets, ENSO; the design at the certified periods, priors off",
          "eleven certified digits, less what rounded periods cost", enso),
    Group("Exponentials beside a level", "certified",
          "NIST Statistical Reference Datasets, BoxBOD and MGH17; at the certified rates, priors off",
          "eleven certified digits, less what rounded rates cost", exponentials),
)  # fmt: skip
