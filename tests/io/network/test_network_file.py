"""The network that is read is the one that was written."""

import hashlib
from collections.abc import Callable
from datetime import date
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.network.network_file import read_network
from massfit.results.assumptions import stated_assumptions

Change = Callable[[str, str], None]


def test_what_was_written_is_read(network_folder: Path) -> None:
    network = read_network(network_folder)
    assert [site.id for site in network.sites] == ["A", "B"]
    assert network.settings.frame.reference_year == 2016
    assert network.source == str(network_folder / "network.toml")
    assert [record.deployment for record in network.records] == ["A/1", "B/1"]
    text, netcdf = network.records
    # both files hold one cosine of 1 hPa: text in hPa with four decimals, NetCDF in Pa
    np.testing.assert_allclose(text.pressure + text.reference, netcdf.pressure + netcdf.reference, atol=0.0051)
    assert np.ptp(netcdf.pressure) == pytest.approx(200.0, rel=1e-3)
    assert netcdf.drift == "linear"
    assert network.ocean_mean_atmosphere is not None
    np.testing.assert_allclose(network.ocean_mean_atmosphere.pressure, netcdf.pressure + netcdf.reference, atol=0.0051)
    (model,) = network.circulation
    assert model.pressure.dims == ("time", "site")
    np.testing.assert_allclose(model.pressure.sel(site="B") / model.pressure.sel(site="A"), 2.0)
    assert [pattern.name for pattern in network.loads] == ["wet", "dry"]
    assert network.loads[0].values[28, 16] == 3.0 - 4.0j


def test_the_file_itself_may_be_named(network_folder: Path) -> None:
    assert read_network(str(network_folder / "network.toml")).settings.frame.name == "Two invented sites"


def test_every_file_is_fingerprinted(network_folder: Path) -> None:
    inputs = read_network(network_folder).inputs
    files = [path for path in network_folder.rglob("*") if path.is_file()]
    expected = {p.relative_to(network_folder).as_posix(): hashlib.sha256(p.read_bytes()).hexdigest() for p in files}
    assert inputs == expected


def test_exclusions_are_whole_days(network_folder: Path) -> None:
    (interval,) = read_network(network_folder).sites[0].exclude
    assert interval.start == np.datetime64("2015-03-01T00:00:00")
    assert np.datetime64("2015-03-11") - interval.end == np.timedelta64(1, "ns")


def test_times_with_a_zone_become_utc(network_folder: Path, change: Change) -> None:
    change("from = 2015-03-01, to = 2015-03-10", "from = 2015-03-01T02:00:00+02:00, to = 2015-03-10T12:00:00Z")
    (interval,) = read_network(network_folder).sites[0].exclude
    assert (interval.start, interval.end) == (np.datetime64("2015-03-01T00"), np.datetime64("2015-03-10T12"))


def test_records_keep_their_samples_outside_the_window(network_folder: Path, change: Change) -> None:
    whole = read_network(network_folder).records[0].time.size
    change("reference_year = 2016", "reference_year = 2016\nstart = 2014-02-01\nend = 2015-12-31")
    network = read_network(network_folder)
    assert network.settings.frame.end == date(2015, 12, 31)
    assert network.records[0].time.size == whole


def test_an_excluded_site_is_kept_and_its_files_are_not_opened(network_folder: Path, change: Change) -> None:
    change('id = "B"', 'id = "B"\nexclude = "flooded"')
    (network_folder / "records/b.nc").unlink()
    network = read_network(network_folder)
    assert network.sites[1].excluded_because == "flooded"
    assert [record.site for record in network.records] == ["A"]


def test_a_record_outside_the_window_is_dropped_with_a_warning(network_folder: Path, change: Change) -> None:
    rows = (network_folder / "records/a.csv").read_text().splitlines(keepends=True)
    (network_folder / "records/a.csv").write_text("".join(rows[:100]))
    (network_folder / "records/a2.csv").write_text("".join(rows[100:]))
    text = (network_folder / "network.toml").read_text()
    deployment = text[text.index("  [[site.deployment]]") : text.index('[[site]]\nid = "B"')]
    change(deployment, deployment + deployment.replace("a.csv", "a2.csv"))
    change("reference_year = 2016", "reference_year = 2016\nstart = 2014-05-01")
    network = read_network(network_folder)
    assert [record.deployment for record in network.records] == ["A/2", "B/1"]
    assert network.warnings == ("A/1 has no data inside the window and is not used.",)


def test_shorthands_of_a_deployment(network_folder: Path, change: Change) -> None:
    first_value = (network_folder / "records/a.csv").read_text().splitlines()[0].split(",")[1]
    change('delimiter = ","', f'delimiter = ","\nmissing = {first_value}\nsteps = [2015-01-01, 2015-06-01T12:00:00Z]')
    record = read_network(network_folder).records[0]
    assert np.isnan(record.pressure[0])
    assert record.steps == (np.datetime64("2015-01-01"), np.datetime64("2015-06-01T12"))


def test_ramps_and_settling_of_a_deployment(network_folder: Path, change: Change) -> None:
    ramps = "[{ from = 2015-04-24, to = 2015-04-26 }, { from = 2015-06-01T06:00:00Z, to = 2015-06-02T18:00:00Z }]"
    change('delimiter = ","', f'delimiter = ","\nramps = {ramps}\nsettling = 14')
    record = read_network(network_folder).records[0]
    # a date as `to` means its last instant
    whole, hours = record.ramps
    assert whole == (np.datetime64("2015-04-24"), np.datetime64("2015-04-26T23:59:59.999999999"))
    assert hours == (np.datetime64("2015-06-01T06"), np.datetime64("2015-06-02T18"))
    assert (record.settling, record.find_steps) == (14.0, True)


def test_built_in_loads(network_folder: Path, change: Change) -> None:
    change('["fields/loads.nc"]', '["builtin:nominal", "fields/loads.nc"]')
    assert [pattern.name for pattern in read_network(network_folder).loads] == ["nominal", "wet", "dry"]


def test_a_model_with_its_own_mean(network_folder: Path, change: Change) -> None:
    change('ocean_mean = "removed"', 'ocean_mean = "fields/air.csv"')
    (model,) = read_network(network_folder).circulation
    assert model.ocean_mean is not None
    assert model.ocean_mean.name == "ocean mean of Invented model"


def test_gravity_is_a_setting_and_its_files_are_read_elsewhere(network_folder: Path, change: Change) -> None:
    change("[fingerprint]", '[gravity]\nfields = "gravity"\nbuffer_km = 250\n\n[fingerprint]')
    settings = read_network(network_folder).settings.gravity
    assert settings is not None
    assert settings.fields == ("gravity",)
    assert settings.buffer_km == 250.0


def test_keys_of_gravity_are_checked(network_folder: Path, change: Change) -> None:
    change("[fingerprint]", '[gravity]\nfield = "gravity"\nbuffer_km = -1\n\n[fingerprint]')
    with pytest.raises(InputError) as error:
        read_network(network_folder)
    text = str(error.value)
    assert 'gravity.field: unknown key "field"' in text
    assert 'Did you mean "fields"?' in text
    assert "gravity.buffer_km: the value is -1" in text


def test_the_network_file_is_not_changed_by_reading(network_folder: Path) -> None:
    before = {path: path.read_bytes() for path in network_folder.rglob("*") if path.is_file()}
    read_network(network_folder)
    assert {path: path.read_bytes() for path in network_folder.rglob("*") if path.is_file()} == before


def test_a_damaged_model_file_is_a_fault(network_folder: Path) -> None:
    file = network_folder / "fields/model.nc"
    file.write_bytes(file.read_bytes()[:-200])
    with pytest.raises(InputError, match=r"fields/model\.nc: the file cannot be read as NetCDF"):
        read_network(network_folder)


def test_one_model_under_two_names_is_refused(network_folder: Path, change: Change) -> None:
    (network_folder / "fields/copy.nc").write_bytes((network_folder / "fields/model.nc").read_bytes())
    second = '[[circulation]]\nname = "Other"\nfile = "fields/copy.nc"\nocean_mean = "removed"\n'
    change("[fingerprint]", f'{second}air_pressure = "not-forced"\n\n[fingerprint]')
    with pytest.raises(InputError, match='same content as the file of "Invented model"'):
        read_network(network_folder)


def test_a_folder_in_place_of_the_network_file_is_named(tmp_path: Path) -> None:
    (tmp_path / "network.toml").mkdir()
    with pytest.raises(InputError, match="it is a folder"):
        read_network(tmp_path)


def test_a_byte_order_mark_is_no_fault(network_folder):
    file = network_folder / "network.toml"
    file.write_bytes(b"\xef\xbb\xbf" + file.read_bytes())
    assert read_network(network_folder).settings.frame.name == "Two invented sites"


def test_a_site_too_short_to_be_used_is_announced(network_folder: Path) -> None:
    path = network_folder / "records/a.csv"
    rows = path.read_text().splitlines(keepends=True)
    path.write_text("".join(rows[:60]))
    assert read_network(network_folder).warnings == (
        "Site A has 60 days of data and is left out: a site needs 90. Add records of it.",
    )


def test_perturbed_loads_are_made_from_all_others(network_folder: Path, change: Change) -> None:
    change('loads = ["fields/loads.nc"]', 'loads = ["perturbed:3", "fields/loads.nc"]\nperturbed_seed = 4')
    names = [load.name for load in read_network(network_folder).loads]
    assert names == ["wet", "dry", "perturbed 1 of wet", "perturbed 2 of dry", "perturbed 3 of wet"]
    assert "spread by 20%, their timing by 10 days" in " ".join(stated_assumptions(read_network(network_folder)))


def test_perturbed_loads_alone_are_made_from_the_nominal_one(network_folder: Path, change: Change) -> None:
    change('loads = ["fields/loads.nc"]', 'loads = ["perturbed:2"]')
    names = [load.name for load in read_network(network_folder).loads]
    assert names == ["perturbed 1 of nominal", "perturbed 2 of nominal"]
