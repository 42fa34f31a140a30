"""The network's own answer before, in and after a gap between satellites."""

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.gravity.field import Span
from massfit.phasor import as_complex

LEAST_GAP_DAYS = 75.0
"""Two missing months in a row and a little; single months are missing in every series."""


@dataclass(frozen=True, eq=False)
class BridgePart:
    """The network's cycle in one part of the period.

    Parameters
    ----------
    name : str
        "before the gap", "in the gap" or "after the gap".
    span : Span
    phasor : complex
        Mean cycle of the part, Pa.
    covariance : (2, 2) array
        Pa2.
    """

    name: str
    span: Span
    phasor: complex
    covariance: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class BridgeStep:
    """How far the network's cycle in a gap lies from that of the other months, and how much of that the records say.

    Parameters
    ----------
    phasor : complex
        Cycle in the gap less that before and after it, Pa.
    covariance : (2, 2) array
        Pa2.
    assumed_sd : float
        Standard deviation of each component that the model assumes before it sees a record, Pa.
    """

    phasor: complex
    covariance: NDArray[np.float64]
    assumed_sd: float

    @property
    def learned(self) -> float:
        """Part of the assumed variance that the records take away, from 0 (nothing is learned) to 1."""
        return float(np.clip(1.0 - np.trace(self.covariance) / (2.0 * self.assumed_sd**2), 0.0, 1.0))


def largest_gap(spans: Sequence[Span]) -> Span | None:
    """Find the longest time without a month.

    Parameters
    ----------
    spans : sequence of Span

    Returns
    -------
    Span or None
        None where none is longer than `LEAST_GAP_DAYS`.

    Examples
    --------
    >>> edges = [("2017-04-01", "2017-05-01"), ("2017-05-01", "2017-06-01"), ("2018-06-01", "2018-07-01")]
    >>> gap = largest_gap([Span(np.datetime64(start), np.datetime64(end)) for start, end in edges])
    >>> str(gap.start), str(gap.end)
    ('2017-06-01', '2018-06-01')
    """
    ordered = sorted(spans, key=lambda span: span.start)
    gaps = [Span(one.end, other.start) for one, other in itertools.pairwise(ordered)]
    longest = max(gaps, key=lambda gap: gap.days, default=None)
    return longest if longest is not None and longest.days > LEAST_GAP_DAYS else None


def bridged(year_draws: NDArray[np.float64], years: Sequence[int], window: Span, gap: Span) -> tuple[BridgePart, ...]:
    """Average the network's cycle of each year over the parts of a period.

    Parameters
    ----------
    year_draws : (n, n_year, 2) array
        Draws of the annual phasor of each calendar year, Pa.
    years : sequence of int
    window : Span
        Of the comparison.
    gap : Span

    Returns
    -------
    tuple of BridgePart
        Each year counts by its days in the part; parts without any are left out. A part shorter than a year still takes
        the whole cycle of its year: the model knows no change within one.
    """
    found = []
    for name, span in _parts(window, gap).items():
        days = _days_of(years, span)
        if days.sum() > 0.0:
            found.append(BridgePart(name, span, *_moments(year_draws, days / days.sum())))
    return tuple(found)


def bridge_step(
    year_draws: NDArray[np.float64], years: Sequence[int], window: Span, gap: Span, *, year_sd: float
) -> BridgeStep | None:
    """Compare the network's cycle in a gap with that of the other months.

    Parameters
    ----------
    year_draws : (n, n_year, 2) array
        Draws of the annual phasor of each calendar year, Pa.
    years : sequence of int
    window, gap : Span
    year_sd : float
        Standard deviation of the cycle of one year about the mean that the model assumes, Pa.

    Returns
    -------
    BridgeStep or None
        None where all months are on one side, or every year has the same part of its months in the gap.
    """
    parts = _parts(window, gap)
    inside = _days_of(years, parts.pop("in the gap")) if "in the gap" in parts else np.zeros(len(years))
    rest = sum((_days_of(years, span) for span in parts.values()), np.zeros(len(years)))
    if not inside.sum() > 0.0 or not rest.sum() > 0.0:
        return None
    weight = inside / inside.sum() - rest / rest.sum()
    assumed = year_sd * float(np.sqrt(np.sum(weight**2)))
    return BridgeStep(*_moments(year_draws, weight), assumed) if assumed > 0.0 else None


def _parts(window: Span, gap: Span) -> dict[str, Span]:
    edges = {
        "before the gap": (window.start, min(gap.start, window.end)),
        "in the gap": (max(gap.start, window.start), min(gap.end, window.end)),
        "after the gap": (max(gap.end, window.start), window.end),
    }
    return {name: Span(start, end) for name, (start, end) in edges.items() if start < end}


def _days_of(years: Sequence[int], span: Span) -> NDArray[np.float64]:
    return np.array([span.overlap_days(_calendar_year(year)) for year in years])


def _moments(year_draws: NDArray[np.float64], weight: NDArray[np.float64]) -> tuple[complex, NDArray[np.float64]]:
    """Mean and covariance of a weighted sum of the years."""
    draws = np.einsum("y,nyc->nc", weight, year_draws)
    return complex(as_complex(draws.mean(axis=0))), np.cov(draws, rowvar=False)


def _calendar_year(year: int) -> Span:
    return Span(np.datetime64(f"{year:04d}-01-01", "s"), np.datetime64(f"{year + 1:04d}-01-01", "s"))
