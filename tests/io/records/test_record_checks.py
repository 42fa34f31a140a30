"""Values that no sea floor gives are refused; everything that one can give passes."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray

from massfit.errors import InputError
from massfit.io.network.network_file import read_network
from massfit.io.results.results_folder import check_output

Change = Callable[[str, str], None]


@pytest.fixture
def put(network_folder: Path) -> Callable[[NDArray[np.float64]], None]:
    """Replace the pressure of site B, Pa."""

    def write(pressure: NDArray[np.float64]) -> None:
        path = network_folder / "records/b.nc"
        with xr.open_dataset(path, engine="h5netcdf") as file:
            dataset = file.load()
        (name,) = [name for name in dataset.data_vars if dataset[name].dims == ("time",)]
        dataset[name].values[:] = pressure
        dataset.to_netcdf(path, engine="h5netcdf")

    return write


def _samples(network_folder: Path) -> NDArray[np.float64]:
    record = read_network(network_folder).records[1]
    return record.pressure + 5e7


def _fault(network_folder: Path) -> str:
    with pytest.raises(InputError) as caught:
        read_network(network_folder)
    (fault,) = caught.value.faults
    return str(fault)


def test_a_constant_record_is_refused(network_folder: Path, put: Callable[..., None]) -> None:
    put(np.full_like(_samples(network_folder), 5e7))
    assert "have the same value" in _fault(network_folder)


def test_a_pressure_beyond_any_ocean_is_refused(network_folder: Path, put: Callable[..., None]) -> None:
    put(100.0 * _samples(network_folder))
    assert "No ocean is that deep" in _fault(network_folder)


def test_codes_for_missing_are_refused_with_their_first_place(network_folder: Path, put: Callable[..., None]) -> None:
    pressure = _samples(network_folder)
    pressure[7::40] = -9999.0
    put(pressure)
    assert "the first -99.99 hPa" in _fault(network_folder)


def test_one_wild_sample_is_left_to_the_spike_filter(network_folder: Path, put: Callable[..., None]) -> None:
    pressure = _samples(network_folder)
    pressure[20] = 9e9
    put(pressure)
    assert read_network(network_folder).records[1].pressure.max() > 1e9


def test_time_on_deck_may_be_excluded(network_folder: Path, put: Callable[..., None], change: Change) -> None:
    pressure = _samples(network_folder)
    pressure[:12] = 1e5
    put(pressure)
    assert "on deck" in _fault(network_folder)
    last = np.datetime64(_times(network_folder)[11], "D")
    change('id = "B"', f'id = "B"\nexclude = [{{ from = 1990-01-01, to = {last}, reason = "on deck" }}]')
    assert len(read_network(network_folder).records) == 2


def _times(network_folder: Path) -> NDArray[np.datetime64]:
    """Times of site B."""
    with xr.open_dataset(network_folder / "records/b.nc", engine="h5netcdf") as file:
        return np.asarray(file["time"].values)


@pytest.mark.parametrize(("depth_m", "warned"), [(4900, False), (490, True), (11000, True)])
def test_depth_and_pressure_are_compared(
    network_folder: Path, put: Callable[..., None], change: Change, depth_m: float, warned: bool
) -> None:
    put(_samples(network_folder))
    change('id = "B"', f'id = "B"\ndepth_m = {depth_m}')
    assert any("check the units" in text for text in read_network(network_folder).warnings) is warned


@pytest.mark.parametrize(
    ("factor", "depth_m", "expected"),
    [
        (100.0, None, "Correct `units`, in the file or here: "),
        (1e4, 4900, 'Correct `units`, in the file or here: "Pa" would give 4902 m.'),
        (100.0, 4900, 'Correct `units`, in the file or here: "hPa" would give 4902 m.'),
    ],
)
def test_a_unit_that_would_fit_is_named(
    network_folder: Path, put: Callable[..., None], change: Change, factor: float, depth_m: float | None, expected: str
) -> None:
    path = network_folder / "records/b.nc"
    put(_samples(network_folder))
    with xr.open_dataset(path, engine="h5netcdf") as file:
        dataset = file.load()
    dataset["pressure"].attrs["units"] = {1e4: "dbar", 100.0: "dbar"}[factor]
    dataset["pressure"].values[:] /= 1e4 / factor
    dataset.to_netcdf(path, engine="h5netcdf")
    if depth_m:
        change('id = "B"', f'id = "B"\ndepth_m = {depth_m}')
    fault = _fault(network_folder)
    assert "No ocean is that deep" in fault
    assert expected in fault


def test_a_unit_that_does_not_belong_to_the_depth_is_warned_about_with_the_one_that_would(
    network_folder: Path, put: Callable[..., None], change: Change
) -> None:
    # 5000 dbar, called kPa
    put(_samples(network_folder) / 10.0)
    change('id = "B"', 'id = "B"\ndepth_m = 4900')
    (warning,) = [text for text in read_network(network_folder).warnings if "check the units" in text]
    assert "does not belong to a depth of 4900 m" in warning
    assert warning.endswith('check the units: "mm" would give 5000 m.')  # no unit of pressure here is ten pascals


def test_a_record_that_hardly_varies_is_warned_about(network_folder: Path, put: Callable[..., None]) -> None:
    wave = (_samples(network_folder) - 5e7) / 1e4
    put(wave)
    (warning,) = [text for text in read_network(network_folder).warnings if "varies by" in text]
    assert warning == (
        "B/1: the pressure varies by 6.97e-05 hPa (1 sd), and tides and weather on the sea floor by about 1 to 100: "
        'check the units: "dbar" would make it 0.697 hPa.'
    )


def test_coarse_numbers_are_warned_about(network_folder: Path, put: Callable[..., None]) -> None:
    put(_samples(network_folder))
    path = network_folder / "records/b.nc"
    with xr.open_dataset(path, engine="h5netcdf") as file:
        dataset = file.load()
    dataset.to_netcdf(path, engine="h5netcdf", encoding={"pressure": {"dtype": "float32"}})
    assert any("resolve 4.0 Pa only" in text for text in read_network(network_folder).warnings)


def test_an_output_that_is_a_file_is_refused_first(tmp_path: Path) -> None:
    # that the folder above can be written is tried when its partial folder is made: tests/faults/test_output_faults.py
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="Must be a folder"):
        check_output(tmp_path / "file", overwrite=True)
    check_output(tmp_path / "new" / "results", overwrite=False)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["file"]
