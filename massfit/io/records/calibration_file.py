"""In-situ calibrations of a pressure recorder from CSV."""

from pathlib import Path

import numpy as np

from massfit.constants import PASCAL_PER_HPA
from massfit.errors import Fault, InputError
from massfit.io.records.pressure_csv import read_pressure_csv
from massfit.records.record import Calibrations

UNSTATED_SD = 0.1 * PASCAL_PER_HPA
"""Standard deviation of a reading where the file states none, Pa."""


def read_calibrations(path: Path, *, source: str) -> Calibrations:
    """Read the readings of a recorder at a known pressure.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the header ``time,value`` or ``time,value,sd`` and a comment ``# units: hPa``: UTC time, reading
        less the known pressure (any constant may be added), and its standard deviation.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    Calibrations
        Rows without a value are left out; 0.1 hPa where no standard deviation is stated.

    Raises
    ------
    InputError
        Every fault of the file, with lines.
    """
    time, values = read_pressure_csv(path, [("time", "value"), ("time", "value", "sd")], source=source)
    sd = np.full(len(time), np.nan) if len(values) < 2 else values[1]
    if np.any(sd <= 0.0):
        problem = f"{int(np.sum(sd <= 0.0))} standard deviations are not above 0"
        raise InputError(Fault(source, "sd", problem, "Must be above 0, or empty", "Correct them"))
    valid = np.isfinite(values[0])
    if valid.sum() < 2:
        problem = f"the file has {int(valid.sum())} readings"
        raise InputError(Fault(source, "value", problem, "Must be at least two: only changes matter", "Check the file"))
    return Calibrations(time[valid], values[0][valid], np.where(np.isnan(sd), UNSTATED_SD, sd)[valid])
