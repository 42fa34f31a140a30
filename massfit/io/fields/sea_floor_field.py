"""Bottom pressure of an ocean model in NetCDF or Zarr, in one file or many, read block by block."""

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import Fault, InputError
from massfit.io.netcdf.netcdf_file import damage_as_fault, is_netcdf, open_netcdf
from massfit.io.netcdf.variables import canonical, decoded, pascal_of_field, pick, require_order

CALENDARS = ("standard", "gregorian", "proleptic_gregorian")
"""Calendars that are read: their days are real ones, so that a year has its length."""

_DIMENSIONS = ("time", "lat", "lon")
_ZARR_SIGNS = ("zarr.json", ".zgroup", ".zmetadata")
_SAME_DEG = 1e-4


@dataclass(frozen=True)
class Piece:
    """One file, and which of all times it holds.

    Parameters
    ----------
    path : str
    first, last : int
        Times, the last one excluded.
    """

    path: str
    first: int
    last: int


@dataclass(frozen=True, eq=False)
class FileSource:
    """A field in files; a :class:`massfit.screening.field.BlockSource` that every process opens for itself.

    Parameters
    ----------
    pieces : tuple of Piece
        In order of time.
    variable : str
    pascal_per_unit : float
    time, latitude_deg, longitude_deg : array
        As of :class:`massfit.screening.field.BlockSource`.
    chunks : (int, int)
        Times and rows that are stored together.
    """

    pieces: tuple[Piece, ...]
    variable: str
    pascal_per_unit: float
    time: NDArray[np.datetime64]
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]
    chunks: tuple[int, int]

    def read(self, when: slice, rows: slice) -> NDArray[np.float64]:
        """Values in Pa, (n_when, n_rows, n_lon).

        Raises
        ------
        InputError
            A file that cannot be read there.
        """
        blocks = []
        for piece in self.pieces:
            first, last = max(when.start, piece.first), min(when.stop, piece.last)
            if first < last:
                own = slice(first - piece.first, last - piece.first)
                path = Path(piece.path)
                with damage_as_fault(piece.path, self.variable, _kind(path)), _opened(path, decode=True) as dataset:
                    values = dataset[self.variable].isel(time=own, lat=rows).transpose(*_DIMENSIONS)
                    blocks.append(np.array(values.to_numpy(), dtype=np.float64))
        block = blocks[0] if len(blocks) == 1 else np.concatenate(blocks)
        if self.pascal_per_unit != 1.0:
            block *= self.pascal_per_unit
        return block


def sea_floor_field(paths: list[Path], *, variable: str | None = None) -> FileSource:
    """Look into the files of one model.

    Parameters
    ----------
    paths : list of pathlib.Path
        NetCDF files or Zarr stores over (time, lat, lon), of one variable and one grid, in any order.
    variable : str, optional
        Which variable; optional where unambiguous.

    Returns
    -------
    FileSource

    Raises
    ------
    InputError
        Every fault of every file: not NetCDF or Zarr, no such variable, no time, another calendar, unit or grid;
        times that overlap.
    """
    faults: list[Fault] = []
    looked: list[_Look] = []
    for path in paths:
        try:
            looked.append(_look(path, variable))
        except InputError as error:
            faults += error.faults
    faults += [fault for look in looked[1:] for fault in _differs(look, looked[0])]
    if faults:
        raise InputError(faults)
    looked.sort(key=lambda look: look.time[0])
    ends = np.cumsum([look.time.size for look in looked])
    time = np.concatenate([look.time for look in looked])
    _require_apart(looked)
    pieces = tuple(
        Piece(look.path, int(end) - look.time.size, int(end)) for look, end in zip(looked, ends, strict=True)
    )
    first = looked[0]
    return FileSource(pieces, first.variable, first.factor, time, first.latitude_deg, first.longitude_deg, first.chunks)


@dataclass(frozen=True, eq=False)
class _Look:
    """What a file holds."""

    path: str
    variable: str
    factor: float
    time: NDArray[np.datetime64]
    latitude_deg: NDArray[np.float64]
    longitude_deg: NDArray[np.float64]
    chunks: tuple[int, int]


def _look(path: Path, variable: str | None) -> _Look:
    source = str(path)
    with damage_as_fault(source, kind=_kind(path)), _opened(path, decode=False) as dataset:
        name = pick(dataset, [_DIMENSIONS], source=source, variable=variable)
        _require_calendar(dataset, source)
        factor = pascal_of_field(dataset[name].attrs.get("units"), source=source, name=name)
        data = decoded(dataset, name, source=source)
        latitude, longitude = (np.asarray(data[axis].values, dtype=float) for axis in ("lat", "lon"))
        longitude = np.unwrap(longitude, period=360.0)
        faults = [
            Fault(source, axis, "the values are out of order or fewer than two", "Must rise or fall throughout")
            for axis, values in (("lat", latitude), ("lon", longitude))
            if values.size < 2 or not (np.all(np.diff(values) > 0.0) or np.all(np.diff(values) < 0.0))
        ]
        if np.abs(latitude).max(initial=0.0) > 90.0:
            faults.append(Fault(source, "lat", f"a latitude is {np.abs(latitude).max():g}", "Must be in [-90, 90]"))
        if longitude.size > 1 and np.ptp(longitude) >= 360.0:
            action = "Drop the column that stands twice"
            faults.append(
                Fault(source, "lon", f"the columns span {np.ptp(longitude):g} degrees", "Once around", action)
            )
        if not data["time"].size:
            faults.append(Fault(source, "time", "the file holds no time", "At least one", "Leave the file out"))
        if faults:
            raise InputError(faults)
        return _Look(source, name, factor, data["time"].to_numpy(), latitude, longitude, _chunks(dataset[name]))


def _chunks(data: xr.DataArray) -> tuple[int, int]:
    """Give times and rows of a stored piece; a single row of one time where values stand one after the other."""
    stored = data.encoding.get("chunksizes") or data.encoding.get("chunks")
    if not stored:
        return 1, 1
    own = dict(zip(data.dims, stored, strict=True))
    return int(own["time"]), int(own["lat"])


def _require_calendar(dataset: xr.Dataset, source: str) -> None:
    calendar = str(dataset["time"].attrs.get("calendar", "standard")).lower() if "time" in dataset.variables else ""
    if calendar and calendar not in CALENDARS:
        problem = f"the calendar is {calendar!r}"
        allowed = f"Must be {', '.join(CALENDARS[:-1])} or {CALENDARS[-1]}: a year needs its real length"
        action = "Give every time its real date; a 29 February that is not there may be missing"
        raise InputError(Fault(source, "time", problem, allowed, action))


def _differs(look: _Look, first: _Look) -> list[Fault]:
    """Faults of a file that does not go with the first of its model."""
    same = f"Must be as in {first.path}"
    faults = []
    for axis in ("latitude_deg", "longitude_deg"):
        own, other = getattr(look, axis), getattr(first, axis)
        if own.size != other.size or np.abs(own - other).max() > _SAME_DEG:
            shown = f"{own.size} values from {own[0]:g} to {own[-1]:g}"
            faults.append(Fault(look.path, axis.removesuffix("_deg"), f"there are {shown}", same, "Use one grid"))
    if look.variable != first.variable:
        faults.append(Fault(look.path, look.variable, "the variable has another name", same, "Rename it"))
    if look.factor != first.factor:
        faults.append(Fault(look.path, look.variable, "the unit is another", same, "Convert the values"))
    return faults


def _require_apart(looked: list[_Look]) -> None:
    """Refuse files whose times overlap."""
    faults = []
    for before, after in pairwise(looked):
        if after.time[0] <= before.time[-1]:
            problem = f"it begins {str(after.time[0])[:16]}, and {before.path} ends {str(before.time[-1])[:16]}"
            faults.append(Fault(after.path, "time", problem, "Files must follow each other", "Leave one of them out"))
    if faults:
        raise InputError(faults)
    require_order(np.concatenate([look.time for look in looked]), source=looked[0].path)


@contextmanager
def _opened(path: Path, *, decode: bool) -> Iterator[xr.Dataset]:
    """Open a file, with fill values and packing decoded or not; names of its dimensions are ours."""
    # a file is examined when it is first looked into, and then opened again for every block
    with _raw(path, examined=decode) as raw:
        dataset = canonical(raw)
        yield xr.decode_cf(dataset, decode_times=False) if decode else dataset


def _raw(path: Path, *, examined: bool) -> xr.Dataset:
    if path.is_dir():
        return _zarr(path)
    if not path.is_file():
        raise InputError(Fault(str(path), "", "there is no such file", "Must be NetCDF or Zarr", "Check the path"))
    return open_netcdf(path, decode=False, examined=examined, mapped=True)


def _zarr(path: Path) -> xr.Dataset:
    try:
        import zarr  # noqa: F401
    except ImportError as error:
        problem = f"it is a Zarr store, and the library that reads them is not installed ({error})"
        raise InputError(Fault(str(path), "", problem, "", "Install massfit[big], or give NetCDF")) from error
    return xr.open_dataset(path, engine="zarr", consolidated=False, mask_and_scale=False, decode_times=False)


def _kind(path: Path) -> str:
    return "Zarr" if path.is_dir() else "NetCDF"


def is_zarr(path: Path) -> bool:
    """Whether a folder is a Zarr store, by what lies in it.

    Parameters
    ----------
    path : pathlib.Path

    Returns
    -------
    bool
    """
    return path.is_dir() and any((path / sign).is_file() for sign in _ZARR_SIGNS)


def is_field_file(path: Path) -> bool:
    """Whether a path may hold a field: NetCDF by its first bytes, or a Zarr store.

    Parameters
    ----------
    path : pathlib.Path

    Returns
    -------
    bool
    """
    return is_zarr(path) or (path.is_file() and is_netcdf(path))
