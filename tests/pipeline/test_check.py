"""What `massfit check` finds is held against the run itself and against the files."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.network import Network, Series
from massfit.pipeline.check import check_network, look_at, refuse
from massfit.records.record import Record
from massfit.site import Interval


def unbounded(network: Network) -> Network:
    """The network without its window."""
    frame = replace(network.settings.frame, start=None, end=None)
    return replace(network, settings=replace(network.settings, frame=frame))


def test_it_agrees_with_the_run(invented, run) -> None:
    check = look_at(invented)
    assert check.faults == ()
    for site, reduction in zip(check.found["sites"], run.reductions, strict=True):
        days = np.unique(np.concatenate([daily.time for daily in reduction.daily]))
        # daily values are rejected as spikes only in the run
        assert days.size <= site["days"] <= days.size + 5
        assert [model["name"] for model in site["models"] if model["present"]] == list(reduction.fit.models)
        assert site["left_out"] is None
    assert check.found["assumptions"] == run.summary["assumptions"]


def test_days_of_an_hourly_network_are_those_of_the_run() -> None:
    from massfit.pipeline.sites import daily_records
    from massfit.simulate.network import simulate_network
    from massfit.simulate.options import SimulationOptions

    options = SimulationOptions(sites=1, years=1, sampling="hourly", models=0, bad_site=False)
    network = simulate_network(options, seed=4).network
    (site,) = look_at(network).found["sites"]
    daily = daily_records(network, lambda *_: None)[site["id"]]
    days = np.unique(np.concatenate([each.time for each in daily]))
    assert abs(days.size - site["days"]) <= 3
    assert site["deployments"][0]["sampling_s"] == 3600.0
    shares = [share for year in site["months"].values() for share in year if share is not None]
    lengths = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
    assert min(shares) >= 0
    assert max(shares) == 1.0
    assert site["days"] / lengths.max() < sum(shares) < site["days"] / lengths.min()


def test_months_windows_and_exclusions(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change("reference_year = 2016", "reference_year = 2016\nstart = 2014-03-01")
    a, b = check_network(network_folder).found["sites"]
    assert list(a["months"]) == ["2014", "2015", "2016"]
    # data before the window are there and not used; nothing after May 2016
    assert a["months"]["2014"] == [0.0, 0.0, *[1.0] * 10]
    assert a["months"]["2016"] == [*[1.0] * 5, *[None] * 7]
    assert a["months"]["2015"][2] == pytest.approx(21 / 31, abs=1e-3)  # the ten days left out of March
    assert b["months"]["2015"][2] == 1.0
    assert b["days"] - a["days"] == 10
    assert (a["deployments"][0]["units"], b["deployments"][0]["units"]) == ("hPa", "Pa")
    assert a["deployments"][0]["file"] == "records/a.csv"
    assert a["ocean_fraction"] == 1.0
    (model,) = a["models"]
    assert (model["name"], model["present"], model["covered"]) == ("Invented model", True, 1.0)
    assert (model["start"], model["end"]) == ("2014-01-01T12:00:00", "2016-05-31T12:00:00")


def test_every_fault_of_reading_is_found_at_once(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change("latitude = -11.25", "latitude = 95.0")
    change('drift = "linear"', 'drift = "cubic"')
    check = check_network(network_folder)
    assert [fault["line"] for fault in check.found["faults"]] == [7, 28]
    # B could not be read for its drift, and A is nowhere
    (b,) = check.found["sites"]
    assert (b["id"], b["left_out"]) == ("B", "no record of it was read: see the faults")
    assert check.found["assumptions"] == []
    with pytest.raises(InputError) as caught:
        refuse(check)
    assert caught.value.faults == check.faults


def test_what_can_be_read_is_shown_beside_the_faults(network_folder: Path, change: Callable[[str, str], None]) -> None:
    whole = check_network(network_folder).found["sites"]
    change('drift = "linear"', 'drift = "cubic"')
    change('air_pressure = "not-forced"', 'air_pressure = "forced-excluded"')
    header, *rows = (network_folder / "fields/air.csv").read_text().splitlines(keepends=True)[1:]
    (network_folder / "fields/air.csv").write_text("".join([header, *rows[:300]]))
    check = check_network(network_folder)
    a, b = check.found["sites"]
    assert {**a, "models": whole[0]["models"], "notes": []} == whole[0]
    assert b["left_out"].startswith("no record of it was read")
    # those of the file, then what a run would meet; the model's is told once
    assert [fault["name"] for fault in check.found["faults"]] == [
        "site[B].deployment[1].drift", "circulation[Invented model].air_pressure", "ocean_mean_atmosphere",
    ]  # fmt: skip


def test_a_wrong_section_leaves_nothing_to_show(network_folder: Path, change: Callable[[str, str], None]) -> None:
    change("reference_year = 2016", "reference_year = 16")
    check = check_network(network_folder)
    assert check.found["sites"] == []
    assert "network" not in check.found
    assert len(check.faults) == 1


def test_faults_that_a_run_would_meet_later_are_found_together(invented) -> None:
    half = invented.ocean_mean_atmosphere
    short = Series(half.name, half.time[:400], half.pressure[:400])
    model = replace(invented.circulation[0], air_pressure="forced-excluded")
    network = replace(invented, ocean_mean_atmosphere=short, circulation=(model, *invented.circulation[1:]))
    check = look_at(network)
    text = [str(fault) for fault in check.faults]
    assert len(text) == 1 + len(invented.sites)
    assert 'the model states "forced-excluded"' in text[0]
    assert all("does not cover" in line for line in text[1:])
    assert len(check.found["sites"]) == len(invented.sites)


def test_a_record_beyond_known_polar_motion_is_a_fault(invented) -> None:
    site = invented.sites[0].id
    record = next(each for each in invented.records if each.site == site)
    late = replace(record, time=record.time + np.timedelta64(50 * 365, "D"))
    network = replace(unbounded(invented), records=(late,), ocean_mean_atmosphere=None, circulation=())
    assert any("polar motion" in str(fault) for fault in look_at(network).faults)


def test_short_and_left_out_sites(invented) -> None:
    first, second, third = invented.sites
    cut = [
        replace(each, time=each.time[:80], pressure=each.pressure[:80]) if each.site == second.id else each
        for each in invented.records
        if each.site != second.id or each.deployment.endswith("/1")
    ]
    sites = (replace(first, excluded_because="anchor lost"), second, replace(third, depth_m=None))
    found = look_at(replace(invented, sites=sites, records=tuple(cut))).found["sites"]
    assert found[0]["left_out"] == "anchor lost"
    assert found[0]["models"] == []
    assert found[1]["left_out"] == f"{found[1]['days']} days that are well covered; a site needs 90"
    assert found[1]["long_enough"] is False
    assert found[2]["depth_m"] is None


def test_a_half_day_is_no_day(invented) -> None:
    site = replace(invented.sites[0], exclude=(Interval(*np.array(["2016-02-02", "2016-02-02T12"], "M8[ns]"), "test"),))
    time = np.arange("2016-02-01T00:30", "2016-02-11", np.timedelta64(1, "h"), dtype="datetime64[m]").astype("M8[ns]")
    record = Record(site.id, f"{site.id}/1", time, np.cos(np.arange(time.size)))
    bare = replace(unbounded(invented), circulation=(), ocean_mean_atmosphere=None)
    network = replace(bare, sites=(site,), records=(record,))
    assert look_at(network).found["sites"][0]["days"] == 9
