"""Only the places of a network: from its network file, or from a folder of finished results."""

from pathlib import Path

from massfit.errors import Fault, InputError
from massfit.io.network.reading import open_reading
from massfit.io.network.sections import parse_sections
from massfit.io.results.read_results import read_results
from massfit.io.results.results_folder import RUN_FILE
from massfit.site import Site


def read_places(path: Path) -> tuple[tuple[Site, ...], int]:
    """Read where the sites of a network are.

    Parameters
    ----------
    path : pathlib.Path
        A network.toml, the folder that holds one, or a results folder of `massfit estimate`. Records, models and
        fields are not looked for.

    Returns
    -------
    sites : tuple of Site
        Those that are left out as a whole included.
    reference_year : int

    Raises
    ------
    InputError
        Faults of the network file, or it is no results folder.
    """
    if (path / RUN_FILE).is_file():
        return _of_results(path)
    reading = open_reading(path, outside=True)
    sections = parse_sections(reading, records=False)
    frame = sections.settings["network"]
    if reading.faults or frame is None:
        raise InputError(reading.faults)
    return tuple(table.entry.site() for table in sections.sites if table.entry is not None), frame.reference_year


def _of_results(folder: Path) -> tuple[tuple[Site, ...], int]:
    run = read_results(folder)
    phasors = run.datasets["site_phasors.nc"]
    if "latitude" not in phasors:
        problem = "its sites have no places"
        raise InputError(Fault(str(folder), "", problem, "", "Name the network file instead"))
    rows = zip(phasors["site"].values, phasors["latitude"].values, phasors["longitude"].values, strict=True)
    sites = tuple(Site(str(name), float(latitude), float(longitude)) for name, latitude, longitude in rows)
    return sites, int(run.summary["reference_year"])
