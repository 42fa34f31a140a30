"""Student scatter and mixtures for any subset: expectation propagation along the scale of the site scatter.

Given the scales a site whose scatter is Student's, or whose record is a mixture, is a sum of normal densities in what
the network predicts there. Each such density is replaced by one normal factor that, beside the prediction from
everything else, has the same mean and variance (Minka 2001, Expectation propagation for approximate Bayesian
inference, Proc. 17th UAI, 362-369; for Student's density Jylanki, Vanhatalo & Vehtari 2011, Journal of Machine Learning
Research 12, 3227-3257). This is done on the knots of s_site and some of s_group, the other scales at their means under
normal scatter: what evidence, mean and covariance differ there from those of normal scatter is added on all knots. In
that normal scatter a place that the whole network sees far off has a variance of its own, so that little differs.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.posterior.likelihood import log_stretch_prior
from massfit.posterior.node_terms import NodeTable, prior_precision
from massfit.posterior.observations import Observations, record_covariance

Floats = NDArray[np.float64]

ROUNDS = 30
"""Largest number of rounds in which all factors are renewed together; four or five are usual."""

_STEP = 0.8  # of the way to each new factor: whole steps can swing
_LEAST_WEIGHT = 1e-4  # parts of a mixture below are left out
_SETTLED = 1e-3  # of the largest precision
_SWINGING = 0.03  # of the largest precision, from which a point has not settled
_LEAST = 1e-6  # least precision of a factor, in units of that of the site without scatter


@dataclass(frozen=True)
class Factors:
    """What is not normal: sites, and places with several sites, each along two axes.

    Parameters
    ----------
    design : (n_factor, 2, n_column) array
        Columns in the order of the node table.
    site : (n_factor,) array of int
        Index of the site; -1 for a place, which is in every subset.
    log_weight : (n_factor, n_part) array
        Of the parts of the mixture; -inf where there are fewer.
    value, variance : (n_factor, n_part, 2) array
        Pa and Pa2, without the scales.
    local, alone, own : (n_factor,) array
        What s_local^2, s_group^2 and stretched s_site^2 are multiplied with.
    extra : (n_factor,) array
        Pa2, variance beyond s_site^2 of the normal scatter that the factors are compared with.
    log_stretch, log_mass : (n_stretch,) array
        Nodes of the stretch of Student scatter, and the logarithms of their masses.
    """

    design: Floats
    site: NDArray[np.int64]
    log_weight: Floats
    value: Floats
    variance: Floats
    local: Floats
    alone: Floats
    own: Floats
    extra: Floats
    log_stretch: Floats
    log_mass: Floats


def stretch_nodes(student: bool) -> tuple[Floats, Floats]:
    """Nodes of the logarithm of the stretch and logarithms of their masses; one of 1 where the scatter is normal.

    Examples
    --------
    The mean of the inverse stretch is 1, that of the stretch 2:

    >>> nodes, log_mass = stretch_nodes(True)
    >>> [round(float(np.exp(log_mass) @ np.exp(power * nodes)), 2) for power in (-1, 0, 1)]
    [1.0, 1.0, 1.99]
    """
    if not student:
        return np.zeros(1), np.zeros(1)
    nodes = np.arange(-1.8, 6.5, 0.65)
    density = log_stretch_prior(nodes)
    return nodes, density - np.log(np.exp(density).sum())


def subset_factors(table: NodeTable, observations: Observations, mixed: tuple[str, ...]) -> Factors:
    """Find what is not normal in a network.

    Parameters
    ----------
    table : NodeTable
        Of one load pattern.
    observations : Observations
        What the table was made from.
    mixed : tuple of str
        Sites that enter by their mixture.

    Returns
    -------
    Factors
    """
    model, rows = table.model, table.model.rows
    pairs = rows.mean_count // 2
    site = rows.site[: 2 * pairs : 2]
    order = np.argsort(site)
    axes = rows.direction[: 2 * pairs].reshape(pairs, 2, 2)[order]
    parts = [_parts(observations, s, axes[s], observations.sites[s] in mixed) for s in range(pairs)]
    most = max(len(weight) for weight, _, _ in parts)
    places = len(model.columns.shared_place)
    log_weight = np.full((pairs + places, most), -np.inf)
    value, variance = np.zeros((pairs + places, most, 2)), np.ones((pairs + places, most, 2))
    for s, (weight, values, variances) in enumerate(parts):
        count = len(weight)
        log_weight[s, :count], value[s, :count], variance[s, :count] = np.log(weight), values, variances
    log_weight[pairs:, 0] = 0.0
    variance[pairs:] = 0.0
    size = table.design.shape[2] - 1
    design = np.zeros((pairs + places, 2, size))
    design[:pairs] = table.design[0, : 2 * pairs, :-1].reshape(pairs, 2, size)[order]
    for p in range(places):
        design[pairs + p, :, table.from_place + 2 * p : table.from_place + 2 * p + 2] = np.eye(2)
    padded = np.zeros(places)
    own = model.own_scatter[::2][order].astype(float)
    return Factors(
        design,
        np.concatenate([np.arange(pairs), np.full(places, -1)]),
        log_weight,
        value,
        variance,
        np.concatenate([rows.local_factor[: 2 * pairs : 2][order], padded]),
        np.concatenate([model.sharing.alone.astype(float) * (model.scale_count == 4), padded]),
        np.concatenate([own, np.ones(places)]),
        np.concatenate([own, np.ones(places)])
        * table.extra[np.concatenate([model.sharing.place, model.columns.shared_place])],
        *stretch_nodes(model.student),
    )


def _parts(observations: Observations, s: int, axes: Floats, mixed: bool) -> tuple[Floats, Floats, Floats]:
    """Weights (n,), values (n, 2) and variances (n, 2) of the parts of one site, along its axes."""
    if mixed:
        chosen = np.flatnonzero(observations.weight[s] > _LEAST_WEIGHT)
        weight = observations.weight[s, chosen] / observations.weight[s, chosen].sum()
        phasor, covariance = observations.part_phasor[s, chosen], observations.part_covariance[s, chosen]
    else:
        weight, phasor, covariance = np.ones(1), observations.phasor[s][None], observations.covariance[s][None]
    count = int(observations.model_count[s])
    noise = observations.model_noise[s]
    whole = record_covariance(covariance, noise, count) + noise / count
    return weight, np.nanmean(phasor, axis=1) @ axes.T, np.einsum("ai,kij,aj->ka", axes, whole, axes)


@dataclass(frozen=True)
class Answers:
    """Log evidence (n,), mean (n, 2) in Pa and covariance (n, 2, 2) in Pa2 of A at n points."""

    log_evidence: Floats
    mean: Floats
    covariance: Floats


class Points:
    """Subsets at points of the scales; a factor is exp(-precision x^2 / 2 + shift x) along each of its axes.

    Parameters
    ----------
    table : NodeTable
        Of one load pattern.
    factors : Factors
    kept : (n, n_site) array
        1 for the sites of each point's subset, 0 for the others.
    log_scales : (n, n_scale) array
    """

    def __init__(self, table: NodeTable, factors: Factors, kept: Floats, log_scales: Floats) -> None:
        self._table, self._factors = table, factors
        rows, means = table.model.rows, table.model.rows.mean_count
        design = table.design[0]
        squares = np.exp(2.0 * log_scales)
        weight = kept[:, rows.site[means:]] / (rows.variance[means:] + squares[:, 1:2] * rows.local_factor[means:])
        size = design.shape[1]
        products = design[means:, :, None] * design[means:, None, :]
        fixed = (weight @ products.reshape(-1, size * size)).reshape(-1, size, size)
        self._prior = prior_precision(table, log_scales)
        self._prior[:, table.from_place : table.fixed] = 0.0  # what a place scatters by is a factor of its own
        self._information = fixed[:, :-1, :-1] + self._prior[:, :, None] * np.eye(size - 1)
        self._right = fixed[:, :-1, -1]
        self._design = factors.design.reshape(-1, size - 1)
        products = self._design[:, :, None] * self._design[:, None, :]
        self._products = products.reshape(len(self._design), -1)
        inside = np.concatenate([kept, np.ones((len(kept), 1))], axis=1)
        self._kept = inside[:, factors.site][:, :, None]  # (n, n_factor, 1)
        base = squares[:, 1:2] * factors.local
        if table.model.scale_count == 4:
            base = base + squares[:, 3:4] * factors.alone
        self._own = squares[:, :1] * factors.own  # (n, n_factor)
        self._base = base[:, :, None, None] + factors.variance  # (n, n_factor, n_part, 2)

    def normal_factors(self) -> tuple[Floats, Floats]:
        """Precision and shift (n, n_factor, 2) of normal scatter, one Gaussian a site."""
        factors = self._factors
        weight = np.exp(factors.log_weight)[:, :, None]
        value = (weight * factors.value).sum(axis=1)
        between = (weight * (factors.value - value[:, None]) ** 2).sum(axis=1)
        spread = (weight * self._base).sum(axis=2) + between + (self._own + factors.extra)[:, :, None]
        precision = self._kept / spread
        return precision, precision * value

    def only_kept(self, precision: Floats, shift: Floats) -> tuple[Floats, Floats]:
        """Factors of another subset, of those that are kept here."""
        return self._kept * precision, self._kept * shift

    def leverage(self, precision: Floats) -> Floats:
        """Share (n, n_factor, 2) of each site in each component of A: its weight times its response to A."""
        covariance = self._solved(precision, np.zeros_like(precision))[0]
        design = self._factors.design
        gain = np.einsum("nap,fxp->nfax", covariance[:, -2:], design) * precision[:, :, None]
        return np.asarray(np.einsum("nfax,fxa->nfa", gain, design[:, :, -2:]))

    def fitted_factors(self) -> tuple[Floats, Floats, NDArray[np.bool_]]:
        """Precision and shift (n, n_factor, 2) that agree with the true factors, and where (n,) they settled."""
        precision, shift = self.normal_factors()
        step = _STEP
        for k in range(ROUNDS):
            new_precision, new_shift = self._renewed(precision, shift)
            change = np.abs(new_precision - precision).max(axis=(1, 2)) / (precision.max(axis=(1, 2)) + 1e-300)
            precision, shift = precision + step * (new_precision - precision), shift + step * (new_shift - shift)
            if change.max() < _SETTLED:
                break
            step = _STEP if k < ROUNDS // 3 else 0.9 * step  # ever smaller steps where whole ones swing
        return precision, shift, change < _SWINGING

    def member_means(self, designs: Floats, precision: Floats, shift: Floats) -> Floats:
        """Mean (n_member, n, 2) of A with the factors given and other designs (n_member, n_factor, 2, n_column)."""
        count, size = self._right.shape
        means = np.empty((len(designs), count, 2))
        for k, design in enumerate(designs.reshape(len(designs), -1, size)):
            products = (design[:, :, None] * design[:, None, :]).reshape(len(design), -1)
            information = self._information + (precision.reshape(count, -1) @ products).reshape(count, size, size)
            right = self._right + shift.reshape(count, -1) @ design
            means[k] = np.linalg.solve(information, right[:, :, None])[:, -2:, 0]
        return self._table.model.annual_sd * means

    def _solved(self, precision: Floats, shift: Floats) -> tuple[Floats, Floats, Floats]:
        """Covariance (n, n_column, n_column), mean (n, n_column) and right-hand side of the columns."""
        count, size = self._right.shape
        flat = precision.reshape(count, -1)
        information = self._information + (flat @ self._products).reshape(count, size, size)
        right = self._right + shift.reshape(count, -1) @ self._design
        covariance = np.linalg.inv(information)
        return covariance, (covariance @ right[:, :, None])[:, :, 0], right

    def _rest(self, precision: Floats, shift: Floats) -> tuple[Floats, Floats]:
        """Mean and variance (n, n_factor, 2) along every axis, by everything but its own factor."""
        covariance, mean, _ = self._solved(precision, shift)
        variance = ((covariance @ self._design.T) * self._design.T).sum(axis=1).reshape(precision.shape)
        here = (mean @ self._design.T).reshape(precision.shape)
        rest = np.maximum(1.0 / variance - precision, 1e-3 / variance)
        return (here / variance - shift) / rest, 1.0 / rest

    def _tilted(self, mean: Floats, variance: Floats) -> tuple[Floats, Floats, Floats]:
        """Log evidence (n, n_factor) of the true factors beside a prediction, and the mean and variance they give."""
        factors = self._factors
        stretched = self._own[:, :, None, None, None] * np.exp(factors.log_stretch)[:, None]
        own = self._base[:, :, :, None] + stretched  # (n, n_factor, n_part, n_stretch, 2)
        total = own + variance[:, :, None, None]
        residual = factors.value[:, :, None] - mean[:, :, None, None]
        log_mass = -0.5 * (np.log(2.0 * np.pi * total) + residual**2 / total).sum(axis=-1)
        log_mass = log_mass + factors.log_weight[:, :, None] + factors.log_mass
        top = log_mass.max(axis=(2, 3))
        mass = np.exp(log_mass - top[:, :, None, None])
        evidence = mass.sum(axis=(2, 3))
        share = (mass / evidence[:, :, None, None])[..., None]
        gain = variance[:, :, None, None] / total
        moved = gain * residual
        shift = (share * moved).sum(axis=(2, 3))
        square = (share * (gain * own + moved**2)).sum(axis=(2, 3))
        return top + np.log(evidence), mean + shift, square - shift**2

    def _renewed(self, precision: Floats, shift: Floats) -> tuple[Floats, Floats]:
        """Renew the factors of all sites at once."""
        rest_mean, rest_variance = self._rest(precision, shift)
        _, mean, variance = self._tilted(rest_mean, rest_variance)
        # a factor that widens is kept as one that says nothing
        fresh = np.maximum(1.0 / variance - 1.0 / rest_variance, _LEAST / rest_variance)
        return self._kept * fresh, self._kept * (mean * (fresh + 1.0 / rest_variance) - rest_mean / rest_variance)

    def answers(self, precision: Floats, shift: Floats, *, normal: bool) -> Answers:
        """Evidence and moments of A with these factors, which are normal ones or stand for the true ones.

        The evidence of both is up to the same constants.
        """
        covariance, mean, right = self._solved(precision, shift)
        evidence = 0.5 * (np.log(np.where(self._prior > 0, self._prior, 1.0)).sum(axis=1) + (right * mean).sum(axis=1))
        evidence += 0.5 * np.linalg.slogdet(covariance)[1]
        evidence += self._constants(precision, shift) if normal else self._true_constants(precision, shift)
        sd = self._table.model.annual_sd
        return Answers(evidence, sd * mean[:, -2:], sd**2 * covariance[:, -2:, -2:])

    def _constants(self, precision: Floats, shift: Floats) -> Floats:
        """Logarithms (n,) of what normal densities are more than their factors."""
        there = precision > 0
        safe = np.where(there, precision, 1.0)
        own = 0.5 * (np.log(safe / (2.0 * np.pi)) - shift**2 / safe)
        return np.asarray((own * there).sum(axis=(1, 2)))

    def _true_constants(self, precision: Floats, shift: Floats) -> Floats:
        """Logarithms (n,) of what the true densities are more than their factors, beside all others."""
        mean, variance = self._rest(precision, shift)
        wide = 1.0 + precision * variance
        square = (mean + variance * shift) ** 2 / wide - mean**2
        of_factor = 0.5 * (square / variance - np.log(wide)).sum(axis=2)
        return np.asarray((self._kept[:, :, 0] * (self._tilted(mean, variance)[0] - of_factor)).sum(axis=1))
