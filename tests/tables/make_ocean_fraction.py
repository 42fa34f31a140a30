"""Make massfit/tables/ocean_fraction.npz from the 30-arc-second mask of the package global-land-mask.

Run ``python tests/tables/make_ocean_fraction.py``. The mask (from the GLOBE elevation model, Hastings &
Dunbar 1999) marks every cell without land elevation as ocean: marginal ice shelves are ocean; lakes,
the Caspian and the Dead Sea are land. It is read in strips of a quarter of a degree, so that the
gigabyte of the whole mask is never in memory. Water that is not connected to the open ocean on the
quarter-degree grid (corners count as connected) becomes land: one cell of 15 km2 at 78.6 S, 161.6 E.
"""

import zipfile
from collections.abc import Iterator
from importlib.util import find_spec
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

ROWS, COLUMNS, FINE = 720, 1440, 30  # quarter-degree rows and columns, fine cells per side of a coarse one
TARGET = Path(__file__).parents[2] / "massfit" / "tables" / "ocean_fraction.npz"


def strip_counts(last_row: int = ROWS) -> Iterator[NDArray[np.uint16]]:
    """Ocean cells (0 to 900) in every cell of each quarter-degree row, from the north pole down."""
    spec = find_spec("global_land_mask")
    assert spec is not None
    assert spec.origin is not None
    archive = Path(spec.origin).parent / "globe_combined_mask_compressed.npz"
    with zipfile.ZipFile(archive) as members, members.open("mask.npy") as stream:
        np.lib.format.read_magic(stream)
        shape, fortran_order, dtype = np.lib.format.read_array_header_1_0(stream)
        assert (shape, fortran_order, dtype) == ((ROWS * FINE, COLUMNS * FINE), False, np.dtype(bool))
        for _ in range(last_row):
            strip = np.frombuffer(stream.read(FINE * COLUMNS * FINE), dtype=np.uint8)
            yield strip.reshape(FINE, COLUMNS, FINE).sum(axis=(0, 2), dtype=np.uint16)


def open_ocean(count: NDArray[np.uint16]) -> NDArray[np.uint16]:
    """Only the water that is connected to the largest body of water across the date line."""
    doubled = np.concatenate([count, count], axis=1) > 0
    labels, _ = ndimage.label(doubled, structure=np.ones((3, 3)))
    largest = labels == np.bincount(labels[labels > 0]).argmax()
    joined = largest[:, :COLUMNS] | largest[:, COLUMNS:]
    return np.where(joined, count, 0).astype(np.uint16)


if __name__ == "__main__":
    np.savez_compressed(TARGET, count=open_ocean(np.stack(list(strip_counts()))))
