"""The short tides: diurnal and faster lines, by Doodson number.

Long-period lines are left out on purpose: Sa and Ssa are the annual and the
semi-annual cycle themselves.
"""

import numpy as np

_RAYLEIGH = 0.95
"""Cycles; a little below 1, so that 365 days of hourly samples part K1 and S1."""
_CENTURY_DAYS = 36_525.0
# degrees per day of s, h, p, N' and p1: the linear terms of the mean longitudes of Moon, Sun, lunar
# perigee, negative node and solar perigee (Meeus 1998, Astronomical Algorithms, chapters 22, 25 and 47)
_MEAN_RATES = (
    np.array([481_267.881_234_21, 36_000.769_83, 4_069.013_728_7, 1_934.136_289_1, 1.719_54]) / _CENTURY_DAYS
)
# tau, the lunar hour angle of the mean Moon, turns with the Earth less s plus h
_ARGUMENT_RATES = np.concatenate([[360.0 - _MEAN_RATES[0] + _MEAN_RATES[1]], _MEAN_RATES])

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
    digits = np.array([int(digit) for digit in doodson_number if digit != "."])
    multiples = digits - np.array([0, 5, 5, 5, 5, 5])
    return float(multiples @ _ARGUMENT_RATES) / 360.0


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
