"""Pole tide of the ocean: its answer to the centrifugal potential of observed polar motion.

IERS Conventions (2010), section 7.1.4-5, with the secular pole of their 2018 update. The potential of
the wobble (m1, m2) over g is ``-(Omega^2 a^2 / 2 g) sin(2 lat) (m1 cos lon + m2 sin lon)``.
"""

import numpy as np
from numpy.typing import NDArray

from massfit.constants import EARTH_ROTATION_RATE, STANDARD_GRAVITY
from massfit.tables.polar_motion import RADIAN_PER_ARCSECOND, polar_motion_at

GAMMA_2 = 0.6870
"""Real part of 1 + k_2 - h_2 at the period of the wobble (IERS Conventions 2010, section 6.5, from memory)."""

EQUATORIAL_RADIUS = 6_378_136.6
"""m (IERS Conventions 2010, table 1.1)."""

HEIGHT_PER_RADIAN = GAMMA_2 * (EARTH_ROTATION_RATE * EQUATORIAL_RADIUS) ** 2 / (2.0 * STANDARD_GRAVITY)
"""Equilibrium height where sin(2 lat) = 1, on an Earth covered by weightless water, m per rad."""

_MILLIARCSECOND = 1e-3 * RADIAN_PER_ARCSECOND


def secular_pole(time: NDArray[np.datetime64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Secular pole of the 2018 update of the IERS Conventions (2010), section 7.1.4.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    x_s, y_s : (n,) array of float
        Rad.

    Examples
    --------
    >>> x, y = secular_pole(np.array(["2000-01-01"], dtype="datetime64[ns]"))
    >>> [round(float(v[0]) / RADIAN_PER_ARCSECOND, 4) for v in (x, y)]
    [0.055, 0.3205]
    """
    elapsed = np.asarray(time, dtype="datetime64[ns]") - np.datetime64("2000-01-01T00:00:00", "ns")
    years = elapsed.astype(np.int64) / (86_400e9 * 365.25)
    return (55.0 + 1.677 * years) * _MILLIARCSECOND, (320.5 + 3.460 * years) * _MILLIARCSECOND


def wobble_of(
    time: NDArray[np.datetime64], x: NDArray[np.float64], y: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Wobble parameters of given positions of the pole.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.
    x, y : (n,) array of float
        Position of the pole, rad.

    Returns
    -------
    m1, m2 : (n,) array of float
        Rad; m1 = x - x_s, m2 = -(y - y_s).
    """
    x_secular, y_secular = secular_pole(time)
    return x - x_secular, -(y - y_secular)


def observed_wobble(time: NDArray[np.datetime64]) -> tuple[NDArray[np.float64], NDArray[np.float64], int]:
    """Observed wobble parameters.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.

    Returns
    -------
    m1, m2 : (n,) array of float
        Rad.
    predicted : int
        Number of the times whose polar motion is a prediction.

    Raises
    ------
    InputError
        The shipped polar motion does not cover the time.
    """
    x, y, predicted = polar_motion_at(time)
    m1, m2 = wobble_of(time, x, y)
    return m1, m2, int(predicted.sum())


def pole_tide_height(
    latitude_deg: NDArray[np.float64] | float, longitude_deg: NDArray[np.float64] | float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Equilibrium heights per unit of m1 and of m2, without loading or self-attraction.

    Parameters
    ----------
    latitude_deg, longitude_deg : (...,) array
        Degrees north and east; broadcast against each other.

    Returns
    -------
    per_m1, per_m2 : (...,) array of float
        m per rad.

    Examples
    --------
    >>> per_m1, per_m2 = pole_tide_height(45.0, 0.0)
    >>> round(float(per_m1)), float(per_m2)
    (-7577, -0.0)
    """
    latitude, longitude = np.radians(latitude_deg), np.radians(longitude_deg)
    amplitude = -HEIGHT_PER_RADIAN * np.sin(2.0 * latitude)
    return np.asarray(amplitude * np.cos(longitude)), np.asarray(amplitude * np.sin(longitude))
