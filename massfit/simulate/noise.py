"""Random series with known spectra.

They are made by routes that the analysis does not use: flicker noise by shaping
a spectrum, red noise by its exact recursion at time scales of its own.
"""

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

# flicker noise has no variance of its own; its size is quoted between these two periods
LONGEST_PERIOD_DAYS = 1500.0
SHORTEST_PERIOD_DAYS = 2.0


def ornstein_uhlenbeck(
    rng: np.random.Generator, shape: tuple[int, ...], *, step_days: float, time_scale_days: float
) -> NDArray[np.float64]:
    """Stationary Ornstein-Uhlenbeck series of unit standard deviation.

    Parameters
    ----------
    rng : numpy.random.Generator
    shape : tuple of int
        Any leading dimensions; time is last.
    step_days, time_scale_days : float
        Sampling interval and decay time, days.

    Returns
    -------
    array of `shape`
        Exact discretisation (Uhlenbeck & Ornstein 1930), autocorrelation exp(-lag / time scale).

    Examples
    --------
    >>> ornstein_uhlenbeck(np.random.default_rng(1), (2, 5), step_days=1.0, time_scale_days=5.0).shape
    (2, 5)
    """
    memory = np.exp(-step_days / time_scale_days)
    shocks = rng.standard_normal(shape) * np.sqrt(1.0 - memory**2)
    shocks[..., 0] /= np.sqrt(1.0 - memory**2)
    return np.asarray(lfilter([1.0], [1.0, -memory], shocks, axis=-1))


def flicker(rng: np.random.Generator, n: int, *, step_days: float) -> NDArray[np.float64]:
    """Flicker (1/f) noise of unit standard deviation between periods of 2 and 1500 days.

    Parameters
    ----------
    rng : numpy.random.Generator
    n : int
        Number of samples.
    step_days : float
        Sampling interval, days.

    Returns
    -------
    (n,) array
        Power spectrum 1 / (f ln(1500 / 2)) (one-sided, per cycle per day) from the sampling limit down to one
        cycle in the length of twice the series, made by shaping white noise (Timmer & Koenig 1995).

    Examples
    --------
    >>> flicker(np.random.default_rng(1), 6, step_days=1.0).shape
    (6,)
    """
    # twice the length, of which half is used, so that the period of the transform is not seen
    length = 2 * n
    frequency = np.fft.rfftfreq(length, step_days)[1:]
    spectrum = 1.0 / (frequency * np.log(LONGEST_PERIOD_DAYS / SHORTEST_PERIOD_DAYS))
    # one-sided spectrum S: E|X_k|^2 = S length / (2 step)
    scale = np.sqrt(spectrum * length / (4.0 * step_days))
    coefficients = scale * (rng.standard_normal(frequency.size) + 1j * rng.standard_normal(frequency.size))
    return np.fft.irfft(np.concatenate([[0.0], coefficients]), length)[:n]
