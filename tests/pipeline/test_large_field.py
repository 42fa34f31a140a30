"""A field of 5 GB, made on the spot, screened by two processes that stay below 2 GB each."""

import resource
from pathlib import Path

import h5py
import numpy as np
import pytest
from screening.invented_ocean import daily, land_mask

from massfit.constants import ANNUAL_RATE
from massfit.io.fields.model_fields import read_model_fields
from massfit.phasor import days_since
from massfit.pipeline.dask_executor import DaskExecutor
from massfit.pipeline.executor import make_executor
from massfit.pipeline.screen import screen_sea_floor
from massfit.screening.field import BlockSource

DAYS, PATTERNS = 1220, 12


def make_large_field(path: Path, *, spacing: float = 0.25, days: int = DAYS) -> np.ndarray:
    """Write daily bottom pressure of a quarter of a degree, patterns that come and go; give its times."""
    rng = np.random.default_rng(5)
    time = daily("2011-01-01", "2030-01-01", 1)[:days]
    latitude, longitude = np.arange(-90.0 + spacing / 2, 90.0, spacing), np.arange(spacing / 2, 360.0, spacing)
    shape = (latitude.size, longitude.size)
    patterns = rng.normal(size=(PATTERNS, shape[0] * shape[1])).astype(np.float32)
    patterns[:, land_mask(latitude, longitude).ravel()] = np.nan
    weights = 100.0 * np.cumsum(rng.normal(size=(days, PATTERNS)), axis=0).astype(np.float32) / 20.0
    with h5py.File(path, "w") as file:
        field = file.create_dataset("pressure", (days, *shape), "f4")
        field.attrs["units"] = "Pa"
        for axis, (name, values, units) in enumerate(
            [
                ("time", (time - np.datetime64("2011-01-01", "ns")) / np.timedelta64(1, "D"), "days since 2011-01-01"),
                ("lat", latitude, "degrees_north"),
                ("lon", longitude, "degrees_east"),
            ]
        ):
            coordinate = file.create_dataset(name, data=values)
            coordinate.attrs["units"] = units
            coordinate.make_scale(name)
            field.dims[axis].attach_scale(coordinate)
        for first in range(0, days, 20):
            field[first : first + 20] = (weights[first : first + 20] @ patterns).reshape(-1, *shape)
    return time


def peak_gb() -> float:
    """Most memory this process ever had."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024 / 1e9


def ocean_mean_of(source: BlockSource) -> np.ndarray:
    """Mean of every day, weighted with the area between the bounds of the rows."""
    latitude = np.radians(source.latitude_deg)
    half = 0.5 * (latitude[1] - latitude[0])
    height = (np.sin(latitude + half) - np.sin(latitude - half))[:, None]
    means = []
    for first in range(0, DAYS, 20):
        block = source.read(slice(first, min(first + 20, DAYS)), slice(0, latitude.size))
        wet = np.isfinite(block[0]) * height
        means.append(np.nansum(block * height, axis=(1, 2)) / wet.sum())
    return np.concatenate(means)


@pytest.mark.slow
def test_five_gigabytes_are_screened_by_two_processes_below_two_gigabytes_each(tmp_path: Path) -> None:
    path = tmp_path / "large.nc"
    time = make_large_field(path)
    assert path.stat().st_size > 5.0e9
    (kept,) = read_model_fields([str(path)], ocean_mean=["subtract"])
    with make_executor(workers=2, memory_gb=2.0) as executor:
        assert isinstance(executor, DaskExecutor)
        found = screen_sea_floor([kept], executor=executor)
        peaks = executor.everywhere(peak_gb)
    print(f"peak memory of the workers: {', '.join(f'{peak:.2f}' for peak in peaks)} GB")
    assert len(peaks) == 2
    assert max(peaks) < 2.0
    # some rows by least squares, less the mean that the cells have together
    rows = slice(400, 404)
    values = kept.source.read(slice(0, DAYS), rows)
    mean = ocean_mean_of(kept.source)
    path.unlink()
    days = days_since(time, 2011)
    waves = [wave(k * ANNUAL_RATE * days) for k in (1, 2) for wave in (np.cos, np.sin)]
    design = np.column_stack([np.ones_like(days), days, *waves])
    series = (values - mean[:, None, None]).reshape(DAYS, -1)
    wet = np.isfinite(series[0])
    left = series[:, wet] - design @ np.linalg.lstsq(design, series[:, wet], rcond=None)[0]
    expected = np.sqrt((left**2).sum(axis=0) / (DAYS - 6))
    assert np.abs(found["sd"].values[rows].ravel()[wet] / expected - 1.0).max() < 1e-10
