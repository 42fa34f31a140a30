"""Whether the values of a record can be pressure on the sea floor at all."""

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA, STANDARD_GRAVITY
from massfit.io.locate import KeyPath
from massfit.io.reading import Reading
from massfit.records.clean import find_spikes
from massfit.records.record import Record
from massfit.site import Site

_DEEPEST = 1.2e8
"""Pa; the Challenger Deep, just under 11 km, holds about 1.1e8 Pa."""
_FARTHEST = 1e6
"""Pa, a hundred metres of water: ten times the largest tide, and more than drift, weather and steps together."""
_ABSOLUTE_ABOVE = 1e6
"""Pa; a smaller median belongs to a record that is given relative to something."""
_DEPTH_RATIO = 1.5
_SEA_WATER = 1040.0
"""kg m-3, mean of a deep column."""


def check_values(reading: Reading, path: KeyPath, site: Site, record: Record, used: NDArray[np.bool_]) -> None:
    """Refuse values that no sea floor gives; warn where depth and pressure disagree.

    Parameters
    ----------
    reading : Reading
        Receives the faults and warnings.
    path : tuple
        Where the deployment stands in the file.
    site : Site
    record : Record
    used : (n,) array of bool
        Samples inside the window and outside the exclusions; only these are judged.
    """
    place = (*path, "file")
    pressure = record.pressure[used]
    if abs(record.reference) > _DEEPEST:
        problem = f"the median pressure is {record.reference / PASCAL_PER_HPA:.4g} hPa"
        reading.fault(place, problem, "No ocean is that deep", "Correct `units`, in the file or here")
        return
    if pressure.size > 1 and np.ptp(pressure) == 0.0:
        problem = f"all {pressure.size} samples have the same value"
        reading.fault(place, problem, "A recorder that works varies", "Leave the deployment out")
        return
    _check_far(reading, place, record, used)
    _check_depth(reading, site, record)


def _check_far(reading: Reading, place: KeyPath, record: Record, used: NDArray[np.bool_]) -> None:
    # the median of what is used: a file may begin on deck and hold more of that than of the sea floor
    far = np.zeros(used.size, dtype=bool)
    far[used] = np.abs(record.pressure[used] - np.median(record.pressure[used])) > _FARTHEST
    if not far.any():
        return
    far[used] &= ~find_spikes(record.pressure[used])  # single ones are rejected when the record is reduced
    if not far.any():
        return
    first = int(np.flatnonzero(far)[0])
    when = np.datetime_as_string(record.time[first], unit="s")
    value = (record.pressure[first] + record.reference) / PASCAL_PER_HPA
    reading.fault(
        place,
        f"{int(far.sum())} samples lie more than 100 m of water from the median, the first {value:.6g} hPa at {when}",
        "Must be pressure on the sea floor",
        "State what means missing in the file, or leave the time on deck and on the way out with `exclude`",
    )


def _check_depth(reading: Reading, site: Site, record: Record) -> None:
    if site.depth_m is None or abs(record.reference) < _ABSOLUTE_ABOVE:
        return
    expected = _SEA_WATER * STANDARD_GRAVITY * site.depth_m
    if not 1.0 / _DEPTH_RATIO < record.reference / expected < _DEPTH_RATIO:
        reading.warnings.append(
            f"{record.deployment}: the median pressure of {record.reference / PASCAL_PER_HPA:.4g} hPa does not belong "
            f"to a depth of {site.depth_m:g} m, which has about {expected / PASCAL_PER_HPA:.4g} hPa: check the units."
        )
