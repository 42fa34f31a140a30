"""The 18.6-year modulation of the lunar tides by the node of the Moon's orbit."""

import numpy as np

_NODE_DEG = 125.044_52 + 0.5 * 1_934.136_261 / 36_525.0
"""Mean longitude of the ascending node at 1 January 2000 00:00 UTC (Meeus 1998, chapter 47)."""
_NODE_DEG_PER_DAY = -1_934.136_261 / 36_525.0

# size: mean and share of cos N; turn: degrees of sin N. Pugh (1987), Tides, Surges and Mean Sea-Level, table 4.3, after
# Doodson & Warburg (1941)
_MODULATION = {
    "M2": (1.000, -0.037, -2.1),
    "K2": (1.024, 0.286, -17.7),
    "K1": (1.006, 0.115, -8.9),
    "O1": (1.009, 0.187, 10.8),
}
# powers of these by which a line is modulated
_FACTORS: dict[str, dict[str, float]] = {
    **{name: {} for name in ("S1", "S2", "P1", "T2", "pi1", "S4")},
    **{name: {"M2": 1.0} for name in ("M2", "N2", "nu2", "mu2", "lambda2", "MS4")},
    **{name: {"O1": 1.0} for name in ("O1", "Q1", "2Q1", "sigma1")},
    **{name: {"M2": 2.0} for name in ("M4", "MN4", "2MS6")},
    **{name: {"K1": 1.0} for name in ("K1", "SK3")},
    "K2": {"K2": 1.0},
    "M3": {"M2": 1.5},
    "M6": {"M2": 3.0},
    "MK3": {"M2": 1.0, "K1": 1.0},
    "MO3": {"M2": 1.0, "O1": 1.0},
    "MK4": {"M2": 1.0, "K2": 1.0},
}


def nodal_modulation(name: str, days: float) -> tuple[float, float] | None:
    """Size and turn of a line against its mean over 18.6 years.

    Parameters
    ----------
    name : str
        Darwin name.
    days : float
        Days from 1 January 2000 00:00 UTC.

    Returns
    -------
    factor : float
        f; 1 for solar lines.
    angle : float
        u, radians: a line of mean amplitude H and lag g is seen as f H cos(V + u - g).

    Both are None where the modulation of the line follows no simple rule (the perigee turns it too).

    References
    ----------
    Pugh, D. T. (1987), Tides, Surges and Mean Sea-Level, Wiley, table 4.3.

    Examples
    --------
    >>> factor, angle = nodal_modulation("O1", 365.25 * 6.4)  # June 2006, node at the equinox
    >>> round(factor, 2), abs(angle) < 0.02
    (1.2, True)
    """
    if name not in _FACTORS:
        return None
    node = np.radians(_NODE_DEG + _NODE_DEG_PER_DAY * days)
    factor, angle = 1.0, 0.0
    for parent, power in _FACTORS[name].items():
        mean, swing, turn_deg = _MODULATION[parent]
        factor *= float(mean + swing * np.cos(node)) ** power
        angle += power * float(np.radians(turn_deg) * np.sin(node))
    return factor, angle
