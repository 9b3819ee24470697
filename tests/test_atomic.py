"""Files written whole or not at all."""

from __future__ import annotations

import json
import stat

import pytest

from fieldmap.atomic import output_folder, replacing
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
        assert aside.parent == path.parent
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
    with pytest.raises(InputError, match="cannot be written"):
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
