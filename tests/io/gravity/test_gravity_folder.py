"""Satellite gravity from one folder: what is found in it, whatever it is called."""

import gzip
import io
import tarfile
import zipfile
from pathlib import Path

import pytest

from massfit.errors import InputError
from massfit.io.gravity.gravity_folder import read_gravity_folder

HEAD = """product_type gravity_field
modelname invented
radius 6.3781363E+06
earth_gravity_constant 3.9860044150E+14
max_degree {top}
errors no
tide_system zero_tide
end_of_head
"""
DEGREE_ONE = "made up\n" + "".join(
    f"2031{month:02d} 1 0 1.0E-10 0.0E+00 1E-11 0.0 2031{month:02d}01.0000 2031{month + 1:02d}01.0000\n"
    f"2031{month:02d} 1 1 2.0E-10 1.0E-10 1E-11 1E-11 2031{month:02d}01.0000 2031{month + 1:02d}01.0000\n"
    for month in (1, 2, 3)
)
LOW = "C20 is zero tide\n62867.0 2031.0 -4.84165E-04 0.1 0.2 9.5717E-07 0.1 0.2 62898.0 2031.1\n"
OTHERS = "# mine\nlabel,method,amplitude_hpa,amplitude_sd_hpa,peak_day,peak_day_sd\nA,levelling,0.9,0.1,280,5\n"


def month(top: int = 6) -> str:
    rows = [
        f"gfc {n} {m} {-4.8417e-4 if (n, m) == (2, 0) else 1e-9} 0.0" for n in range(2, top + 1) for m in range(n + 1)
    ]
    return HEAD.format(top=top) + "\n".join(rows) + "\n"


def model(top: int = 6) -> str:
    text = month(top).replace("gfc 2 0 -0.00048417 0.0", "gfct 2 0 -0.00048417 0.0 20300101\nacos 2 0 1e-11 0.0 1.0")
    assert "acos" in text
    return text


def zipped(names: list[str]) -> bytes:
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as archive:
        for name in names:
            archive.writestr(name, month())
    return out.getvalue()


def tarred(names: list[str]) -> bytes:
    out = io.BytesIO()
    with tarfile.open(fileobj=out, mode="w:gz") as archive:
        for name in names:
            data = gzip.compress(month().encode())
            member = tarfile.TarInfo(f"some/where/{name}.gz")
            member.size = len(data)
            archive.addfile(member, io.BytesIO(data))
    return out.getvalue()


@pytest.fixture
def network(tmp_path: Path) -> Path:
    (tmp_path / "net").mkdir()
    file = tmp_path / "net" / "network.toml"
    file.write_text('[network]\nname = "Invented"\nreference_year = 2031\n')
    return file


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    place = tmp_path / "from the centres"
    place.mkdir()
    (place / "north.zip").write_bytes(zipped(["x_2031-01.gfc", "x_2031-02.gfc"]))
    (place / "South v2.tgz").write_bytes(tarred(["y_20310101-20310131.gfc"]))
    (place / "GAA").mkdir()
    (place / "GAA" / "a_203101.gfc").write_text(month())
    (place / "deg 1.txt").write_text(DEGREE_ONE)
    (place / "low.dat").write_text(LOW)
    (place / "theirs.csv").write_text(OTHERS)
    (place / "read me.md").write_text("Nothing of use.\n")
    (place / ".hidden").write_text("not looked at")
    return place


def test_everything_is_found_under_any_name(folder: Path, network: Path) -> None:
    found = read_gravity_folder(folder, network=network)
    assert [(each.name, len(each.fields)) for each in found.solutions] == [("South v2", 1), ("north", 2)]
    assert (found.settings.degree_one, found.settings.low_degree) == ("deg 1.txt", "low.dat")
    assert len(found.atmosphere) == 1
    assert found.dealiasing == ()
    assert [each.label for each in found.determinations] == ["A"]
    assert found.warnings == ("read me.md is none of fields, tables and determinations, and is not used",)
    assert found.settings.max_degree == 6  # the network file asks for none, and the fields reach no further
    assert set(found.inputs) >= {
        f"{folder.as_posix()}/{name}" for name in ("north.zip", "deg 1.txt", "GAA/a_203101.gfc")
    }


def test_the_switches_of_the_network_file_hold_and_its_files_do_not(folder: Path, network: Path) -> None:
    network.write_text(network.read_text() + '[gravity]\nfields = "nowhere"\ndegree_one = "no"\nbuffer_km = 150\n')
    found = read_gravity_folder(folder, network=network)
    assert found.settings.buffer_km == 150.0
    assert found.settings.max_degree == 60  # as stated there; the comparison says that the fields end below
    (folder / "deg 1.txt").unlink()
    assert read_gravity_folder(folder, network=network).degree_one is None


def test_months_in_the_folder_itself_and_one_file(tmp_path: Path, network: Path) -> None:
    place = tmp_path / "months"
    place.mkdir()
    for name in ("b_2031-02.gfc", "a_2031-01.gfc.gz"):
        data = month().encode()
        (place / name).write_bytes(gzip.compress(data) if name.endswith("gz") else data)
    (solution,) = read_gravity_folder(place, network=network).solutions
    assert (solution.name, len(solution.fields)) == ("months", 2)
    (place / "steady.gfc").write_text(model())
    with pytest.raises(InputError, match=r"it holds months and models side by side: steady\.gfc"):
        read_gravity_folder(place, network=network)
    for name in ("b_2031-02.gfc", "a_2031-01.gfc.gz"):
        (place / name).unlink()
    (place / "other.gfc").write_text(model())
    assert [each.name for each in read_gravity_folder(place, network=network).solutions] == ["other", "steady"]
    (single,) = read_gravity_folder(place / "other.gfc", network=network).solutions
    assert (single.name, len(single.models)) == ("other", 1)


def test_what_is_wrong_is_told(folder: Path, network: Path) -> None:
    (folder / "more.txt").write_text(DEGREE_ONE)
    with pytest.raises(InputError) as error:
        read_gravity_folder(folder, network=network)
    assert str(error.value) == (
        f"{folder}: degree_one: there are 2: deg 1.txt, more.txt. Must be one. Leave the others out."
    )
    (folder / "more.txt").write_text(DEGREE_ONE.replace("2.0E-10", "2.0E+10", 1))  # a table all the same
    with pytest.raises(InputError, match=r"more\.txt:3: row: the coefficient is 2e\+10"):
        read_gravity_folder(folder, network=network)
    empty = folder / "empty"
    empty.mkdir()
    with pytest.raises(InputError, match="there is no gravity field in it"):
        read_gravity_folder(empty, network=network)
    with pytest.raises(InputError, match='no file "nothing"'):
        read_gravity_folder(folder / "nothing", network=network)
