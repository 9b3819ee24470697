"""Rooms import one way only, and the package stays light to import."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import fieldmap

PACKAGE = Path(fieldmap.__file__).parent
# from the ground up; a room imports from rooms before it and from itself
ROOMS = ["ground", "readings", "estimate", "magnet", "bench", "show", "shell"]
GROUND = {"errors", "units", "atomic", "folder_lock", "shipped", "progress", "version"}
SHELL = {"__init__", "__main__", "cli"}  # the face and the command line use every room
MODULES = sorted(PACKAGE.rglob("*.py"))
LATE = {"pint", "pandas", "h5netcdf", "h5py", "matplotlib", "ipywidgets", "tqdm", "IPython"}


def room_of(path):
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    if len(parts) == 1:
        if parts[0] in GROUND:
            return "ground"
        assert parts[0] in SHELL, f"{path.name} belongs to no room"
        return "shell"
    assert parts[0] in ROOMS, f"{parts[0]} is no room"
    return parts[0]


def imports(tree):
    """Name, and whether it is imported as the module loads, of each import."""
    late = {
        id(inner)
        for node in ast.walk(tree)
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef) or _only_for_types(node)
        for inner in ast.walk(node)
    }
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, id(node) not in late
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are absolute"
            yield node.module, id(node) not in late
            for alias in node.names:  # from fieldmap import show
                if node.module == "fieldmap":
                    yield f"fieldmap.{alias.name}", id(node) not in late


def _only_for_types(node):
    return isinstance(node, ast.If) and ast.unparse(node.test).endswith("TYPE_CHECKING")


def parsed(path):
    return ast.parse(path.read_text("utf-8"), filename=str(path))


def target_room(name):
    """Room of an imported module of the package, None for a name of the package's face."""
    parts = name.split(".")[1:]
    if not parts:
        return "shell"
    path = PACKAGE.joinpath(*parts)
    if path.with_suffix(".py").is_file():
        return room_of(path.with_suffix(".py"))
    return room_of(path / "__init__.py") if path.is_dir() else None


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_go_one_way(path):
    own = ROOMS.index(room_of(path))
    for name, _ in imports(parsed(path)):
        if name.split(".")[0] != "fieldmap":
            continue
        room = target_room(name)
        if room is not None:
            assert ROOMS.index(room) <= own, f"{path.name} imports {name}"


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_screens_stay_in_their_room(path):
    room, inside = room_of(path), path.relative_to(PACKAGE).parts
    for name, _ in imports(parsed(path)):
        top = name.split(".")[0]
        if top in {"matplotlib", "mpl_toolkits", "ipympl"}:
            assert room == "show", f"{path.name} imports {name}"
        if top == "ipywidgets":
            assert inside[:2] == ("show", "panels"), f"{path.name} imports {name}"


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_heavy_packages_are_imported_late(path):
    for name, at_once in imports(parsed(path)):
        if at_once:
            assert name.split(".")[0] not in LATE, f"{path.name} imports {name} as it loads"


def test_the_order_is_the_one_of_the_folders():
    folders = {p.name for p in PACKAGE.iterdir() if p.is_dir() and (p / "__init__.py").is_file()}
    assert folders == set(ROOMS) - {"ground", "shell"}


def loaded(code):
    """Top-level packages in memory after some code, in a fresh interpreter."""
    report = f"{code}; import sys; print(*{{name.split('.')[0] for name in sys.modules}})"
    done = subprocess.run(
        [sys.executable, "-c", report], capture_output=True, text=True, check=True
    )
    return set(done.stdout.split())


def test_import_stays_light():
    # xarray brings pandas with it, so xarray itself is imported late too
    heavy = LATE | {"xarray", "jupyterlab", "dask", "tqdm", "ipympl", "notebook"}
    assert not loaded("import fieldmap") & heavy


def test_the_command_line_stays_light():
    assert not loaded("import fieldmap.cli") & (LATE | {"xarray"})


def test_every_public_name_is_there():
    for name in fieldmap.__all__:
        assert getattr(fieldmap, name) is not None
    assert 10 <= len(fieldmap.__all__) <= 18
    assert len(set(fieldmap.__all__)) == len(fieldmap.__all__)


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_modules_are_small_and_say_what_they_are(path):
    text = path.read_text("utf-8")
    assert len(text.splitlines()) < 400
    assert not text or ast.get_docstring(parsed(path))
