"""Record error to be expected of recorders that are not yet laid: the site stage without data.

What the site stage knows of the phasor when noise and drift are given depends on the days, not on what is measured.
Only the drift time constants are told by the data; for each of a few true drifts the data without noise are put in
and the posterior of the time constant is summed as the site stage does. The equations are in docs/theory/candidates.md.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from massfit.annual.design import DriftTerm, build_design
from massfit.annual.evidence import ANNUAL, DriftBasis
from massfit.annual.nodes import TIMED, Nodes
from massfit.annual.noise import NoiseModel
from massfit.annual.record import ReducedRecord
from massfit.constants import JULIAN_YEAR_DAYS
from massfit.settings import Priors

Floats = NDArray[np.float64]

DAY = np.timedelta64(1, "D")

_SHARES = np.array([1.0, 3.0, 5.0]) / 6.0  # middles of three equal parts of the prior
_PRIOR_NODES = 33
_STEP = 0.02  # of the logarithm of a time constant, for differences
_NEAR = np.linspace(-5.0, 5.0, 25)  # in widths of the posterior of a logarithm


def planned_recorder(
    label: str, start: np.datetime64, days: int, *, drift: str = "exponential+linear", first_day: int = 0
) -> ReducedRecord:
    """Make a recorder that is to be laid, with a mean for every day.

    Parameters
    ----------
    label : str
        Unique at its site.
    start : datetime64
        When it reaches the bottom.
    days : int
        Until when it records, days after `start`.
    drift : str
        As of :class:`massfit.annual.record.ReducedRecord`.
    first_day : int
        Days after `start` at which the record begins.

    Returns
    -------
    ReducedRecord
        Its pressure is zero: what is measured is not known.

    Examples
    --------
    >>> recorder = planned_recorder("next", np.datetime64("2027-01-01"), 730)
    >>> len(recorder.time), str(recorder.time[-1])[:10]
    (730, '2028-12-30')
    """
    begin = start.astype("datetime64[ns]")
    time = begin + np.timedelta64(12, "h") + np.arange(first_day, days) * DAY
    return ReducedRecord(label, time, np.zeros(len(time)), np.empty((0, len(time))), begin, drift)


def years_of_record(years: float, *, drift: str = "exponential+linear") -> ReducedRecord:
    """One recorder for so many years, from a 1 January on: the date shifts the phase of its error only a little."""
    return planned_recorder("planned", np.datetime64("2027-01-01"), round(years * JULIAN_YEAR_DAYS), drift=drift)


def expected_covariance(
    recorders: Sequence[ReducedRecord], noise: NoiseModel, *, reference_year: int, priors: Priors
) -> Floats:
    """Covariance of the annual phasor that the site stage is expected to find, level, slope, decay and steps free.

    Parameters
    ----------
    recorders : sequence of ReducedRecord
        Their days, starts, forms of drift and steps count; a form that is to be found, "compare", counts as
        "exponential+linear".
    noise : NoiseModel
        One white noise for each recorder, or one for all.
    reference_year : int
        Phases count from 1 January 00:00 UTC of this year.
    priors : Priors

    Returns
    -------
    (2, 2) array
        Pa2, the mean over nine drifts that are equally likely before: size and time constant at the middles of
        thirds of their priors. Noise is taken as known.

    Examples
    --------
    Two years of white noise, without drift: the variance of each component is 2 w^2 / n.

    >>> recorder = planned_recorder("next", np.datetime64("2027-01-01"), 731, drift="none")
    >>> noise = NoiseModel(np.zeros(0), np.zeros(0), np.array([50.0]))
    >>> covariance = expected_covariance([recorder], noise, reference_year=2027, priors=Priors())
    >>> (covariance * 731 / (2 * 50.0**2)).round(2).diagonal()
    array([1., 1.])
    """
    plain = [_with_known_form(recorder) for recorder in recorders]
    design = build_design(plain, reference_year=reference_year, priors=priors)
    white = np.broadcast_to(noise.white, len(plain)) if len(noise.white) == 1 else noise.white
    basis = DriftBasis(design)
    reduction = basis.reduce(design.covariance(NoiseModel(noise.rates, noise.variances, white)))
    sums = _Sums(
        reduction.covariance[np.ix_(ANNUAL, ANNUAL)], reduction.leak[ANNUAL], reduction.normal, reduction.precision
    )
    if not design.terms:
        return sums.covariance
    return np.asarray(np.mean([_at_share(sums, basis, share) for share in _SHARES], axis=0))


def _with_known_form(recorder: ReducedRecord) -> ReducedRecord:
    return replace(recorder, drift="exponential+linear") if recorder.drift == "compare" else recorder


@dataclass(frozen=True)
class _Sums:
    """What is left of the fit once level, slope, steps and harmonics are eliminated, on the basis of the decays."""

    covariance: Floats  # (2, 2) of the phasor without decays
    leak: Floats  # (2, B) response of the phasor to each column
    normal: Floats  # (B, B)
    precision: float  # of the size of a decay

    def without(self, columns: Floats) -> "_Sums":
        """Eliminate decays (B, D) too."""
        gain = np.linalg.inv(columns.T @ self.normal @ columns + self.precision * np.eye(columns.shape[1]))
        leak, cross = self.leak @ columns, columns.T @ self.normal
        return _Sums(
            self.covariance + leak @ gain @ leak.T,
            self.leak - leak @ gain @ cross,
            self.normal - cross.T @ gain @ cross,
            self.precision,
        )


def _at_share(sums: _Sums, basis: DriftBasis, share: float) -> Floats:
    """Covariance where every true time constant lies at one share of its prior, mean over sizes of the decays.

    The time constants are summed over in turn, the others held at the truth.
    """
    terms = basis.design.terms
    truth = np.array([np.log(term.low) + share * np.log(term.high / term.low) for term in terms])
    columns = [basis.of_term(place, _nodes(term, truth[[place]])) for place, term in enumerate(terms)]
    known = sums.without(np.column_stack(columns)).covariance
    total = known.copy()
    for place in range(len(terms)):
        others = [np.zeros((len(columns[0]), 0)), *(own for i, own in enumerate(columns) if i != place)]
        total += _summed_over_time(sums.without(np.column_stack(others)), basis, place, float(truth[place])) - known
    return total


def _nodes(term: DriftTerm, log_time: Floats) -> Nodes:
    form = next(form for form in term.forms if form in TIMED)
    return Nodes(np.full(len(log_time), form), np.asarray(log_time), np.full(len(log_time), 1.0 / len(log_time)))


def _summed_over_time(sums: _Sums, basis: DriftBasis, place: int, truth: float) -> Floats:
    """Covariance of the posterior over one time constant for data that are one decay without noise, mean over sizes."""
    term = basis.design.terms[place]
    low, high = np.log(term.low), np.log(term.high)
    below, true, above = basis.of_term(place, _nodes(term, np.array([truth - _STEP, truth, truth + _STEP]))).T
    sizes = ndtri(0.5 * (1.0 + _SHARES)) / np.sqrt(sums.precision)
    near = truth + np.outer(_widths(sums, true, (above - below) / (2.0 * _STEP), sizes, high - low), _NEAR)
    grid = np.unique(np.concatenate([np.linspace(low, high, _PRIOR_NODES), near.ravel()]).clip(low, high))
    columns = basis.of_term(place, _nodes(term, grid))
    weight, response = sums.normal @ columns, sums.leak @ columns
    variance = 1.0 / (sums.precision + np.sum(columns * weight, axis=0))
    halves = 0.5 * np.diff(grid)
    log_prior = np.log(np.append(halves, 0.0) + np.append(0.0, halves)) + 0.5 * np.log(variance)
    right = np.outer(sizes, true @ weight)
    log_mass = log_prior + 0.5 * right**2 * variance
    mass = np.exp(log_mass - log_mass.max(axis=1, keepdims=True))
    mass /= mass.sum(axis=1, keepdims=True)
    # (2, size, node)
    phasor = np.multiply.outer(sums.leak @ true, sizes)[:, :, None] - response[:, None] * (right * variance)
    away = phasor - np.sum(phasor * mass, axis=2, keepdims=True)
    between = np.einsum("iqg,qg,jqg->ij", away, mass, away) / len(sizes)
    return np.asarray(sums.covariance + (response * variance * mass.mean(axis=0)) @ response.T + between)


def _widths(sums: _Sums, true: Floats, slope: Floats, sizes: Floats, log_range: float) -> Floats:
    """Give the standard deviation of the logarithm of a time constant for every size, to first order."""
    of_true, of_slope = sums.normal @ true, sums.normal @ slope
    information = slope @ of_slope - (slope @ of_true) ** 2 / (sums.precision + true @ of_true)
    return np.asarray(1.0 / np.sqrt(sizes**2 * information + 12.0 / log_range**2))
