import re
from pathlib import Path

import pytest

from massfit.io.network.write_network import write_network
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.simulate.story import command_line, tell_story


@pytest.mark.parametrize(("models", "sampling"), [(0, "daily"), (4, "daily"), (3, "hourly")])
def test_the_story_names_the_files_and_tells_no_result(models: int, sampling: str, tmp_path: Path) -> None:
    options = SimulationOptions(sites=9, years=1, models=models, sampling=sampling)  # type: ignore[arg-type]
    simulated = simulate_network(options, seed=3)
    story = tell_story(simulated, options, folder="here")
    write_network(simulated.network, tmp_path / "here", truth=simulated.truth, readme=story)
    named = set(re.findall(r"`((?:fields|records)/[^`]*)`", story))
    assert {"records/", "fields/loads.nc"} <= named
    assert all((tmp_path / "here" / name).exists() for name in named)
    written = {f"fields/{path.name}" for path in (tmp_path / "here" / "fields").iterdir()}
    assert written <= named
    assert command_line(options, seed=3, folder="here") in story
    assert f"{simulated.truth['amplitude_hpa']:.2f}" not in story
    assert (tmp_path / "here" / "README.md").read_text() == story
