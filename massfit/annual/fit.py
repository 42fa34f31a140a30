"""Drift, noise and annual phasor of one site, together.

The model of the daily means y of one site, and the priors, are written out in
docs/theory/annual.md. Everything linear is solved exactly; noise amplitudes and drift
time constants are integrated, never plugged in.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from massfit.annual.components import Components, integrate
from massfit.annual.design import (
    SHARED_COLUMNS,
    Design,
    DriftColumns,
    build_design,
    mean_circulation,
)
from massfit.annual.evidence import DriftBasis
from massfit.annual.families import noise_families
from massfit.annual.mode import Mode, joint_mode
from massfit.annual.nodes import EXPONENTIAL, LINE, LOGARITHM, NOTHING, TIMED
from massfit.annual.noise import NoiseModel
from massfit.annual.operator import model_noise, phasor_operator, year_shares
from massfit.annual.parts import merge_components
from massfit.annual.record import ReducedRecord, check_records
from massfit.constants import PASCAL_PER_HPA
from massfit.display import Described, Description, counted
from massfit.settings import Priors

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Estimate:
    """Posterior mean and standard deviation of one number.

    Parameters
    ----------
    mean, sd : float
    """

    mean: float
    sd: float


@dataclass(frozen=True)
class NoiseFit:
    """Noise of one site.

    Parameters
    ----------
    form_weight : mapping of str to float
        Posterior weight of each form of noise that counts; sums to 1.
    red : Estimate
        Standard deviation of the red noise, Pa.
    memory_days : Estimate
        Integral of its correlation over positive lags.
    white : tuple of Estimate
        Standard deviation of the white noise of a daily mean of each deployment, Pa.
    typical : NoiseModel
        At the joint mode.
    """

    form_weight: Mapping[str, float]
    red: Estimate
    memory_days: Estimate
    white: tuple[Estimate, ...]
    typical: NoiseModel


@dataclass(frozen=True)
class DriftFit:
    """Drift of one deployment.

    Parameters
    ----------
    deployment : str
    time : (n,) array of datetime64[ns]
    drift : (n,) array
        Posterior mean of level, slope, exponential or logarithm, and steps, Pa.
    reduced : (n,) array
        Record minus the mean of the models minus `drift`, Pa; the annual cycle is in it.
    form_weight : mapping of str to float
        Posterior weight of each form of drift, such as "exponential+linear"; sums to 1.
    slope : Estimate or None
        Pa per Julian year; no slope counts as one of zero where it is weighed.
    exponential, logarithm : Estimate or None
        Size of the exponential at the start of the deployment, change by the logarithm from start to
        end, Pa; each as if that form were true.
    time_constant_days : Estimate or None
        Of the more likely of the two.
    steps : tuple of (datetime64, Estimate)
        Declared steps that have data on both sides, and their sizes, Pa.
    """

    deployment: str
    time: NDArray[np.datetime64]
    drift: Floats
    reduced: Floats
    form_weight: Mapping[str, float]
    slope: Estimate | None
    exponential: Estimate | None
    logarithm: Estimate | None
    time_constant_days: Estimate | None
    steps: tuple[tuple[np.datetime64, Estimate], ...]


@dataclass(frozen=True, repr=False)
class SiteFit(Described):
    """What one site says about its annual phasor, and what else was found.

    Parameters
    ----------
    site : str
    models : tuple of str
        Circulation models subtracted; may be empty.
    weight : (K,) array
        Weights of the Gaussian parts; sum to 1.
    phasor : (K, max(M, 1), 2) array
        In phase and quadrature of every part for each model subtracted, Pa.
    covariance : (K, 2, 2) array
        Of each part, Pa^2; shared by all models.
    model_noise : (2, 2) array
        Covariance of each model's own weather at the annual line (D_s), Pa^2.
    reduced_sd : float
        Standard deviation of the daily residuals with drift, steps, mean model, annual and
        semi-annual cycle taken off, Pa.
    days : int
        Distinct days used.
    effective_sample_size : float
        Of the noise models behind the parts.
    noise : NoiseFit
    drifts : tuple of DriftFit
        One per deployment.
    year_share : mapping of int to float
        Share of each calendar year in the phasor; sums to 1.
    notes : tuple of str
        What was left out, and why.
    companions : (C, 2) array, optional
        Annual phasors of the companions of the records, by the operators of the fit averaged over its parts, Pa: what
        each adds to the phasor when it is left in the record. None without companions.
    """

    site: str
    models: tuple[str, ...]
    weight: Floats
    phasor: Floats
    covariance: Floats
    model_noise: Floats
    reduced_sd: float
    days: int
    effective_sample_size: float
    noise: NoiseFit
    drifts: tuple[DriftFit, ...]
    year_share: Mapping[int, float]
    notes: tuple[str, ...] = ()
    companions: Floats | None = None

    def describe(self) -> Description:
        """Phasor, and how well it is known."""
        mean, covariance = self.single_gaussian()
        parts = zip(mean.mean(axis=0) / PASCAL_PER_HPA, np.sqrt(np.diag(covariance)) / PASCAL_PER_HPA, strict=True)
        in_phase, quadrature = (f"{value:.3f} (sd {sd:.3f}) hPa" for value, sd in parts)
        return f"Fit of site {self.site}".rstrip(), {
            "in phase": in_phase,
            "quadrature": quadrature,
            "subtracted": f"mean of {', '.join(self.models)}" if self.models else "no model",
            "record": f"{counted(self.days, 'day')}, {counted(len(self.drifts), 'deployment')}",
            "residual": f"sd {self.reduced_sd / PASCAL_PER_HPA:.2f} hPa",
        }

    def single_gaussian(self) -> tuple[Floats, Floats]:
        """Mean (max(M, 1), 2) and covariance (2, 2) of the whole mixture, Pa and Pa^2.

        The covariance is that of the mean over the models.
        """
        mean = np.einsum("k,kmc->mc", self.weight, self.phasor)
        away = self.phasor.mean(axis=1) - mean.mean(axis=0)
        within = np.einsum("k,kij->ij", self.weight, self.covariance)
        return mean, within + np.einsum("k,ki,kj->ij", self.weight, away, away)


def fit_site(
    records: Sequence[ReducedRecord],
    *,
    models: Sequence[str],
    reference_year: int,
    rng: np.random.Generator,
    priors: Priors = Priors(),  # noqa: B008 (frozen)
    site: str = "",
) -> SiteFit:
    """Fit drift, noise and annual phasor of one site together.

    Noise and drift are estimated once, on the record minus the mean of the models; the
    same linear operator then acts on every single subtraction.

    Parameters
    ----------
    records : sequence of ReducedRecord
        The deployments, in any order; they may overlap.
    models : sequence of str
        Names of the circulation models, in the order of each record's `circulation`.
    reference_year : int
        Phases count from 1 January 00:00 UTC of this year.
    rng : numpy.random.Generator
    priors : Priors
    site : str
        Name, for the result and for messages.

    Returns
    -------
    SiteFit

    Raises
    ------
    InputError
        Shapes that do not match, missing values, times that do not increase, a start after
        the first day, an unknown form of drift, repeated labels, or fewer than 90 days.

    Examples
    --------
    Two years of an invented record, in Pa, with a 40 Pa cycle that peaks with the year:

    >>> rng = np.random.default_rng(1)
    >>> days = np.arange(730)
    >>> pressure = 40 * np.cos(2 * np.pi * days / 365.2422) - 900 * np.exp(-days / 50) + rng.normal(0, 5, 730)
    >>> time = np.datetime64("2016-01-01", "ns") + days * np.timedelta64(1, "D")
    >>> record = ReducedRecord("one", time, pressure, np.empty((0, 730)), time[0])
    >>> fit = fit_site([record], models=[], reference_year=2016, rng=rng)
    >>> mean, covariance = fit.single_gaussian()
    >>> bool(abs(mean[0, 0] - 40) < 3 * np.sqrt(covariance[0, 0]))
    True
    """
    check_records(records, models, site)
    design = build_design(records, reference_year=reference_year, priors=priors)
    basis = DriftBasis(design)
    mode = joint_mode(basis, noise_families(priors))
    components = integrate(basis, mode, rng)
    operator = phasor_operator(design.covariance(mode.noise), design, mode.grid.mode)
    parts = merge_components(components)
    first = 1 + len(models)
    return SiteFit(
        site=site,
        models=tuple(models),
        weight=parts.weight,
        # L(y) - L(q_m) = L(y - mean q) - L(q_m - mean q)
        phasor=parts.phasor[:, :1] - parts.phasor[:, 1:first] if len(models) else parts.phasor[:, :1],
        covariance=parts.covariance,
        model_noise=model_noise(design, priors, operator),
        reduced_sd=_residual_sd(design, components),
        days=len(np.unique(design.days[design.observed])),
        effective_sample_size=components.effective_sample_size,
        noise=_noise_fit(mode, components),
        drifts=tuple(
            _drift_fit(record, design, drift, components) for record, drift in zip(records, design.drifts, strict=True)
        ),
        year_share=year_shares(design, operator, reference_year),
        notes=design.notes,
        companions=np.einsum("k,kcj->cj", parts.weight, parts.phasor[:, first:]) if design.companions.size else None,
    )


def _estimate(weight: Floats, mean: Floats, variance: Floats | float = 0.0) -> Estimate:
    """Moments of a mixture of one number."""
    centre = float(weight @ mean)
    return Estimate(centre, float(np.sqrt(weight @ ((mean - centre) ** 2 + variance))))


def _noise_fit(mode: Mode, components: Components) -> NoiseFit:
    weight = components.node_weight
    forms = {form: float(weight[np.array(components.forms) == form].sum()) for form in dict.fromkeys(components.forms)}
    return NoiseFit(
        form_weight=forms,
        red=_estimate(weight, np.array([model.red_sd for model in components.models])),
        memory_days=_estimate(weight, np.array([model.memory_days for model in components.models])),
        white=tuple(_estimate(weight, white) for white in np.array([model.white for model in components.models]).T),
        typical=mode.noise,
    )


def _drift_curve(design: Design, drift: DriftColumns, components: Components) -> Floats:
    """Posterior mean of one deployment's drift on its own days, level as in the centred data: (n,)."""
    fixed = np.array(drift.fixed)
    curve = design.fixed[np.ix_(drift.rows, fixed)] @ (components.weight @ components.mean[:, fixed])
    for place in drift.terms:
        nodes = components.nodes[place]
        sizes = np.bincount(components.choice[:, place], components.weight * components.size[:, place], len(nodes))
        curve = curve + design.term_columns(design.terms[place], nodes, drift.rows) @ sizes
    return np.asarray(curve)


def _drift_fit(record: ReducedRecord, design: Design, drift: DriftColumns, components: Components) -> DriftFit:
    def fixed(column: int) -> Estimate:
        return _estimate(components.weight, components.mean[:, column], components.variance[:, column])

    data = record.pressure - mean_circulation(record)
    curve = _drift_curve(design, drift, components) + data.mean()
    slope = None if drift.slope is None else fixed(drift.slope)
    if drift.line is not None:
        scale = design.line_scale * components.size[:, drift.line]
        lies = _form(components, drift.line) == LINE
        variance = design.line_scale**2 * components.size_variance[:, drift.line]
        slope = _estimate(components.weight, np.where(lies, scale, 0.0), np.where(lies, variance, 0.0))
    sizes = {form: _size(components, drift.decay, form) for form in TIMED}
    return DriftFit(
        deployment=record.deployment,
        time=record.time,
        drift=curve,
        reduced=data - curve,
        form_weight=_form_weight(drift, components),
        slope=slope,
        exponential=sizes[EXPONENTIAL],
        logarithm=sizes[LOGARITHM],
        time_constant_days=_time_constant(components, drift.decay),
        steps=tuple((time, fixed(column)) for time, column in zip(drift.step_times, drift.steps, strict=True)),
    )


def _form(components: Components, place: int) -> NDArray[np.int64]:
    """Form of one drift term in every component."""
    return components.nodes[place].form[components.choice[:, place]]


def _size(components: Components, place: int | None, form: int) -> Estimate | None:
    """Size of a term where it has a form."""
    if place is None:
        return None
    weight = components.weight * (_form(components, place) == form)
    if not weight.any():
        return None
    return _estimate(weight / weight.sum(), components.size[:, place], components.size_variance[:, place])


def _time_constant(components: Components, place: int | None) -> Estimate | None:
    if place is None:
        return None
    form = _form(components, place)
    weights = [components.weight * (form == each) for each in TIMED]
    weight = max(weights, key=np.sum)
    if not weight.any():
        return None
    times = np.exp(components.nodes[place].log_time[components.choice[:, place]])
    return _estimate(weight / weight.sum(), times)


def _form_weight(drift: DriftColumns, components: Components) -> dict[str, float]:
    count = len(components.weight)
    decay = np.full(count, NOTHING) if drift.decay is None else _form(components, drift.decay)
    line = np.full(count, NOTHING if drift.slope is None else LINE)
    if drift.line is not None:
        line = _form(components, drift.line)
    found = {}
    for form, name in ((EXPONENTIAL, "exponential"), (LOGARITHM, "logarithm"), (NOTHING, "")):
        for sloping, word in ((LINE, "linear"), (NOTHING, "")):
            weight = float(components.weight[(decay == form) & (line == sloping)].sum())
            if weight > 0.0:
                found["+".join(part for part in (name, word) if part) or "none"] = weight
    return found


def _residual_sd(design: Design, components: Components) -> float:
    residual = design.data - design.fixed[:, :SHARED_COLUMNS] @ (components.weight @ components.mean)[:SHARED_COLUMNS]
    for drift in design.drifts:
        residual[drift.rows] -= _drift_curve(design, drift, components)
    return float(residual[design.observed].std())
