"""Where a command writes when it is not told."""

from pathlib import Path


def output_folder(network: Path, output: Path | None, name: str) -> Path:
    """Give the folder as asked, or one of a name beside the network file.

    Parameters
    ----------
    network : Path
        A network.toml or the folder that holds one.
    output : Path or None
    name : str

    Returns
    -------
    Path

    Examples
    --------
    >>> output_folder(Path("here/network.toml"), None, "results").as_posix()
    'here/results'
    """
    return output or (network if network.is_dir() else network.parent) / name
