"""The results folder of a finished run: what is in it, that damage shows, and that it is whole or not there."""

import csv
import json
import resource
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.io.results import results_folder
from massfit.io.results.partial_folder import claimed
from massfit.io.results.results_folder import write_results
from massfit.pipeline import save
from massfit.pipeline.save import save_results
from massfit.results.estimate import Estimate
from massfit.results.finished import finished_run

DATASETS = ("posterior.nc", "site_phasors.nc", "fingerprints.nc", "reduced_records.nc")
BOTH_WIDTHS = ("phasor_plane", "network_map", "fingerprint", "corner", "convergence", "coverage")
PICTURES = ("records.png", *(f"{name}{width}.png" for name in BOTH_WIDTHS for width in ("", "_column")))


@pytest.fixture(scope="module")
def folder(run: Estimate, tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("saved") / "deep" / "results"
    save_results(run, place)
    return place


def content(folder: Path) -> dict[str, bytes]:
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def test_the_folder_holds_what_is_promised_and_nothing_else(folder: Path) -> None:
    pictures = {f"figures/{name}" for name in PICTURES}
    assert set(content(folder)) == {"estimate.json", "run.json", "sites.csv", "report.html", *DATASETS, *pictures}
    assert [path.name for path in folder.parent.iterdir()] == ["results"]
    for name in PICTURES:
        assert (folder / "figures" / name).read_bytes().startswith(b"\x89PNG\r\n\x1a\n")


def test_json_holds_the_summary(folder: Path, run: Estimate) -> None:
    assert json.loads((folder / "estimate.json").read_text("utf-8")) == run.summary


def test_the_site_table_holds_the_sites(folder: Path, run: Estimate) -> None:
    rows = list(csv.DictReader((folder / "sites.csv").read_text("utf-8").splitlines()))
    for row, site in zip(rows, run.summary["sites"], strict=True):
        assert row["id"] == site["id"]
        assert float(row["quadrature_hpa"]) == pytest.approx(site["phasor_hpa"][1], rel=1e-5)
        assert float(row["covariance_hpa2"]) == pytest.approx(site["phasor_covariance_hpa2"][0][1], rel=1e-5)
        # the corrections and the phasor of the site add up to the record, to the digits printed
        taken = ("long_period_tides", "pole_tide", "ocean_mean_atmosphere", "circulation")
        for part in ("in_phase", "quadrature"):
            summed = float(row[f"{part}_hpa"]) + sum(float(row[f"{name}_{part}_hpa"]) for name in taken)
            assert summed == pytest.approx(float(row[f"record_{part}_hpa"]), abs=1e-4)


def test_run_json_says_how_to_repeat_it(folder: Path, run: Estimate) -> None:
    said = json.loads((folder / "run.json").read_text("utf-8"))
    assert said["command"] == "massfit.estimate(network) in Python"
    assert said["processes"] == 1
    assert {pool["threads"] for pool in said["threads"]} == {1}
    assert set(said["elapsed_s"]) >= {"daily means", "site phasors", "network posterior"}
    assert said["seed"] == run.network.settings.posterior.seed
    assert said["settings"]["priors"]["model_common_hpa"] == 0.15
    assert said["settings"]["frame"]["start"] == "2014-01-01"
    assert set(said["versions"]) >= {"numpy", "ducc0", "emcee", "celerite2"}
    assert said["transform_backend"].startswith("ducc0 ")


# NetCDF


@pytest.mark.parametrize("name", DATASETS)
def test_every_dataset_opens_and_says_what_it_is(folder: Path, run: Estimate, name: str) -> None:
    with xr.open_dataset(folder / name, engine="h5netcdf") as data:
        data.load()
    assert data.attrs["Conventions"] == "CF-1.13, ACDD-1.3"
    assert data.attrs["title"].startswith(run.summary["network"])
    assert data.attrs["phase_reference"] == "1 January 2015 00:00 UTC"
    assert data.attrs["converged"] == 1
    assert "exchangeable" in data.attrs["summary"]
    for variable in data.data_vars.values():
        assert "units" in variable.attrs or variable.dtype.kind not in "f"


def test_draws_and_phasors_survive_the_file(folder: Path, run: Estimate) -> None:
    with xr.open_dataset(folder / "posterior.nc", group="posterior", engine="h5netcdf") as data:
        # the load members are dealt out in turn
        dealt = np.argsort(np.arange(run.posterior.annual.shape[1]) % len(run.posterior.members), kind="stable")
        assert np.array_equal(data["annual_phasor"].values[:, dealt], run.posterior.annual)
    with xr.open_dataset(folder / "site_phasors.nc", engine="h5netcdf") as data:
        assert np.array_equal(data["phasor"], run.site_phasors["phasor"], equal_nan=True)
        assert list(data["site"].values) == [site["id"] for site in run.summary["sites"]]


def test_reduced_records_add_up_to_the_pressure(folder: Path, run: Estimate) -> None:
    with xr.open_dataset(folder / "reduced_records.nc", engine="h5netcdf") as data:
        data.load()
    ends = np.cumsum(data["row_size"].values)
    assert ends[-1] == data.sizes["obs"]
    for end, size in zip(ends, data["row_size"].values, strict=True):
        part = data.isel(obs=slice(end - size, end))
        common = part["long_period_tides"] + part["pole_tide"] + part["ocean_mean_atmosphere"]
        left = part["pressure"] - common - part["circulation"].mean("model") - part["drift"] - part["reduced"]
        # a constant; corrections enter the fit rounded to a millionth of a pascal
        assert float(left.max() - left.min()) < 5e-6
        assert int(left.count()) > 0.9 * size
    assert list(data["deployment"].values) == [record.deployment for record in run.network.records]


def test_the_posterior_opens_as_a_tree_of_the_groups_that_arviz_reads(folder: Path, run: Estimate) -> None:
    with xr.open_datatree(folder / "posterior.nc", engine="h5netcdf") as tree:
        tree.load()
    assert list(tree.children) == ["posterior", "sample_stats", "observed_data", "constant_data"]
    posterior, stats = tree["posterior"], tree["sample_stats"]
    for group in (posterior, stats):
        for variable in group.data_vars.values():
            assert variable.dims[:2] == ("chain", "draw")
        np.testing.assert_array_equal(group["draw"], np.arange(group.sizes["draw"]))
    members = len(run.posterior.members)
    for k in range(members):
        chosen = stats["load_member"].values[0] == k
        np.testing.assert_array_equal(
            posterior["member_annual_phasor"].values[:, chosen], run.posterior.member_annual[k]
        )
        np.testing.assert_array_equal(posterior["s_common"].values[:, chosen], run.posterior.scales[k, ..., 2])
        assert list(np.flatnonzero(chosen)[:3]) == [k, k + members, k + 2 * members]
    # as the members alternate the halves of a chain hold the same mixture: split R-hat of the file is that of the draws
    from arviz_stats.base import array_stats

    assert array_stats.rhat(posterior["annual_phasor"].values[..., 1]) < 1.02
    # what a summary by ArviZ shows (0.23.4 was opened on a file of the demo): numbers for every variable
    for name in ("annual_phasor", "s_site", "s_local", "s_common"):
        values = posterior[name].values.reshape(*posterior[name].shape[:2], -1)
        for k in range(values.shape[-1]):
            assert array_stats.ess(values[..., k], method="bulk") > 100.0
            assert np.isfinite(array_stats.hdi(values[..., k], 0.94)).all()
    assert set(tree["observed_data"].data_vars) == {"phasor", "reduced_sd", "days"}
    assert {"covariance", "weight", "admittance"} <= set(tree["constant_data"].data_vars)
    assert tree.attrs["Conventions"] == "CF-1.13, ACDD-1.3"


def numeric(path: Path) -> dict[str, h5py.Dataset]:
    """Arrays of numbers in every group; a dimension without values of its own is none."""
    found: dict[str, h5py.Dataset] = {}
    h5py.File(path).visititems(lambda name, item: found.update({name: item} if isinstance(item, h5py.Dataset) else {}))
    return {
        name: item
        for name, item in found.items()
        if item.ndim
        and item.dtype.kind in "fiu"
        and not item.attrs.get("NAME", b"").startswith(b"This is a netCDF dimension but not")
    }


@pytest.mark.parametrize("name", DATASETS)
def test_every_number_is_under_a_checksum(folder: Path, name: str) -> None:
    found = numeric(folder / name)
    assert len(found) >= 3
    assert {key: item.fletcher32 for key, item in found.items()} == dict.fromkeys(found, True)


@pytest.mark.parametrize("name", DATASETS)
def test_a_flipped_byte_is_noticed(folder: Path, tmp_path: Path, name: str) -> None:
    copy = tmp_path / name
    for key, item in numeric(folder / name).items():
        chunk = item.id.get_chunk_info(0)
        damaged = bytearray((folder / name).read_bytes())
        damaged[chunk.byte_offset + chunk.size // 2] ^= 0x10
        copy.write_bytes(damaged)
        with h5py.File(copy) as file, pytest.raises(OSError, match="read"):
            file[key][...]


# refusal and wholeness


@pytest.fixture
def undrawn(monkeypatch: pytest.MonkeyPatch) -> None:
    """Leave the drawing out: it takes seconds and is not what is tested."""
    monkeypatch.setattr(save, "draw_figures", lambda *_: dict.fromkeys(name[:-4] for name in PICTURES))
    monkeypatch.setattr(save, "png", lambda _: b"a picture")


def test_finished_results_are_kept_unless_told_otherwise(run: Estimate, folder: Path) -> None:
    before = content(folder)
    with pytest.raises(InputError, match="finished results"):
        save_results(run, folder)
    assert content(folder) == before


@pytest.mark.usefixtures("undrawn")
def test_finished_results_are_replaced_when_told(run: Estimate, tmp_path: Path) -> None:
    place = tmp_path / "results"
    save_results(run, place)
    (place / "stale.txt").write_text("of the run before")
    save_results(run, place, overwrite=True)
    assert not (place / "stale.txt").exists()
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_a_folder_of_something_else_is_never_replaced(run: Estimate, tmp_path: Path) -> None:
    (tmp_path / "thesis.tex").write_text("years of work")
    with pytest.raises(InputError, match="holds no results of massfit"):
        save_results(run, tmp_path, overwrite=True)
    assert [path.name for path in tmp_path.iterdir()] == ["thesis.tex"]


def test_a_file_in_the_way_is_left_alone(run: Estimate, tmp_path: Path) -> None:
    (tmp_path / "results").write_text("a file")
    with pytest.raises(InputError, match="the output is a file"):
        save_results(run, tmp_path / "results", overwrite=True)
    assert (tmp_path / "results").read_text() == "a file"


@pytest.fixture
def full_disk(monkeypatch: pytest.MonkeyPatch) -> Callable[[], None]:
    """Make the third Dataset fail half-way."""
    really = results_folder.write_dataset

    def fail(path: Path, dataset: xr.Dataset) -> None:
        if path.name == DATASETS[2]:
            path.write_bytes(b"half a fi")
            raise OSError(28, "No space left on device")
        really(path, dataset)

    return lambda: monkeypatch.setattr(results_folder, "write_dataset", fail)


@pytest.mark.usefixtures("undrawn")
def test_no_half_results_are_left(run: Estimate, tmp_path: Path, full_disk: Callable[[], None]) -> None:
    full_disk()
    with pytest.raises(InputError, match=r"cannot be written \(No space"):
        save_results(run, tmp_path / "results")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.usefixtures("undrawn")
def test_old_results_outlive_a_failed_replacement(run: Estimate, tmp_path: Path, full_disk: Callable[[], None]) -> None:
    place = tmp_path / "results"
    save_results(run, place)
    before = content(place)
    full_disk()
    with pytest.raises(InputError, match=r"cannot be written \(No space"):
        save_results(run, place, overwrite=True)
    assert content(place) == before
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_no_file_may_grow_too_large_for_the_disk_unnoticed(run: Estimate, tmp_path: Path) -> None:
    finished = finished_run(run, command="")
    largest = max(len(dataset.to_netcdf(engine="h5netcdf")) for dataset in finished.datasets.values())
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    for limit in (200, 20_000, largest // 4, largest // 2):
        with claimed(tmp_path / "results") as partial:
            # the kernel refuses to let a file grow beyond this, as it refuses when a disk is full
            resource.setrlimit(resource.RLIMIT_FSIZE, (limit, hard))
            try:
                with pytest.raises(InputError, match=r"cannot be written \(File too large\)"):
                    write_results(partial, finished, pictures={}, page="")
            finally:
                resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
        assert list(tmp_path.iterdir()) == []
