"""Choices for one drift term of a deployment: its form and, where it has one, its time constant."""

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Choices = NDArray[np.int64]

NOTHING, LINE, EXPONENTIAL, LOGARITHM = range(4)
"""Forms of a term: none; a slope; exp(-t / T); logarithmic creep ln(1 + t / T), one at the end of the deployment."""

TIMED = (EXPONENTIAL, LOGARITHM)
"""Forms with a time constant."""

FIRST_NODES = 13
"""Nodes of a form with a time constant on the first grid, log-spaced over the prior range."""

SPLIT_MASS = 0.06
"""An interval is halved when it holds more mass than this."""


@dataclass(frozen=True)
class Nodes:
    """Choices for one term, form after form, each with rising time constant.

    Parameters
    ----------
    form : (G,) array of int
    log_time : (G,) array
        Logarithm of the time constant in days; 0 where the form has none.
    prior : (G,) array
        Prior mass: the forms have equal shares, within a form it is uniform in log time
        (trapezoid masses).

    Examples
    --------
    >>> nodes = first_nodes([NOTHING, EXPONENTIAL], 3.0, 300.0)
    >>> len(nodes), float(nodes.prior[0]), float(nodes.prior.sum().round(12))
    (14, 0.5, 1.0)
    """

    form: Choices
    log_time: Floats
    prior: Floats

    def __len__(self) -> int:
        return len(self.form)

    @property
    def timed(self) -> NDArray[np.bool_]:
        """Which have a time constant: (G,)."""
        return np.isin(self.form, TIMED)

    @property
    def time_constants(self) -> Floats:
        """Days, NaN where the form has none: (G,)."""
        return np.where(self.timed, np.exp(self.log_time), np.nan)

    def columns(self, elapsed: Floats, length: float, line: Floats) -> Floats:
        """Columns of every choice.

        Parameters
        ----------
        elapsed : (n,) array
            Days since the start of the deployment.
        length : float
            Of the deployment, days.
        line : (n,) array
            The column of a slope.

        Returns
        -------
        (n, G) array
        """
        time = np.exp(self.log_time)
        age = np.asarray(elapsed)[:, None]
        columns = np.zeros((len(age), len(self)))
        columns[:, self.form == LINE] = line[:, None]
        own = self.form == EXPONENTIAL
        columns[:, own] = exponential_columns(elapsed, time[own])
        own = self.form == LOGARITHM
        columns[:, own] = np.log1p(age / time[own]) / np.log1p(length / time[own])
        return columns

    def nearest(self, form: Choices, log_time: Floats) -> Choices:
        """Places of the nodes next to given ones of the same form."""
        away = np.abs(log_time[..., None] - self.log_time) + 1e9 * (form[..., None] != self.form)
        return np.asarray(away.argmin(axis=-1), np.int64)

    def take(self, which: Choices | NDArray[np.bool_]) -> "Nodes":
        """Those nodes, with their masses."""
        return Nodes(self.form[which], self.log_time[which], self.prior[which])

    def split(self, mass: Floats) -> "Nodes":
        """Nodes with every heavy interval halved, given the posterior masses."""
        parts = []
        for form in dict.fromkeys(self.form.tolist()):
            own = self.form == form
            logs = self.log_time[own]
            if form in TIMED:
                logs = _insert(logs, mass[own])
            parts.append(_one_form(form, logs, float(self.prior[own].sum())))
        return _joined(parts)


def first_nodes(forms: Sequence[int], low: float, high: float, count: int = FIRST_NODES) -> Nodes:
    """First grid of a term that may have several forms, equally likely before.

    Parameters
    ----------
    forms : sequence of int
    low, high : float
        Range of the time constant, days.
    count : int
        Time constants of each form that has one.

    Returns
    -------
    Nodes
    """
    logs = np.linspace(np.log(low), np.log(high), count)
    return _joined([_one_form(form, logs if form in TIMED else np.zeros(1), 1.0 / len(forms)) for form in forms])


def exponential_nodes(time_constants: Floats) -> Nodes:
    """Nodes of exponentials with given time constants in days, equally likely before."""
    times = np.asarray(time_constants, float)
    return Nodes(np.full(len(times), EXPONENTIAL), np.log(times), np.full(len(times), 1.0 / len(times)))


def exponential_columns(elapsed: Floats, time_constants: Floats) -> Floats:
    """Decay exp(-t / T) for each time constant: (n,) and (G,) to (n, G)."""
    return np.exp(-np.asarray(elapsed)[:, None] / np.asarray(time_constants)[None, :])


def _one_form(form: int, logs: Floats, share: float) -> Nodes:
    if len(logs) == 1:
        return Nodes(np.array([form]), logs, np.array([share]))
    halves = np.diff(logs) / (2.0 * (logs[-1] - logs[0]))
    return Nodes(np.full(len(logs), form), logs, share * (np.append(halves, 0.0) + np.append(0.0, halves)))


def _joined(parts: Sequence[Nodes]) -> Nodes:
    columns = zip(*((part.form, part.log_time, part.prior) for part in parts), strict=True)
    return Nodes(*(np.concatenate(column) for column in columns))


def _insert(logs: Floats, mass: Floats) -> Floats:
    middles = [
        0.5 * (low + high)
        for (low, high), (left, right) in zip(pairwise(logs), pairwise(mass), strict=True)
        if 0.5 * (left + right) > SPLIT_MASS
    ]
    return np.sort(np.append(logs, middles))
