"""The chain on small networks in memory: what its numbers depend on, and what it says of poor networks."""

import hashlib
import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import replace
from datetime import date, timedelta
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from massfit.errors import InputError
from massfit.fingerprint.ocean import OceanFunction
from massfit.fingerprint.pattern import LoadPattern
from massfit.network import Network
from massfit.pipeline.estimate import estimate
from massfit.posterior.sample import sample_posterior
from massfit.results.estimate import Estimate

DOCS = Path(__file__).parents[2] / "docs"


def digest(result: Estimate) -> str:
    """Hash of every number of the answer, to the last bit."""
    digits = hashlib.sha256(result.posterior.annual.tobytes())
    digits.update(result.site_phasors["phasor"].values.tobytes())
    digits.update(json.dumps(result.summary, sort_keys=True).encode())
    return digits.hexdigest()


def phasors_of(result: Estimate, site: str) -> xr.Dataset:
    return result.site_phasors.sel(site=site, drop=True)


def with_one_member(network: Network) -> Network:
    return replace(network, loads=network.loads[:1])


def with_first_site(network: Network) -> Network:
    first = network.sites[0]
    return replace(
        network, sites=(first,), records=tuple(record for record in network.records if record.site == first.id)
    )


# what the numbers depend on


# that another process gives the same numbers is tested with the command


def test_two_workers_give_the_numbers_of_one(invented: Network, run: Estimate) -> None:
    assert digest(estimate(invented, workers=2)) == digest(run)


def test_another_seed_gives_other_draws_of_the_same_answer(invented: Network, run: Estimate) -> None:
    # control for the comparison above: it can fail
    other = sample_posterior(
        run.site_phasors,
        run.fingerprints,
        settings=replace(invented.settings.posterior, seed=2),
        priors=invented.settings.priors,
    )
    draws = run.posterior.member_annual[0]
    again = other.member_annual[0]
    assert again.shape == draws.shape
    assert not np.array_equal(again, draws)
    # Monte Carlo error of 400 effective draws or more: below .05 sd; four of it for each of the two runs
    shift = again.mean(axis=(0, 1)) - draws.mean(axis=(0, 1))
    assert np.all(np.abs(shift) < 0.28 * draws.std(axis=(0, 1)))


@pytest.fixture(scope="module")
def stages() -> dict[str, list[tuple[int, int]]]:
    """What the run below told of its progress."""
    return {}


@pytest.fixture(scope="module")
def only_third(invented: Network, stages: dict[str, list[tuple[int, int]]]) -> Estimate:
    """The first site excluded, the second cut to sixty days, the third untouched."""
    first, second, third = invented.sites
    early = min(record.time[0] for record in invented.records) + np.timedelta64(60, "D")
    records = []
    for record in invented.records:
        keep = (record.time < early) | (record.site != second.id)
        records.append(replace(record, time=record.time[keep], pressure=record.pressure[keep]))
    sites = (replace(first, excluded_because="lies on a mud volcano"), second, third)
    network = replace(with_one_member(invented), sites=sites, records=tuple(records))
    return estimate(network, progress=lambda stage, *parts: stages.setdefault(stage, []).append(parts))


def test_other_sites_do_not_change_the_phasor_of_a_site(invented: Network, run: Estimate, only_third: Estimate) -> None:
    name = invented.sites[2].id
    xr.testing.assert_identical(phasors_of(only_third, name), phasors_of(run, name))


def test_sites_left_out_are_listed_with_the_reason(invented: Network, run: Estimate, only_third: Estimate) -> None:
    first, second, third = (site.id for site in invented.sites)
    summary = only_third.summary
    assert summary["left_out"] == {first: "lies on a mud volcano", second: "too few days of data are left"}
    assert [site["id"] for site in summary["sites"]] == [third]
    assert run.summary["left_out"] == {}


def test_one_site_and_one_load_member_run_and_say_so(only_third: Estimate) -> None:
    text = " ".join(only_third.summary["warnings"])
    assert "One site" in text
    assert "One load member" in text
    assert only_third.summary["variance_share"]["fingerprint"] == 0.0


@pytest.mark.parametrize(("count", "words"), [(0, "No ocean model"), (1, "One ocean model")])
def test_networks_with_few_models_run_and_say_so(invented: Network, run: Estimate, count: int, words: str) -> None:
    few = estimate(replace(with_one_member(invented), circulation=invented.circulation[:count]))
    assert words in " ".join(few.summary["warnings"])
    assert "spread is assumed" in " ".join(few.summary["assumptions"]).replace("spread between models", "spread")
    check_contract(few.summary)
    # fewer models know less
    assert few.summary["amplitude_hpa"]["sd"] > run.summary["amplitude_hpa"]["sd"]


def test_fewer_than_180_days_are_refused(invented: Network) -> None:
    frame = invented.settings.frame
    assert frame.start is not None
    short = replace(frame, end=frame.start + timedelta(days=49))
    with pytest.raises(InputError, match="days of data are left after the window") as refusal:
        estimate(replace(invented, settings=replace(invented.settings, frame=short)))
    (fault,) = refusal.value.faults
    assert "180" in fault.allowed


def test_progress_names_every_stage_and_reaches_its_end(
    only_third: Estimate, stages: dict[str, list[tuple[int, int]]]
) -> None:
    assert list(stages) == ["daily means", "sea-level equation", "site phasors", "network posterior"]
    for steps in stages.values():
        assert steps == sorted(steps)
        assert steps[-1][0] == steps[-1][1]
    assert stages["site phasors"][-1] == (len(only_third.reductions), 1)


# air pressure as a field


def coarse(pattern: LoadPattern, factor: int) -> LoadPattern:
    """Means of blocks of cells, by area."""
    weight = np.cos(np.deg2rad(pattern.latitude_deg))
    rows, columns = len(pattern.latitude_deg) // factor, len(pattern.longitude_deg) // factor
    weighted = (pattern.values * weight[:, None]).reshape(rows, factor, columns, factor).sum(axis=(1, 3)) / factor
    return replace(
        pattern,
        latitude_deg=pattern.latitude_deg.reshape(rows, factor).mean(axis=1),
        longitude_deg=pattern.longitude_deg.reshape(columns, factor).mean(axis=1),
        values=weighted / weight.reshape(rows, factor).sum(axis=1)[:, None],
    )


def over_ocean(pattern: LoadPattern) -> complex:
    """Mean over the ocean, by blocks of the cells of the ocean function."""
    ocean = OceanFunction.builtin()
    factor = len(ocean.fraction) // len(pattern.latitude_deg)
    latitude = 0.5 * (ocean.cells.latitude_bounds_deg[1:] + ocean.cells.latitude_bounds_deg[:-1])
    # the table of the ocean runs from north to south, the pattern from south to north
    assert latitude[0] > 0.0 > pattern.latitude_deg[0]
    first_edge = pattern.longitude_deg[0] - 0.5 * (pattern.longitude_deg[1] - pattern.longitude_deg[0])
    shift = round((first_edge - ocean.cells.longitude_bounds_deg[0]) / 0.25)
    fraction = np.roll(ocean.fraction, -shift, axis=1)[::-1]
    weight = fraction * np.cos(np.deg2rad(latitude[::-1]))[:, None]
    cells = weight.reshape(len(pattern.latitude_deg), factor, len(pattern.longitude_deg), factor).sum(axis=(1, 3))
    return complex((cells * pattern.values).sum() / cells.sum())


def test_a_field_of_air_pressure_replaces_series_and_load(invented: Network) -> None:
    assert invented.atmosphere_load is not None
    assert invented.ocean_mean_atmosphere is not None
    pattern, series = coarse(invented.atmosphere_load, 3), invented.ocean_mean_atmosphere
    origin = np.datetime64(f"{invented.settings.frame.reference_year}-01-01T00", "ns")
    days = (series.time - origin) / np.timedelta64(1, "D")
    turn = np.exp(-2j * np.pi * days / 365.2422)
    # the pattern, and the same weather everywhere, such that the ocean mean is the series
    weather = series.pressure - (over_ocean(pattern) * turn).real
    field = (pattern.values[None] * turn[:, None, None]).real + weather[:, None, None]
    grid = {"time": series.time, "lat": pattern.latitude_deg, "lon": pattern.longitude_deg}
    pressure = xr.DataArray(1e5 + field, grid, tuple(grid), attrs={"units": "Pa"})
    small = with_one_member(with_first_site(invented))
    chosen = replace(invented.settings.corrections, ocean_mean_atmosphere=None, atmosphere_load=None, air_pressure="f")
    by_field = estimate(
        replace(
            small,
            settings=replace(small.settings, corrections=chosen),
            ocean_mean_atmosphere=None,
            atmosphere_load=None,
            air_pressure=pressure,
        )
    )
    # the annual cycle of that weather belongs to the load on land too: least squares, with a trend
    columns = np.column_stack([turn.real, -turn.imag, np.ones_like(days), days])
    in_phase, quadrature = np.linalg.lstsq(columns, weather, rcond=None)[0][:2]
    load = replace(pattern, values=pattern.values + complex(in_phase, quadrature))
    by_series = estimate(replace(small, atmosphere_load=load))
    # a constant level of the air is a level of the record
    assert np.allclose(by_field.site_phasors["phasor"], by_series.site_phasors["phasor"], atol=1e-3)
    # what is left is the two fits of the annual cycle of the weather
    response = by_series.fingerprints["air_load_response"].values
    assert np.allclose(by_field.fingerprints["air_load_response"], response, atol=0.02 * np.abs(response).max())
    assert by_field.summary["amplitude_hpa"]["median"] == pytest.approx(
        by_series.summary["amplitude_hpa"]["median"], abs=0.1 * by_series.summary["amplitude_hpa"]["sd"]
    )


# the content of estimate.json


def names_of(value: Any) -> Iterator[str]:
    """Every key at any depth."""
    if isinstance(value, Mapping):
        for key, item in value.items():
            yield key
            yield from names_of(item)
    elif isinstance(value, list):
        for item in value:
            yield from names_of(item)


def numbers_of(value: Any) -> Iterator[float]:
    if isinstance(value, Mapping):
        for item in value.values():
            yield from numbers_of(item)
    elif isinstance(value, list):
        for item in value:
            yield from numbers_of(item)
    elif isinstance(value, float):
        yield value


QUANTITIES = ("amplitude_hpa", "peak_day", "in_phase_hpa", "quadrature_hpa", "water_mm", "sea_water_mm", "mass_gt")


def check_contract(summary: Mapping[str, Any]) -> None:
    """What docs/results.md promises of estimate.json."""
    again = json.loads(json.dumps(summary, allow_nan=False))
    assert again == summary
    page = (DOCS / "results.md").read_text()
    promised = set(re.findall(r"`([a-z_0-9]+)`", page[page.index("## `estimate.json`") :]))
    assert promised - {"estimate.json"} <= set(names_of(summary))
    assert all(np.isfinite(number) for number in numbers_of(summary))
    for name in QUANTITIES:
        value = summary[name]
        (low95, high95), (low50, high50) = value["region95"], value["region50"]
        assert low95 < low50 < value["median"] < high50 < high95
        assert low95 < value["mean"] < high95
        assert value["sd"] > 0.0
    shares = summary["variance_share"]
    assert set(shares) == {
        "record", "site_scatter", "group", "model_local", "model_spread", "atmosphere", "year", "fingerprint", "scales",
    }  # fmt: skip
    assert sum(shares.values()) == pytest.approx(1.0, abs=1e-9)
    assert min(shares.values()) >= 0.0
    for row in summary["alternatives"]:
        assert set(row) == {"name", "shift_sd", "sd_ratio", "in_phase_hpa", "quadrature_hpa"}
    assert set(summary["convergence"]) >= {
        "rhat_max", "ess_bulk_min", "ess_tail_min", "second_route_mean_shift_sd", "second_route_sd_ratio", "converged",
    }  # fmt: skip
    for site in summary["sites"]:
        assert set(site) >= {
            "id", "phasor_hpa", "phasor_covariance_hpa2", "admittance", "standardised_residual", "outlier_probability",
            "warnings",
        }  # fmt: skip
        assert np.all(np.linalg.eigvalsh(site["phasor_covariance_hpa2"]) > 0.0)
        assert 0.0 <= site["outlier_probability"] <= 1.0


def test_the_summary_keeps_its_contract(run: Estimate) -> None:
    check_contract(run.summary)


def test_the_units_of_the_summary_agree(run: Estimate) -> None:
    summary = run.summary
    amplitude = summary["amplitude_hpa"]["median"]
    # 100 Pa in a hectopascal, standard gravity 9.80665, fresh water 1000 kg m-3
    assert summary["water_mm"]["median"] == pytest.approx(amplitude * 100.0 / 9.80665, rel=1e-9)
    assert summary["sea_water_mm"]["median"] == pytest.approx(amplitude * 100.0 / 9.80665 / 1.025, rel=1e-9)
    mass = amplitude * 100.0 / 9.80665 * summary["ocean_area_m2"] / 1e12
    assert summary["mass_gt"]["median"] == pytest.approx(mass, rel=1e-9)
    day = date(summary["reference_year"], 1, 1) + timedelta(days=int(summary["peak_day"]["median"]))
    assert summary["peak_date"] == day.isoformat()
    assert 0.0 <= summary["peak_day"]["median"] < 365.2422
    draws = run.posterior.draws / 100.0
    assert np.allclose(summary["covariance_hpa2"], np.cov(draws.T))


def test_every_action_on_every_deployment_is_listed(invented: Network, run: Estimate) -> None:
    assert set(run.summary["actions"]) == {record.deployment for record in invented.records}


def test_daily_means_with_their_tides_and_an_idle_model_are_named(invented: Network) -> None:
    idle = invented.circulation[0]
    idle = replace(idle, name="Idle", pressure=idle.pressure.isel(time=slice(0, 20)))
    settings = replace(invented.settings, corrections=replace(invented.settings.corrections, tides="remove"))
    network = with_first_site(with_one_member(replace(invented, settings=settings)))
    summary = estimate(replace(network, circulation=(*network.circulation, idle))).summary
    assert any("Idle covers no site and was not used" in text for text in summary["warnings"])
    assert not any("Idle" in text for text in summary["assumptions"])
    assert any(
        "holds daily means: their short tides cannot be removed" in text for text in summary["sites"][0]["warnings"]
    )
