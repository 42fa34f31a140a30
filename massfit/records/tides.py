"""Short tides by least squares, together with everything slower that a record holds."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve
from scipy.sparse import csr_array

from massfit.records.background import background_design
from massfit.records.clean import find_spikes
from massfit.records.inference import Companion, companions, expected_of
from massfit.records.nodal import nodal_modulation
from massfit.records.record import TidalConstant
from massfit.records.tidal_lines import SHORT_TIDES, greenwich_argument, parted_lines

_SEGMENT_HOURS = 8766
"""Hours of data of a segment, at least: a year, over which the node moves an amplitude by a few per cent."""
_ROUNDS = 4
"""Fits of a segment, at most, while spikes are looked for."""
_NEAR_CYCLES_PER_DAY = 0.1
"""What the record holds so close to a line is taken for its noise: the tides of a species lie within twice that."""
_LEAST_BINS = 8
_LEAST_NOISE = 1.0
"""Pa2 a sample: the digits of a recorder."""
_RIDGE = 1.0e-6
"""Keeps splines without data at zero; samples count as 1."""


@dataclass(frozen=True)
class TideFit:
    """Short tides of one record.

    Parameters
    ----------
    tide : (n,) array
        Pa.
    spikes : (n,) array of bool
        Values that were kept out of the fit.
    constants : tuple of TidalConstant
        Means over the segments, largest first.
    merged : tuple of str
        Lines that some segment is too short to part from a larger neighbour.
    segments : int
        How many were fitted.
    """

    tide: NDArray[np.float64]
    spikes: NDArray[np.bool_]
    constants: tuple[TidalConstant, ...]
    merged: tuple[str, ...]
    segments: int


def fit_short_tides(
    days: NDArray[np.float64],
    pressure: NDArray[np.float64],
    *,
    spread: NDArray[np.float64] | float = 0.0,
    breaks: Sequence[float] | NDArray[np.float64] = (),
    seams: Sequence[float] = (),
) -> TideFit:
    """Fit the short tides of a record.

    The record is cut into segments of a year of data or somewhat more, so that
    the 18.6-year modulation is followed. In each the lines that its length parts are
    fitted together with a spline background, which takes up drift, weather
    and the annual cycle; spikes against the fit are left out and the fit repeated. Where a segment is too short to
    part P1 from K1 or K2 from S2 the smaller is removed as well, held to the ratio of the equilibrium tide as far as
    the noise of the record leaves it open. The constants are those of the fit without such lines.

    Parameters
    ----------
    days : (n,) array
        Days from 1 January 2000 00:00 UTC, increasing.
    pressure : (n,) array
        Pa; means over an hour or samples.
    spread : (n,) array or float
        Variance of the sample times within each mean, days squared; a mean over an
        interval attenuates a line of rate w by 1 - w^2 spread / 2.
    breaks : (k,) array
        Times at which a new level begins, days, increasing.
    seams : (k,) sequence of float
        Times at which the gain changes, so that a new segment begins, days, increasing.

    Returns
    -------
    TideFit

    References
    ----------
    Foreman, M. G. G. & Henry, R. F. (1989), Adv. Water Resour. 12, 109-120, for harmonic
    analysis by least squares and the criterion of Rayleigh.

    Examples
    --------
    >>> days = np.arange(24 * 60) / 24
    >>> fit = fit_short_tides(days, 300 * np.cos(2 * np.pi * SHORT_TIDES["M2"] * days) + 5 * days)
    >>> fit.constants[0].name, round(fit.constants[0].amplitude, 3)
    ('M2', 300.0)
    """
    spread = np.broadcast_to(np.asarray(spread, dtype=float), days.shape)
    edges = _segments(days, seams)
    tide, spikes = np.empty(days.size), np.zeros(days.size, dtype=bool)
    phasors: dict[str, list[complex]] = {}
    variances: dict[str, list[float]] = {}
    merged: set[str] = set()
    for start, stop in pairwise(edges):
        part = slice(start, stop)
        names = parted_lines(days[stop - 1] - days[start])
        merged |= set(SHORT_TIDES) - set(names)
        tides = _tidal_design(days[part], spread[part], names)
        background = background_design(days[part], np.asarray(breaks, dtype=float))
        coefficients, residual, spikes[part] = _robust_fit(background, tides, pressure[part])
        tide[part] = tides @ coefficients
        inferred = companions(names, 0.5 * float(days[start] + days[stop - 1]))
        if inferred:
            tide[part], spikes[part] = _with_companions(days[part], pressure[part], spread[part], background, inferred)
        noise = _amplitude_variances(days[part], np.where(spikes[part], 0.0, residual), names)
        for name, cosine, sine, variance in zip(names, *coefficients.reshape(2, -1), noise, strict=True):
            phasors.setdefault(name, []).append(complex(cosine, sine))
            variances.setdefault(name, []).append(float(variance))
    middle = 0.5 * float(days[0] + days[-1]) if days.size else 0.0
    constants = [_constant(name, phasors[name], variances[name], middle) for name in phasors]
    constants.sort(key=lambda constant: -constant.amplitude)
    unparted = tuple(name for name in SHORT_TIDES if name in merged)
    return TideFit(tide, spikes, tuple(constants), unparted, len(edges) - 1)


def _segments(days: NDArray[np.float64], seams: Sequence[float]) -> NDArray[np.int64]:
    """First sample of every segment, and the number of samples."""
    stretches = pairwise(np.unique([0, *np.searchsorted(days, seams), days.size]).tolist()) if days.size else [(0, 0)]
    parts = [
        np.linspace(start, stop, max(1, (stop - start) // _SEGMENT_HOURS) + 1).astype(np.int64)
        for start, stop in stretches
    ]
    return np.concatenate([parts[0], *(part[1:] for part in parts[1:])])


def _constant(name: str, phasors: list[complex], variances: list[float], middle: float) -> TidalConstant:
    phasor = complex(np.mean(phasors))
    factor, angle = nodal_modulation(name, middle) or (None, None)
    return TidalConstant(
        name=name,
        cycles_per_day=SHORT_TIDES[name],
        amplitude=abs(phasor),
        greenwich_lag=float((np.angle(phasor) + greenwich_argument(name)) % (2.0 * np.pi)),
        amplitude_sd=float(np.sqrt(np.sum(variances))) / len(variances),
        nodal_factor=factor,
        nodal_angle=angle,
    )


def _amplitude_variances(
    days: NDArray[np.float64], residual: NDArray[np.float64], names: Sequence[str]
) -> NDArray[np.float64]:
    """Variance of each amplitude from the spectrum of what is left around its line: (len(names),), Pa2.

    A level of power S (the variance, for white noise) gives an amplitude the variance 2 S / n. The lines
    that were fitted took their own bins, so that the mean over the others counts.
    """
    hour = np.round((days - days[0]) * 24.0).astype(np.int64)
    power = np.abs(np.fft.rfft(np.bincount(hour, residual))) ** 2 / days.size
    frequency = np.arange(power.size) * 24.0 / (hour[-1] + 1)
    lines = np.array([SHORT_TIDES[name] for name in names])
    width = max(_NEAR_CYCLES_PER_DAY, 0.5 * _LEAST_BINS * 24.0 / (hour[-1] + 1))
    level = np.empty(lines.size)
    for place, line in enumerate(lines):
        near = np.abs(frequency - line) <= width
        fitted = np.count_nonzero(np.abs(lines - line) <= width)
        level[place] = power[near].sum() / max(np.count_nonzero(near) - fitted, 1)
    return np.asarray(2.0 * level / days.size)


def _tidal_design(
    days: NDArray[np.float64],
    spread: NDArray[np.float64],
    names: Sequence[str],
) -> NDArray[np.float64]:
    """Cosines of all lines, then sines, as means over each interval."""
    design = np.empty((2 * len(names), days.size))
    for row, name in enumerate(names):
        rate = 2.0 * np.pi * SHORT_TIDES[name]
        attenuation = 1.0 - 0.5 * rate**2 * spread
        design[row] = attenuation * np.cos(rate * days)
        design[row + len(names)] = attenuation * np.sin(rate * days)
    return design.T


def _with_companions(
    days: NDArray[np.float64],
    pressure: NDArray[np.float64],
    spread: NDArray[np.float64],
    background: csr_array,
    inferred: Sequence[Companion],
) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Tide and spikes with the lines that are not parted, each held to what its larger neighbour lets expect.

    The more the noise near a line leaves open, the closer it is held. Noise and size of the larger line are those of
    the fit before; the first begins with what a fit without the companions leaves.
    """
    parted = parted_lines(days[-1] - days[0])
    names = [*parted, *(each.name for each in inferred)]
    tides = _tidal_design(days, spread, names)
    own = np.concatenate([np.arange(len(parted)), len(names) + np.arange(len(parted))])
    lines = np.zeros(2 * len(names))
    lines[own], residual, spikes = _robust_fit(background, tides[:, own], pressure)
    for _ in range(_ROUNDS):
        levels = 0.5 * days.size * _amplitude_variances(days, np.where(spikes, 0.0, residual), names)
        penalty = expected_of(inferred, names, lines, np.maximum(levels, _LEAST_NOISE))
        lines, residual, spikes = _robust_fit(background, tides, pressure, penalty)
    return tides @ lines, spikes


def _robust_fit(
    background: csr_array,
    tides: NDArray[np.float64],
    pressure: NDArray[np.float64],
    penalty: NDArray[np.float64] | None = None,
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.bool_]]:
    """Coefficients of the tides, what the whole fit leaves, and the spikes against it."""
    centred = pressure - np.median(pressure)
    spikes = np.zeros(pressure.size, dtype=bool)
    whole, whole_right = _normal_equations(background, tides, centred)
    whole[np.diag_indices_from(whole)] += _RIDGE
    if penalty is not None:
        whole[-len(penalty) :, -len(penalty) :] += penalty
    for _ in range(_ROUNDS):
        spike, spike_right = _normal_equations(background[spikes], tides[spikes], centred[spikes])
        solution = cho_solve(cho_factor(whole - spike, check_finite=False), whole_right - spike_right)
        curve, lines = solution[: -tides.shape[1]], solution[-tides.shape[1] :]
        residual = centred - background @ curve - tides @ lines
        found = find_spikes(residual)
        if np.array_equal(found, spikes):
            break
        spikes = found
    return lines, residual, spikes


def _normal_equations(
    background: csr_array, tides: NDArray[np.float64], values: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    mixed = background.T @ tides
    normal = np.block([[(background.T @ background).toarray(), mixed], [mixed.T, tides.T @ tides]])
    return normal, np.concatenate([background.T @ values, tides.T @ values])
