"""What the figure of the satellite comparison is drawn from."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from massfit.phasor import annual_basis, days_since
from massfit.results.finished import FinishedRun


@dataclass(frozen=True, eq=False)
class Placed:
    """A determination as it is drawn.

    Parameters
    ----------
    label : str
    phasor_hpa : (2,) array
    covariance_hpa2 : (2, 2) array
    role : str
        "network", "satellite", "joint" or "other".
    error_stated : bool
        False for one that is drawn without a region.
    """

    label: str
    phasor_hpa: NDArray[np.float64]
    covariance_hpa2: NDArray[np.float64]
    role: str
    error_stated: bool = True


@dataclass(frozen=True, eq=False)
class Months:
    """The series of one solution.

    Parameters
    ----------
    name : str
    time : (n,) array of datetime64
    water_mm : (n,) array
        Kernel means; none of a model, which has no months.
    fine_time : (k,) array of datetime64
    annual_mm : (k,) array
        The fitted annual cycle at these.
    """

    name: str
    time: NDArray[np.datetime64]
    water_mm: NDArray[np.float64]
    fine_time: NDArray[np.datetime64]
    annual_mm: NDArray[np.float64]


@dataclass(frozen=True)
class Reading:
    """One phasor as amplitude and day; an error that is not known is NaN.

    Parameters
    ----------
    amplitude_hpa, amplitude_sd_hpa : float
    peak_day, peak_day_sd : float
    """

    amplitude_hpa: float
    amplitude_sd_hpa: float
    peak_day: float
    peak_day_sd: float


@dataclass(frozen=True)
class SiteBeside:
    """Recorder and satellites at one site as they are drawn.

    Parameters
    ----------
    site : str
    recorder : Reading or None
    satellite : Reading
    probability : float
        NaN where there is none.
    """

    site: str
    recorder: Reading | None
    satellite: Reading
    probability: float


def sites_beside(run: FinishedRun) -> list[SiteBeside]:
    """Every recorder beside the satellites.

    Parameters
    ----------
    run : FinishedRun
        With a comparison.

    Returns
    -------
    list of SiteBeside
        In the order of the run.
    """
    return [
        SiteBeside(
            each["id"], None if each["recorder"] is None else _reading(each["recorder"]), _reading(each["satellite"]),
            _number(each["probability"]),
        )
        for each in run.summary["comparison"]["sites"]
    ]  # fmt: skip


def _reading(phasor: Mapping[str, Any]) -> Reading:
    errors = (_number(phasor.get(name)) for name in ("amplitude_sd_hpa", "peak_day_sd"))
    amplitude_sd, day_sd = errors
    return Reading(phasor["amplitude_hpa"], amplitude_sd, phasor["peak_day"], day_sd)


def _number(value: float | None) -> float:
    return np.nan if value is None else float(value)


def placed_determinations(run: FinishedRun) -> list[Placed]:
    """Network, satellites, the two together where they agree, and the analyst's others.

    Parameters
    ----------
    run : FinishedRun
        With a comparison.

    Returns
    -------
    list of Placed
    """
    comparison = run.summary["comparison"]
    found = [(comparison["network"], "network"), (comparison["satellite"], "satellite")]
    if comparison["difference"]["joint"] is not None:
        found.append((comparison["difference"]["joint"], "joint"))
    found += [(each, "other") for each in comparison["others"]]
    return [
        Placed(
            each["label"],
            np.array([each["in_phase_hpa"], each["quadrature_hpa"]]),
            np.array(each["covariance_hpa2"]),
            role,
            each["amplitude_sd_hpa"] is not None,
        )
        for each, role in found
    ]


def satellite_months(run: FinishedRun) -> list[Months]:
    """Monthly series of every solution with the fitted cycle.

    Parameters
    ----------
    run : FinishedRun
        With a comparison.

    Returns
    -------
    list of Months
    """
    data, year = run.datasets["comparison.nc"], run.summary["reference_year"]
    kinds = [solution.get("kind", "months") for solution in run.summary["comparison"]["solutions"]]
    ends = np.cumsum(data["row_size"].values)
    months = []
    for index, (end, size) in enumerate(zip(ends, data["row_size"].values, strict=True)):
        time, series = data["time"].values[end - size : end], data["ocean_mean"].values[end - size : end]
        fine = np.arange(time[0], time[-1], np.timedelta64(10, "D"))
        annual = annual_basis(days_since(fine, year)) @ data["fitted_phasor"].values[index]
        shown = slice(None) if kinds[index] == "months" else slice(0)
        months.append(Months(str(data["solution"].values[index]), time[shown], series[shown], fine, annual))
    return months
