"""Real records of five kinds of files through one network file, down to daily means, with every row accounted for."""

from pathlib import Path

import numpy as np
import pytest

from massfit.io.network.network_file import read_network
from massfit.network import Network
from massfit.records.daily import reduce_to_daily
from massfit.records.record import Record

NETWORK = """\
[network]
name = "Records of others"
reference_year = 2018

[corrections]
ocean_mean_atmosphere = "already-removed"

[[site]]
id = "west Pacific"
latitude = 42.617
longitude = 152.583
depth_m = 5264

  [[site.deployment]]
  file = "{folder}/deep_recorder_21401_201103.txt"
  columns = ["year", "month", "day", "hour", "minute", "second", "kind", "height"]
  keep_kinds = ["1"]
  missing = 9999
  units = "m"
  density_kg_m3 = 1040

[[site]]
id = "off Japan"
latitude = 38.711
longitude = 148.694

  [[site.deployment]]
  file = "{folder}/deep_recorder_21418_201103.txt"
  columns = ["year", "month", "day", "hour", "minute", "second", "kind", "height"]
  missing = 9999
  units = "m"
  density_kg_m3 = 1040

[[site]]
id = "volcano"
latitude = 45.95547
longitude = -130.00957
depth_m = 1511

  [[site.deployment]]
  file = "{folder}/axial_botpt_15s_depth_2011_feb_apr.mat"
  start_time = 2011-01-31T23:59:52.525Z
  interval_s = 15
  units = "m"
  scale_factor = -1e-5
  missing = 0
  density_kg_m3 = 1030

  [[site.deployment]]
  file = "{folder}/axial_botpt_mj03e_mj03f_daily_2015_2026.csv"
  delimiter = ","
  time_column = "date_utc"
  variable = "depth_mj03f_m"
  stamp = "start"
  units = "m"
  density_kg_m3 = 1030

[[site]]
id = "harbour"
latitude = 21.3
longitude = -157.87

  [[site.deployment]]
  file = "{folder}/honolulu_hourly_sealevel_2010.asc"
  columns = ["time", "height"]
  time_format = "days since 1700-01-01"
  units = "mm"
  density_kg_m3 = 1025
"""


@pytest.fixture(scope="module")
def network(open_data: Path, tmp_path_factory: pytest.TempPathFactory) -> Network:
    folder = tmp_path_factory.mktemp("others")
    (folder / "network.toml").write_text(NETWORK.format(folder=open_data))
    return read_network(folder, outside=True)


def record_of(network: Network, deployment: str) -> Record:
    (record,) = [record for record in network.records if record.deployment == deployment]
    return record


def said(record: Record) -> dict[str, int]:
    return {action.what: action.count for action in record.actions}


# rows and codes are those that grep and awk count in the files
@pytest.mark.parametrize(
    ("deployment", "rows", "missing", "actions"),
    [
        ("west Pacific/1", 2976, 172, {"rows of other kinds left out": 2944}),
        ("off Japan/1", 2952, 152, {}),
        ("volcano/1", 512_640, 11_520, {}),
        ("volcano/2", 4034, 118, {"stamps moved to the middle": 4034}),
        ("harbour/1", 8760, 0, {}),
    ],
)
def test_every_row_is_accounted_for(
    network: Network, deployment: str, rows: int, missing: int, actions: dict[str, int]
) -> None:
    record = record_of(network, deployment)
    assert record.time.size == rows
    assert np.count_nonzero(np.isnan(record.pressure)) == missing
    assert said(record) == actions


@pytest.mark.parametrize(
    ("deployment", "days", "counts"),
    [
        # two days of a tsunami have event rows only
        ("west Pacific/1", (29, 29), {"samples without a value left out": 172}),
        # 6 rows of two kinds with one stamp and one value, 21 with one stamp and two: sort and uniq count them
        ("off Japan/1", (4, 4), {"repeated samples left out": 6, "repeated stamps averaged": 21}),
        # 89 days less a gap of two; the days of the ramp in April may be left out
        ("volcano/1", (80, 87), {"samples without a value left out": 11_520}),
        ("volcano/2", (3900, 3916), {"samples without a value left out": 118}),
        ("harbour/1", (365, 365), {}),
    ],
)
def test_daily_means_account_for_the_rest(
    network: Network, deployment: str, days: tuple[int, int], counts: dict[str, int]
) -> None:
    daily = reduce_to_daily(record_of(network, deployment))
    assert days[0] <= daily.time.size <= days[1]
    found = {action.what: action.count for action in daily.actions}
    assert {what: found.get(what) for what in counts} == counts


def test_the_step_of_april_2011_is_found_in_the_15_s_record(network: Network) -> None:
    daily = reduce_to_daily(record_of(network, "volcano/1"))
    # the sea floor fell by about 2.3 m on and after 6 April 2011, 0.2 m a day and less after the first
    level = daily.pressure / (1030.0 * 9.80665)
    before = level[daily.time < np.datetime64("2011-04-05")].mean()
    after = level[daily.time > np.datetime64("2011-04-15")].mean()
    assert after - before == pytest.approx(2.3, abs=0.2)


def test_no_unit_or_clock_is_doubted(network: Network) -> None:
    doubts = ("check the units", "the clock goes back", "resolution")
    assert [warning for warning in network.warnings if any(doubt in warning for doubt in doubts)] == []
