import json
from copy import deepcopy

import pytest

from massfit.pipeline.check import look_at
from massfit.report.words.check_text import BLOCKS, LETTERS, WIDTH, check_text, in_json


@pytest.fixture(scope="module")
def found(invented):
    return look_at(invented).found


@pytest.mark.parametrize("plain", [False, True])
def test_it_fits_eighty_columns(found, plain) -> None:
    long = deepcopy(found)
    long["network"] = "A network with a name of many words that goes on beyond what a line of a terminal can hold"
    long["sites"][0]["id"] = "X" * 120
    long["sites"][0]["deployments"][0]["file"] = "records/" + "y" * 200 + ".nc"
    long["sites"][1]["months"] = {str(year): [1.0, 0.6, 0.2, 0.0, None, *[1.0] * 7] for year in range(2010, 2022)}
    text = check_text(long, plain=plain)
    assert max(map(len, text.splitlines())) <= WIDTH
    assert text.isascii() == plain
    assert "2020         2021\n" in text


def test_marks_of_the_calendar(found) -> None:
    one = deepcopy(found)
    one["sites"] = one["sites"][:1]
    one["sites"][0]["months"] = {"2014": [1.0, 0.9, 0.89, 0.5, 0.49, 0.001, 0.0, None, 1.0, 1.0, 1.0, 1.0]}
    assert "\n  ██▓▓░░x·████\n" in check_text(one)
    assert "\n  ##++--x.####\n" in check_text(one, plain=True)
    assert len(BLOCKS) == len(LETTERS)


def test_short_left_out_and_missing_are_said(found) -> None:
    changed = deepcopy(found)
    first, second, third = changed["sites"]
    first |= {"left_out": "anchor lost"}
    second |= {"long_enough": False}
    third["models"][0] |= {"present": False, "covered": 0.12}
    text = " ".join(check_text(changed).split())
    assert "LEFT OUT: anchor lost" in text
    assert "SHORT: drift and annual cycle part only beyond 1.5 years" in text
    assert f"{third['models'][0]['name']} MISSING HERE (12 % of the days)" in text
    assert "SHORT" not in check_text(found)
    for sentence in found["assumptions"]:
        assert sentence.replace("- ", "-") in text.replace("- ", "-")


def test_control_characters_do_not_reach_the_terminal(found) -> None:
    odd = deepcopy(found)
    odd["sites"][0]["group"] = "\x1b[2Jnorth\u202e"
    text = check_text(odd)
    assert "north" in text
    assert "\x1b" not in text
    assert "\u202e" not in text


def test_json_is_json(found) -> None:
    assert json.loads(in_json(found)) == json.loads(json.dumps(found))


def test_a_network_with_faults(found) -> None:
    assert check_text({"source": "a.toml", "sites": [], "faults": [{}]}) == "a.toml cannot be used as it is."
    text = check_text({**found, "source": "a.toml", "assumptions": [], "faults": [{}]})
    assert text.startswith("a.toml cannot be used as it is. This could be read of it:\n")
    assert found["sites"][0]["id"] in text
    assert "What will be assumed" not in text
