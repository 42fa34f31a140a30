"""What the figure of the satellite comparison is drawn from."""

from dataclasses import dataclass

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
