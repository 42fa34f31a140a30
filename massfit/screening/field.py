"""Bottom pressure of an ocean model as the screening reads it: in blocks of times and rows."""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.corrections.grid_field import grid_field
from massfit.errors import Fault, InputError

OceanMeanChoice = Literal["subtract", "removed"]

_LARGEST_ANOMALY_PA = 1e4
_MONTHS = 12  # of the first year that are looked at: ice comes and goes

OCEAN_MEAN_CHOICES = ("subtract", "removed")
"""What is done about the mean over the ocean: subtract it here, or it was removed by who made the field."""


class BlockSource(Protocol):
    """A field over (time, lat, lon) of which parts can be read, here or in another process."""

    @property
    def time(self) -> NDArray[np.datetime64]:
        """Middles of the intervals, (n_time,), UTC, in order."""
        ...

    @property
    def latitude_deg(self) -> NDArray[np.float64]:
        """Centres of the rows, (n_lat,), monotonic."""
        ...

    @property
    def longitude_deg(self) -> NDArray[np.float64]:
        """Centres of the columns, (n_lon,), monotonic and unwrapped."""
        ...

    @property
    def chunks(self) -> tuple[int, int]:
        """Times and rows that are stored together and best read together."""
        ...

    def read(self, when: slice, rows: slice) -> NDArray[np.float64]:
        """Values in Pa, (n_when, n_rows, n_lon), a new array; NaN where there is none."""
        ...


@dataclass(frozen=True, eq=False)
class ArraySource:
    """A field in memory, or one that xarray reads when it is asked for values.

    Parameters
    ----------
    data : xarray.DataArray
        (time, lat, lon), Pa.
    time, latitude_deg, longitude_deg : array
        As of :class:`BlockSource`.
    """

    data: xr.DataArray
    time: NDArray[np.datetime64]
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]

    @property
    def chunks(self) -> tuple[int, int]:
        """Of a chunked array its first chunk; one time of all rows otherwise."""
        chunks = self.data.chunks
        return (1, self.latitude_deg.size) if chunks is None else (int(chunks[0][0]), int(chunks[1][0]))

    def read(self, when: slice, rows: slice) -> NDArray[np.float64]:
        """Values of some times and rows."""
        return np.array(self.data[when, rows].values, dtype=np.float64)


@dataclass(frozen=True, eq=False)
class ModelField:
    """Bottom pressure of one ocean model.

    Parameters
    ----------
    name : str
        Of the model.
    pressure : xarray.DataArray or BlockSource
        Pa, over (time, lat, lon): means over equal intervals, stamped with their middle, UTC; NaN on land. Degrees
        north ascending or descending, degrees east in either convention. May be lazy.
    ocean_mean : str
        ``"subtract"``: the mean over the model's own ocean, weighted with area, is subtracted at every time;
        ``"removed"``: it was removed before, which is checked where the model covers the ocean.

    Raises
    ------
    InputError
        Another choice of the ocean mean, or coordinates that are missing or out of order.

    Examples
    --------
    >>> time = np.arange("2015-01-01T12", "2018-01-01T12", 24, dtype="datetime64[h]").astype("datetime64[ns]")
    >>> pressure = xr.DataArray(
    ...     np.zeros((time.size, 2, 3)), dims=("time", "lat", "lon"),
    ...     coords={"time": time, "lat": [-45.0, 45.0], "lon": [-120.0, 0.0, 120.0]})
    >>> ModelField("invented", pressure, "subtract").source.latitude_deg
    array([-45.,  45.])
    """

    name: str
    pressure: xr.DataArray | BlockSource
    ocean_mean: OceanMeanChoice

    def __post_init__(self) -> None:
        if self.ocean_mean not in OCEAN_MEAN_CHOICES:
            raise InputError(ocean_mean_fault(self.name, self.ocean_mean))
        _ = self.source

    @property
    def source(self) -> BlockSource:
        """Where its blocks are read from."""
        if not isinstance(self.pressure, xr.DataArray):
            return self.pressure
        ordered = grid_field(self.name, self.pressure)
        return ArraySource(ordered.data, ordered.time, ordered.latitude_deg, ordered.longitude_deg)


def ocean_mean_fault(name: str, given: object) -> Fault:
    """Fault of a field of which nobody said what to do about its ocean mean.

    Parameters
    ----------
    name : str
        Of the model.
    given : object
        What was said; None for nothing.

    Returns
    -------
    Fault
    """
    problem = "there is no choice for its ocean mean" if given is None else f"the choice is {given!r}"
    return Fault(
        name,
        "ocean mean",
        problem,
        "Must be subtract (the mean over the model's own ocean is subtracted here) or removed (it was before)",
        f"Give --ocean-mean subtract for all models, or --ocean-mean {name}=removed",
    )


@dataclass(frozen=True, eq=False)
class FirstLook:
    """What the first year of a field tells of its cells.

    Parameters
    ----------
    wet : (n_cell,) array of bool
        Cells that have water.
    pressure : (n_cell,) array
        Pressure from which the sums are counted, Pa: their mean, or 0 where the field holds anomalies.
    """

    wet: NDArray[np.bool_]
    pressure: NDArray[np.float64]

    def rows(self, cells: slice) -> "FirstLook":
        """Take some cells."""
        return FirstLook(self.wet[cells], self.pressure[cells])


def first_look(source: BlockSource) -> FirstLook:
    """Look at one time in each month of the first year.

    Parameters
    ----------
    source : BlockSource

    Returns
    -------
    FirstLook
    """
    count, total = np.zeros((2, source.latitude_deg.size, source.longitude_deg.size))
    for when, rows in _looks(source):
        values = source.read(when, rows)[:: _month(source)]
        finite = np.isfinite(values)
        count[rows] += finite.sum(axis=0)
        total[rows] += np.where(finite, values, 0.0).sum(axis=0)
    pressure = (total / np.maximum(count, 1)).ravel()
    # sums of anomalies lose no digits that matter; those of whole pressures would
    whole = np.abs(pressure).max() > _LARGEST_ANOMALY_PA
    return FirstLook(count.ravel() > 0, pressure if whole else np.zeros_like(pressure))


def _month(source: BlockSource) -> int:
    """Count the times of a month."""
    step = float((source.time[1] - source.time[0]) / np.timedelta64(1, "D"))
    return max(1, round(30.0 / step))


def _looks(source: BlockSource) -> Iterator[tuple[slice, slice]]:
    """Give times and rows from which every month of the first year is taken: no stored piece is read twice."""
    month, rows = _month(source), source.latitude_deg.size
    if source.chunks[0] <= month:
        for first in range(0, min(_MONTHS * month, source.time.size), month):
            yield slice(first, first + 1), slice(0, rows)
        return
    for row in range(0, rows, source.chunks[1]):
        yield slice(0, min(_MONTHS * month, source.time.size)), slice(row, min(row + source.chunks[1], rows))
