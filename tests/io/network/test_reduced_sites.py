"""`[[site]]` of a site that was reduced elsewhere: what is read, what is refused, and the way back to a file."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.io.network.network_file import read_network
from massfit.io.network.write_network import write_network
from massfit.network import ReducedSite

Change = Callable[[str, str], None]

DEPLOYMENT = '  [[site.deployment]]\n  file = "records/b.nc"\n  drift = "linear"\n'
COVARIANCE = "phasor_covariance_hpa2 = [[0.01, 0.002], [0.002, 0.02]]\n"
YEARS = "years = [2014, 2016]\n"
MEAN = "phasor_hpa = [0.125, -0.75]\n" + COVARIANCE + YEARS + 'subtracted = ["Invented model"]\n'

# what site B holds instead of its deployment (which begins on line 26), and the messages
FAULTS = {
    "everything else is missing": (
        "phasor_hpa = [0.1, 0.8]\n",
        ["N:21: site[B].phasor_covariance_hpa2: the key is missing beside phasor_hpa. Must be [[a, c], [c, b]]. "
         "Add it.",
         "N:21: site[B].years: the key is missing beside phasor_hpa. Must be the first and the last year of the "
         "record. Add it.",
         "N:21: site[B].subtracted: the key is missing beside phasor_hpa. Must be the names of the models whose mean "
         "was subtracted. Add it; [] where none was."],
    ),
    "no phasor": (
        COVARIANCE + YEARS + "subtracted = []\n",
        ["N:21: site[B].phasor_hpa: the key is missing beside phasor_covariance_hpa2. Must be [in phase, quadrature], "
         "or a table of them by model. Add it."],
    ),
    "records too": (
        MEAN + DEPLOYMENT,
        ["N:26: site[B].phasor_hpa: the site has a deployment and phasor_hpa, of a site that was reduced elsewhere. "
         "Must be one of the two. Remove one."],
    ),
    "intervals": (
        'exclude = [{ from = 2015-03-01, to = 2015-03-10, reason = "storm" }]\n' + MEAN,
        ["N:26: site[B].exclude: intervals are left out of a site that was reduced elsewhere. Must be a reason, for "
         "the whole site. Remove it."],
    ),
    "unknown model": (
        MEAN.replace("Invented model", "Invented modle"),
        ['N:29: site[B].subtracted: the network has no model "Invented modle". Must be the name of a [[circulation]]. '
         'Did you mean "Invented model"?'],
    ),
    "unknown model by name": (
        'phasor_hpa = { "Invented model" = [0.1, 0.8], "Another" = [0.1, 0.8] }\n' + COVARIANCE + YEARS,
        ['N:26: site[B].phasor_hpa: the network has no model "Another". Must be the name of a [[circulation]].'],
    ),
    "model twice": (
        MEAN.replace('["Invented model"]', '["Invented model", "Invented model"]'),
        ['N:29: site[B].subtracted: "Invented model" stands twice. Must be unique. Remove one.'],
    ),
    "two lists of models": (
        'phasor_hpa = { "Invented model" = [0.1, 0.8] }\n' + COVARIANCE + YEARS + "subtracted = []\n",
        ['N:29: site[B].subtracted: the models are [], those of phasor_hpa ["Invented model"]. Must be the same. '
         "Remove it."],
    ),
    "no model by name": (
        "phasor_hpa = {}\n" + COVARIANCE + YEARS,
        ["N:26: site[B].phasor_hpa: the value is {}. Must be two finite numbers, or two for each model."],
    ),
    "covariance that is none": (
        MEAN.replace("[0.002, 0.02]", "[0.002, -0.02]"),
        ["N:27: site[B].phasor_covariance_hpa2: the value is [[0.01, 0.002], [0.002, -0.02]]. Must be [[a, c], "
         "[c, b]], positive definite."],
    ),
    "covariance that is not symmetric": (
        MEAN.replace("[0.002, 0.02]", "[0.003, 0.02]"),
        ["N:27: site[B].phasor_covariance_hpa2: the value is [[0.01, 0.002], [0.003, 0.02]]. Must be [[a, c], "
         "[c, b]], positive definite."],
    ),
    "noise that is none": (
        MEAN + "model_noise_hpa2 = [[0.01, 0.02], [0.02, 0.01]]\n",
        ["N:30: site[B].model_noise_hpa2: the value is [[0.01, 0.02], [0.02, 0.01]]. Must be [[a, c], [c, b]], "
         "without a negative variance."],
    ),
    "years in the wrong order": (
        MEAN.replace("[2014, 2016]", "[2016, 2014]"),
        ["N:28: site[B].years: the value is [2016, 2014]. Must be the first and the last year."],
    ),
    "words for numbers": (
        MEAN.replace("[0.125, -0.75]", '"large"'),
        ['N:26: site[B].phasor_hpa: the value is "large". Must be a list, or a table.'],
    ),
    "a number too many": (
        MEAN.replace("[0.125, -0.75]", "[0.125, -0.75, 0.1]"),
        ["N:26: site[B].phasor_hpa: the value is [0.125, -0.75, 0.1]. Must be a shorter list, or a table."],
    ),
    "a year before pressure recorders": (
        MEAN.replace("2014", "214"),
        ["N:28: site[B].years[1]: the value is 214. Must be greater than or equal to 1900."],
    ),
}  # fmt: skip


def test_a_model_may_have_a_name_only(network_folder: Path, change: Change, tmp_path: Path) -> None:
    named = '[[circulation]]\nname = "Printed model"\nsubtracted_elsewhere = true\n\n'
    change(DEPLOYMENT, MEAN.replace('["Invented model"]', '["Invented model", "Printed model"]') + "\n" + named)
    network = read_network(network_folder)
    assert network.model_names == ("Invented model", "Printed model")
    assert network.reduced[0].mean_only
    write_network(network, tmp_path / "out")
    assert read_network(tmp_path / "out").models_elsewhere == ("Printed model",)


@pytest.mark.parametrize(
    ("table", "message"),
    [
        ('name = "Invented model"\nsubtracted_elsewhere = true\n', '"Invented model" stands twice'),
        ('name = "X"\nsubtracted_elsewhere = false\n', "the value is false. Must be True"),
        ('name = "X"\nsubtracted_elsewhere = true\nfile = "a.nc"\n', 'unknown key "file"'),
    ],
)
def test_a_model_of_a_name_only_has_its_faults(network_folder: Path, change: Change, table: str, message: str) -> None:
    change(DEPLOYMENT, f"{MEAN}\n[[circulation]]\n{table}\n")
    with pytest.raises(InputError, match=message):
        read_network(network_folder)


@pytest.mark.parametrize("name", FAULTS)
def test_every_fault_has_its_message(network_folder: Path, change: Change, name: str) -> None:
    text, messages = FAULTS[name]
    change(DEPLOYMENT, text)
    with pytest.raises(InputError) as raised:
        read_network(network_folder)
    home = str(network_folder / "network.toml")
    assert [str(fault).replace(home, "N") for fault in raised.value.faults] == messages


def test_a_mean_over_models_is_read(network_folder: Path, change: Change) -> None:
    change(DEPLOYMENT, MEAN)
    network = read_network(network_folder)
    assert [site.id for site in network.sites] == ["A", "B"]
    assert {record.site for record in network.records} == {"A"}
    (reduced,) = network.reduced
    assert (reduced.site, reduced.years, reduced.models) == ("B", (2014, 2016), ("Invented model",))
    np.testing.assert_allclose(reduced.phasor, [12.5, -75.0])
    np.testing.assert_allclose(reduced.covariance, [[100.0, 20.0], [20.0, 200.0]])
    assert not reduced.model_noise.any()


def test_a_phasor_for_each_model_is_read(network_folder: Path, change: Change) -> None:
    noise = "model_noise_hpa2 = [[0.001, 0], [0, 0.001]]\n"
    change(DEPLOYMENT, COVARIANCE + YEARS + noise + '[site.phasor_hpa]\n"Invented model" = [0.125, -0.75]\n')
    (reduced,) = read_network(network_folder).reduced
    np.testing.assert_allclose(reduced.phasor, [[12.5, -75.0]])
    np.testing.assert_allclose(reduced.model_noise, 10.0 * np.eye(2))
    assert reduced.models == ("Invented model",)


def test_a_network_without_records_needs_no_days(network_folder: Path, change: Change) -> None:
    file = network_folder / "network.toml"
    text = file.read_text()
    start, end = text.index("exclude = "), text.index('[[site]]\nid = "B"')
    file.write_text(text[:start] + MEAN + "\n" + text[end:])
    change(DEPLOYMENT, 'exclude = "doubtful"\n' + MEAN)
    network = read_network(network_folder)
    assert network.records == ()
    assert [each.site for each in network.reduced] == ["A", "B"]
    assert network.sites[1].excluded_because == "doubtful"
    assert network.warnings == ()


def test_sites_reduced_elsewhere_come_back(network_folder: Path, change: Change, tmp_path: Path) -> None:
    change(DEPLOYMENT, MEAN)
    network = read_network(network_folder)
    first = network.circulation[0]
    second = replace(first, name='Second "quoted" model', pressure=2.0 * first.pressure)
    places = tuple(replace(network.sites[1], id=name) for name in "BCDE")
    covariance, noise = np.array([[90.1, 1.0 / 3.0], [1.0 / 3.0, 60.0]]), np.array([[9.0, -1.0], [-1.0, 7.0]])
    models = (first.name, second.name)
    phasor = np.array([10.0 / 3.0, 81.7])
    reduced = (
        ReducedSite("B", phasor, covariance, (2014, 2016), models),
        ReducedSite("C", np.stack([phasor, -phasor]), covariance, (2015, 2015), models, noise),
        ReducedSite("D", phasor, covariance, (2014, 2016)),
        ReducedSite("E", phasor[None], covariance, (2014, 2016)),
    )
    wider = replace(
        network, sites=(network.sites[0], *places), circulation=(*network.circulation, second), reduced=reduced
    )
    write_network(wider, tmp_path / "out")
    found = read_network(tmp_path / "out").reduced
    assert len(found) == 4
    for read, written in zip(found, reduced, strict=True):
        assert (read.site, read.years, read.models) == (written.site, written.years, written.models)
        assert read.mean_only == written.mean_only
        np.testing.assert_allclose(read.model_phasors, written.model_phasors, rtol=1e-14)
        np.testing.assert_allclose(read.covariance, written.covariance, rtol=1e-14)
        np.testing.assert_allclose(read.model_noise, written.model_noise, rtol=1e-14)
