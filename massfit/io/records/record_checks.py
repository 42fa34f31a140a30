"""Whether the values of a record can be pressure on the sea floor at all."""

import numpy as np
from numpy.typing import NDArray

from massfit.constants import PASCAL_PER_HPA, STANDARD_GRAVITY
from massfit.io.network.locate import KeyPath
from massfit.io.network.reading import Reading
from massfit.io.records.clock import SET_BACK
from massfit.io.records.samples import COARSE
from massfit.io.records.units import PRESSURE_UNITS, pascal_per_unit
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
_UNIT_RATIO = 1.2
"""Units that differ by less cannot be told apart by depth."""
_ALIKE = 0.05
_SEA_WATER = 1040.0
"""kg m-3, mean of a deep column."""
_LEAST_SPREAD, _MOST_SPREAD = 3.0, 7e4
"""Pa; the quietest sea floor varies by ten times the first (common practice), the largest tides by less than the
second."""
_WARNED = {
    COARSE: "Have the record written in double precision, or as a difference from a constant",
    SET_BACK: "If that is summer time, write the stamps in UTC; `exclude` leaves out what cannot be told",
}
"""What is done about an action of reading that is worth a warning."""


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
        action = f"Correct `units`, in the file or here{_likely(record, site)}"
        reading.fault(place, problem, "No ocean is that deep", action)
        return
    if pressure.size > 1 and np.ptp(pressure) == 0.0:
        problem = f"all {pressure.size} samples have the same value"
        reading.fault(place, problem, "A recorder that works varies", "Leave the deployment out")
        return
    _check_far(reading, place, record, used)
    _check_depth(reading, site, record)
    _check_spread(reading, record, pressure)
    for done in record.actions:
        if done.what in _WARNED:
            reading.warnings.append(f"{record.deployment}: {done.what}: {done.detail}. {_WARNED[done.what]}.")


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
            f"to a depth of {site.depth_m:g} m, which has about {expected / PASCAL_PER_HPA:.4g} hPa: check the units"
            f"{_likely(record, site)}."
        )


def _check_spread(reading: Reading, record: Record, pressure: NDArray[np.float64]) -> None:
    spread = float(np.std(pressure))
    if not pressure.size or _LEAST_SPREAD < spread < _MOST_SPREAD:
        return
    fitting = _fitting(record, spread, _LEAST_SPREAD * 10.0, _MOST_SPREAD)
    likely = ""
    if fitting:
        likely = f': "{fitting[0]}" would make it {_factor(fitting[0], record, spread) / PASCAL_PER_HPA:.3g} hPa'
    reading.warnings.append(
        f"{record.deployment}: the pressure varies by {spread / PASCAL_PER_HPA:.3g} hPa (1 sd), and tides and weather "
        f"on the sea floor by about 1 to 100: check the units{likely}."
    )


def _likely(record: Record, site: Site) -> str:
    """Name the unit that would fit: the depth where that is known, else any sea floor."""
    low, high = 2e6, _DEEPEST
    if site.depth_m:
        expected = _SEA_WATER * STANDARD_GRAVITY * site.depth_m
        low, high = expected / _UNIT_RATIO, expected * _UNIT_RATIO
    fitting = _fitting(record, record.reference, low, high)
    each = (f'"{unit}" would give {_depth(unit, record):.0f} m' for unit in fitting[:3])
    return f": {', '.join(each)}" if fitting else ""


def _depth(unit: str, record: Record) -> float:
    return _factor(unit, record, record.reference) / (_SEA_WATER * STANDARD_GRAVITY)


def _fitting(record: Record, value: float, low: float, high: float) -> list[str]:
    """Find units in which a value, read as Pa, would lie within bounds; of like ones, such as dbar and m, the first."""
    fitting: dict[str, float] = {}
    for unit in PRESSURE_UNITS if record.units in PRESSURE_UNITS else ():
        size = _factor(unit, record, value)
        known = any(abs(size / other - 1.0) < _ALIKE for other in (value, *fitting.values()))
        if low < size < high and not known:
            fitting[unit] = size
    return list(fitting)


def _factor(unit: str, record: Record, value: float) -> float:
    """Give what a value would be if the record were in another unit, Pa."""
    own, other = (pascal_per_unit(each, density_kg_m3=_SEA_WATER) for each in (record.units, unit))
    return value * other / own
