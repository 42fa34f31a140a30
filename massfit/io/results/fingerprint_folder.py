"""The folder that the fingerprint of a network is written to: table, Dataset, figures and page."""

import csv
import io
from collections.abc import Mapping
from pathlib import Path

from massfit.io.results.partial_folder import PartialFolder
from massfit.io.results.results_folder import write_dataset, write_drawn, write_run
from massfit.results.fingerprint import DegreeRow, FingerprintStudy, Row, degree_rows, site_rows

FINGERPRINT_TABLE = "fingerprints.csv"

FINGERPRINT_PAGE = "fingerprint.html"

CONVERGENCE_TABLE = "convergence.csv"

_COLUMNS = (
    "site", "latitude", "longitude", "kind", "member", "amplitude_ratio", "delay_days", "amplitude_ratio_spread",
    "delay_spread_days",
)  # fmt: skip
_FORMULA = ("=", "+", "-", "@")


def write_fingerprint(
    partial: PartialFolder, study: FingerprintStudy, *, pictures: Mapping[str, bytes], page: str
) -> None:
    """Write the folder aside and move it into place.

    Parameters
    ----------
    partial : PartialFolder
    study : FingerprintStudy
    pictures : mapping of str to bytes
        PNG images by name, for `figures/`.
    page : str

    Raises
    ------
    InputError
        The folder cannot be written; what was there before is untouched.
    """
    with partial.whole() as aside:
        _write_table(aside / FINGERPRINT_TABLE, site_rows(study.dataset))
        _write_convergence(aside / CONVERGENCE_TABLE, degree_rows(study.dataset))
        write_dataset(aside / "fingerprints.nc", study.dataset)
        write_drawn(aside, pictures, page, name=FINGERPRINT_PAGE)
        write_run(aside, study.provenance, {path.relative_to(aside).as_posix() for path in aside.rglob("*.*")})
    partial.clear()


def _write_table(path: Path, rows: list[Row]) -> None:
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(_COLUMNS)
    for row in rows:
        numbers = (row.amplitude_ratio, row.delay_days, row.amplitude_ratio_spread, row.delay_spread_days)
        place = (f"{row.latitude_deg:.9g}", f"{row.longitude_deg:.9g}")
        written = ("" if number is None else f"{number:.6g}" for number in numbers)
        table.writerow([_no_formula(row.site), *place, row.kind, _no_formula(row.member), *written])
    path.write_text(text.getvalue(), encoding="utf-8")


def _write_convergence(path: Path, rows: list[DegreeRow]) -> None:
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(("site", "degree", "amplitude_ratio", "delay_days", "ratio_change", "delay_change_days"))
    for row in rows:
        numbers = (row.amplitude_ratio, row.delay_days, row.ratio_change, row.delay_change_days)
        table.writerow([_no_formula(row.site), row.degree, *(f"{number:.6g}" for number in numbers)])
    path.write_text(text.getvalue(), encoding="utf-8")


def _no_formula(name: str) -> str:
    """Keep a spreadsheet from taking a name for a formula."""
    return f"'{name}" if name.startswith(_FORMULA) else name
