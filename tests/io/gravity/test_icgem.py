"""ICGEM files: what is read, and what each bad file is told, word for word."""

import bz2
import gzip
import io
import lzma
import tarfile
import zipfile
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.gravity.field import GravityField
from massfit.io.gravity.gravity_files import read_gravity_files
from massfit.io.gravity.icgem import parse_icgem
from massfit.io.gravity.icgem_span import span_of

HEAD = """comment that the format allows
begin_of_head ====
product_type           gravity_field
modelname              invented_2031-03
radius                 6.3781363000E+06
earth_gravity_constant 3.9860044150E+14
max_degree             2
norm                   fully_normalized
tide_system            zero_tide
errors                 formal
end_of_head ====
"""
ROWS = """gfc  0 0  1.0D0  0.0  0.0 0.0
gfc  1 0  0.0  0.0  0.0 0.0
gfc  1 1  0.0  0.0  0.0 0.0
gfc  2 0 -4.8417D-04  0.0  1.0E-12 0.0
gfc  2 1 -2.1e-10  1.4e-09  2.0E-12 2.0E-12
gfc  2 2  2.4e-06 -1.4e-06  3.0E-12 4.0E-12
"""
NAME = "invented_2031060-2031090.gfc"
END = (
    "Must be gfc degree order C S sigma_C sigma_S, 7 columns, order at most the degree, finite numbers. "
    "Mend the file or leave it out."
)
GAP = "Every degree from 2 to max_degree 2 with all its orders. Check that the file is whole."


def read(text: str) -> GravityField:
    found = parse_icgem(text.encode(), name=NAME, source="a.gfc")
    assert isinstance(found, GravityField)
    return found


def test_a_file_is_read() -> None:
    found = read(HEAD + ROWS)
    assert found.name == "invented_2031-03"
    assert found.coefficients[0, 2, 0] == -4.8417e-4
    assert found.coefficients[:, 2, 2].tolist() == [2.4e-6, -1.4e-6]
    assert found.sd is not None
    assert found.sd[1, 2, 2] == 4e-12
    assert found.conventions.tide_system == "zero_tide"
    assert (found.conventions.gm, found.conventions.radius_m) == (3.986004415e14, 6378136.3)
    assert found.span is not None
    assert (str(found.span.start), str(found.span.end)) == ("2031-03-01T00:00:00", "2031-04-01T00:00:00")
    assert not found.filtered


def test_rows_may_come_in_any_order_and_with_any_line_end() -> None:
    shuffled = "".join(reversed(ROWS.splitlines(keepends=True))).replace("\n", "\r\n")
    np.testing.assert_array_equal(read(HEAD + shuffled + "\n\n").coefficients, read(HEAD + ROWS).coefficients)


def test_degrees_nought_and_one_may_be_left_out() -> None:
    found = read(HEAD + "".join(ROWS.splitlines(keepends=True)[3:]))
    assert np.all(found.coefficients[:, :2] == 0.0)


def test_a_filter_that_the_header_tells_of_is_kept() -> None:
    assert read("model after non-isotropic smoothing\n" + HEAD + ROWS).filtered


BAD = {
    "no end of head": (
        "gravity\n" + ROWS,
        "a.gfc: header: there is no line that begins with end_of_head. An ICGEM file ends its header so. "
        "Check that the file is whole and of this format.",
    ),
    "no errors key": (
        HEAD.replace("errors                 formal\n", "") + ROWS,
        "a.gfc: errors: the header key is missing. Must be one of no, calibrated, formal, calibrated_and_formal.",
    ),
    "unknown norm": (
        HEAD.replace("fully_normalized", "unnormalized") + ROWS,
        "a.gfc:8: norm: the value is 'unnormalized'. Must be one of fully_normalized.",
    ),
    "unknown tide system": (
        HEAD.replace("zero_tide", "some_tide") + ROWS,
        "a.gfc:9: tide_system: the value is 'some_tide'. Must be one of tide_free, zero_tide, mean_tide, unknown.",
    ),
    "another product": (
        HEAD.replace("gravity_field", "topography") + ROWS,
        "a.gfc:3: product_type: the value is 'topography'. Must be one of gravity_field.",
    ),
    "radius in km": (
        HEAD.replace("6.3781363000E+06", "6378.1363") + ROWS,
        "a.gfc:5: radius: the value is '6378.1363'. Must be a number from 6.3e+06 to 6.4e+06.",
    ),
    "constant of another body": (
        HEAD.replace("3.9860044150E+14", "4.9E+12") + ROWS,
        "a.gfc:6: earth_gravity_constant: the value is '4.9E+12'. Must be a number from 3.98e+14 to 3.99e+14.",
    ),
    "no degree": (
        HEAD.replace("max_degree             2\n", "") + ROWS,
        "a.gfc: max_degree: the header key is missing. Must be a number from 1 to 2190.",
    ),
    "half a degree": (
        HEAD.replace("max_degree             2", "max_degree 2.5") + ROWS,
        "a.gfc: max_degree: the value is 2.5. Must be whole.",
    ),
    "order above degree": (
        HEAD + ROWS.replace("gfc  2 1", "gfc  2 3"),
        f"a.gfc:16: gfc: the order 3 is above the degree 2. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 1). {GAP}",
    ),
    "degree above the highest": (
        HEAD + ROWS + "gfc 3 0 1e-9 0.0 0.0 0.0\n",
        f"a.gfc:18: gfc: the degree is 3, above the header's max_degree 2. {END}",
    ),
    "negative order": (
        HEAD + ROWS.replace("gfc  2 1", "gfc  2 -1"),
        f"a.gfc:16: gfc: degree and order are '2' and '-1'. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 1). {GAP}",
    ),
    "not a number": (
        HEAD + ROWS.replace("-2.1e-10", "NaN"),
        f"a.gfc:16: gfc: 'NaN' is no finite number. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 1). {GAP}",
    ),
    "infinite": (
        HEAD + ROWS.replace("-2.1e-10", "1e999"),
        f"a.gfc:16: gfc: '1e999' is no finite number. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 1). {GAP}",
    ),
    "digits parted": (
        HEAD + ROWS.replace("-2.1e-10", "-2_1e-10"),
        f"a.gfc:16: gfc: '-2_1e-10' is no finite number. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 1). {GAP}",
    ),
    "given twice": (
        HEAD + ROWS + "gfc 2 2 2.4e-06 -1.4e-06 0.0 0.0\n",
        "a.gfc:18: gfc: degree 2 order 2 is given twice. Must be given once. Remove one of the rows.",
    ),
    "missing row": (
        HEAD + ROWS.replace("gfc  2 0 -4.8417D-04  0.0  1.0E-12 0.0\n", ""),
        f"a.gfc: gfc: 1 coefficients are missing: (2, 0). {GAP}",
    ),
    "cut in the middle": (
        (HEAD + ROWS)[:-20],
        f"a.gfc:17: gfc: the row has 5 columns. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 2). {GAP}",
    ),
    "too few columns": (
        HEAD + ROWS.replace("  1.0E-12 0.0", ""),
        f"a.gfc:15: gfc: the row has 5 columns. {END}\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 0). {GAP}",
    ),
    "an exponent cut off": (
        HEAD.replace("formal", "no") + "gfc 2 0 -4.8e-4 0.0\ngfc 2 1 0.0 0.0\ngfc 2 2 2.4e-06 -1.4",
        "a.gfc:14: gfc: the coefficient is -1.4, and no gravity field of the Earth has any above 0.002. "
        "Must be gfc degree order C S, 5 columns, order at most the degree, finite numbers. "
        "Mend the file or leave it out.\n"
        f"a.gfc: gfc: 1 coefficients are missing: (2, 2). {GAP}",
    ),
    "unknown key": (
        HEAD + ROWS + "gfx 2 2 1.0 1.0\n",
        f"a.gfc:18: gfx: the row begins with no known key. {END}",
    ),
    "trend without an epoch": (
        HEAD + ROWS + "trnd 2 0 1.0e-11 0.0 0.0 0.0\n",
        "a.gfc:18: trnd: degree 2 order 0 has no gfct row. Must have one, for its epoch.",
    ),
    "an epoch that is no date": (
        HEAD + ROWS.replace("gfc  2 0 -4.8417D-04  0.0  1.0E-12 0.0", "gfct 2 0 -4.8417D-04 0.0 1.0E-12 0.0 20311399"),
        "a.gfc:15: gfct: the dates are 20311399. Must be yyyymmdd or yyyymmdd.hhmm, in order.",
    ),
    "no period": (
        HEAD + ROWS.replace("gfc  2 0 -4.8417D-04  0.0  1.0E-12 0.0", "gfct 2 0 -4.8417D-04 0.0 1.0E-12 0.0 20310101")
        + "acos 2 0 1e-11 0.0 0.0 0.0 0.0\n",
        "a.gfc:18: acos: the period is 0 years. Must be 0.01 to 100.",
    ),
    "empty": ("", "a.gfc: header: there is no line that begins with end_of_head. An ICGEM file ends its header so. "
              "Check that the file is whole and of this format."),
}  # fmt: skip


@pytest.mark.parametrize("name", list(BAD))
def test_bad_files_are_told_what_is_wrong(name: str) -> None:
    text, message = BAD[name]
    with pytest.raises(InputError) as error:
        parse_icgem(text.encode(), name=NAME, source="a.gfc")
    assert str(error.value) == message


def test_many_faults_are_shortened() -> None:
    with pytest.raises(InputError) as error:
        read(HEAD + ROWS + "gfx 1\n" * 100)
    assert len(error.value.faults) == 21
    assert error.value.faults[-1].problem == "80 more faults of rows"


COVERED = "time_coverage_start : 2012-05-05T00:00:00.00\ntime_coverage_end : 2012-06-01T00:00:00"


@pytest.mark.parametrize(
    ("header", "name", "start", "end"),
    [
        (COVERED, "x", "2012-05-05", "2012-06-01"),
        ("time_period_of_data 20120505 - 20120531 (mid)", "x", "2012-05-05", "2012-06-01"),
        ("", "GSM_2012126-2012152_x.gfc", "2012-05-05", "2012-06-01"),
        ("", "x_20120505-20120531.gfc", "2012-05-05", "2012-06-01"),
        ("", "x-2012-12.gfc", "2012-12-01", "2013-01-01"),
        ("", "x_201212.gfc", "2012-12-01", "2013-01-01"),
        ("time_coverage_start : nonsense\ntime_coverage_end : nonsense", "x_201201.gfc", "2012-01-01", "2012-02-01"),
    ],
    ids=["covered", "period", "days of year", "dates", "month", "plain month", "header of no use"],
)  # fmt: skip
def test_the_span_is_found(header: str, name: str, start: str, end: str) -> None:
    span = span_of(header, name)
    assert span is not None
    assert (str(span.start)[:10], str(span.end)[:10]) == (start, end)


@pytest.mark.parametrize("name", ["model.gfc", "x_2012400-2012500.gfc", "x_20121305-20121331.gfc", "v20120505.gfc"])
def test_a_name_that_says_no_month_gives_no_span(name: str) -> None:
    assert span_of("", name) is None


TIMED = """gfc  1 0  0.0  0.0
gfc  1 1  0.0  0.0
gfct 2 0 -4.8e-04 0.0 20100101
trnd 2 0  1.0e-11 0.0
acos 2 0  3.0e-11 0.0 1.0
asin 2 0  4.0e-11 0.0 1.0
gfct 2 1  1.0e-10 2.0e-10 20120101
trnd 2 1  2.0e-12 0.0
acos 2 1  5.0e-12 6.0e-12 1.0
gfc  2 2  2.4e-06 -1.4e-06
"""


def test_a_model_that_changes_with_time() -> None:
    head = HEAD.replace("formal", "no")
    (model,) = parse_icgem((head + TIMED).encode(), name="model.gfc", source="a.gfc")
    assert str(model.epoch)[:10] == "2010-01-01"

    def value(day: str, degree: int, order: int, part: int) -> float:
        years = float((np.datetime64(day, "s") - model.epoch) / np.timedelta64(1, "s")) / (86400 * 365.25)
        total = model.field.coefficients[part, degree, order] + years * model.trend[part, degree, order]
        for each in model.periodic:
            turn = 2 * np.pi * years / each.period_years
            total += each.cosine[part, degree, order] * np.cos(turn) + each.sine[part, degree, order] * np.sin(turn)
        return float(total)

    # the formula of the format, from each coefficient's own epoch
    for day in ("2011-04-05", "2014-10-31"):
        t = float((np.datetime64(day, "s") - np.datetime64("2010-01-01", "s")) / np.timedelta64(1, "s")) / (
            86400 * 365.25
        )
        expected = -4.8e-4 + 1e-11 * t + 3e-11 * np.cos(2 * np.pi * t) + 4e-11 * np.sin(2 * np.pi * t)
        assert value(day, 2, 0, 0) == pytest.approx(expected, abs=1e-18)
        t = float((np.datetime64(day, "s") - np.datetime64("2012-01-01", "s")) / np.timedelta64(1, "s")) / (
            86400 * 365.25
        )
        assert value(day, 2, 1, 0) == pytest.approx(1e-10 + 2e-12 * t + 5e-12 * np.cos(2 * np.pi * t), abs=1e-20)
        assert value(day, 2, 1, 1) == pytest.approx(2e-10 + 6e-12 * np.cos(2 * np.pi * t), abs=1e-20)


def test_a_model_in_pieces() -> None:
    head = HEAD.replace("formal", "no").replace("norm ", "format icgem2.0\nnorm ")
    rows = """gfct 2 0 1.0e-10 0.0 20100101.0000 20120101.0000
gfct 2 0 3.0e-10 0.0 20120101.0000 20150101.0000
trnd 2 0 1.0e-11 0.0 20120101.0000 20150101.0000
acos 2 0 2.0e-11 0.0 20100101.0000 20150101.0000 1.0
gfc 2 1 0.0 0.0
gfc 2 2 0.0 0.0
"""
    first, second = parse_icgem((head + rows).encode(), name="model.gfc", source="a.gfc")
    assert (first.field.coefficients[0, 2, 0], second.field.coefficients[0, 2, 0]) == (1e-10, 3e-10)
    assert (first.trend[0, 2, 0], second.trend[0, 2, 0]) == (0.0, 1e-11)
    assert str(second.field.span.start)[:10] == "2012-01-01"
    # the periodic term is one through both pieces: a cosine from 2010, 2 years of 365 days before the second epoch
    turn = 2 * np.pi * 730 / 365.25
    assert second.periodic[0].cosine[0, 2, 0] == pytest.approx(2e-11 * np.cos(turn))
    assert second.periodic[0].sine[0, 2, 0] == pytest.approx(-2e-11 * np.sin(turn))


def content() -> dict[str, bytes]:
    return {f"invented_2031{month:02d}.gfc": (HEAD + ROWS).encode() for month in (3, 1, 2)}


def tar_of(files: dict[str, bytes], mode: str) -> bytes:
    out = io.BytesIO()
    with tarfile.open(fileobj=out, mode=mode) as archive:  # type: ignore[call-overload]
        for name, data in files.items():
            member = tarfile.TarInfo(name)
            member.size = len(data)
            archive.addfile(member, io.BytesIO(data))
    return out.getvalue()


def zip_of(files: dict[str, bytes]) -> bytes:
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, data in files.items():
            archive.writestr(name, data)
    return out.getvalue()


@pytest.mark.parametrize(
    ("name", "data"),
    [
        ("a.tar", tar_of(content(), "w")),
        ("a.tar.xz", tar_of(content(), "w:xz")),
        ("a.tar.gz", tar_of(content(), "w:gz")),
        ("a.tgz", tar_of({f"deep/er/{name}.gz": gzip.compress(data) for name, data in content().items()}, "w:gz")),
        ("a.zip", zip_of(content() | {"readme.txt": b"no field"})),
        ("b.zip", zip_of({f"{name}.bz2": bz2.compress(data) for name, data in content().items()})),
    ],
    ids=["tar", "tar.xz", "tar.gz", "tar of gz in folders", "zip", "zip of bz2"],
)
def test_archives(tmp_path: Path, name: str, data: bytes) -> None:
    (tmp_path / name).write_bytes(data)
    found = read_gravity_files(tmp_path / name, source=name)
    assert [str(field.span.start)[:7] for field in found] == ["2031-01", "2031-02", "2031-03"]  # type: ignore[union-attr]


def test_a_folder_and_a_single_file(tmp_path: Path) -> None:
    for name, data in content().items():
        (tmp_path / f"{name}.xz").write_bytes(lzma.compress(data))
    (tmp_path / "readme.txt").write_text("no field")
    assert len(read_gravity_files(tmp_path, source="fields")) == 3
    (field,) = read_gravity_files(tmp_path / "invented_203102.gfc.xz", source="one")
    assert isinstance(field, GravityField)


@pytest.mark.parametrize(
    ("name", "data", "message"),
    [
        ("a.tar.xz", tar_of(content(), "w:xz")[:-200], "a.tar.xz: the file is damaged or cut: "),
        ("a.gfc.gz", gzip.compress((HEAD + ROWS).encode())[:-30], "a.gfc.gz: the file is damaged or cut: "),
        (
            "a.zip",
            zip_of({"x.txt": b""}),
            "a.zip: there is no gravity field in it. Must hold files whose names end in .gfc",
        ),
        ("a.tar", tar_of({"../../x.gfc": b"nothing"}, "w"), "a.tar/x.gfc: header: there is no line that begins with"),
    ],
    ids=["cut tar", "cut gz", "zip without any", "path that climbs"],
)
def test_archives_that_are_no_use(tmp_path: Path, name: str, data: bytes, message: str) -> None:
    (tmp_path / name).write_bytes(data)
    with pytest.raises(InputError) as error:
        read_gravity_files(tmp_path / name, source=name)
    assert str(error.value).startswith(message)
    assert [path.name for path in tmp_path.iterdir()] == [name]


def test_a_file_that_unpacks_to_more_than_is_allowed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("massfit.io.gravity.gravity_files.MOST_BYTES", 1000)
    (tmp_path / "a.gfc.gz").write_bytes(gzip.compress(b"0" * 100_000))
    with pytest.raises(InputError, match=r"a\.gfc\.gz has more than 1000 bytes"):
        read_gravity_files(tmp_path / "a.gfc.gz", source="a.gfc.gz")


def test_the_faults_of_all_files_are_told(tmp_path: Path) -> None:
    (tmp_path / "a_203101.gfc").write_text(HEAD + ROWS.replace("2 1 -", "2 9 -"))
    (tmp_path / "b_203102.gfc").write_text("nothing")
    with pytest.raises(InputError) as error:
        read_gravity_files(tmp_path, source="fields")
    assert [fault.source for fault in error.value.faults] == ["fields/a_203101.gfc"] * 2 + ["fields/b_203102.gfc"]


# damaged at random

SOUND = (
    (HEAD + ROWS).encode(),
    (HEAD.replace("formal", "no") + TIMED).encode(),
    (HEAD.replace("formal", "no").replace("norm ", "format icgem2.0\nnorm ")
     + "gfct 2 0 1e-10 0.0 20100101.0000 20120101.0000\nacos 2 0 2e-11 0.0 20100101.0000 20150101.0000 1.0\n"
     + "gfct 2 0 3e-10 0.0 20120101.0000 20150101.0000\ngfc 2 1 0.0 0.0\ngfc 2 2 0.0 0.0\n").encode(),
)  # fmt: skip


def damaged(data: bytes, rng: np.random.Generator) -> bytes:
    """Cut, swap, repeat, overwrite or insert: a few times."""
    out = bytearray(data)
    for _ in range(rng.integers(1, 4)):
        at = int(rng.integers(0, max(1, len(out))))
        length = int(rng.integers(1, 30))
        match rng.integers(0, 6):
            case 0:
                del out[at : at + length]
            case 1:
                out[at:at] = rng.bytes(length)
            case 2:
                out[at : at + 1] = bytes([rng.integers(0, 256)])
            case 3:
                out[at:at] = out[at : at + length]
            case 4:
                out = out[:at]
            case _:
                word = [b"nan", b"1e400", b"-1", b"gfct", b"99999999999", b"2.0", b"\n", b"end_of_head\n", b"1D-300"]
                out[at:at] = word[rng.integers(0, len(word))]
    return bytes(out)


def outcomes(count: int, seed: int) -> tuple[int, int]:
    """How many damaged files are read, and how many refused; anything else is raised."""
    read_in, refused = 0, 0
    for number in range(count):
        rng = np.random.default_rng([seed, number])
        data = damaged(SOUND[number % len(SOUND)], rng)
        try:
            parse_icgem(data, name=NAME, source="a.gfc")
            read_in += 1
        except InputError:
            refused += 1
    return read_in, refused


def test_ten_thousand_damaged_files_meet_only_our_own_error() -> None:
    read_in, refused = outcomes(10_000, seed=1)
    assert read_in > 500  # comments and blanks may be damaged
    assert refused > 5_000


@pytest.mark.slow
def test_a_hundred_thousand_damaged_files_meet_only_our_own_error() -> None:
    outcomes(100_000, seed=2)
