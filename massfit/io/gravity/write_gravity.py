"""Write satellite gravity as the files that `read_gravity` reads."""

import csv
import io
import tarfile
from pathlib import Path

import numpy as np

from massfit.constants import PASCAL_PER_HPA
from massfit.gravity.field import GravityField
from massfit.gravity.inputs import Determination, GravityInputs
from massfit.gravity.tables import CoefficientTable
from massfit.io.gravity.read_gravity import DETERMINATION_COLUMNS
from massfit.phasor import peak_days, polar_sd

_MJD_EPOCH = np.datetime64("1858-11-17T00:00:00", "s")


def write_gravity(inputs: GravityInputs, folder: Path) -> None:
    """Write fields and tables under the names that the settings give them.

    Parameters
    ----------
    inputs : GravityInputs
        With one `.tar.xz` of its settings for each solution.
    folder : pathlib.Path
        Of the network file.
    """
    chosen = inputs.settings
    for text, solution in zip(chosen.fields, inputs.solutions, strict=True):
        path = folder / text
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(_archive(solution.fields))
    if inputs.degree_one is not None and chosen.degree_one is not None:
        (folder / chosen.degree_one).write_text(degree_one_text(inputs.degree_one), encoding="utf-8")
    if inputs.low_degree is not None and chosen.low_degree is not None:
        (folder / chosen.low_degree).write_text(low_degree_text(inputs.low_degree), encoding="utf-8")
    if inputs.determinations and chosen.determinations is not None:
        (folder / chosen.determinations).write_text(determinations_text(inputs.determinations), encoding="utf-8")


def _archive(fields: tuple[GravityField, ...]) -> bytes:
    out = io.BytesIO()
    with tarfile.open(fileobj=out, mode="w:xz") as archive:
        for field in fields:
            data = icgem_text(field).encode()
            member = tarfile.TarInfo(field.source)  # of no time and no owner: the same bytes every time
            member.size = len(data)
            archive.addfile(member, io.BytesIO(data))
    return out.getvalue()


def icgem_text(field: GravityField) -> str:
    """Write a field in the ICGEM format 1.0, without errors, to 1e-15.

    Parameters
    ----------
    field : GravityField

    Returns
    -------
    str
    """
    head = [
        f"modelname              {field.name.replace(' ', '_')}",
        f"product_type           {field.product}",
        f"earth_gravity_constant {field.conventions.gm:.10E}",
        f"radius                 {field.conventions.radius_m:.10E}",
        f"max_degree             {field.max_degree}",
        "errors                 no",
        "norm                   fully_normalized",
        f"tide_system            {field.conventions.tide_system}",
    ]
    span = []
    if field.span is not None:
        span = [f"time_coverage_start {field.span.start}", f"time_coverage_end {field.span.end}"]
    c, s = field.coefficients
    rows = [f"gfc {n} {m} {c[n, m]:.15f} {s[n, m]:.15f}" for n in range(field.max_degree + 1) for m in range(n + 1)]
    return "\n".join([*span, "begin_of_head", *head, "end_of_head", *rows]) + "\n"


def degree_one_text(table: CoefficientTable) -> str:
    """Write a table of degree 1: month, degree, order, C, S, two errors, first day, day after."""
    lines = ["Degree 1 of the water on land and in the ocean, centre of figure, fully normalised."]
    for row in table.rows:
        month = str(row.span.start)[:7].replace("-", "")
        first, after = (f"{str(edge)[:10].replace('-', '')}.0000" for edge in (row.span.start, row.span.end))
        c10, c11, s11 = (row.values[name] for name in (("C", 1, 0), ("C", 1, 1), ("S", 1, 1)))
        lines += [
            f"{month} 1 0 {c10:.8E} {0.0:.8E} 2.5E-11 0.0E+00 {first} {after}",
            f"{month} 1 1 {c11:.8E} {s11:.8E} 2.5E-11 2.5E-11 {first} {after}",
        ]
    return "\n".join(lines) + "\n"


def low_degree_text(table: CoefficientTable) -> str:
    """Write a table of C20 and C30: first and last modified Julian date in columns 1 and 9, values in 3 and 6."""
    lines = [f"C20 and C30 to replace those of the fields. C20 is {table.tide_system.replace('_', ' ')}."]
    means = {name: np.mean([row.values[name] for row in table.rows]) for name in table.coefficients}
    for row in table.rows:
        days = [float((edge - _MJD_EPOCH) / np.timedelta64(86400, "s")) for edge in (row.span.start, row.span.end)]
        years = [2000.0 + (day - 51544.0) / 365.25 for day in days]
        cells = [
            f"{row.values[name]:.13E} {1e10 * (row.values[name] - means[name]):.4f} 0.2000"
            for name in (("C", 2, 0), ("C", 3, 0))
        ]
        lines.append(f"{days[0]:.1f} {years[0]:.4f} {cells[0]} {cells[1]} {days[1]:.1f} {years[1]:.4f}")
    return "\n".join(lines) + "\n"


def determinations_text(determinations: tuple[Determination, ...]) -> str:
    """Write other determinations as CSV."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(DETERMINATION_COLUMNS)
    for each in determinations:
        amplitude_sd, day_sd = polar_sd(each.phasor, each.covariance)
        cells = (
            abs(each.phasor) / PASCAL_PER_HPA,
            amplitude_sd / PASCAL_PER_HPA,
            float(peak_days(each.phasor)),
            day_sd,
        )
        writer.writerow([each.label, each.method, *(f"{value:.4f}" for value in cells)])
    return out.getvalue()
