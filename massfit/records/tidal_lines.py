"""The short tides: diurnal and faster lines, by Doodson number.

Long-period lines are left out on purpose: Sa and Ssa are the annual and the
semi-annual cycle themselves.
"""

import numpy as np
from numpy.typing import NDArray

_RAYLEIGH = 0.95
"""Cycles; a little below 1, so that 365 days of hourly samples part K1 and S1."""
_CENTURY_DAYS = 36_525.0
# degrees per day of s, h, p, N' and p1: the linear terms of the mean longitudes of Moon, Sun, lunar
# perigee, negative node and solar perigee (Meeus 1998, Astronomical Algorithms, chapters 22, 25 and 47)
_MEAN_RATES = np.array([481_267.881_234_21, 36_000.769_83, 4_069.013_728_7, 1_934.136_289_1, 1.719_54]) / _CENTURY_DAYS
# tau, the lunar hour angle of the mean Moon, turns with the Earth less s plus h
_ARGUMENT_RATES = np.concatenate([[360.0 - _MEAN_RATES[0] + _MEAN_RATES[1]], _MEAN_RATES])
# the same mean longitudes in degrees at 1 January 2000 12:00 (ibid.; N' is counted backwards)
_MEAN_LONGITUDES = np.array([218.316_447_7, 280.466_46, 83.353_246_5, -125.044_52, 282.937_35])

# Doodson numbers (Doodson 1921) of the lines of the developed potential (Cartwright & Tayler 1971; Cartwright &
# Edden 1973) and of the common shallow-water compounds, under their Darwin names. The order is that of claim: of two
# lines that a record cannot part the earlier one is fitted. It follows the equilibrium amplitude, except that S1 comes
# before its weaker neighbours in the potential because the daily cycle of the air adds to it.
_DOODSON_NUMBERS = {
    "M2": "255.555",
    "K1": "165.555",
    "S2": "273.555",
    "O1": "145.555",
    "P1": "163.555",
    "N2": "245.655",
    "K2": "275.555",
    "Q1": "135.655",
    "M4": "455.555",
    "M3": "355.555",
    "M6": "655.555",
    "MK3": "365.555",
    "MS4": "473.555",
    "MN4": "445.655",
    "MO3": "345.555",
    "SK3": "383.555",
    "S4": "491.555",
    "2MS6": "673.555",
    "S1": "164.556",
    "nu2": "247.455",
    "2N2": "235.755",
    "mu2": "237.555",
    "NO1": "155.655",
    "J1": "175.455",
    "OO1": "185.555",
    "L2": "265.455",
    "T2": "272.556",
    "rho1": "137.455",
    "sigma1": "127.555",
    "2Q1": "125.755",
    "pi1": "162.556",
    "eps2": "227.655",
    "phi1": "167.555",
    "lambda2": "263.655",
    "eta2": "285.455",
    "chi1": "157.455",
    "theta1": "173.655",
    "SO1": "183.555",
    "psi1": "166.554",
    "H1": "254.556",
    "H2": "256.554",
    "tau1": "147.555",
    "R2": "274.554",
    "ups1": "195.455",
    "MK4": "475.555",
}


# quarters of a turn that a line is ahead of the sum of its longitudes, so that its equilibrium amplitude is positive
# north of the equator (Doodson 1921; Schureman 1958, table 2); zero where not given. Compounds take their parents'.
_QUARTER_TURNS = {
    **dict.fromkeys(("K1", "S1", "NO1", "J1", "OO1", "phi1", "chi1", "theta1", "psi1", "tau1", "ups1"), 1),
    **dict.fromkeys(("MK3", "SK3", "SO1"), 1),
    **dict.fromkeys(("L2", "lambda2", "H1", "R2", "M3"), 2),
    **dict.fromkeys(("O1", "P1", "Q1", "rho1", "sigma1", "2Q1", "pi1", "MO3"), 3),
}


def cycles_per_day(doodson_number: str) -> float:
    """Frequency of a tidal line from its Doodson number.

    Parameters
    ----------
    doodson_number : str
        Six digits with a point, each after the first 5 more than the multiple of
        s, h, p, N' and p1.

    Returns
    -------
    float
        Cycles per day of mean solar time.

    References
    ----------
    Doodson, A. T. (1921), Proc. R. Soc. A 100, 305-329.

    Examples
    --------
    >>> round(cycles_per_day("255.555") * 15, 6)  # M2, degrees per hour
    28.984104
    """
    return float(_multiples(doodson_number) @ _ARGUMENT_RATES) / 360.0


def _multiples(doodson_number: str) -> NDArray[np.int64]:
    """Multiples of lunar time, s, h, p, N' and p1."""
    digits = np.array([int(digit) for digit in doodson_number if digit != "."])
    return np.asarray(digits - np.array([0, 5, 5, 5, 5, 5]))


def _longitudes_at_epoch() -> NDArray[np.float64]:
    """Lunar time, s, h, p, N' and p1 at 1 January 2000 00:00 UTC, degrees."""
    midnight = _MEAN_LONGITUDES - 0.5 * _MEAN_RATES
    return np.concatenate([[midnight[1] - midnight[0]], midnight])


def greenwich_argument(name: str) -> float:
    """Phase of a line of the equilibrium tide at Greenwich at 1 January 2000 00:00 UTC.

    Parameters
    ----------
    name : str
        Darwin name.

    Returns
    -------
    float
        Radians, in [0, 2 pi); without the 18.6-year modulation.

    Examples
    --------
    >>> greenwich_argument("S2")  # twice the mean Sun, at midnight
    0.0
    """
    degrees = _multiples(_DOODSON_NUMBERS[name]) @ _longitudes_at_epoch() + 90.0 * _QUARTER_TURNS.get(name, 0)
    return float(np.radians(round(float(degrees), 9) % 360.0))


SHORT_TIDES = {name: cycles_per_day(number) for name, number in _DOODSON_NUMBERS.items()}
"""Cycles per day of every short tide, by Darwin name, in the order of claim."""


def parted_lines(span_days: float) -> tuple[str, ...]:
    """Short tides that a record of some length tells apart.

    Parameters
    ----------
    span_days : float
        From the first to the last sample, days.

    Returns
    -------
    tuple of str
        Names, in the order of claim; each differs from all before it by nearly one
        cycle over the span (the criterion of Rayleigh).

    Examples
    --------
    >>> "P1" in parted_lines(31), "P1" in parted_lines(366)
    (False, True)
    """
    chosen: list[str] = []
    for name, frequency in SHORT_TIDES.items():
        if all(abs(frequency - SHORT_TIDES[other]) * span_days >= _RAYLEIGH for other in chosen):
            chosen.append(name)
    return tuple(chosen)
