"""A network built in memory is checked as a whole."""

from dataclasses import replace

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.network import Network, check_network
from massfit.pipeline.estimate import estimate


def problems(network: Network) -> list[tuple[str, str]]:
    with pytest.raises(InputError) as caught:
        check_network(network)
    return [(fault.name, fault.problem) for fault in caught.value.faults]


def test_a_network_that_fits_together_is_taken(invented: Network) -> None:
    check_network(invented)


def test_silence_about_the_air_is_refused(invented: Network) -> None:
    name = "corrections.ocean_mean_atmosphere"
    silent = replace(invented, ocean_mean_atmosphere=None)
    assert problems(silent) == [(name, "nothing is said about the ocean-mean air pressure")]
    stated = replace(invented.settings.corrections, ocean_mean_atmosphere="already-removed")
    settings = replace(invented.settings, corrections=stated)
    both = 'the value is "already-removed", and a series is given'
    assert problems(replace(invented, settings=settings)) == [(name, both)]
    check_network(replace(silent, settings=settings))


def test_every_fault_of_names_and_arrays_is_told(invented: Network) -> None:
    first, second, third = invented.records
    broken = replace(
        invented,
        sites=(*invented.sites[1:], invented.sites[1]),
        records=(first, replace(second, pressure=second.pressure[1:]), replace(third, deployment=second.deployment)),
        circulation=(*invented.circulation, invented.circulation[0]),
    )
    size = second.time.size
    assert problems(broken) == [
        ("sites", f'"{invented.sites[1].id}" stands twice'),
        ("records", f'"{second.deployment}" stands twice'),
        ("circulation", f'"{invented.circulation[0].name}" stands twice'),
        (first.deployment, f'its site "{first.site}" is not in the network'),
        (second.deployment, f"time is datetime64[ns] ({size},), pressure ({size - 1},)"),
    ]


def test_times_must_be_times(invented: Network) -> None:
    first, *others = invented.records
    counted = replace(first, time=np.arange(first.time.size))
    assert [name for name, _ in problems(replace(invented, records=(counted, *others)))] == [first.deployment]


def test_the_main_job_checks_before_it_works(invented: Network) -> None:
    def stop(*stage: object) -> None:
        raise AssertionError(stage)

    with pytest.raises(InputError):
        estimate(replace(invented, ocean_mean_atmosphere=None), progress=stop)


def with_choices(network: Network, **choices: object) -> Network:
    settings = network.settings
    return replace(network, settings=replace(settings, fingerprint=replace(settings.fingerprint, **choices)))


def test_the_wobble_is_not_counted_twice(invented: Network) -> None:
    asked = with_choices(invented, rotational_feedback=True)
    problem = "the value is true, and the pole tide is taken off with observed polar motion"
    assert problems(asked) == [("fingerprint.rotational_feedback", problem)]
    kept = replace(asked.settings, corrections=replace(asked.settings.corrections, pole_tide="none"))
    check_network(replace(asked, settings=kept))


def test_an_earth_that_is_named_must_be_given(invented: Network) -> None:
    assert problems(with_choices(invented, earth_model="mine.csv")) == [
        ("fingerprint.earth_model", "the value is 'mine.csv', and no Earth profile is given")
    ]


def test_a_site_on_land_is_told_where_the_sea_is(invented: Network) -> None:
    first, *others = invented.sites
    inland = replace(first, latitude_deg=47.0, longitude_deg=8.0)
    with pytest.raises(InputError, match=r"the site at 47, 8 is on land\. .* ocean is at 44\.375, 8\.875, 300 km"):
        check_network(replace(invented, sites=(inland, *others)))
