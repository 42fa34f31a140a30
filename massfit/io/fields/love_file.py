"""Load Love numbers as CSV."""

from collections.abc import Mapping
from pathlib import Path

from massfit.earth.love import LoveNumbers
from massfit.errors import Fault, InputError


def check_new_file(path: Path, *, overwrite: bool) -> None:
    """Refuse a file that must not or cannot be written, before anything is computed.

    Parameters
    ----------
    path : pathlib.Path
    overwrite : bool
        Whether a file that is there may be replaced.

    Raises
    ------
    InputError
    """
    if path.is_dir():
        raise InputError(Fault(str(path), "", "it is a folder", "Must be a file", "Add the name of the file"))
    if path.exists() and not overwrite:
        raise InputError(Fault(str(path), "", "the file exists", "", "Give --overwrite to replace it"))
    if not path.parent.is_dir():
        raise InputError(Fault(str(path), "", "its folder does not exist", "", "Make it, or correct the path"))


def write_love_numbers(path: Path, love: LoveNumbers, notes: Mapping[str, str]) -> None:
    """Write the numbers of every degree, below comment lines that say where they come from.

    Parameters
    ----------
    path : pathlib.Path
    love : LoveNumbers
    notes : mapping of str to str
        Comment lines by what they say.

    Raises
    ------
    InputError
        The file cannot be written.
    """
    lines = [f"# {name}: {' '.join(text.split())}" for name, text in notes.items()]
    lines.append("degree,h,l,k")
    numbers = zip(love.h.tolist(), love.l.tolist(), love.k.tolist(), strict=True)
    lines += [f"{degree},{h!r},{l!r},{k!r}" for degree, (h, l, k) in enumerate(numbers)]  # noqa: E741 - its usual name
    try:
        path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    except OSError as error:
        problem = f"it cannot be written ({error.strerror})"
        raise InputError(Fault(str(path), "", problem, "", "Choose another")) from error
