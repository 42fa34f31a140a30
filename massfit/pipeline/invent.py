"""An invented network, written in the network-file format."""

from pathlib import Path
from typing import Any

from massfit.io.fields.write_fields import write_circulation
from massfit.io.network.write_network import check_empty, write_network
from massfit.network import CirculationModel
from massfit.simulate.network import simulate_network
from massfit.simulate.options import SimulationOptions
from massfit.simulate.sea_floor import invented_sea_floor
from massfit.simulate.story import tell_story


def simulate_to_folder(folder: Path, seed: int, *, sea_floor: bool = False, **options: Any) -> None:
    """Invent a network with known truth and write it.

    Parameters
    ----------
    folder : Path
        Must not exist or be empty.
    seed : int
    sea_floor : bool
        Invent fields of ocean models too, in the folder ``sea_floor``.
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
    if sea_floor:
        (folder / "sea_floor").mkdir()
        for name, pressure in invented_sea_floor(seed).items():
            write_circulation(folder / "sea_floor" / f"{name}.nc", CirculationModel(name, pressure, None, "not-forced"))
