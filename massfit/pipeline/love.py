"""Load Love numbers from an Earth profile to a table with its provenance."""

from importlib import metadata
from pathlib import Path

from massfit.earth.love import DegreeOneFrame, LoveNumbers, half_space_limits, love_numbers
from massfit.earth.profile import prem
from massfit.errors import Fault, InputError
from massfit.io.fields.earth_file import read_earth_profile
from massfit.io.fields.love_file import check_new_file, write_love_numbers
from massfit.io.results.results_folder import file_digest
from massfit.pipeline.digest import digest

_FRAMES = {
    "CE": "centre of mass of the solid Earth",
    "CM": "centre of mass of solid Earth and load",
    "CF": "centre of the figure of the surface",
}


def love_numbers_to_file(
    path: Path, *, earth: Path | None, max_degree: int, frame: DegreeOneFrame, overwrite: bool
) -> LoveNumbers:
    """Compute load Love numbers and write them as CSV.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the columns degree, h, l, k below comment lines.
    earth : pathlib.Path, optional
        CSV of an Earth profile, as :func:`massfit.io.fields.earth_file.read_earth_profile` reads it; PREM by default.
    max_degree : int
        From 1.
    frame : str
        Origin of degree one: "CE", "CM" or "CF".
    overwrite : bool
        Replace a file that is there.

    Returns
    -------
    LoveNumbers

    Raises
    ------
    InputError
        The profile is wrong, or the file must not or cannot be written.
    """
    check_new_file(path, overwrite=overwrite)
    if earth is not None and not earth.is_file():
        raise InputError(Fault(str(earth), "", "there is no such file", "Must be the CSV of an Earth profile"))
    profile = prem() if earth is None else read_earth_profile(earth, source=str(earth))
    love = love_numbers(profile, max_degree=max_degree, frame=frame)
    limits = "h' {:.6g}, n l' {:.6g}, n k' {:.6g}".format(*half_space_limits(profile))
    notes = {
        "content": "load Love numbers h'_n, l'_n, k'_n, not multiplied by n; degree 0 is zero",
        "profile": profile.name,
        "profile reference": profile.reference,
        "profile sha256": f"{digest(profile)} (of its layers)",
        "file": "none, it ships with the package" if earth is None else f"{earth} sha256 {file_digest(earth)}",
        "degree one": f"{frame}, {_FRAMES[frame]}",
        "method": "static equations of Alterman, Jarosch & Pekeris (1959), loading of Farrell (1972), fluid core after "
        f"Saito (1974); integrated to degree {love.integrated_to}, above it h', n l' and n k' stay constant",
        "limits of a half-space of the surface rock": limits,
        "made by": f"massfit {metadata.version('massfit')}",
    }
    write_love_numbers(path, love, notes)
    return love
