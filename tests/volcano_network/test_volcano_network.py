"""The main job on real measurements that are not quiet: it must end well and claim little."""

import json
import shutil
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pytest

from massfit.constants import STANDARD_GRAVITY
from massfit.io.network.network_file import read_network
from massfit.pipeline.estimate import estimate
from massfit.pipeline.save import save_results
from massfit.report.words.run_text import summary_text
from massfit.results.estimate import Estimate

HERE = Path(__file__).parent


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory, open_data: Path) -> Path:
    folder = tmp_path_factory.mktemp("volcano")
    shutil.copy(HERE / "network.toml", folder)
    (folder / "open_data").symlink_to(open_data)
    return folder


@pytest.fixture(scope="module")
def result(folder: Path) -> Estimate:
    return estimate(read_network(folder, outside=True))


@pytest.fixture(scope="module")
def summary(result: Estimate) -> Mapping[str, Any]:
    return result.summary


def test_it_converges_and_is_written(result, summary, folder):
    assert summary["convergence"]["converged"]
    save_results(result, folder / "results")
    assert json.loads((folder / "results/estimate.json").read_text()) == summary
    assert (folder / "results/report.html").exists()


def test_the_answer_is_very_wide(summary):
    # a network of quiet sites states a few hundredths to two tenths of a hPa; two recorders on a volcano, with no model
    # subtracted, must not come near that
    assert summary["amplitude_hpa"]["sd"] > 0.5
    low, high = summary["amplitude_hpa"]["region95"]
    assert high - low > 2.0


def test_both_sites_are_flagged_as_not_quiet(summary):
    for site in summary["sites"]:
        assert site["reduced_sd_hpa"] > 3.0
        assert any("Not quiet" in warning for warning in site["warnings"]), site["id"]


def test_the_reader_is_told_that_no_site_is_quiet(summary):
    assert any("No site of this network is quiet" in warning for warning in summary["warnings"])
    assert "No site of this network is quiet" in " ".join(summary_text(summary).split())


@pytest.mark.parametrize(("site", "fall_m"), [(0, (0.90, 1.00)), (1, (2.30, 2.40))])
def test_the_fall_of_the_sea_floor_is_fitted_whether_declared_or_found(result, site, fall_m):
    # 0.95 m at the first recorder, 2.3 to 2.4 m at the second, by the provenance of the open data
    ((_, step),) = result.reductions[site].fit.drifts[0].steps
    metres = step.mean / (1035.0 * STANDARD_GRAVITY)
    assert fall_m[0] - 2 * step.sd / 1e4 < metres < fall_m[1] + 2 * step.sd / 1e4


def test_what_was_found_is_said_at_its_site(summary):
    declared, found = (" ".join(site["warnings"]) for site in summary["sites"])
    assert "nobody declared" not in declared
    assert "changes of level that nobody declared were found and are fitted (ramp 2015-04-24)" in found
    said = [action["what"] for action in summary["actions"]["MJ03F/1"]]
    assert {"changes of level found", "samples on ramps left out", "days without a mean"} <= set(said)


def test_the_changes_of_level_stand_with_their_fitted_sizes(summary):
    (declared,), (found,) = (site["level_changes"] for site in summary["sites"])
    assert (declared["kind"], declared["found"]) == ("ramp", False)
    assert (found["kind"], found["found"]) == ("ramp", True)
    assert (found["start"], found["end"]) == ("2015-04-24T00:00:00", "2015-04-26T00:00:00")
    # hPa: 0.95 and 2.3 to 2.4 m of water of 1035 kg m-3, within two standard deviations
    for change, metres in ((declared, 0.95), (found, 2.35)):
        expected = 1035.0 * STANDARD_GRAVITY * metres / 100.0
        assert change["size_hpa"] == pytest.approx(expected, abs=0.05 * expected + 2.0 * change["size_sd_hpa"])
