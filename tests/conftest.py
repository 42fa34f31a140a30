"""A small network on disk that the readers accept; tests break one thing at a time."""

import os
from collections.abc import Callable, Generator
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import massfit

NETWORK = """\
[network]
name = "Two invented sites"
reference_year = 2016

[[site]]
id = "A"
latitude = -11.25
longitude = 205.5
depth_m = 4870
group = "north"
exclude = [{ from = 2015-03-01, to = 2015-03-10, reason = "anchor dragged" }]

  [[site.deployment]]
  file = "records/a.csv"
  units = "hPa"
  columns = ["date", "pressure"]
  time_column = "date"
  time_format = "iso"
  delimiter = ","

[[site]]
id = "B"
latitude = 5.0
longitude = -150.0

  [[site.deployment]]
  file = "records/b.nc"
  drift = "linear"

[corrections]
tides = "already-removed"
ocean_mean_atmosphere = "fields/air.csv"

[[circulation]]
name = "Invented model"
file = "fields/model.nc"
ocean_mean = "removed"
air_pressure = "not-forced"

[fingerprint]
loads = ["fields/loads.nc"]
"""

DAYS = np.arange("2014-01-01T12", "2016-06-01T12", 24, dtype="datetime64[h]").astype("datetime64[ns]")


def small_network(folder: Path) -> None:
    """Write the network of two sites, one model and two load members."""
    (folder / "records").mkdir()
    (folder / "fields").mkdir()
    (folder / "network.toml").write_text(NETWORK)
    wave = np.cos(np.arange(DAYS.size) / 58.0)
    rows = "".join(f"{day}Z,{value:.4f}\n" for day, value in zip(DAYS.astype("datetime64[s]"), wave, strict=True))
    (folder / "records/a.csv").write_text(rows)
    attributes = {"units": "Pa", "standard_name": "sea_water_pressure_at_sea_floor"}
    record = xr.Dataset({"pressure": ("time", 100.0 * wave, attributes)}, {"time": DAYS})
    record.to_netcdf(folder / "records/b.nc", engine="h5netcdf")
    header = "# invented\n# units: hPa\ntime,value\n"
    (folder / "fields/air.csv").write_text(header + rows)
    sites = xr.Dataset(
        {"bottom_pressure": (("time", "site"), np.column_stack([wave, 2.0 * wave]), {"units": "hPa"})},
        {"time": DAYS, "site": ["A", "B"]},
    )
    sites.to_netcdf(folder / "fields/model.nc", engine="h5netcdf")
    latitude, longitude = np.arange(-87.5, 90.0, 5.0), np.arange(2.5, 360.0, 5.0)
    dims = ("member", "lat", "lon")
    inland = (np.abs(latitude[:, None] - 52.5) < 8.0) & (np.abs(longitude - 80.0) < 18.0)  # dry ground of Asia
    loads = xr.Dataset(
        {
            "load_in_phase": (dims, np.stack(2 * [np.where(inland, 3.0, np.nan)]), {"units": "kg m-2"}),
            "load_quadrature": (dims, np.stack(2 * [np.where(inland, -4.0, np.nan)]), {"units": "kg m-2"}),
        },
        {"member": ["wet", "dry"], "lat": latitude, "lon": longitude},
    )
    loads.to_netcdf(folder / "fields/loads.nc", engine="h5netcdf")


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport() -> Generator[None, pytest.TestReport, pytest.TestReport]:
    """Count a skip as a failure where the open data are at hand: only want of a browser leaves something out there."""
    report = yield
    meant = hasattr(report, "wasxfail") or "there is no chromium" in str(report.longrepr)
    if report.skipped and "MASSFIT_OPEN_DATA" in os.environ and not meant:
        report.outcome = "failed"
        report.longrepr = f"skipped where nothing may be: {report.longrepr}"
    return report


@pytest.fixture(scope="session")
def open_data() -> Path:
    """Folder of real measurements made by others, which are not part of the project."""
    name = os.environ.get("MASSFIT_OPEN_DATA")
    if name is None:
        pytest.skip("MASSFIT_OPEN_DATA does not name the folder of the open data")
    folder = Path(name)
    assert folder.is_dir(), "MASSFIT_OPEN_DATA names no folder"
    return folder


@pytest.fixture
def network_folder(tmp_path: Path) -> Path:
    """Folder of the small network."""
    folder = tmp_path / "network"
    folder.mkdir()
    small_network(folder)
    return folder


@pytest.fixture
def change(network_folder: Path) -> Callable[[str, str], None]:
    """Change a piece of text of network.toml that stands there exactly once."""

    def replace(old: str, new: str) -> None:
        file = network_folder / "network.toml"
        text = file.read_text()
        assert text.count(old) == 1, old
        file.write_text(text.replace(old, new))

    return replace


@pytest.fixture(scope="session")
def invented():
    """Three sites, two years of daily means, three models, two load members; nothing in it can be written to."""
    from massfit.simulate.options import SimulationOptions

    options = SimulationOptions(sites=3, years=2, load_members=2, sampling="daily", incidents=False, bad_site=False)
    network = massfit.simulate_network(options, seed=11).network
    for record in network.records:
        record.time.flags.writeable = record.pressure.flags.writeable = False
    for model in network.circulation:
        model.pressure.values.flags.writeable = False
    return network


@pytest.fixture(scope="session")
def judged(invented):
    """The sites of the invented network alone, each judged; tests do not change it."""
    from massfit.pipeline.phasors import site_run

    return site_run(invented)


@pytest.fixture(scope="session")
def run(invented):
    """The main job on the invented network; tests do not change it."""
    return massfit.estimate(invented)
