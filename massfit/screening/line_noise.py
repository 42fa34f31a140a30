"""How much noise a record of some years shows at the annual line, from the lines beside it in a longer one.

Near the annual line the spectrum of the dynamics is taken as a power law, S(f) = S1 (f / 1 per year)^-q. What the lines
of a field hold on average for each q follows from its own columns and from all that was fitted to it, and so does the
variance of the annual phasor of a shorter record: both are quadratures over frequency with the response of a
linear estimator. S1 is found for every q, and the answer is the mean over q with the likelihood of Whittle (1953).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import next_fast_len, rfft

from massfit.constants import ANNUAL_RATE, TROPICAL_YEAR_DAYS
from massfit.phasor import annual_basis
from massfit.screening.design import FITTED, Design
from massfit.screening.sums import Floats

SLOPES = np.arange(-0.5, 4.01, 0.25)
"""Powers q that are weighed."""

SLOPE_PRIOR = (1.0, 1.0)
"""Mean and standard deviation of the normal prior of q: white to red, as open-ocean bottom pressure is."""

_FINER = 8  # frequencies to the width of a line


@dataclass(frozen=True, eq=False)
class LineNoise:
    """What the lines of a field and the phasors of shorter records hold of a power law.

    Parameters
    ----------
    line : (n_slope, n_line) array
        Expected square of a line for S1 = 1 per Pa2 yr, Pa2.
    record : (n_slope, n_record) array
        Variance of one component of the annual phasor of a record for S1 = 1 per Pa2 yr, Pa2.
    """

    line: Floats
    record: Floats


def line_noise(design: Design, days: NDArray[np.float64], step_days: float, record_years: Sequence[float]) -> LineNoise:
    """Tables for the times of a field.

    Parameters
    ----------
    design : Design
    days : (n_time,) array
        Times of the field, days since 1 January of the reference year of the design.
    step_days : float
        Length of an interval.
    record_years : sequence of float
        Lengths of records.

    Returns
    -------
    LineNoise
    """
    columns = design.rows(days)
    fitted, waves = columns[:, :FITTED], columns[:, FITTED:]
    kept = waves - fitted @ np.linalg.lstsq(fitted, waves, rcond=None)[0]
    place = np.rint((days - days[0]) / step_days).astype(int)
    on_grid = np.zeros((place[-1] + 1, kept.shape[1]))
    np.add.at(on_grid, place, kept)
    power = _variance(on_grid, step_days)
    pairs = power.reshape(len(SLOPES), -1, 2).sum(axis=-1)
    records = [_variance(_annual_estimator(years, step_days), step_days).mean(axis=-1) for years in record_years]
    return LineNoise(pairs, np.stack(records, axis=-1))


def _annual_estimator(years: float, step_days: float) -> Floats:
    """Weights that turn a record of some years into its annual phasor, (n, 2): level, trend and season are fitted."""
    length = max(round(years * TROPICAL_YEAR_DAYS / step_days), FITTED + 1)
    days = np.linspace(0.5, length - 0.5, length) * step_days
    columns = [np.ones_like(days), days / days[-1] - 0.5, annual_basis(days), annual_basis(days, 2)]
    return np.asarray(np.linalg.pinv(np.column_stack(columns))[2:4].T)


def _variance(weights: Floats, step_days: float) -> Floats:
    """Variance of weighted sums of noise with the spectrum f^-q, f in cycles per year, (n_slope, n_column)."""
    length = next_fast_len(_FINER * weights.shape[0], real=True)
    response = np.abs(rfft(weights, n=length, axis=0)[1:]) ** 2
    spacing = TROPICAL_YEAR_DAYS / (length * step_days)
    frequency = spacing * np.arange(1, response.shape[0] + 1)
    return np.asarray(spacing * frequency ** -SLOPES[:, None] @ response)


@dataclass(frozen=True, eq=False)
class NoiseAtLine:
    """Noise at the annual line of each cell.

    Parameters
    ----------
    density : (n_cell,) array
        One-sided spectral density at the annual line, Pa2 yr.
    slope : (n_cell,) array
        Power by which it falls with frequency.
    record_variance : (n_record, n_cell) array
        Of one component of the annual phasor, Pa2.
    """

    density: Floats
    slope: Floats
    record_variance: Floats


def noise_at_line(squares: Floats, tables: LineNoise) -> NoiseAtLine:
    """Weigh the power laws by what the lines hold.

    Parameters
    ----------
    squares : (n_line, n_cell) array
        Square of each line of what the fit leaves, cosine and sine together, Pa2.
    tables : LineNoise

    Returns
    -------
    NoiseAtLine
    """
    level = np.stack([(squares / expected[:, None]).mean(axis=0) for expected in tables.line])
    count = squares.shape[0]
    with np.errstate(divide="ignore"):  # a cell that never moves has no noise
        surprise = count * np.log(level) + np.log(tables.line).sum(axis=1)[:, None]
    middle, width = SLOPE_PRIOR
    score = -surprise - 0.5 * ((SLOPES[:, None] - middle) / width) ** 2
    score = np.where(level > 0.0, score, 0.0)
    weight = np.exp(score - score.max(axis=0))
    weight /= weight.sum(axis=0)
    shares = weight * level
    return NoiseAtLine(shares.sum(axis=0), SLOPES @ weight, tables.record.T @ shares)


def attenuation(step_days: float) -> float:
    """Share of the annual line that a mean over an interval keeps.

    Examples
    --------
    >>> round(attenuation(TROPICAL_YEAR_DAYS / 12.0), 5)
    0.98862
    """
    return float(np.sinc(ANNUAL_RATE * step_days / (2.0 * np.pi)))
