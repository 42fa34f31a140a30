"""Imports point down only, and names on one line do not import each other."""

import ast
from pathlib import Path

import pytest

import massfit

# from the top of the house down; the arrows may only point to a later line
LAYERS = [
    {"cli"},
    {"pipeline", "figures"},
    {"io", "report", "simulate"},
    {"results"},
    {"gravity", "siting"},
    {"screening"},
    {"posterior"},
    {"annual"},
    {"corrections"},
    {"network"},
    {"records", "fingerprint"},
    {"earth"},
    {"settings", "site", "phasor", "contracts"},
    {"tables"},
    {"constants", "errors", "display"},
]
LEVEL = {room: level for level, rooms in enumerate(LAYERS) for room in rooms}
ROOT = Path(massfit.__file__).parent
MODULES = sorted(path for path in ROOT.rglob("*.py") if path != ROOT / "__init__.py" and path != ROOT / "__main__.py")


def room_of(path: Path) -> str:
    return path.relative_to(ROOT).parts[0].removesuffix(".py")


def imported_rooms(tree: ast.AST) -> set[str]:
    names: set[str] = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            names.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "relative import"
            module = node.module or ""
            names.update(f"{module}.{alias.name}" if module == "massfit" else module for alias in node.names)
    return {name.split(".")[1] for name in names if name.startswith("massfit.")}


def broken_arrows(room: str, tree: ast.AST) -> list[str]:
    return sorted(
        target
        for target in imported_rooms(tree)
        if target != room and not (target in LEVEL and LEVEL[target] > LEVEL[room])
    )


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(ROOT)))
def test_imports_point_down(path: Path) -> None:
    text = path.read_text()
    assert room_of(path) in LEVEL, f"{room_of(path)} is not a room of the house"
    assert "TYPE_CHECKING" not in text, "a type-checking escape hides an arrow"
    assert broken_arrows(room_of(path), ast.parse(text)) == []


@pytest.mark.parametrize(
    "source",
    ["import massfit.pipeline", "from massfit.pipeline import estimate", "from massfit import pipeline"],
)
def test_an_upward_arrow_is_seen(source: str) -> None:
    assert broken_arrows("annual", ast.parse(source)) == ["pipeline"]


def test_neighbours_do_not_import_each_other() -> None:
    assert broken_arrows("records", ast.parse("from massfit.fingerprint import ocean")) == ["fingerprint"]


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(ROOT)))
def test_modules_stay_short(path: Path) -> None:
    # the house rule of the contributor guide: a module is one subject
    assert len(path.read_text().splitlines()) < 400


def test_only_io_and_tables_open_files() -> None:
    openers = {"open", "open_dataset", "read_text", "read_bytes", "write_text", "to_netcdf"}
    found = []
    for path in MODULES:
        if room_of(path) in {"io", "tables"}:
            continue
        for node in ast.walk(ast.parse(path.read_text())):
            if isinstance(node, ast.Call):
                name = node.func.id if isinstance(node.func, ast.Name) else getattr(node.func, "attr", "")
                if name in openers:
                    found.append(f"{path.relative_to(ROOT)}:{node.lineno} {name}")
    assert found == []
