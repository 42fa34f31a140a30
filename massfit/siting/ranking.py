"""Every question about the sites of a network, asked one after the other."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.node_integral import SubsetMoments
from massfit.posterior.subsets import SubsetTables, full_scales, subset_posteriors
from massfit.siting.influence import LeftOut, Pull, leave_out, site_pull, site_weights
from massfit.siting.keep_path import CRITERIA, best_subsets, planned_cost
from massfit.siting.subset_sizes import Answer, SubsetSizes, answer_sizes
from massfit.siting.threshold import Sweep, sweep

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class KeepPath:
    """Best subsets of every size by one criterion.

    Parameters
    ----------
    criterion : str
    kept : (n_site, n_site) array of bool
        Row k - 1 holds k sites.
    value : (n_site,) array
        Criterion, Pa, at fixed scales.
    moments : SubsetMoments
        Answers of these subsets.
    """

    criterion: str
    kept: NDArray[np.bool_]
    value: Floats
    moments: SubsetMoments


@dataclass(frozen=True)
class Ranking:
    """What the sites of a network do for its answer.

    Parameters
    ----------
    sites : tuple of str
    whole : SubsetMoments
        One answer, of all sites.
    single : LeftOut
        Without each site.
    groups : tuple of str
    grouped : LeftOut
        Without each group.
    information, leverage : (n_site, 2) array
    pull : Pull, optional
    sizes : SubsetSizes
    by : Sweep
        In an order the phasors have no say in.
    agreeable : Sweep
        Those first that lie nearest to the prediction from the others: a warning, not an answer.
    paths : tuple of KeepPath
    """

    sites: tuple[str, ...]
    whole: SubsetMoments
    single: LeftOut
    groups: tuple[str, ...]
    grouped: LeftOut
    information: Floats
    leverage: Floats
    pull: Pull | None
    sizes: SubsetSizes
    by: Sweep
    agreeable: Sweep
    paths: tuple[KeepPath, ...]


def rank_network(
    tables: SubsetTables,
    by: Floats,
    residual: Floats,
    *,
    per_size: int,
    rng: np.random.Generator,
    with_pull: bool = True,
    answer: Answer = subset_posteriors,
    progress: Callable[[int, int], None] | None = None,
) -> Ranking:
    """Ask every question about the sites of a network.

    Parameters
    ----------
    tables : SubsetTables
    by : (n_site,) array
        Sites of small values are kept first.
    residual : (n_site,) array
        Standardised residual of each site under the prediction from the others.
    per_size : int
        Random subsets of each size.
    rng : numpy.random.Generator
    with_pull : bool
        Whether to find how far each site could pull: half of the work.
    answer : callable
        Who answers the random subsets.
    progress : callable, optional
        Called with the number of steps done and of all.

    Returns
    -------
    Ranking
    """
    count, seen = tables.site_count, tables.observations
    steps = 5 + (count if with_pull else 0)

    def done(step: int) -> None:
        if progress is not None:
            progress(step, steps)

    everything = np.ones((1, count), dtype=bool)
    whole = subset_posteriors(tables, everything)
    single = leave_out(tables, ~np.eye(count, dtype=bool), whole)
    done(1)
    names = tuple(name for name in dict.fromkeys(seen.group) if name and 0 < seen.group.count(name) < count)
    without = np.array([[own != name for own in seen.group] for name in names], dtype=bool).reshape(-1, count)
    grouped = (
        leave_out(tables, without, whole) if names else LeftOut(without, single.moments.take(np.arange(0)), *_NONE)
    )
    network = tables.alone if tables.sharing is None else tables.sharing
    scales = full_scales(network)
    information, leverage = site_weights(network, scales)
    paths = []
    for criterion in CRITERIA:
        kept, value = best_subsets(planned_cost(network, scales, criterion), count)
        paths.append(KeepPath(criterion, kept, value, subset_posteriors(tables, kept)))
    done(2)
    sweeps = sweep(tables, by), sweep(tables, residual)
    done(3)
    sizes = answer_sizes(tables, per_size, rng, answer)
    done(5)
    pull = site_pull(tables, whole, progress=lambda k, _: done(5 + k)) if with_pull else None
    return Ranking(seen.sites, whole, single, names, grouped, information, leverage, pull, sizes, *sweeps, tuple(paths))


_NONE = np.zeros((0, 2)), np.zeros((0, 2))
