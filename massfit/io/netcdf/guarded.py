"""Values that stay in their file until they are used, and say so when the file turns out to be damaged."""

from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray
from xarray.backends import BackendArray
from xarray.core import indexing

from massfit.io.netcdf.netcdf_file import damage_as_fault


class _Guarded(BackendArray):
    """Lazy values whose reading may fail long after their file was opened.

    Parameters
    ----------
    data : xarray.DataArray
        Lazy.
    source : str
        File as the analyst wrote it.
    """

    def __init__(self, data: xr.DataArray, source: str) -> None:
        self.data, self.source = data, source
        self.shape, self.dtype = data.shape, data.dtype

    def __getitem__(self, key: indexing.ExplicitIndexer) -> NDArray[Any]:
        """Read the values of a key."""
        return np.asarray(
            indexing.explicit_indexing_adapter(key, self.shape, indexing.IndexingSupport.OUTER, self._read)
        )

    def _read(self, key: tuple[Any, ...]) -> NDArray[Any]:
        with damage_as_fault(self.source, str(self.data.name)):
            return self.data.isel(dict(zip(self.data.dims, key, strict=True))).to_numpy()


def guarded(data: xr.DataArray, *, source: str) -> xr.DataArray:
    """Let a lazy variable tell of damage by file and name, whenever it is read.

    Parameters
    ----------
    data : xarray.DataArray
        Lazy, its file open.
    source : str
        File as the analyst wrote it.

    Returns
    -------
    xarray.DataArray
        The same, lazy; an InputError where a part of it that is read is damaged.
    """
    lazy = indexing.LazilyIndexedArray(_Guarded(data, source))
    variable = xr.Variable(data.dims, lazy, attrs=data.attrs)
    return xr.DataArray(variable, coords=data.coords, name=data.name)
