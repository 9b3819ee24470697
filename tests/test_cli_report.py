"""The verb report: from the map alone, the same as the reduction left."""

import shutil

import pytest

import fieldmap
from fieldmap.cli import main
from fieldmap.shipped import demo_folder


@pytest.fixture(scope="module")
def reduced(tmp_path_factory):
    """A folder that a reduction left; its readings are gone."""
    root = tmp_path_factory.mktemp("reduced")
    shutil.copytree(demo_folder() / "slot", root / "slot")
    assert main(["reduce", str(root / "slot"), "--out", str(root / "out")]) == 0
    shutil.rmtree(root / "slot")
    return root / "out"


def refused(capsys, *arguments):
    """The one sentence of a refused command."""
    assert main(arguments) == 2
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err.count("\n") == 1
    return said.err


def test_reduce_leaves_a_report(reduced):
    assert sorted(file.name for file in reduced.iterdir()) == [
        "map.nc",
        "report.html",
        "results.json",
    ]


@pytest.mark.parametrize("name", ["map.nc", "."])
def test_the_report_again_without_the_readings(reduced, tmp_path, capsys, name):
    out = tmp_path / "again" / "here"
    assert main(["report", str(reduced / name), "--out", str(out)]) == 0
    assert capsys.readouterr().out == f"Written: {out / 'report.html'}\n"
    assert [file.name for file in out.iterdir()] == ["report.html"]
    assert (out / "report.html").read_bytes() == (reduced / "report.html").read_bytes()


def test_what_is_no_map_is_refused(reduced, tmp_path, capsys):
    out = tmp_path / "out"
    assert "no such file" in refused(capsys, "report", str(tmp_path), "--out", str(out))
    assert "cannot be read as a map" in refused(
        capsys, "report", str(reduced / "results.json"), "--out", str(out)
    )
    assert not out.exists()


def test_a_file_in_place_of_the_folder_is_left_alone(reduced, tmp_path, capsys):
    taken = tmp_path / "taken"
    taken.write_text("mine", encoding="utf-8")
    said = refused(capsys, "report", str(reduced), "--out", str(taken))
    assert "expected a folder" in said
    assert taken.read_text(encoding="utf-8") == "mine"


def test_a_folder_named_like_a_page_is_a_folder(reduced, tmp_path):
    assert main(["report", str(reduced), "--out", str(tmp_path / "b3.html")]) == 0
    assert (tmp_path / "b3.html" / "report.html").is_file()


def test_the_face_writes_all_three(reduced, tmp_path):
    fmap = fieldmap.load_map(reduced / "map.nc")
    files = fieldmap.save_reduction(fmap, fieldmap.evaluate(fmap), tmp_path)
    assert [file.name for file in files] == ["map.nc", "results.json", "report.html"]
    assert files[2].read_bytes() == (reduced / "report.html").read_bytes()
    assert files[1].read_bytes() == (reduced / "results.json").read_bytes()
