"""The [gravity] table and its files: what is written is read, and what is wrong is told."""

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from massfit.errors import InputError
from massfit.gravity.inputs import GravityInputs
from massfit.io.gravity.read_gravity import read_determinations, read_gravity
from massfit.io.network.network_file import read_network
from massfit.io.network.write_network import write_network
from massfit.simulate.network import SimulatedNetwork, simulate_network
from massfit.simulate.options import SimulationOptions


@pytest.fixture(scope="module")
def invented() -> SimulatedNetwork:
    options = SimulationOptions(
        sites=1, years=3, models=0, load_members=1, sampling="daily", incidents=False, bad_site=False, satellites=2
    )
    return simulate_network(options, seed=11)


@pytest.fixture(scope="module")
def made(invented: SimulatedNetwork, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("gravity") / "network"
    write_network(invented.network, folder, gravity=invented.gravity)
    return folder


@pytest.fixture
def folder(made: Path, tmp_path: Path) -> Path:
    """A copy of the network file beside the same gravity files."""
    (tmp_path / "gravity").symlink_to(made / "gravity")
    for name in ("records", "fields"):
        (tmp_path / name).symlink_to(made / name)
    (tmp_path / "network.toml").write_text((made / "network.toml").read_text())
    return tmp_path


def test_what_is_written_is_read(invented: SimulatedNetwork, made: Path) -> None:
    given, found = invented.gravity, read_gravity(made)
    assert isinstance(given, GravityInputs)
    assert isinstance(found, GravityInputs)
    assert found.settings == given.settings == read_network(made).settings.gravity
    assert [solution.name for solution in found.solutions] == ["halvorne", "mirrowby"]
    for mine, theirs in zip(given.solutions, found.solutions, strict=True):
        assert [field.span for field in mine.fields] == [field.span for field in theirs.fields]
        for one, other in zip(mine.fields, theirs.fields, strict=True):
            np.testing.assert_allclose(other.coefficients, one.coefficients, rtol=0.0, atol=1.001e-15)
            assert other.conventions == one.conventions
    assert given.degree_one is not None
    assert found.degree_one is not None
    assert given.low_degree is not None
    assert found.low_degree is not None
    assert found.low_degree.tide_system == "zero_tide"
    for mine_table, their_table in ((given.degree_one, found.degree_one), (given.low_degree, found.low_degree)):
        assert [row.span for row in mine_table.rows] == [row.span for row in their_table.rows]
        for mine_row, their_row in zip(mine_table.rows, their_table.rows, strict=True):
            assert their_row.values == pytest.approx(mine_row.values, abs=1e-16, rel=1e-8)
    for mine_one, their_one in zip(given.determinations, found.determinations, strict=True):
        assert (their_one.label, their_one.method) == (mine_one.label, mine_one.method)
        assert their_one.phasor == pytest.approx(mine_one.phasor, abs=0.02)
        np.testing.assert_allclose(their_one.covariance, mine_one.covariance, rtol=2e-3, atol=0.1)
    assert set(found.inputs) == {
        "gravity/halvorne.tar.xz", "gravity/mirrowby.tar.xz", "gravity/degree_one.txt", "gravity/c20_c30.txt",
        "gravity/others.csv",
    }  # fmt: skip


def test_the_gap_between_the_satellites(invented: SimulatedNetwork) -> None:
    assert invented.gravity is not None
    fields = invented.gravity.solutions[0].fields
    starts = np.array([field.span.start for field in fields if field.span is not None]).astype("datetime64[M]")
    assert len(fields) == 36 - 11
    assert np.diff(starts).astype(int).max() == 12
    assert all(np.all(field.coefficients[:, :2] == 0.0) for field in fields)


def test_another_seed_makes_other_fields_and_the_same_seed_the_same(invented: SimulatedNetwork) -> None:
    options = SimulationOptions(
        sites=1, years=3, models=0, load_members=1, sampling="daily", incidents=False, bad_site=False, satellites=2
    )
    again = simulate_network(options, seed=11)
    assert again.gravity is not None
    assert invented.gravity is not None
    one, other = (each.solutions[1].fields[5].coefficients for each in (again.gravity, invented.gravity))
    np.testing.assert_array_equal(one, other)
    # and satellites change nothing else of the network
    without = simulate_network(
        SimulationOptions(
            sites=1, years=3, models=0, load_members=1, sampling="daily", incidents=False, bad_site=False
        ),
        seed=11,
    )
    np.testing.assert_array_equal(without.network.records[0].pressure, again.network.records[0].pressure)
    assert without.truth["amplitude_hpa"] == again.truth["amplitude_hpa"]


Edit = Callable[[str, str], None]


@pytest.fixture
def edit(folder: Path) -> Edit:
    def change(old: str, new: str) -> None:
        file = folder / "network.toml"
        text = file.read_text()
        assert old in text
        file.write_text(text.replace(old, new, 1))

    return change


def told(folder: Path) -> list[str]:
    with pytest.raises(InputError) as error:
        read_gravity(folder, outside=True)  # the links lead out
    return [str(fault).split("network.toml:", 1)[-1].split(": ", 1)[-1] for fault in error.value.faults]


def test_a_file_without_the_table_gives_none(folder: Path) -> None:
    text = (folder / "network.toml").read_text()
    head, _, tail = text.partition("[gravity]")
    (folder / "network.toml").write_text(head + tail[tail.index("[[site]]") :])
    assert read_gravity(folder) is None


def test_files_that_are_not_there(folder: Path, edit: Edit) -> None:
    edit("gravity/halvorne.tar.xz", "gravity/halvorn.tar.xz")
    edit("gravity/degree_one.txt", "gravity/one.txt")
    first, second = told(folder)
    assert first.startswith('gravity.fields[1]: no file "gravity/halvorn.tar.xz"')
    assert second.startswith('gravity.degree_one: no file "gravity/one.txt"')


def test_the_tables_changed_about(folder: Path, edit: Edit) -> None:
    edit("gravity/degree_one.txt", "gravity/x.txt")
    edit("gravity/c20_c30.txt", "gravity/degree_one.txt")
    edit("gravity/x.txt", "gravity/c20_c30.txt")
    assert told(folder) == [
        "gravity.degree_one: it holds degrees 2, 3. Must be a table of degree 1. Give the right table.",
        "gravity.low_degree: it holds degrees 1. Must be a table of C20, or of C20 and C30. Give the right table.",
    ]


def test_addresses_are_never_opened(folder: Path, edit: Edit) -> None:
    edit("gravity/halvorne.tar.xz", "https://invented.example/halvorne.tar.xz")
    assert told(folder) == [
        'gravity.fields[1]: "https://invented.example/halvorne.tar.xz" is an address. Must be a file. '
        "Download it and give its path."
    ]


def test_one_solution_given_twice(folder: Path, edit: Edit) -> None:
    edit("gravity/mirrowby.tar.xz", "gravity/halvorne.tar.xz")
    assert told(folder) == ['gravity.fields[2]: two solutions are called "halvorne". Must differ. Rename one.']


MODEL = """begin_of_head
product_type gravity_field
modelname invented
radius 6.3781363E+06
earth_gravity_constant 3.9860044150E+14
max_degree 2
errors formal
tide_system zero_tide
end_of_head
gfct 2 0 -4.8417e-04 0.0 1e-12 0.0 20100101
acos 2 0 3e-11 0.0 2e-12 0.0 1.0
asin 2 0 4e-11 0.0 1e-12 0.0 1.0
gfc 2 1 0.0 0.0 1e-12 1e-12
gfc 2 2 2.4e-06 -1.4e-06 1e-12 1e-12
"""


def test_a_model_with_annual_terms(folder: Path, edit: Edit) -> None:
    (folder / "invented.gfc").write_text(MODEL)
    edit('"gravity/halvorne.tar.xz"', '"invented.gfc"')
    found = read_gravity(folder, outside=True)
    assert found is not None
    model = found.solutions[0]
    assert (model.name, model.fields, len(model.models)) == ("invented", (), 1)
    (annual,) = model.models[0].periodic
    assert (annual.cosine[0, 2, 0], annual.sine[0, 2, 0]) == (3e-11, 4e-11)
    assert annual.cosine_sd is not None
    assert annual.sine_sd is not None
    assert (annual.cosine_sd[0, 2, 0], annual.sine_sd[0, 2, 0]) == (2e-12, 1e-12)
    assert found.solutions[1].models == ()


def test_a_model_among_months_and_one_without_annual_terms(folder: Path, edit: Edit) -> None:
    (folder / "mixed").mkdir()
    (folder / "mixed" / "model.gfc").write_text(MODEL)
    rows = [line for line in MODEL.splitlines() if line[:4] not in ("acos", "asin")]
    (folder / "mixed" / "month_2031-02.gfc").write_text("\n".join(rows).replace("gfct", "gfc").replace(" 20100101", ""))
    (folder / "steady.gfc").write_text("\n".join(rows) + "\ntrnd 2 0 1e-11 0.0 1e-12 0.0\n")
    edit('"gravity/halvorne.tar.xz"', '"mixed"')
    edit('"gravity/mirrowby.tar.xz"', '"steady.gfc"')
    assert told(folder) == [
        "gravity.fields[1]: 1 of its 2 files hold terms that change with time. Must be fields of single months, or one "
        "model. Give each model as a solution of its own.",
        "gravity.fields[2]: the model has no annual term. Must have some (acos, asin). Give another model.",
    ]


HEAD = "label,method,amplitude_hpa,amplitude_sd_hpa,peak_day,peak_day_sd\n"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "o.csv:1: the header is ''. Must be label,method,amplitude_hpa,amplitude_sd_hpa,peak_day,peak_day_sd. "
         "Name the columns."),
        (HEAD + "a,b,0.9,0.1,280\n", "o.csv:2: row: the row has 5 columns. Must be 6. Mend the row."),
        (HEAD + "a,b,9 mm,0.1,280,5\n",
         "o.csv:2: amplitude_hpa: the value is '9 mm'. Must be a number from 0 to 20, above 0. Correct it."),
        (HEAD + "a,b,0.9,0,280,5\n",
         "o.csv:2: amplitude_sd_hpa: the value is '0'. Must be a number from 0 to 20, above 0. Correct it."),
        (HEAD + "# note\na,b,0.9,0.1,2800,nan\n",
         "o.csv:3: peak_day: the value is '2800'. Must be a number from -366 to 732. Correct it.\n"
         "o.csv:3: peak_day_sd: the value is 'nan'. Must be a number from 0 to 183, above 0. Correct it."),
    ],
    ids=["empty", "short row", "with a unit", "no error", "no day"],
)  # fmt: skip
def test_bad_lists_of_determinations(tmp_path: Path, text: str, message: str) -> None:
    (tmp_path / "o.csv").write_text(text)
    with pytest.raises(InputError) as error:
        read_determinations(tmp_path / "o.csv", source="o.csv")
    assert str(error.value) == message
