import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.fingerprint.loads import builtin_loads
from massfit.io.network.network_file import read_network
from massfit.io.network.write_network import write_network
from massfit.network import Network
from massfit.settings import Corrections, Fingerprint, Frame, PosteriorSettings, Priors, Settings
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.site import Interval, Site

HOUR = np.timedelta64(1, "h")


@pytest.fixture(scope="module")
def network() -> Network:
    options = SimulationOptions(sites=9, years=1.5, models=3, load_members=2, sampling="daily")
    return simulate_network(options, seed=5).network


@pytest.fixture(scope="module")
def read_back(network: Network, tmp_path_factory: pytest.TempPathFactory) -> Network:
    folder = tmp_path_factory.mktemp("written") / "network"
    write_network(network, folder)
    return read_network(folder)


def changed(network: Network, folder: Path, **changes: object) -> Network:
    """Write a changed network and read it."""
    write_network(replace(network, **changes), folder / "out")  # type: ignore[arg-type]
    return read_network(folder / "out")


def test_settings_and_sites_come_back(network: Network, read_back: Network) -> None:
    assert read_back.settings == network.settings
    assert read_back.sites == network.sites
    assert any(site.exclude for site in read_back.sites)


def test_records_come_back(network: Network, read_back: Network) -> None:
    assert {record.source.rsplit(".", 1)[1] for record in network.records} == {"nc", "txt"}
    assert any(record.steps for record in network.records)
    for written, read in zip(network.records, read_back.records, strict=True):
        assert (read.site, read.deployment, read.source) == (written.site, written.deployment, written.source)
        assert (read.drift, read.steps, read.find_steps) == (written.drift, written.steps, written.find_steps)
        assert np.array_equal(read.time, written.time)
        absolute = written.pressure + written.reference
        assert np.allclose(read.pressure + read.reference, absolute, rtol=0.0, atol=1e-6, equal_nan=True)


def test_ramps_and_settling_come_back(network: Network, tmp_path: Path) -> None:
    first, *others = network.records
    ramp = (np.datetime64("2015-04-24T06:00:00", "ns"), np.datetime64("2015-04-26T12:30:00", "ns"))
    records = (replace(first, ramps=(ramp,), settling="trim"), *others)
    read = changed(network, tmp_path, records=records).records
    assert (read[0].ramps, read[0].settling) == ((ramp,), "trim")
    assert (read[1].ramps, read[1].settling) == ((), "model")


def test_fields_come_back(network: Network, read_back: Network) -> None:
    for written, read in zip(network.circulation, read_back.circulation, strict=True):
        assert (read.name, read.air_pressure) == (written.name, written.air_pressure)
        xr.testing.assert_allclose(read.pressure, written.pressure, rtol=0.0, atol=1e-6)
        assert (read.ocean_mean is None) == (written.ocean_mean is None)
        if written.ocean_mean is not None and read.ocean_mean is not None:
            assert np.allclose(read.ocean_mean.pressure, written.ocean_mean.pressure, rtol=0.0, atol=0.006)
    for written, read in zip(network.loads, read_back.loads, strict=True):
        assert (read.name, read.reference) == (written.name, written.reference)
        assert np.allclose(read.values, written.values, rtol=0.0, atol=1e-9)
        assert np.allclose(read.longitude_deg, written.longitude_deg)
    air, written_air = read_back.ocean_mean_atmosphere, network.ocean_mean_atmosphere
    assert air is not None
    assert written_air is not None
    assert np.array_equal(air.time, written_air.time)
    assert np.allclose(air.pressure, written_air.pressure, rtol=0.0, atol=0.006)  # CSV has 0.01 Pa
    assert read_back.atmosphere_load is not None
    assert network.atmosphere_load is not None
    assert np.allclose(read_back.atmosphere_load.values, network.atmosphere_load.values, rtol=0.0, atol=1e-9)


def test_netcdf_is_cf_packed_and_checksummed(network: Network, tmp_path: Path) -> None:
    write_network(network, tmp_path / "out")
    h5py = pytest.importorskip("h5py")
    path = next((tmp_path / "out/records").glob("*.nc"))
    with h5py.File(path) as file:
        stored = file["pressure"]
        assert stored.dtype == np.int32
        assert (stored.compression, stored.shuffle, stored.fletcher32) == ("gzip", True, True)
        assert file.attrs["featureType"] == "timeSeries"
    with xr.open_dataset(path, engine="h5netcdf") as dataset:
        assert dataset.attrs["Conventions"] == "CF-1.13"
        assert dataset["pressure"].attrs["standard_name"] == "sea_water_pressure_at_sea_floor"
        assert dataset["station"].attrs["cf_role"] == "timeseries_id"


def test_every_setting_comes_back(network: Network, tmp_path: Path) -> None:
    settings = Settings(
        frame=Frame(name='Quotes " and \\ and é', reference_year=2015),
        corrections=Corrections(
            ocean_mean_atmosphere="already-removed",
            tides="already-removed",
            long_period_tides="none",
            pole_tide="none",
            ocean_mean_atmosphere_sd_hpa=0.0123456789,
            ocean_mean_phasor_hpa=(-0.6, 0.05),
            atmosphere_load="fields/atmosphere_load.nc",
        ),
        fingerprint=Fingerprint(loads=("fields/loads.nc",), water_vapour_kg=6.1e14, max_degree=120),
        posterior=PosteriorSettings(seed=7, site_scatter="normal", group_scatter=750.0, model_truth="centred"),
        priors=Priors(year_sd_hpa=0.1, noise_time_scales_days=(3.0, 30.0)),
    )
    read = changed(network, tmp_path, settings=settings, ocean_mean_atmosphere=None)
    assert read.settings == settings


def test_exclusions_come_back(network: Network, tmp_path: Path) -> None:
    day = Interval(
        np.datetime64("2014-05-01", "ns"),
        np.datetime64("2014-05-04", "ns") - np.timedelta64(1, "ns"),
        "anchor dragged, [twice]",
    )
    short = Interval(np.datetime64("2014-06-01T03:30", "ns"), np.datetime64("2014-06-01T09:15", "ns"), "ship overhead")
    first, second, *rest = network.sites
    sites = (replace(first, exclude=(day, short)), replace(second, excluded_because="leaks"), *rest)
    read = changed(network, tmp_path, sites=sites)
    assert read.sites == sites
    assert all(record.site != second.id for record in read.records)


def test_names_that_collide_or_leave_the_folder_are_replaced(network: Network, tmp_path: Path) -> None:
    records = tuple(replace(record, source="../outside.nc") for record in network.records)
    names = ("A b", "a-b", "A/b")
    models = tuple(replace(model, name=name) for model, name in zip(network.circulation, names, strict=True))
    read = changed(network, tmp_path, records=records, circulation=models)
    assert len({record.source for record in read.records}) == len(records)
    assert all(record.source.startswith("records/") for record in read.records)
    assert tuple(model.name for model in read.circulation) == names
    assert not (tmp_path / "outside.nc").exists()


def test_fine_records_keep_a_tenth_of_a_pascal(network: Network, tmp_path: Path) -> None:
    first = network.records[0]
    time = np.datetime64("2014-01-01T00:00:07.5", "ns") + HOUR * np.arange(8000)
    pressure = np.random.default_rng(1).normal(0.0, 300.0, time.size)
    pressure[5] = np.nan
    records = (
        replace(first, time=time, pressure=pressure, source="records/fine.nc"),
        replace(first, time=time, pressure=pressure, source="records/fine.txt"),
    )
    read = changed(network, tmp_path, records=records, sites=network.sites[:1])
    for record in read.records:
        assert np.abs((record.time - time) / np.timedelta64(1, "ms")).max() <= 1.0
        absolute = record.pressure + record.reference
        assert np.allclose(absolute, pressure + first.reference, rtol=0.0, atol=0.0501, equal_nan=True)
        assert np.isnan(record.pressure[5])


def test_members_on_different_grids_and_air_pressure_fields(network: Network, tmp_path: Path) -> None:
    loads = (*network.loads, *builtin_loads(("nominal",)))
    lat, lon = np.arange(-85.0, 90.0, 10.0), np.arange(5.0, 360.0, 10.0)
    time = np.datetime64("2013-12-31T12:00", "ns") + 24 * HOUR * np.arange(560)
    values = np.round(1e5 + np.random.default_rng(1).normal(0.0, 500.0, (time.size, lat.size, lon.size)), 1)
    air = xr.DataArray(values, {"time": time, "lat": lat, "lon": lon}, ("time", "lat", "lon"))
    corrections = replace(network.settings.corrections, ocean_mean_atmosphere=None, atmosphere_load=None)
    read = changed(
        network,
        tmp_path,
        loads=loads,
        air_pressure=air,
        ocean_mean_atmosphere=None,
        atmosphere_load=None,
        settings=replace(network.settings, corrections=corrections),
    )
    assert [member.name for member in read.loads] == [member.name for member in loads]
    assert read.air_pressure is not None
    assert np.allclose(read.air_pressure.to_numpy(), values, rtol=0.0, atol=1e-6)


def test_truth_and_readme_lie_beside(network: Network, tmp_path: Path) -> None:
    write_network(network, tmp_path / "out", truth={"amplitude_hpa": 0.5}, readme="# Read me\n")
    assert json.loads((tmp_path / "out/truth.json").read_text()) == {"amplitude_hpa": 0.5}
    assert (tmp_path / "out/README.md").read_text() == "# Read me\n"


def test_a_folder_with_anything_in_it_is_left_alone(network: Network, tmp_path: Path) -> None:
    (tmp_path / "note.txt").write_text("mine")
    with pytest.raises(InputError, match="not empty"):
        write_network(network, tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["note.txt"]


def test_a_failure_leaves_nothing(network: Network, tmp_path: Path) -> None:
    broken = replace(network, sites=(Site("A", 0.0, 200.0), *network.sites))
    unwritable = {"amplitude_hpa": object()}
    with pytest.raises(TypeError):
        write_network(broken, tmp_path / "out", truth=unwritable)
    assert list(tmp_path.iterdir()) == []


def test_an_empty_folder_is_filled(network: Network, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    write_network(network, tmp_path / "out")
    assert (tmp_path / "out/network.toml").is_file()
