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
    parts = {
        "before the gap": (window.start, min(gap.start, window.end)),
        "in the gap": (max(gap.start, window.start), min(gap.end, window.end)),
        "after the gap": (max(gap.end, window.start), window.end),
    }
    found = []
    for name, (start, end) in parts.items():
        if not start < end:
            continue
        span = Span(start, end)
        days = np.array([span.overlap_days(_calendar_year(year)) for year in years])
        if days.sum() > 0.0:
            draws = np.einsum("y,nyc->nc", days / days.sum(), year_draws)
            phasor = complex(as_complex(draws.mean(axis=0)))
            found.append(BridgePart(name, span, phasor, np.cov(draws, rowvar=False)))
    return tuple(found)


def _calendar_year(year: int) -> Span:
    return Span(np.datetime64(f"{year:04d}-01-01", "s"), np.datetime64(f"{year + 1:04d}-01-01", "s"))
