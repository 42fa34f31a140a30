"""The annual phasor: one complex number for amplitude and timing.

``p(t) = Re[Z exp(-i w (t - t0))] = a cos w(t-t0) + b sin w(t-t0)`` with
``Z = a + i b`` (a *in phase*, b *quadrature*), w the tropical annual rate and t0
1 January 00:00 UTC of the network's reference year.
"""

from datetime import datetime, timedelta

import numpy as np
from numpy.typing import NDArray

from massfit.constants import ANNUAL_RATE, TROPICAL_YEAR_DAYS

COMPONENTS = ("in_phase", "quadrature")


def days_since(time: NDArray[np.datetime64], reference_year: int) -> NDArray[np.float64]:
    """Days from 1 January 00:00 UTC of the reference year.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.
    reference_year : int

    Returns
    -------
    (n,) array of float
        Days.

    Examples
    --------
    >>> days_since(np.array(["2016-01-02T12:00"], dtype="datetime64[ns]"), 2016)
    array([1.5])
    """
    origin = np.datetime64(f"{reference_year:04d}-01-01T00:00:00", "ns")
    elapsed = np.asarray(time, dtype="datetime64[ns]") - origin
    return elapsed.astype(np.int64) / 86_400e9


def annual_basis(days: NDArray[np.float64], harmonic: int = 1) -> NDArray[np.float64]:
    """Cosine and sine of a harmonic of the year.

    Parameters
    ----------
    days : (n,) array
        Days from the phase origin.
    harmonic : int
        1 annual, 2 semi-annual.

    Returns
    -------
    (n, 2) array
        Columns cos and sin.
    """
    angle = harmonic * ANNUAL_RATE * np.asarray(days, dtype=float)
    return np.column_stack([np.cos(angle), np.sin(angle)])


def as_components(phasor: NDArray[np.complex128] | complex) -> NDArray[np.float64]:
    """Split complex phasors into a last axis of (in phase, quadrature)."""
    values = np.asarray(phasor, dtype=complex)
    return np.stack([values.real, values.imag], axis=-1)


def as_complex(components: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Join a last axis of (in phase, quadrature) into complex phasors."""
    values = np.asarray(components, dtype=float)
    return np.asarray(values[..., 0] + 1j * values[..., 1], dtype=complex)


def admittance_matrix(admittance: NDArray[np.complex128] | complex) -> NDArray[np.float64]:
    """Real 2 x 2 matrices by which complex factors act on (in phase, quadrature).

    Parameters
    ----------
    admittance : (...,) array of complex

    Returns
    -------
    (..., 2, 2) array
        ``[[Re, -Im], [Im, Re]]``.
    """
    values = np.asarray(admittance, dtype=complex)
    rows = [np.stack([values.real, -values.imag], -1), np.stack([values.imag, values.real], -1)]
    return np.stack(rows, axis=-2)


def peak_days(phasor: NDArray[np.complex128] | complex) -> NDArray[np.float64]:
    """Day of the maximum after 1 January 00:00 UTC, in [0, 365.2422).

    Examples
    --------
    >>> float(peak_days(1j)).__round__(4)
    91.3106
    """
    turns = np.angle(np.asarray(phasor, dtype=complex)) / (2.0 * np.pi)
    return np.asarray(np.mod(turns, 1.0) * TROPICAL_YEAR_DAYS, dtype=float)


def unwrapped_peak_days(phasors: NDArray[np.complex128]) -> NDArray[np.float64]:
    """Peak days of draws on one branch, so that their regions never wrap.

    Parameters
    ----------
    phasors : (n,) array of complex
        Draws of one phasor.

    Returns
    -------
    (n,) array
        Days; the median lies in [0, 365.2422).
    """
    draws = np.asarray(phasors, dtype=complex)
    centre = np.mean(draws / np.abs(draws))
    turns = np.angle(draws * np.conj(centre)) + np.angle(centre)
    days = turns * TROPICAL_YEAR_DAYS / (2.0 * np.pi)
    return np.asarray(days - np.floor(np.median(days) / TROPICAL_YEAR_DAYS) * TROPICAL_YEAR_DAYS)


def delay_days(admittance: NDArray[np.complex128] | complex) -> NDArray[np.float64]:
    """Days by which a complex factor delays the cycle, in (-182.6, 182.6].

    Examples
    --------
    >>> float(delay_days(1.0 + 0.0j))
    0.0
    """
    return np.asarray(np.angle(np.asarray(admittance, dtype=complex)) * TROPICAL_YEAR_DAYS / (2.0 * np.pi))


def phasor_from_peak(amplitude: float, peak_day: float) -> complex:
    """Phasor of an amplitude and a peak day.

    Examples
    --------
    >>> z = phasor_from_peak(2.0, 0.0)
    >>> (z.real, z.imag)
    (2.0, 0.0)
    """
    return complex(amplitude * np.exp(2j * np.pi * peak_day / TROPICAL_YEAR_DAYS))


def polar_sd(phasor: complex, covariance: NDArray[np.float64]) -> tuple[float, float]:
    """Give the standard deviations of amplitude and peak day, to first order.

    Parameters
    ----------
    phasor : complex
    covariance : (2, 2) array
        Of (in phase, quadrature).

    Returns
    -------
    amplitude_sd : float
        In the unit of the phasor.
    day_sd : float
        Days.

    Examples
    --------
    >>> amplitude_sd, day_sd = polar_sd(1.0j, np.diag([0.04, 0.01]))
    >>> round(amplitude_sd, 3), round(day_sd, 2)
    (0.1, 11.63)
    """
    along = as_components(phasor / abs(phasor))
    across = np.array([-along[1], along[0]])
    radial, turned = along @ covariance @ along, across @ covariance @ across
    return float(np.sqrt(radial)), float(np.sqrt(turned) / abs(phasor) / ANNUAL_RATE)


def polar_covariance(phasor: complex, amplitude_sd: float, day_sd: float) -> NDArray[np.float64]:
    """Give the covariance of the components from independent errors of amplitude and peak day, to first order.

    Parameters
    ----------
    phasor : complex
    amplitude_sd : float
        In the unit of the phasor.
    day_sd : float
        Days.

    Returns
    -------
    (2, 2) array

    Examples
    --------
    >>> covariance = polar_covariance(0.6 - 0.8j, 0.1, 5.0)
    >>> [round(value, 3) for value in polar_sd(0.6 - 0.8j, covariance)]
    [0.1, 5.0]
    """
    along = as_components(phasor / abs(phasor))
    axes = np.array([[along[0], -along[1]], [along[1], along[0]]])
    return np.asarray(axes @ np.diag([amplitude_sd**2, (abs(phasor) * day_sd * ANNUAL_RATE) ** 2]) @ axes.T)


def peak_date(peak_day: float, reference_year: int) -> str:
    """ISO date of a peak day in the reference year.

    Examples
    --------
    >>> peak_date(273.5, 2016)
    '2016-09-30'
    """
    day = peak_day % TROPICAL_YEAR_DAYS
    return (datetime(reference_year, 1, 1) + timedelta(days=day)).date().isoformat()
