"""What the answer would be with fewer sites: random subsets of every size, and the smallest network that will do."""

from collections.abc import Callable
from dataclasses import dataclass
from itertools import combinations
from math import comb

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.node_integral import SubsetMoments
from massfit.posterior.subsets import SubsetTables, subset_posteriors

Kept = NDArray[np.bool_]
Answer = Callable[[SubsetTables, Kept], SubsetMoments]
"""Answers subsets, as :func:`massfit.posterior.subsets.subset_posteriors` does, here or elsewhere."""


@dataclass(frozen=True)
class SubsetSizes:
    """Answers of random subsets.

    Parameters
    ----------
    kept : (n, n_site) array of bool
    moments : SubsetMoments
        n answers.
    """

    kept: Kept
    moments: SubsetMoments

    @property
    def size(self) -> NDArray[np.int64]:
        """(n,), sites in each subset."""
        return np.asarray(self.kept.sum(axis=1))

    def widths(self, size: int) -> NDArray[np.float64]:
        """Widths of the subsets of one size, Pa, in ascending order."""
        return np.sort(self.moments.width[self.size == size])

    def smallest(self, width: float, share: float) -> int | None:
        """Least size of which this share of the subsets is at most so wide (Pa); None where there is none.

        Every larger size must be as good: a size that a lucky handful reaches does not count.
        """
        count = self.kept.shape[1]
        good = [np.mean(self.widths(size) <= width * (1 + 1e-9)) >= share for size in range(1, count + 1)]
        lasting = [all(good[start:]) for start in range(count)]
        return lasting.index(True) + 1 if any(lasting) else None


def random_subsets(site_count: int, per_size: int, rng: np.random.Generator) -> Kept:
    """Draw subsets of every size from one site to all; all of a size where there are no more than asked for.

    Parameters
    ----------
    site_count : int
    per_size : int
    rng : numpy.random.Generator

    Returns
    -------
    (n, site_count) array of bool
        No subset twice.

    Examples
    --------
    >>> kept = random_subsets(4, 3, np.random.default_rng(1))
    >>> np.bincount(kept.sum(axis=1)).tolist()
    [0, 3, 3, 3, 1]
    """
    kept: list[Kept] = []
    for size in range(1, site_count + 1):
        if comb(site_count, size) <= per_size:
            chosen: set[tuple[int, ...]] = set(combinations(range(site_count), size))
        else:
            chosen = set()
            while len(chosen) < per_size:
                chosen.add(tuple(sorted(rng.choice(site_count, size, replace=False).tolist())))
        kept.extend(np.isin(np.arange(site_count), sites) for sites in sorted(chosen))
    return np.array(kept)


def answer_sizes(
    tables: SubsetTables, per_size: int, rng: np.random.Generator, answer: Answer = subset_posteriors
) -> SubsetSizes:
    """Answer random subsets of every size, the scales integrated anew for each.

    Parameters
    ----------
    tables : SubsetTables
    per_size : int
        Largest number of subsets of a size.
    rng : numpy.random.Generator
    answer : callable
        Who answers them.

    Returns
    -------
    SubsetSizes
    """
    kept = random_subsets(tables.site_count, per_size, rng)
    return SubsetSizes(kept, answer(tables, kept))
