"""The fingerprint of a network file in a folder of its own, whole or not at all."""

import dataclasses
from pathlib import Path

from massfit.io.network.network_file import read_sites_and_loads
from massfit.io.results.fingerprint_folder import FINGERPRINT_TABLE, write_fingerprint
from massfit.io.results.partial_folder import claimed
from massfit.io.results.results_folder import check_output
from massfit.pipeline.fingerprint_study import FINEST_DEGREE, study_fingerprint
from massfit.pipeline.progress import Progress, ignore
from massfit.report.figures.fingerprint_figures import draw_fingerprint
from massfit.report.figures.render import png
from massfit.report.pages.fingerprint_page import fingerprint_page
from massfit.results.fingerprint import FingerprintStudy


def fingerprint_to_folder(
    network: Path,
    folder: Path,
    *,
    finest_degree: int = FINEST_DEGREE,
    overwrite: bool = False,
    outside: bool = False,
    progress: Progress = ignore,
    threads: int = 1,
) -> FingerprintStudy:
    """Read places and loads of a network, study its fingerprint and write the folder, whole or not at all.

    Parameters
    ----------
    network : Path
        A network.toml or the folder that holds one.
    folder : Path
    finest_degree : int
    overwrite : bool
        Replace what this command wrote before.
    outside : bool
        Allow paths outside the network's folder.
    progress : callable
    threads : int

    Returns
    -------
    FingerprintStudy

    Raises
    ------
    InputError
        Every fault of the input or of the output folder; nothing was written.
    """
    check_output(folder, overwrite=overwrite, holds=FINGERPRINT_TABLE)
    with claimed(folder) as partial:
        check_output(folder, overwrite=overwrite, holds=FINGERPRINT_TABLE)
        progress("reading", 0, 1)
        inputs = read_sites_and_loads(network, outside=outside)
        study = study_fingerprint(inputs, finest_degree=finest_degree, progress=progress, threads=threads)
        made_by = {**study.provenance, "command": f"massfit fingerprint {network}"}
        study = dataclasses.replace(study, provenance=made_by)
        progress("report", 0, 1)
        pictures = {name: png(figure) for name, figure in draw_fingerprint(study.dataset).items()}
        write_fingerprint(partial, study, pictures=pictures, page=fingerprint_page(study, pictures))
        progress("report", 1, 1)
    return study
