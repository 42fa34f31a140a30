"""Ocean-mean pressure series from CSV or NetCDF."""

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA
from massfit.errors import Fault, InputError
from massfit.io.netcdf.netcdf_file import is_netcdf
from massfit.io.netcdf.variables import read_pressure
from massfit.io.records.pressure_csv import read_pressure_csv
from massfit.network import Series

_LARGEST_SD = 2e3
"""Pa; ten times and more what an ocean mean with any trend has."""


def read_series(path: Path, *, name: str, source: str) -> Series:
    """Read an ocean-mean series.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the header ``time,value`` and a comment ``# units: hPa`` (optionally
        ``# stamp: start``), or NetCDF with one variable over time.
    name : str
        What the series is called in outputs.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    Series
        Pa at the middle of each interval; rows without a value are left out.

    Raises
    ------
    InputError
        Every fault of the file, with lines.
    """
    time, values = _read_netcdf(path, source) if is_netcdf(path) else _read_csv(path, source)
    valid = np.isfinite(values)
    if valid.sum() < 2:
        problem = f"the series has {int(valid.sum())} values"
        raise InputError(Fault(source, "value", problem, "Must be at least two", "Check the file"))
    if (sd := float(np.std(values[valid]))) > _LARGEST_SD:
        problem = f"the series varies by {sd / PASCAL_PER_HPA:.3g} hPa (1 sd)"
        allowed = "A mean over the whole ocean varies by about 1 hPa"
        raise InputError(Fault(source, "value", problem, allowed, "Correct the units"))
    return Series(name, time[valid], values[valid])


def _read_netcdf(path: Path, source: str) -> tuple[NDArray[np.datetime64], NDArray[np.float64]]:
    data = read_pressure(path, [("time",)], source=source)
    return data["time"].to_numpy(), data.to_numpy()


def _read_csv(path: Path, source: str) -> tuple[NDArray[np.datetime64], NDArray[np.float64]]:
    time, (values,) = read_pressure_csv(path, [("time", "value")], source=source)
    return time, values
