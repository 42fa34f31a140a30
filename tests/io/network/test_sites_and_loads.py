"""A network file read for its fingerprint: without records and models, which need not be there."""

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from massfit.errors import InputError
from massfit.io.network.network_file import read_network, read_sites_and_loads


def test_records_and_models_need_not_be_there(network_folder: Path) -> None:
    whole = read_network(network_folder)
    shutil.rmtree(network_folder / "records")
    (network_folder / "fields/model.nc").unlink()
    (network_folder / "fields/air.csv").unlink()
    network = read_sites_and_loads(network_folder)
    assert network.sites == whole.sites
    assert network.settings == whole.settings
    assert [load.name for load in network.loads] == ["wet", "dry"]
    assert (network.records, network.circulation, network.warnings) == ((), (), ())
    assert set(network.inputs) == {"network.toml", "fields/loads.nc"}


def test_planned_sites_need_no_deployment(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change('\n  [[site.deployment]]\n  file = "records/b.nc"\n  drift = "linear"\n', "")
    assert [site.id for site in read_sites_and_loads(network_folder).sites] == ["A", "B"]
    with pytest.raises(InputError, match="the site has no deployment"):
        read_network(network_folder)


def test_air_that_is_not_there_is_left_out_aloud(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change('ocean_mean_atmosphere = "fields/air.csv"',
           'ocean_mean_atmosphere = "fields/air.csv"\natmosphere_load = "fields/gone.nc"')  # fmt: skip
    network = read_sites_and_loads(network_folder)
    assert network.atmosphere_load is None
    assert network.warnings == ("Air pressure on land is left out: there is no fields/gone.nc.",)


def test_an_address_is_refused_all_the_same(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change('ocean_mean_atmosphere = "fields/air.csv"',
           'ocean_mean_atmosphere = "fields/air.csv"\natmosphere_load = "https://example.org/air.nc"')  # fmt: skip
    with pytest.raises(InputError, match="is an address"):
        read_sites_and_loads(network_folder)


def test_faults_of_sites_and_loads_are_told_together(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change("latitude = -11.25", "latitude = 95.0")
    change('loads = ["fields/loads.nc"]', 'loads = ["fields/lost.nc", "builtin:nominla"]')
    with pytest.raises(InputError) as caught:
        read_sites_and_loads(network_folder)
    names = [fault.name for fault in caught.value.faults]
    assert names == ["site[A].latitude", "fingerprint.loads[1]", "fingerprint.loads[2]"]
