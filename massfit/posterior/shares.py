"""Which source of error the variance of the network phasor comes from."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.likelihood import LinearModel, estimator
from massfit.posterior.network_model import member_spread
from massfit.posterior.observations import Observations, record_covariance
from massfit.posterior.quadrature import ScalePosterior

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
    models: Sequence[LinearModel], posteriors: Sequence[ScalePosterior], observations: Observations
) -> dict[str, float]:
    """Variance of A, summed over both components, by its source.

    Parameters
    ----------
    models : sequence of LinearModel
        One a load member.
    posteriors : sequence of ScalePosterior
    observations : Observations

    Returns
    -------
    dict of str to float
        Pa2: the `SOURCES`, and "prior" for the pull of the wide prior of A. They add up
        to the trace of the pooled posterior covariance exactly.

    Notes
    -----
    Given the scales the estimate is linear in the data, and each source S adds
    tr(G S G') with G that linear map (propagation of error); the terms are averaged over
    the posterior of the scales. `group` and `year` are zero: the model holds no such term.
    """
    terms = [_member_terms(m, p, observations) for m, p in zip(models, posteriors, strict=True)]
    mean = {name: float(np.mean([member[name] for member in terms])) for name in terms[0]}
    return {
        **mean,
        "group": 0.0,
        "year": 0.0,
        "fingerprint": float(np.trace(member_spread(posteriors))),
        "scales": float(np.mean([np.trace(p.scale_covariance) for p in posteriors])),
    }


def variance_shares(terms: dict[str, float]) -> dict[str, float]:
    """Shares of the sources, summing to 1; the pull of the prior is left out."""
    total = sum(terms[name] for name in SOURCES)
    return {name: terms[name] / total for name in SOURCES}


def _member_terms(model: LinearModel, posterior: ScalePosterior, observations: Observations) -> dict[str, float]:
    rows, log_scales, weight = model.rows, posterior.log_scales, posterior.weight
    site, local, common = np.exp(2.0 * log_scales).T
    linear = estimator(model, log_scales)
    squares = (linear**2).sum(axis=1)  # over the two components, (n_node, n_row)
    answer = linear @ model.design
    lost = model.annual_sd * np.eye(2) - answer[:, :, :2]
    record, noise = _row_covariances(model, observations)

    def average(term: NDArray[np.float64]) -> float:
        return float(weight @ term)

    return {
        "record": average(((linear @ record) * linear).sum(axis=(1, 2))),
        "site_scatter": average(site * (squares @ rows.is_mean)),
        "model_local": average(
            ((linear @ noise) * linear).sum(axis=(1, 2)) + local * (squares @ rows.local_factor)
        ),
        "model_spread": average(common * (answer[:, :, 4:] ** 2).sum(axis=(1, 2))),
        "atmosphere": average((answer[:, :, 2:4] ** 2).sum(axis=(1, 2))),
        "prior": average((lost**2).sum(axis=(1, 2))),
    }


def _row_covariances(
    model: LinearModel, observations: Observations
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Covariances (n_row, n_row) that the record error and the models' weather give the rows, Pa2."""
    rows = model.rows
    counts = observations.model_count
    record = np.stack(
        [
            record_covariance(covariance, noise, count)
            for covariance, noise, count in zip(
                observations.covariance, observations.model_noise, counts, strict=True
            )
        ]
    )
    same = rows.site[:, None] == rows.site
    shared = same & rows.is_mean[:, None] & rows.is_mean
    overlap = same * (rows.model_weight @ rows.model_weight.T)
    turn = rows.direction
    return (
        shared * np.einsum("rc,rcd,qd->rq", turn, record[rows.site], turn),
        overlap * np.einsum("rc,rcd,qd->rq", turn, observations.model_noise[rows.site], turn),
    )
