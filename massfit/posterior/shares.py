"""Which source of error the variance of the network phasor comes from."""

from collections.abc import Callable, Iterable, Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.importance import ScalePosterior
from massfit.posterior.likelihood import estimator, units
from massfit.posterior.network_model import member_spread
from massfit.posterior.regression import LinearModel

SOURCES = (
    "record",
    "site_scatter",
    "group",
    "model_local",
    "model_spread",
    "atmosphere",
    "year",
    "fingerprint",
    "scales",
)


def variance_terms(
    model: LinearModel,
    posteriors: Sequence[ScalePosterior],
    *,
    mapped: Callable[[Callable[[Any], Any], Sequence[Any]], Iterable[Any]] = map,
) -> dict[str, float]:
    """Variance of A, summed over both components, by its source.

    Parameters
    ----------
    model : LinearModel
    posteriors : sequence of ScalePosterior
        One a load member.
    mapped : callable, optional
        Applies a function to each of a sequence, in order.

    Returns
    -------
    dict of str to float
        Pa2: the `SOURCES`, and "prior" for the pull of the wide prior of A. They add up
        to the trace of the pooled posterior covariance exactly.

    Notes
    -----
    Given the scales the estimate is linear in the data, and each source S adds
    tr(G S G') with G that linear map (propagation of error); the terms are averaged over
    the posterior of the scales. `model_spread` holds the circulation where no model was subtracted; `scales` is what
    not knowing the scales, the stretches of Student scatter and the parts of mixtures adds.
    """
    terms = list(mapped(_member_terms, [VarianceTask(model, posterior) for posterior in posteriors]))
    mean = {name: float(np.mean([member[name] for member in terms])) for name in terms[0]}
    return {
        **mean,
        "fingerprint": float(np.trace(member_spread(posteriors))),
        "scales": float(np.mean([np.trace(p.scale_covariance) for p in posteriors])),
    }


def variance_shares(terms: dict[str, float]) -> dict[str, float]:
    """Shares of the sources, summing to 1; the pull of the prior is left out."""
    total = sum(terms[name] for name in SOURCES)
    return {name: terms[name] / total for name in SOURCES}


def site_shares(model: LinearModel, posteriors: Sequence[ScalePosterior]) -> NDArray[np.float64]:
    """Share (n_site,) of the answer that each site makes, in the order of the observations.

    Parameters
    ----------
    model : LinearModel
    posteriors : sequence of ScalePosterior
        One a load member.

    Returns
    -------
    (n_site,) array
        Half the trace of what a cycle of ocean mass that one site alone saw would add to the estimate, averaged over
        the posterior of the scales. Sums to 1; a site may have a share below zero where it serves to tell the others'
        common errors.
    """
    shares = np.zeros(len(model.sharing.place))
    for posterior in posteriors:
        linear = np.einsum("n,nir->ir", posterior.weight, estimator(model, posterior.condition))
        of_rows = np.einsum("ir,ri->r", linear, model.design[posterior.member][:, -2:])
        shares += np.bincount(model.rows.site, of_rows, len(shares))
    return np.asarray(shares / shares.sum())


class VarianceTask(NamedTuple):
    """One load member; the task travels to a worker process whole.

    Parameters
    ----------
    model : LinearModel
    posterior : ScalePosterior
    """

    model: LinearModel
    posterior: ScalePosterior


def _member_terms(task: VarianceTask) -> dict[str, float]:
    model, posterior = task
    condition, weight, rows, columns = posterior.condition, posterior.weight, model.rows, model.columns
    squares = np.exp(2.0 * condition.log_scales)
    linear = estimator(model, condition)
    of_columns = ((linear @ model.design[posterior.member]) * units(model, condition)[:, None]) ** 2
    of_rows = (linear**2).sum(axis=1)  # over the two components, (n_node, n_row)
    of_means, means = of_rows[:, : rows.mean_count], np.s_[: rows.mean_count]
    lost = model.annual_sd * np.eye(2) - linear @ model.design[posterior.member][:, -2:]
    own = condition.stretch[:, model.row_place] * model.own_scatter

    def average(term: NDArray[np.float64]) -> float:
        return float(weight @ term)

    def column(*parts: slice) -> float:
        return sum(average(of_columns[:, :, part].sum(axis=(1, 2))) for part in parts)

    def propagated(covariance: NDArray[np.float64]) -> float:
        """Add up the pairs of rows, with their covariances (n_pair, 2, 2)."""
        pairs = linear.reshape(*linear.shape[:2], -1, 2)
        return average(np.einsum("nipa,pab,nipb->n", pairs, covariance, pairs, optimize=True))

    alone = model.sharing.alone[rows.site[means]]
    group = squares[:, 3] * (of_means @ alone) if model.scale_count == 4 else np.zeros(len(weight))
    return {
        "record": propagated(rows.record),
        "site_scatter": average(squares[:, 0] * (of_means * own).sum(axis=1)) + column(columns.place),
        "group": average(group) + column(columns.group),
        "model_local": propagated(rows.noise) + average(squares[:, 1] * (of_rows @ rows.local_factor)),
        "model_spread": column(columns.common, columns.unmodelled),
        "atmosphere": column(slice(0, 2)),
        "year": column(columns.year),
        "prior": average((lost**2).sum(axis=(1, 2))),
    }
