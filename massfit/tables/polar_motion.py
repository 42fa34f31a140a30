"""Observed polar motion, as the package astropy-iers-data ships it.

Two products of the International Earth Rotation and Reference Systems Service are joined: the final
series C04 (IERS_B_FILE) and, after its end, the combined rapid series (IERS_A_FILE), whose last year
is a prediction. Both are daily at 0 h UTC, in arc seconds, in fixed columns.
"""

from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import astropy_iers_data
import numpy as np
from numpy.typing import NDArray

from massfit.errors import Fault, InputError

RADIAN_PER_ARCSECOND = float(np.pi / 648_000.0)

_MJD_ORIGIN = np.datetime64("1858-11-17T00:00:00", "ns")


@dataclass(frozen=True)
class PolarMotion:
    """Position of the pole on consecutive days.

    Parameters
    ----------
    time : (n,) array of datetime64[ns]
        0 h UTC of consecutive days.
    x, y : (n,) array of float
        Rad: x_p towards the Greenwich meridian, y_p towards 90 degrees west.
    predicted : (n,) array of bool
        Whether the value is a prediction.
    """

    time: NDArray[np.datetime64]
    x: NDArray[np.float64]
    y: NDArray[np.float64]
    predicted: NDArray[np.bool_]


@lru_cache(maxsize=1)
def observed_polar_motion() -> PolarMotion:
    """Join the shipped series, final values first.

    Returns
    -------
    PolarMotion
        From 1962 on; read once a process.

    Raises
    ------
    InputError
        The shipped files are not laid out as their descriptions say.

    Examples
    --------
    >>> pole = observed_polar_motion()
    >>> str(pole.time[0])[:10], round(float(pole.x[0] / RADIAN_PER_ARCSECOND), 4)
    ('1962-01-01', -0.0127)
    """
    final = parse_final(Path(astropy_iers_data.IERS_B_FILE).read_text(encoding="ascii"))
    rapid, predicted = parse_rapid(Path(astropy_iers_data.IERS_A_FILE).read_text(encoding="ascii"))
    return join(final, rapid, predicted)


def parse_final(text: str) -> NDArray[np.float64]:
    """Rows of (modified Julian date, x, y in arc seconds) of a C04 file.

    Parameters
    ----------
    text : str
        The file: comment lines begin with ``#``; columns 17-26, 27-38 and 39-50 hold date, x and y.

    Returns
    -------
    (n, 3) array of float
    """
    rows = [
        (float(line[16:26]), float(line[26:38]), float(line[38:50]))
        for line in text.splitlines()
        if line and not line.startswith("#")
    ]
    return np.array(rows, dtype=float).reshape(-1, 3)


def parse_rapid(text: str) -> tuple[NDArray[np.float64], NDArray[np.bool_]]:
    """Rows of a combined rapid file, and which of them are predictions.

    Parameters
    ----------
    text : str
        The file: columns 8-15, 19-27 and 38-46 hold date, x and y; column 17 is ``I`` (observed) or
        ``P`` (predicted) and blank where there is no value.

    Returns
    -------
    (n, 3) array of float
        Modified Julian date, x and y in arc seconds.
    (n,) array of bool
    """
    lines = [line for line in text.splitlines() if line[16:17] in ("I", "P")]
    rows = [(float(line[7:15]), float(line[18:27]), float(line[37:46])) for line in lines]
    return np.array(rows, dtype=float).reshape(-1, 3), np.array([line[16] == "P" for line in lines], dtype=bool)


def join(final: NDArray[np.float64], rapid: NDArray[np.float64], predicted: NDArray[np.bool_]) -> PolarMotion:
    """Put the rapid rows after the end of the final ones.

    Parameters
    ----------
    final, rapid : (n, 3) array of float
        Modified Julian date, x and y in arc seconds.
    predicted : (n,) array of bool
        For the rapid rows.

    Returns
    -------
    PolarMotion

    Raises
    ------
    InputError
        Days are missing or repeated.
    """
    newer = rapid[:, 0] > (final[-1, 0] if final.size else -np.inf)
    rows = np.concatenate([final, rapid[newer]])
    flags = np.concatenate([np.zeros(len(final), dtype=bool), predicted[newer]])
    if len(rows) < 2 or not np.all(np.diff(rows[:, 0]) == 1.0):
        raise InputError(
            Fault(
                "astropy-iers-data",
                "polar motion",
                "the shipped days are not consecutive",
                "Must be one value a day",
                "Reinstall or update the package astropy-iers-data",
            )
        )
    time = _MJD_ORIGIN + np.round(rows[:, 0]).astype("timedelta64[D]")
    x, y = rows[:, 1:].T * RADIAN_PER_ARCSECOND
    return PolarMotion(time, x, y, flags)


def polar_motion_at(
    time: NDArray[np.datetime64], *, table: PolarMotion | None = None
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.bool_]]:
    """Position of the pole, linear between the daily values.

    Parameters
    ----------
    time : (n,) array of datetime64
        UTC.
    table : PolarMotion, optional
        The shipped one by default.

    Returns
    -------
    x, y : (n,) array of float
        Rad.
    predicted : (n,) array of bool
        Whether a prediction enters.

    Raises
    ------
    InputError
        The table does not cover the time asked for.

    Examples
    --------
    >>> x, y, predicted = polar_motion_at(np.array(["2010-01-01"], dtype="datetime64[ns]"))
    >>> round(float(x[0] / RADIAN_PER_ARCSECOND), 4), bool(predicted[0])
    (0.0987, False)
    """
    table = observed_polar_motion() if table is None else table
    instants = np.asarray(time, dtype="datetime64[ns]")
    if instants.size and (instants.min() < table.time[0] or instants.max() > table.time[-1]):
        raise InputError(_not_covered(instants, table))
    days = (instants - table.time[0]) / np.timedelta64(1, "D")
    whole = np.arange(len(table.time), dtype=float)
    after = np.ceil(days).astype(int)
    return np.interp(days, whole, table.x), np.interp(days, whole, table.y), table.predicted[after]


def _not_covered(instants: NDArray[np.datetime64], table: PolarMotion) -> Fault:
    asked = f"{str(instants.min())[:10]} to {str(instants.max())[:10]}"
    return Fault(
        "astropy-iers-data",
        "polar motion",
        f"the pole tide needs polar motion from {asked}, which is not covered",
        f"The installed table covers {str(table.time[0])[:10]} to {str(table.time[-1])[:10]}",
        'Update the package astropy-iers-data, or set pole_tide = "none"',
    )
