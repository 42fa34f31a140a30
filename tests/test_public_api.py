"""The names at the top of the package: which they are, and that each is documented by an example that runs."""

import doctest
import inspect
import subprocess
import sys

import pytest

import massfit

NAMES = [
    "CirculationModel", "InputError", "LoadPattern", "ModelField", "Network", "OceanFunction", "Record",
    "ReducedRecord", "ReducedSite", "Series", "Settings", "SimulationOptions", "Site", "builtin_loads",
    "compare_gravity", "draw_admittances", "estimate", "fit_site", "love_numbers", "make_settings",
    "prepare_operator", "rank_sites", "read_gravity", "read_network", "regional_responses", "sample_posterior",
    "screen_sea_floor", "simulate_network", "site_fingerprints", "site_footprints", "solve_sea_level",
    "study_fingerprint",
]  # fmt: skip


def section(text: str, title: str) -> str:
    """Text of one numpydoc section; empty where there is none."""
    lines = text.splitlines()
    starts = [i for i, line in enumerate(lines[1:]) if line and set(line) == {"-"}]
    for start, end in zip(starts, [*starts[1:], len(lines)], strict=True):
        if lines[start] == title:
            return "\n".join(lines[start + 2 : end])
    return ""


def documented(parameters: str) -> set[str]:
    """Names at the margin of a Parameters section, several to a line included."""
    heads = [line.split(" : ")[0] for line in parameters.splitlines() if line and not line.startswith(" ")]
    return {name.strip().lstrip("*") for head in heads for name in head.split(",")}


def test_these_are_the_public_names() -> None:
    assert massfit.__all__ == NAMES
    assert set(dir(massfit)) == {*NAMES, "__version__"}


@pytest.mark.parametrize("name", NAMES)
def test_every_name_is_found_where_it_is_defined(name: str) -> None:
    found = getattr(massfit, name)
    assert found.__name__ == name
    assert found.__module__.startswith("massfit.")


@pytest.mark.parametrize("name", NAMES)
def test_every_parameter_and_result_is_documented(name: str) -> None:
    found = getattr(massfit, name)
    text = inspect.getdoc(found) or ""
    signature = inspect.signature(found)
    assert documented(section(text, "Parameters")) == set(signature.parameters)
    if not inspect.isclass(found):
        assert section(text, "Returns")


@pytest.mark.parametrize("name", NAMES)
def test_every_name_has_an_example(name: str) -> None:
    # the examples themselves are run by pytest as doctests of their modules
    found = getattr(massfit, name)
    text = section(inspect.getdoc(found) or "", "Examples")
    examples = doctest.DocTestParser().get_examples(text)
    assert any(example.want for example in examples)
    assert not any(example.options.get(doctest.SKIP) for example in examples)


def test_an_unknown_name_is_refused() -> None:
    with pytest.raises(AttributeError, match="no attribute 'love'"):
        massfit.love  # noqa: B018


def test_importing_the_package_loads_nothing_heavy() -> None:
    code = "import sys, massfit; print(sorted({'numpy', 'xarray', 'scipy', 'pydantic'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
