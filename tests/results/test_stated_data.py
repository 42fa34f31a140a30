"""What a network states of its data."""

import dataclasses

import numpy as np

from massfit.network import Network
from massfit.results.stated_data import series_of_means, stated_data


def test_sites_and_loads_of_one_reference_stand_together(invented: Network) -> None:
    first, *others = invented.sites
    sites = (dataclasses.replace(first, reference="Quillmere Institute 2019"), *others)
    model = dataclasses.replace(invented.circulation[0], reference="Corvane team 2018")
    stated = stated_data(dataclasses.replace(invented, sites=sites, circulation=(model, *invented.circulation[1:])))
    records = [each for each in stated if each["what"] == "records"]
    assert [(each["name"], each["reference"]) for each in records] == [
        (first.id, "Quillmere Institute 2019"),
        (", ".join(site.id for site in others), ""),
    ]
    assert {"what": "ocean model", "name": model.name, "reference": "Corvane team 2018"} in stated
    assert [each["what"] for each in stated].count("annual loads") == 1


def test_a_site_that_is_left_out_is_not_cited(invented: Network) -> None:
    first, *others = invented.sites
    sites = (dataclasses.replace(first, excluded_because="on a volcano"), *others)
    names = [each["name"] for each in stated_data(dataclasses.replace(invented, sites=sites))]
    assert not any(first.id in name for name in names)


def test_series_of_means_are_told_by_their_step(invented: Network) -> None:
    daily, coarse, *_ = invented.circulation
    five_days = dataclasses.replace(coarse, pressure=coarse.pressure.isel(time=slice(None, None, 5)))
    found = series_of_means(dataclasses.replace(invented, circulation=(daily, five_days), ocean_mean_atmosphere=None))
    step = np.median(np.diff(daily.pressure["time"].values)) / np.timedelta64(1, "D")
    assert found == ([daily.name] if step > 1.5 else []) + [five_days.name]
