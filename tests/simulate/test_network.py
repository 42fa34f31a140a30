import json
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from pydantic import ValidationError

from massfit.corrections.circulation import circulation_at_sites
from massfit.corrections.responses import equilibrium_responses
from massfit.corrections.site import site_corrections
from massfit.errors import InputError
from massfit.fingerprint.footprint import site_footprints
from massfit.fingerprint.ocean import OceanFunction
from massfit.phasor import annual_basis, days_since, phasor_from_peak
from massfit.records.daily import reduce_to_daily
from massfit.simulate.network import SimulatedNetwork, simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.simulate.sea_level import true_operator

DAILY = SimulationOptions(sites=12, years=4, sampling="daily")


@cache
def daily(seed: int) -> SimulatedNetwork:
    return simulate_network(DAILY, seed=seed)


def test_same_seed_same_network() -> None:
    first, again = daily(1), simulate_network(DAILY, seed=1)
    assert json.dumps(first.truth) == json.dumps(again.truth)
    for one, two in zip(first.network.records, again.network.records, strict=True):
        assert np.array_equal(one.time, two.time)
        assert np.array_equal(one.pressure, two.pressure, equal_nan=True)
    for one, two in zip(first.network.circulation, again.network.circulation, strict=True):
        assert one.pressure.identical(two.pressure)


def test_another_seed_another_network() -> None:
    assert daily(1).truth["amplitude_hpa"] != daily(2).truth["amplitude_hpa"]
    assert daily(1).network.sites[0].latitude_deg != daily(2).network.sites[0].latitude_deg


def test_more_models_do_not_move_the_records() -> None:
    more = simulate_network(SimulationOptions(sites=12, years=4, sampling="daily", models=5), seed=1)
    assert more.network.sites == daily(1).network.sites
    pairs = zip(more.network.records, daily(1).network.records, strict=True)
    assert all(np.array_equal(one.pressure, two.pressure, equal_nan=True) for one, two in pairs)


def test_truth_is_plain_data_that_agrees_with_itself() -> None:
    truth = json.loads(json.dumps(daily(1).truth))
    phasor = phasor_from_peak(truth["amplitude_hpa"], truth["peak_day"])
    assert phasor == pytest.approx(complex(truth["in_phase_hpa"], truth["quadrature_hpa"]), rel=1e-12)
    assert [site["id"] for site in truth["sites"]] == [site.id for site in daily(1).network.sites]
    roles = [site["role"] for site in truth["sites"]]
    assert sorted(role for role in roles if role != "plain") == [
        "disturbed", "eddies", "missing", "overlap", "short", "step", "text",
    ]  # fmt: skip


def test_the_truth_is_no_member_of_the_ensemble() -> None:
    network, truth = daily(1).network, daily(1).truth
    assert len({member.name for member in network.loads}) == len(network.loads) == 5
    assert all(member.longitude_deg.size == 180 for member in network.loads)
    assert "truth" not in {member.name for member in network.loads}
    assert truth["water_vapour_kg"] != [-0.65e15, 0.0]


def recovered(simulated: SimulatedNetwork, *, leave_in: str = "", admittance: bool = True) -> tuple[complex, float]:
    """Mean over good sites of the phasor by plain least squares, and its standard error, hPa.

    Corrections are those of the analysis; drift time constants, admittances and the self-attraction of the air are
    taken from the truth, so that nothing but the network is on trial.
    """
    network, ocean, operator = simulated.network, OceanFunction.builtin(), true_operator(90)
    footprints = site_footprints(operator, network.sites)
    responses = equilibrium_responses(operator, network.sites)
    models = [circulation_at_sites(m, network.sites, ocean=ocean, footprints=footprints) for m in network.circulation]
    phasors = []
    for site, truth in zip(network.sites, simulated.truth["sites"], strict=True):
        if truth["role"] in ("eddies", "short", "disturbed"):
            continue
        records = [record for record in network.records if record.site == site.id]
        time = np.unique(np.concatenate([record.time for record in records]))
        series = site_corrections(
            site, time, responses=responses, atmosphere=network.ocean_mean_atmosphere, circulation=models
        )
        names = {"long_period_tides", "pole_tide", "ocean_mean_atmosphere"} - {leave_in}
        taken_off = sum(series[name].to_numpy() for name in names)
        if leave_in != "circulation":
            taken_off = taken_off + np.nanmean(series["circulation"].to_numpy(), axis=0)
        columns, values, days = [], [], []
        for record, recorder in zip(records, truth["deployments"], strict=True):
            elapsed = (record.time - record.time[0]) / np.timedelta64(1, "D")
            drift = [np.ones(elapsed.size), elapsed / 365.25, np.exp(-elapsed / recorder["time_constant_days"])]
            drift += [(record.time >= step).astype(float) for step in record.steps]
            columns.append(np.column_stack(drift))
            values.append(record.pressure - taken_off[np.searchsorted(time, record.time)])
            days.append(days_since(record.time, network.settings.frame.reference_year))
        days_all, y = np.concatenate(days), np.concatenate(values)
        drift_all = np.zeros((y.size, sum(part.shape[1] for part in columns)))
        row = column = 0
        for part in columns:
            drift_all[row : row + len(part), column : column + part.shape[1]] = part
            row, column = row + len(part), column + part.shape[1]
        design = np.hstack([annual_basis(days_all), annual_basis(days_all, 2), drift_all])
        finite = np.isfinite(y)
        fit = np.linalg.lstsq(design[finite], y[finite], rcond=None)[0]
        z = complex(fit[0], fit[1]) / 100.0 - complex(*truth["air_load_response_hpa"])
        phasors.append(z / complex(*truth["admittance"]) if admittance else z)
    return complex(np.mean(phasors)), float(np.std(phasors) / np.sqrt(len(phasors)))


def known_errors(simulated: SimulatedNetwork) -> complex:
    """Mean shared error of models and air, which no number of sites averages down."""
    models = [complex(*pair) for pair in simulated.truth["model_common_error_hpa"].values()]
    return complex(np.mean(models)) + complex(*simulated.truth["ocean_mean_air_error_hpa"])


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_least_squares_finds_the_truth(seed: int) -> None:
    simulated = daily(seed)
    truth = complex(simulated.truth["in_phase_hpa"], simulated.truth["quadrature_hpa"])
    found, standard_error = recovered(simulated)
    assert standard_error < 0.2
    # complex scatter over good sites; regional errors of the models make neighbours alike, hence 3.5
    assert abs(found + known_errors(simulated) - truth) < 3.5 * standard_error


def test_a_correction_left_out_is_seen() -> None:
    # control: the ocean-mean air pressure left in shifts the answer by its annual cycle of about 0.63 hPa
    simulated = daily(1)
    with_air, _ = recovered(simulated, leave_in="ocean_mean_atmosphere")
    shift = with_air - recovered(simulated)[0]
    # Sites weigh the air by 1 / F, which is about 1
    air = complex(*simulated.truth["ocean_mean_air_hpa"]) + complex(*simulated.truth["ocean_mean_air_error_hpa"])
    assert abs(shift - air) < 0.15 * abs(air)


def test_hourly_records_hold_the_daily_ones_and_tides() -> None:
    options = SimulationOptions(sites=3, years=1, incidents=False, bad_site=False, noise=0.0, models=1)
    record = simulate_network(options, seed=4).network.records[0]
    assert (record.time[1] - record.time[0]) == np.timedelta64(1, "h")
    half_day = record.pressure[: 24 * 300].reshape(-1, 24).std(axis=1).mean()
    assert half_day > 500.0  # Pa: tides of decimetres
    assert record.reference > 3.5e7


def test_switches() -> None:
    options = SimulationOptions(
        sites=4, years=1, models=0, sampling="daily", noise=0.0, model_error=0.0, incidents=False, bad_site=False
    )
    simulated = simulate_network(options, seed=1)
    assert {site["role"] for site in simulated.truth["sites"]} == {"plain"}
    assert simulated.network.circulation == ()
    assert simulated.network.settings.corrections.tides == "already-removed"
    assert all(site["unmodelled_annual_hpa"] == [0.0, 0.0] for site in simulated.truth["sites"])


def test_a_period_without_observed_polar_motion_is_refused() -> None:
    with pytest.raises(InputError, match="polar motion"):
        simulate_network(SimulationOptions(sites=1, years=1, sampling="daily", first_year=2090), seed=1)


def test_samples_every_15_s_are_those_of_the_same_sea() -> None:
    # invariant: sea, tides, drift and the slow noise of a seed do not depend on how often they are sampled; the daily
    # means of the two differ by how noise runs from hour to hour, half a pascal, and by that of the single samples
    options = SimulationOptions(sites=1, years=1, models=0, incidents=False, bad_site=False)
    hourly, fine = (
        simulate_network(replace(options, sampling=sampling), seed=3).network for sampling in ("hourly", "15s")
    )
    assert fine.settings.corrections.tides == "remove"
    assert np.unique(np.diff(fine.records[0].time)) == np.timedelta64(15, "s")
    one, two = (reduce_to_daily(network.records[0]) for network in (hourly, fine))
    np.testing.assert_array_equal(one.time, two.time)
    apart = one.pressure - two.pressure
    assert 0.1 < np.std(apart) < 1.0
    assert abs(np.mean(apart)) < 0.1
    # the tides of the two are one: M2 within 1 mm
    sizes = [next(tide.amplitude for tide in record.tides if tide.name == "M2") for record in (one, two)]
    assert sizes[0] == pytest.approx(sizes[1], abs=10.0)


@pytest.mark.parametrize("wrong", [{"sites": 0}, {"years": 0.5}, {"noise": -1.0}, {"sampling": "weekly"}])
def test_options_are_validated(wrong: dict[str, object]) -> None:
    with pytest.raises(ValidationError, match=next(iter(wrong))):
        SimulationOptions(**wrong)  # type: ignore[arg-type]
