"""Instants from the counts of time of a CF NetCDF file."""

from collections.abc import Mapping
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.records.stretches import stretches

_ATTRIBUTES = ("units", "calendar", "_FillValue", "missing_value")
_LAST_NS = 9.2e18
"""Nanoseconds from 1970 that 64 bits hold, 292 years."""
_NOT_A_TIME = np.datetime64("NaT", "ns").astype(np.int64)


def cf_instants(values: NDArray[Any], attributes: Mapping[str, Any], *, source: str) -> NDArray[np.datetime64]:
    """Decode counts of time.

    Unit and origin are those that a general decoder gives for the counts 0, 1 and 2; the rest is arithmetic that keeps
    whole counts exact, and takes less memory beside the result.

    Parameters
    ----------
    values : array
        Counts, as they are stored.
    attributes : mapping
        Of the variable: units, calendar, fill values.
    source : str
        File, for the fault.

    Returns
    -------
    array of datetime64[ns]
        NaT where a count is missing.

    Raises
    ------
    InputError
        Units that are no count of time, or years outside 1678 to 2262.

    Examples
    --------
    >>> cf_instants(np.array([0.5]), {"units": "days since 2016-01-01"}, source="a.nc").astype("datetime64[h]")
    array(['2016-01-01T12'], dtype='datetime64[h]')
    """
    kept = {key: attributes[key] for key in _ATTRIBUTES if key in attributes}
    try:
        quick = _by_arithmetic(values, kept)
        return _decoded(values, kept) if quick is None else quick
    except (ValueError, ImportError, OverflowError) as error:
        problem = f"the times in {str(attributes['units'])!r} cannot be decoded"
        allowed = "Must be like 'seconds since 1970-01-01', in the years 1678 to 2262"
        raise InputError(Fault(source, "time", problem, allowed, "Correct the units of the time")) from error


def native(numbers: NDArray[Any]) -> NDArray[Any]:
    """Give numbers the byte order of the machine: those of the classic format are the other way round on most."""
    return numbers.astype(numbers.dtype.newbyteorder("="), copy=False)


def _decoded(values: NDArray[Any], attributes: dict[str, Any]) -> NDArray[np.datetime64]:
    dims = [f"axis_{axis}" for axis in range(values.ndim)]
    decoded = xr.decode_cf(xr.Dataset({"stamps": (dims, values, attributes)}))["stamps"].values
    return np.asarray(decoded, dtype="datetime64[ns]")


def _by_arithmetic(values: NDArray[Any], attributes: dict[str, Any]) -> NDArray[np.datetime64] | None:
    """Origin plus counts of a unit; None where units are of unequal length or 64 bits would not hold it."""
    if values.dtype.kind not in "iuf":
        return None
    described = {key: value for key, value in attributes.items() if key in ("units", "calendar")}
    probe = _decoded(np.arange(3.0), described).astype(np.int64)
    origin, unit = int(probe[0]), int(probe[1] - probe[0])
    if unit <= 0 or probe[2] - probe[1] != unit:
        return None
    fills = [np.asarray(attributes[key], dtype=values.dtype) for key in _ATTRIBUTES[2:] if key in attributes]
    counts, instants = values.ravel(), np.empty(values.size, dtype=np.int64)
    for here in stretches(values.size):
        block = _block(native(counts[here]), fills, unit, origin)
        if block is None:
            return None
        instants[here] = block
    return np.asarray(instants.view("datetime64[ns]").reshape(values.shape))


def _block(counts: NDArray[Any], fills: list[NDArray[Any]], unit: int, origin: int) -> NDArray[np.int64] | None:
    missing = ~np.isfinite(counts) if counts.dtype.kind == "f" else np.zeros(counts.shape, dtype=bool)
    for fill in fills:
        for number in fill.ravel():
            missing |= counts == number
    if missing.any():
        counts = np.where(missing, counts.dtype.type(0), counts)
    low, high = (float(edge) * unit + origin for edge in (counts.min(initial=0), counts.max(initial=0)))
    if not -_LAST_NS < low <= high < _LAST_NS:
        return None
    whole = counts if counts.dtype.kind in "iu" else np.floor(counts)
    instants: NDArray[np.int64] = np.asarray(whole.astype(np.int64) * unit + origin)
    if whole is not counts and (whole != counts).any():
        instants += np.rint((counts - whole) * np.float64(unit)).astype(np.int64)
    instants[missing] = _NOT_A_TIME
    return instants
