"""The answer against the number of sites kept, in an order that the phasors have no say in, and in one that they have.

Sites kept because they are quiet are a sample of quiet sites. Sites kept because they agree scatter less than sites do:
the answer claims a width that it does not have. The second order is shown as a warning beside the first.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.posterior.node_integral import SubsetMoments
from massfit.posterior.observations import Observations
from massfit.posterior.subsets import SubsetTables, subset_posteriors

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Sweep:
    """Answers with the first n sites of an order, n from 1 to all.

    Parameters
    ----------
    order : (n_site,) array of int
    value : (n_site,) array
        By which the sites are ordered, in the order of the sweep.
    moments : SubsetMoments
        One answer for each number of sites.
    """

    order: NDArray[np.int64]
    value: Floats
    moments: SubsetMoments


def record_sd(observations: Observations) -> Floats:
    """Error (n_site,) of each site's record, root mean square of the two components, Pa."""
    return np.asarray(np.sqrt(0.5 * np.trace(observations.covariance, axis1=1, axis2=2)))


def sweep(tables: SubsetTables, value: Floats) -> Sweep:
    """Keep more and more sites, those of the smallest value first.

    Parameters
    ----------
    tables : SubsetTables
    value : (n_site,) array

    Returns
    -------
    Sweep
    """
    order = np.argsort(value, kind="stable")
    rank = np.argsort(order)
    kept = rank < np.arange(1, len(order) + 1)[:, None]
    return Sweep(order, value[order], subset_posteriors(tables, kept))


def column_of_sites(values: Mapping[str, float], sites: Sequence[str], source: str) -> Floats:
    """Match a column of the user with the sites.

    Parameters
    ----------
    values : mapping of str to float
        By site; others are left unused.
    sites : sequence of str
    source : str
        Where the column comes from, for messages.

    Returns
    -------
    (n_site,) array

    Raises
    ------
    InputError
        One fault for every site without a finite value.

    Examples
    --------
    >>> column_of_sites({"north": 2.0, "south": 1.0}, ["south", "north"], "quiet.csv").tolist()
    [1.0, 2.0]
    """
    faults = [
        Fault(source, site, "the site has no finite value", "Every site of the results needs one", "Add a row")
        for site in sites
        if not np.isfinite(values.get(site, np.nan))
    ]
    if faults:
        raise InputError(faults)
    return np.array([values[site] for site in sites], dtype=float)
