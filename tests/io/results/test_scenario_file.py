import json

import pytest

from massfit.errors import InputError
from massfit.io.results.scenario_file import read_scenario
from massfit.posterior.scenario import Scenario

CHOSEN = Scenario(truth=0.0, model_common_hpa=0.2)


@pytest.fixture
def read(tmp_path):
    def read(content):
        file = tmp_path / "scenario.json"
        file.write_text(content if isinstance(content, str) else json.dumps(content), encoding="utf-8")
        return read_scenario(file, network="Lantern Array", chosen=CHOSEN)

    return read


def test_what_is_not_said_is_as_the_run_chose(read):
    assert read({}) == CHOSEN
    assert read({"truth": 1, "without_models": ["Corvane"], "network": "Lantern Array"}) == Scenario(
        without_models=frozenset({"Corvane"}), truth=1.0, model_common_hpa=0.2
    )


def test_every_fault_is_told(read):
    wrong = {
        "network": "Other Array",
        "without_sites": "Aldessa",
        "without_models": [3],
        "truth": True,
        "model_common_hpa": 0.0,
        "without_loads": [],
    }
    with pytest.raises(InputError) as refused:
        read(wrong)
    assert {fault.name for fault in refused.value.faults} == wrong.keys()


@pytest.mark.parametrize(
    ("content", "words"), [("{", "no JSON"), ("[]", "no table of names"), ('{"truth": NaN}', "Must be within")]
)
def test_what_is_no_scenario_is_refused(read, content, words):
    with pytest.raises(InputError, match=words):
        read(content)


def test_a_file_that_is_not_there_is_named(tmp_path):
    with pytest.raises(InputError, match=r"nowhere\.json"):
        read_scenario(tmp_path / "nowhere.json", network="", chosen=CHOSEN)
