"""A network file begun from a folder of records."""

from pathlib import Path

from massfit.io.guess.starter_file import Starter, write_starter


def begin_network_file(folder: Path) -> Starter:
    """Look at a folder of records and write a network file to be completed into it.

    Parameters
    ----------
    folder : pathlib.Path

    Returns
    -------
    massfit.io.guess.starter_file.Starter
        What was written, and how many marks it has.

    Raises
    ------
    InputError
        There is a network file already, or no record.
    """
    return write_starter(folder)
