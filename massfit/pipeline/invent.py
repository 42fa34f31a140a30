"""An invented network, written in the network-file format."""

from pathlib import Path
from typing import Any

from massfit.io.network.write_network import check_empty, write_network
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.simulate.story import tell_story


def simulate_to_folder(folder: Path, seed: int, **options: Any) -> None:
    """Invent a network with known truth and write it.

    Parameters
    ----------
    folder : Path
        Must not exist or be empty.
    seed : int
    **options
        Of :class:`massfit.simulate.options.SimulationOptions`.

    Raises
    ------
    InputError
        The folder is not empty.
    """
    check_empty(folder)
    chosen = SimulationOptions(**options)
    invented = simulate_network(chosen, seed=seed)
    story = tell_story(invented, chosen, folder=folder.name)
    write_network(invented.network, folder, truth=invented.truth, readme=story, gravity=invented.gravity)
