"""What each correction did: its annual phasor as the fit of the site sees it.

The phasor of a site is a linear operator L of its daily record, averaged over the noise and drift that the fit
allows. The same L acts here on every series that was subtracted, so that

    L(record) = phasor of the site + L(tides) + L(pole tide) + L(air pressure) + L(circulation)

holds exactly: a correction's phasor is what the site's own phasor would hold besides, had the series been left on.
"""

from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.corrections.circulation import PARTS

RECORD = "record"
"""Name of the daily record from which nothing was taken off but the short tides."""

COMMON = ("long_period_tides", "pole_tide", "ocean_mean_atmosphere")
"""Series that do not depend on the circulation model."""

CIRCULATION, MEAN = "circulation", "mean"

CALIBRATIONS = "calibrations"
"""Name of what in-situ readings at a known pressure did: they are data of the fit beside the record."""


@dataclass(frozen=True)
class CorrectionPhasor:
    """Annual phasor of one series of a site.

    Parameters
    ----------
    series : str
        `RECORD`, a name of `COMMON`, `CIRCULATION`, `CALIBRATIONS`, or a name of `circulation.PARTS`.
    model : str or None
        The circulation model; `MEAN` for the mean of those present at the site.
    phasor : (2,) array
        In phase and quadrature, Pa.
    """

    series: str
    model: str | None
    phasor: NDArray[np.float64]

    @property
    def label(self) -> str:
        """Name in a table: the series, and the model behind a colon."""
        return self.series if self.model in (None, MEAN) else f"{self.series}: {self.model}"

    @property
    def summand(self) -> bool:
        """Whether the record is the site's phasor plus this and the other summands."""
        return self.series in (*COMMON, CALIBRATIONS) or (self.series, self.model) == (CIRCULATION, MEAN)


def companion_names(corrections: xr.Dataset) -> list[tuple[str, str | None]]:
    """Series whose phasors are wanted beside that of a site, and the model of each.

    Parameters
    ----------
    corrections : xarray.Dataset
        contracts.CORRECTIONS of the site.

    Returns
    -------
    list of (str, str or None)
        In the order of :func:`companion_series`.
    """
    models = [str(name) for name in corrections["model"].values[corrections["present"].values == 1]]
    mean: list[tuple[str, str | None]] = [(CIRCULATION, MEAN)] if models else []
    parts: list[tuple[str, str | None]] = [
        (part, model)
        for model in models
        for part in PARTS
        if part in corrections and bool(np.isfinite(corrections[part].sel(model=model)).any())
    ]
    return [(RECORD, None), *((name, None) for name in COMMON), *mean, *parts]


def companion_series(
    corrections: xr.Dataset, pressure: NDArray[np.float64], days: NDArray[np.intp]
) -> NDArray[np.float64]:
    """Values of the series of :func:`companion_names` on some days of the site.

    Parameters
    ----------
    corrections : xarray.Dataset
    pressure : (n,) array
        Daily record of a deployment, Pa.
    days : (n,) array of int
        Where its days stand in the corrections.

    Returns
    -------
    (n_series, n) array
        Pa.
    """
    present = corrections["present"].values == 1
    rows = []
    for name, model in companion_names(corrections):
        if name == RECORD:
            rows.append(pressure)
        elif model is None:
            rows.append(corrections[name].values[days])
        elif model == MEAN:
            rows.append(corrections[name].values[present][:, days].mean(axis=0))
        else:
            rows.append(corrections[name].sel(model=model).values[days])
    return np.array(rows)


def correction_phasors(
    corrections: xr.Dataset,
    companions: NDArray[np.float64],
    phasors: NDArray[np.float64],
    *,
    calibrated: bool = False,
) -> tuple[CorrectionPhasor, ...]:
    """Name the phasors of the companions, and add those of the single models.

    Parameters
    ----------
    corrections : xarray.Dataset
    companions : (n_series, 2) array
        By the operator of the fit, in the order of :func:`companion_names`, Pa.
    phasors : (n_model, 2) array
        Of the site, with each of the models present subtracted, Pa: they differ by what the models differ.
    calibrated : bool
        Whether the fit held in-situ calibrations. What they did is then the rest: less the phasor that the same
        operator gives to the readings alone.

    Returns
    -------
    tuple of CorrectionPhasor
        The record first.
    """
    found = [
        CorrectionPhasor(name, model, value)
        for (name, model), value in zip(companion_names(corrections), companions, strict=True)
    ]
    models = [str(name) for name in corrections["model"].values[corrections["present"].values == 1]]
    if calibrated:
        taken = sum((each.phasor for each in found if each.summand), start=np.zeros(2))
        found.insert(1, CorrectionPhasor(CALIBRATIONS, None, found[0].phasor - phasors.mean(axis=0) - taken))
    mean = next((each.phasor for each in found if each.series == CIRCULATION), None)
    if mean is None:
        return tuple(found)
    single = [
        CorrectionPhasor(CIRCULATION, model, mean + phasors.mean(axis=0) - own)
        for model, own in zip(models, phasors, strict=True)
    ]
    parts = [each for each in found if each.series in PARTS]
    return (*found[: len(found) - len(parts)], *single, *parts)
