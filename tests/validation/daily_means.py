"""Short tides, and the way from samples to daily means."""

import numpy as np
from utide import harmonics

from massfit.constants import TROPICAL_YEAR_DAYS
from massfit.records.daily import reduce_to_daily
from massfit.records.hourly import days_from_epoch
from massfit.records.nodal import nodal_modulation
from massfit.records.record import Record
from massfit.records.tidal_lines import SHORT_TIDES, greenwich_argument
from validation.registry import Group, Row, published, vanishing

AREA = "Short tides and daily means"

LINES = ("M2", "S2", "N2", "K2", "K1", "O1", "P1", "Q1")
PASCAL_PER_M = 1025.0 * 9.80665


def speeds() -> list[Row]:
    table = {row["line"]: float(row["degrees_per_hour"]) for row in published("tidal_speeds_schureman.csv")}
    return [Row(f"{line} / deg h⁻¹", table[line], 15.0 * SHORT_TIDES[line], 2e-7, ".7f") for line in LINES]


def arguments() -> list[Row]:
    names = [name.strip().casefold() for name in harmonics.ut_constants.const.name]
    spelling = {"sigma1": "sig1", "lambda2": "lda2", "theta1": "the1"}
    places = np.array([names.index(spelling.get(name, name.casefold())) for name in SHORT_TIDES])
    largest = 0.0
    for days in (0.0, 3000.0, 6000.0, 9000.0):
        time = np.array([float(np.datetime64("2000-01-01").astype(int) + 719_163) + days])
        theirs = harmonics.FUV(time, time[0], places, 21.0, [0, 0, 0, 0])[2][0]
        ours = np.array([greenwich_argument(name) / (2 * np.pi) + SHORT_TIDES[name] * days for name in SHORT_TIDES])
        largest = max(largest, float(np.abs((ours - theirs + 0.5) % 1.0 - 0.5).max()) * 360.0)
    return [vanishing(f"{len(SHORT_TIDES)} lines, 2000 to 2024, largest difference / deg", largest, 1e-2)]


def node() -> list[Row]:
    days = np.arange(0.0, 18.7 * 365.25, 10.0)
    swings = {"M2": 3.7, "K1": 11.5, "O1": 18.7, "K2": 28.6}
    rows = []
    for line, swing in swings.items():
        factors = [(nodal_modulation(line, day) or (1.0, 0.0))[0] for day in days]
        rows.append(Row(f"{line} / %", swing, 50.0 * float(np.ptp(factors)), 0.1, ".1f"))
    return rows


def three_years_of_hours() -> np.ndarray:
    return np.datetime64("2015-01-01T00:30", "ns") + np.arange(1096 * 24) * np.timedelta64(1, "h")


def phasor(pressure: np.ndarray, harmonic: int, tides: str) -> complex:
    daily = reduce_to_daily(Record("A", "A/1", three_years_of_hours(), pressure), tides=tides)
    days = days_from_epoch(daily.time)
    turns = [2 * np.pi * k * days / TROPICAL_YEAR_DAYS for k in (1, 2)]
    design = np.column_stack([np.ones(days.size), *(wave(turn) for turn in turns for wave in (np.cos, np.sin))])
    found = np.linalg.lstsq(design, daily.pressure, rcond=None)[0]
    return complex(*found[2 * harmonic - 1 : 2 * harmonic + 1])


def wave(cycles_per_day: float) -> np.ndarray:
    return np.cos(2 * np.pi * cycles_per_day * days_from_epoch(three_years_of_hours()))


def responses() -> list[Row]:
    rows = []
    for harmonic, name in ((1, "annual"), (2, "semi-annual")):
        # 24 hourly values: the Dirichlet kernel, sin(12 x) / (24 sin(x / 2)) with x radians an hour
        step = 2 * np.pi * harmonic / TROPICAL_YEAR_DAYS / 24.0
        kernel = np.sin(12 * step) / (24 * np.sin(0.5 * step))
        found = abs(phasor(100.0 * wave(harmonic / TROPICAL_YEAR_DAYS), harmonic, "remove")) / 100.0
        title = f"1 less the response at the {name} line / 10⁻⁵"
        rows.append(Row(title, 1e5 * (1 - kernel), 1e5 * (1 - found), 0.1, ".1f"))
    step = 2 * np.pi * SHORT_TIDES["K1"] / 24.0
    plain = abs(phasor(PASCAL_PER_M * wave(SHORT_TIDES["K1"]), 1, "already-removed")) / PASCAL_PER_M
    kernel = abs(np.sin(12 * step) / (24 * np.sin(0.5 * step)))
    rows.append(Row("K1 in plain daily means, looks annual / %", 100 * kernel, 100 * plain, 0.01, ".2f"))
    for line in ("M2", "K1", "P1", "S1", "K2"):
        left = abs(phasor(PASCAL_PER_M * wave(SHORT_TIDES[line]), 1, "remove")) / PASCAL_PER_M
        rows.append(vanishing(f"annual line from a metre of {line} / mm", 1000.0 * left, 1e-2))
    return rows


GROUPS = (
    Group("Speeds", "published",
          "Schureman (1958), Manual of Harmonic Analysis and Prediction of Tides, table 2",
          "seven decimals are printed, for the perigee and the node of 1900", speeds),
    Group("Greenwich arguments", "other library", "utide, a general tide library, at four dates",
          "linear mean longitudes against theirs with squares of time", arguments),
    Group("Modulation by the node, half the range of an amplitude", "published",
          "Pugh (1987), Tides, Surges and Mean Sea-Level, table 4.3", "three decimals are printed", node),
    Group("Daily means of three years of hours", "closed form", "the kernel of 24 equal weights (Dirichlet)",
          "noise-free; what the tidal fit and the interpolation to noon add", responses),
)  # fmt: skip
