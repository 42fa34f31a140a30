"""What an attacker or a broken disk may put into a network's folder is refused or harmless."""

import gzip
import os
import pickle
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from click.testing import CliRunner, Result

from massfit.cli.main import main
from massfit.errors import InputError, printable
from massfit.io.network.network_file import read_network

Change = Callable[[str, str], None]
RECORD, MODEL = '"records/a.csv"', '"fields/model.nc"'


def refusal(network: Path, **options: Any) -> str:
    """The faults of a network."""
    with pytest.raises(InputError) as raised:
        read_network(network, **options)
    return str(raised.value)


def estimate(network: Path) -> Result:
    """The command line, which must write nothing."""
    before = sorted(network.rglob("*"))
    done = CliRunner().invoke(main, ["estimate", str(network)])
    assert sorted(network.rglob("*")) == before
    assert done.exit_code == 2
    assert isinstance(done.exception, SystemExit)
    assert done.stdout == ""
    assert "nothing was written" in done.stderr
    return done


# places

PLACES = {
    "../a.csv": "lies outside the folder",
    "records/../../a.csv": "lies outside the folder",
    "/etc/passwd": "lies outside the folder",
    "//etc/passwd": "lies outside the folder",
    "http://example.org/a.csv": "is an address",
    "https://example.org/a.csv": "is an address",
    "ftp://example.org/a.csv": "is an address",
    "s3://bucket/a.csv": "is an address",
    "file:///etc/passwd": "is an address",
    "file:/etc/passwd": "no file",
    "zip+http://example.org/a.csv": "is an address",
    "~/a.csv": "no file",
    "$HOME/a.csv": "no file",
    "records": "is a folder",
    "a" * 5000: "is not a path",
}


@pytest.mark.parametrize("place", PLACES)
def test_places(place: str, network_folder: Path, change: Change) -> None:
    change(RECORD, f'"{place}"')
    assert PLACES[place] in refusal(network_folder)
    assert PLACES[place] in estimate(network_folder).stderr


def test_links_in_a_circle(network_folder: Path) -> None:
    record = network_folder / "records/a.csv"
    record.unlink()
    record.symlink_to(record)
    assert "a.csv" in refusal(network_folder)


@pytest.mark.parametrize("device", ["/dev/zero", "/dev/full", "/dev/stdin"])
def test_a_device_is_not_read(device: str, network_folder: Path, change: Change) -> None:
    change(RECORD, f'"{device}"')
    assert "lies outside" in refusal(network_folder)
    text = refusal(network_folder, outside=True)
    assert "is a pipe or a device. Must be a file." in text or "no file" in text


def test_a_pipe_is_not_waited_for(network_folder: Path) -> None:
    record = network_folder / "records/a.csv"
    record.unlink()
    os.mkfifo(record)
    assert '"records/a.csv" is a pipe or a device. Must be a file. Give the file itself.' in refusal(network_folder)
    assert "is a pipe" in estimate(network_folder).stderr


def test_a_network_file_that_is_a_pipe(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "network.toml")
    assert "network.toml: this is not a regular file. Must be a network file or its folder." in refusal(tmp_path)


# contents that would run or swell


class Evil:
    """Makes a folder when it is unpickled."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def __reduce__(self) -> tuple[Callable[[str], None], tuple[str]]:
        return os.mkdir, (str(self.folder),)


@pytest.mark.parametrize(
    "target", ["records/a.csv", "records/b.nc", "fields/model.nc", "fields/loads.nc", "fields/air.csv"]
)
@pytest.mark.parametrize("form", ["pickle", "array"])
def test_pickles_are_not_opened(form: str, target: str, network_folder: Path) -> None:
    evil, file = Evil(network_folder.parent / "made"), network_folder / target
    if form == "pickle":
        file.write_bytes(pickle.dumps(evil))
    else:
        with file.open("wb") as stream:
            np.save(stream, np.array([evil], dtype=object), allow_pickle=True)
    assert target in refusal(network_folder)
    assert not evil.folder.exists()


@pytest.mark.parametrize("target", ["records/a.csv", "fields/model.nc", "fields/air.csv"])
def test_a_compressed_bomb_is_not_unpacked(target: str, network_folder: Path) -> None:
    (network_folder / target).write_bytes(gzip.compress(bytes(50_000_000)))
    assert target in refusal(network_folder)


def huge(file: h5py.File, folder: Path) -> None:
    del folder
    file.create_dataset("time", shape=(2**40,), chunks=(1024,), dtype="f8")


def unwritten(file: h5py.File, folder: Path) -> None:
    del folder
    file.create_dataset("load_in_phase", shape=(2**20, 2**20), chunks=(1, 1024), compression="gzip", dtype="f8")


def large_chunk(file: h5py.File, folder: Path) -> None:
    del folder
    file.create_dataset("p", shape=(2**26, 2), chunks=(2**26, 2), compression="gzip", dtype="f8")


def link_out(file: h5py.File, folder: Path) -> None:
    other = folder.parent / "other.nc"
    h5py.File(other, "w").close()
    file["p"] = h5py.ExternalLink(str(other), "/p")


def link_out_of_a_group(file: h5py.File, folder: Path) -> None:
    link_out(file.create_group("inner"), folder)
    file["q"] = h5py.SoftLink("/inner/p")


def virtual(file: h5py.File, folder: Path) -> None:
    layout = h5py.VirtualLayout(shape=(4,), dtype="f8")
    layout[:] = h5py.VirtualSource(str(folder.parent / "other.nc"), "p", shape=(4,))
    file.create_virtual_dataset("p", layout)


def raw_file_outside(file: h5py.File, folder: Path) -> None:
    del folder
    file.create_dataset("p", shape=(4,), dtype="u1", external=[("/etc/hostname", 0, 4)])


HDF5 = {
    huge: "'time' has 1099511627776 values along one axis; at most 67108864 are read",
    unwritten: "'load_in_phase' declares 8796093022208 bytes and the file stores 0 of them",
    large_chunk: "the chunks of 'p' are too large: (67108864, 2) values; at most 268435456 bytes are read",
    link_out: "'p' is a link to another file, ",
    link_out_of_a_group: "'inner/p' is a link to another file, ",
    virtual: "the values of 'p' are in another file",
    raw_file_outside: "the values of 'p' are in another file",
}


@pytest.mark.parametrize("target", ["records/b.nc", "fields/model.nc", "fields/loads.nc"])
@pytest.mark.parametrize("make", HDF5, ids=lambda make: make.__name__)
def test_hdf5_that_reaches_out_or_swells(
    make: Callable[[h5py.File, Path], None], target: str, network_folder: Path
) -> None:
    with h5py.File(network_folder / target, "w") as file:
        make(file, network_folder)
    text = refusal(network_folder, outside=True)
    assert f"{target}: the file cannot be read as NetCDF ({HDF5[make]}" in text
    assert text.endswith("Must be NetCDF-3 or NetCDF-4. Fetch it again.")


# the network file itself

LONG = {
    "too many bytes": ("# a\n" * 300_000, ": the file is too long. Must have at most 1048576 bytes. Check the path."),
    "hundred thousand keys": (
        "".join(f"k{number}=1\n" for number in range(100_000)),
        ": one table has more than 200 keys. Must be at most 200. Check that this is the file.",
    ),
    "many keys in all": (
        "[[site]]\nid = 'A'\n" * 11_000,
        ": site: the file has more than 10000 keys. Must be at most 10000. Check that this is the file.",
    ),
    "deep lists": (
        "a = " + "[\n" * 10_000 + "]\n" * 10_000,
        ": tables or lists stand more than 12 deep inside each other.",
    ),
    "lists a little too deep": (
        "a = " + "[" * 20 + "]" * 20,
        ": tables or lists stand more than 12 deep inside each other.",
    ),
    "deep tables": (
        "a = " + "{a = " * 400 + "1" + "}" * 400,
        ": tables or lists stand more than 12 deep inside each other.",
    ),
    "deep key": ("a." * 4_000 + "a = 1", ":1: a key of more than 24 parts starts with 'a.a.a.a.a.a.a.a.a.a.'."),
    "a long line": ("a = 1\nb = '" + "x" * 20_000 + "'", ":2: the line has 20006 bytes. Must be at most 10000."),
    "many digits": ("a = " + "9" * 5_000, ": a number has too many digits. Must be within 64 bits. Shorten it."),
    "a null character": ("a = '\0'", ":1: Found invalid character '\\x00' at column 6."),
}


@pytest.mark.parametrize("name", LONG)
def test_a_network_file_beyond_measure(name: str, tmp_path: Path) -> None:
    text, expected = LONG[name]
    (tmp_path / "network.toml").write_text(text)
    assert refusal(tmp_path).startswith(f"{tmp_path}/network.toml{expected}")


def test_thousands_of_faults_take_no_searches(tmp_path: Path) -> None:
    site = '[[site]]\nid="A"\nlatitude=10\nlongitude=15\n[[site.deployment]]\nfile="none"\n'
    (tmp_path / "network.toml").write_text(site * 1200)
    assert refusal(tmp_path).count("on land") == 1200


@pytest.mark.parametrize(
    "name", ["\\u001b[2J", "\\u0007", "\\u202e", "\\u2028", "\\u009b2J", "\\n", "\\t", "\\r", "\\u007f"]
)
def test_names_that_steer_a_terminal(name: str, network_folder: Path, change: Change) -> None:
    change('id = "A"', f'id = "A{name}"')
    shown = estimate(network_folder).stderr
    assert "holds a control character. Must be printable text. Remove it." in shown
    assert printable(shown.replace("\n", "")) == shown.replace("\n", "")


def test_no_escape_from_a_data_file_reaches_the_terminal(network_folder: Path) -> None:
    with h5py.File(network_folder / "fields/loads.nc", "w") as file:
        file["load\x1b[2J"] = h5py.ExternalLink("\x1b]0;title\x07", "/\x1b[1m")
    shown = estimate(network_folder).stderr
    assert "load\\x1b[2J" in shown
    assert "\x1b" not in shown


@pytest.mark.parametrize("first", "=+-@")
def test_a_site_is_no_formula(first: str, network_folder: Path, change: Change) -> None:
    change('id = "A"', f'id = "{first}HYPERLINK(1)"')
    text = refusal(network_folder)
    assert f'the value is "{first}HYPERLINK(1)". Must not begin with =, +, -, @: a spreadsheet would take it' in text


def test_words_may_run_over_lines(network_folder: Path, change: Change) -> None:
    change('reason = "anchor dragged"', 'reason = "anchor dragged,\\n\\tsee the cruise report: \\"naïve\\" 海"')
    read_network(network_folder)
