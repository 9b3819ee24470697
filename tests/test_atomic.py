"""Files written whole or not at all."""

from __future__ import annotations

import ast
import contextlib
import json
import stat
from pathlib import Path

import pytest

import fieldmap
from fieldmap.atomic import is_folder, new_folder, output_folder, replacing, replacing_set
from fieldmap.errors import InputError
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.results import LineResults, Results
from fieldmap.magnet.results_file import save_results

RESULTS = Results(
    campaign="höhe",
    sha256="beef",
    lines=(LineResults(0.0, 0.0, {"central_field": Quantity(0.5, 1e-5, "T")}),),
)


def write(path, content):
    with replacing(path) as aside:
        aside.write_bytes(content)


def names(folder):
    return [path.name for path in folder.iterdir()]


def test_a_new_file_and_a_replaced_one(tmp_path):
    path = tmp_path / "file"
    write(path, b"one")
    assert path.read_bytes() == b"one"
    write(path, b"two")
    assert path.read_bytes() == b"two"
    assert names(tmp_path) == ["file"]


def test_nothing_appears_before_all_is_written(tmp_path):
    path = tmp_path / "file"
    with replacing(path) as aside:
        aside.write_bytes(b"half")
        assert not path.exists()
        assert aside.parent.parent == path.parent
    assert path.read_bytes() == b"half"


@pytest.mark.parametrize("error", [OSError(28, "No space left on device"), ValueError("no")])
def test_a_failure_leaves_the_old_file_and_no_litter(tmp_path, error):
    path = tmp_path / "file"
    path.write_bytes(b"old")
    expected = InputError if isinstance(error, OSError) else ValueError

    def write_half():
        with replacing(path) as aside:
            aside.write_bytes(b"half")
            raise error

    with pytest.raises(expected) as caught:
        write_half()
    assert path.read_bytes() == b"old"
    assert names(tmp_path) == ["file"]
    if expected is InputError:
        assert "No space left on device" in str(caught.value)
        assert "nothing was replaced" in str(caught.value)


def test_the_usual_permissions(tmp_path):
    path, plain = tmp_path / "file", tmp_path / "plain"
    write(path, b"")
    plain.write_bytes(b"")
    assert stat.S_IMODE(path.stat().st_mode) == stat.S_IMODE(plain.stat().st_mode)


def test_no_such_folder(tmp_path):
    with pytest.raises(InputError, match="cannot be written"):
        write(tmp_path / "nowhere" / "file", b"")


def test_a_folder_in_the_place_of_the_file(tmp_path):
    folder = tmp_path / "folder"
    folder.mkdir()
    with pytest.raises(InputError, match="found a folder, expected a file or nothing"):
        write(folder, b"")
    assert names(tmp_path) == ["folder"]


def test_output_folder_is_made(tmp_path):
    assert output_folder(tmp_path / "a" / "b").is_dir()
    assert output_folder(str(tmp_path / "a" / "b")).is_dir()


def test_a_file_in_the_place_of_the_folder(tmp_path):
    (tmp_path / "a").write_bytes(b"")
    with pytest.raises(InputError, match="found a file, expected a folder"):
        output_folder(tmp_path / "a")
    with pytest.raises(InputError):
        output_folder(tmp_path / "a" / "b")
    with pytest.raises(InputError, match="a name that no folder can have"):
        output_folder(tmp_path / "zero\0byte")


def test_results_file(tmp_path):
    path = tmp_path / "results.json"
    save_results(RESULTS, path)
    text = path.read_text("utf-8")
    assert text.endswith("}\n")
    assert json.loads(text) == RESULTS.as_dict()
    assert "höhe" in text


def test_no_number_that_is_none_reaches_a_file(tmp_path):
    path = tmp_path / "results.json"
    save_results(RESULTS, path)
    before = path.read_bytes()
    nan = LineResults(0.0, 0.0, {"central_field": Quantity(float("nan"), 1e-5, "T")})
    with pytest.raises(ValueError, match="JSON"):
        save_results(Results("x", "", (nan,)), path)
    assert path.read_bytes() == before


# Where files are written, each time to a name that `replacing` or `replacing_set` gave.
PLACES = {
    "atomic.py: open",  # to sync
    "bench/writing.py: write_bytes",
    "cli.py: write_bytes",
    "estimate/netcdf.py: write_bytes",
    "magnet/handover/write_table.py: open",
    "magnet/results_file.py: write_text",
    "readings/table_section.py: write_bytes",
    "show/panels/settings.py: write_text",
    "show/report/page.py: write_text",
}
WRITES = {"write_text", "write_bytes", "touch", "savefig", "to_netcdf", "to_csv", "to_parquet"}
WRITES |= {"copy", "copy2", "copyfile", "copytree", "move", "symlink_to", "hardlink_to", "tofile"}
MODULES = {"shutil", "Path", "os", "np"}  # of calls whose name alone says little


def writes(tree):
    """Names of the calls in a module that write files."""
    for node in ast.walk(tree):
        if not isinstance(node, ast.Call):
            continue
        name = getattr(node.func, "attr", getattr(node.func, "id", ""))
        owner = getattr(getattr(node.func, "value", None), "id", "")
        if name == "open":
            mode = [a.value for a in node.args if isinstance(a, ast.Constant)]
            mode += [k.value.value for k in node.keywords if k.arg == "mode"]
            if any(isinstance(m, str) and set(m) & set("wax+") and len(m) < 4 for m in mode):
                yield name
        elif name in WRITES and (name not in {"copy", "move"} or owner in MODULES):
            yield name


def test_every_place_that_writes_is_known():
    package = Path(fieldmap.__file__).parent
    found = {
        f"{file.relative_to(package).as_posix()}: {name}"
        for file in package.rglob("*.py")
        for name in writes(ast.parse(file.read_text("utf-8")))
    }
    assert found == PLACES


def test_two_files_take_their_places_together(tmp_path):
    for content in (b"one", b"two"):
        with replacing_set(tmp_path, ["a", "b"]) as (a, b):
            a.write_bytes(content)
            b.write_bytes(content)
        assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes() == content
    assert sorted(names(tmp_path)) == ["a", "b"]


def write_one_of_two(folder):
    with replacing_set(folder, ["a", "b"]) as (a, _):
        a.write_bytes(b"new")


def test_a_set_with_a_file_that_was_not_written_changes_nothing(tmp_path):
    (tmp_path / "a").write_bytes(b"old")
    with pytest.raises(InputError, match="cannot be written"):
        write_one_of_two(tmp_path)
    assert (tmp_path / "a").read_bytes() == b"old"
    assert names(tmp_path) == ["a"]


def test_a_new_folder_goes_again_where_writing_fails(tmp_path):
    (tmp_path / "there").mkdir()
    with pytest.raises(ValueError, match="no"), new_folder(tmp_path / "there" / "a" / "b"):
        raise ValueError("no")
    assert names(tmp_path) == ["there"]
    assert names(tmp_path / "there") == []


def test_a_new_folder_that_somebody_else_uses_stays(tmp_path):
    folder = tmp_path / "a" / "b"
    with contextlib.suppress(ValueError), new_folder(folder):
        (folder / "file").write_bytes(b"of somebody else")
        raise ValueError
    assert names(folder) == ["file"]


def test_a_link_is_not_written_through(tmp_path):
    (tmp_path / "far").write_bytes(b"far")
    (tmp_path / "file").symlink_to(tmp_path / "far")
    with pytest.raises(InputError, match="found a link"):
        write(tmp_path / "file", b"new")
    assert (tmp_path / "far").read_bytes() == b"far"
    assert (tmp_path / "file").is_symlink()


def test_a_name_too_long_is_no_folder(tmp_path):
    assert is_folder(tmp_path)
    assert not is_folder(tmp_path / ("x" * 300))
    assert not is_folder("a\0b")
