"""The linear fit behind every site phasor."""

import json

import numpy as np
import xarray as xr

from massfit.annual.evidence import linear_fit
from massfit.io.fields.field_file import month_phasor
from massfit.phasor import annual_basis, delay_days, phasor_from_peak
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


def monthly_means() -> list[Row]:
    # the year in minutes: exact means of each calendar month of a cosine that peaks on day 100
    truth = phasor_from_peak(1.0, 100.0)
    start = np.datetime64("2015-01-01", "m")
    minutes = np.arange(start, np.datetime64("2016-01-01", "m"), 10)
    basis = annual_basis((minutes - start) / np.timedelta64(1, "D") + 5.0 / 1440.0)
    values = basis @ [truth.real, truth.imag]
    month = minutes.astype("datetime64[M]").astype(int) - int(start.astype("datetime64[M]").astype(int))
    means = np.array([values[month == k].mean() for k in range(12)])
    climatology = xr.DataArray(means, dims="month", coords={"month": np.arange(1, 13)})
    found = complex(month_phasor(climatology, 2015).item())
    middles = np.array([basis[month == k].mean(axis=0) for k in range(12)])
    middles /= np.linalg.norm(middles, axis=1)[:, None]  # the wave in the middle of each month, unattenuated
    naive = complex(*np.linalg.lstsq(middles, means, rcond=None)[0])
    return [
        Row("amplitude with the mean taken for the value of mid-month", 0.98862, abs(naive), 2e-4, ".5f"),
        Row("amplitude of month_phasor", 1.0, abs(found), 1e-6, ".6f"),
        Row("delay of month_phasor / days", 0.0, round(float(delay_days(found / truth)), 6) + 0.0, 1e-4, ".3f"),
    ]


GROUPS = (
    Group("The 12-month line of ENSO", "certified",
          "NIST Statistical Reference Datasets, ENSO; the design at the certified periods, priors off",
          "eleven certified digits, less what rounded periods cost", enso),
    Group("Exponentials beside a level", "certified",
          "NIST Statistical Reference Datasets, BoxBOD and MGH17; at the certified rates, priors off",
          "eleven certified digits, less what rounded rates cost", exponentials),
    Group("Monthly means", "closed form",
          "sin(x) / x with x = pi / 12: what a mean over a twelfth of the year leaves of it",
          "months have 28 to 31 days, which moves the fifth digit; ours undoes each month by itself", monthly_means),
)  # fmt: skip
