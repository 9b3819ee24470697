"""The command line as a user meets it: what it prints, what it writes, how it ends."""

import json
import shutil

import pytest

import fieldmap
from fieldmap.cli import main
from fieldmap.shipped import demo_folder


@pytest.fixture
def campaign(tmp_path):
    folder = tmp_path / "slot"
    shutil.copytree(demo_folder() / "slot", folder)
    return folder


def refused(capsys, *arguments):
    """The one sentence of a refused command."""
    assert main(arguments) == 2
    said = capsys.readouterr()
    assert said.out == ""
    assert said.err.count("\n") == 1
    assert "Traceback" not in said.err
    return said.err


def test_reduce_prints_and_writes_the_same_results(campaign, tmp_path, capsys):
    out = tmp_path / "out"
    assert main(["reduce", str(campaign / "campaign.toml"), "--out", str(out)]) == 0
    said = capsys.readouterr().out
    assert "Magnetic length" in said
    assert "pacemakers" in said
    assert sorted(file.name for file in out.iterdir()) == ["map.nc", "report.html", "results.json"]
    written = json.loads((out / "results.json").read_text(encoding="utf-8"))
    assert written["format"] == "fieldmap-results/1"
    assert written == fieldmap.evaluate(fieldmap.load_map(out / "map.nc")).as_dict()
    length = written["lines"][0]["results"]["magnetic_length"]
    assert f"{length['value'] * 1e3:.3f}" in said


def test_a_verdict_against_the_magnet_is_a_result(campaign, tmp_path, capsys):
    with (campaign / "campaign.toml").open("a", encoding="utf-8") as file:
        file.write(
            '\n[[limits]]\nresult = "magnetic_length"\nnominal = "9 mm"\ntolerance = "1 um"\n'
        )
    assert main(["reduce", str(campaign), "--out", str(tmp_path / "out")]) == 0
    assert "REJECT" in capsys.readouterr().out


def test_what_is_refused_is_one_sentence_and_leaves_nothing(campaign, tmp_path, capsys):
    out = tmp_path / "out"
    assert "no such file" in refused(capsys, "reduce", str(tmp_path / "no"), "--out", str(out))
    text = (campaign / "campaign.toml").read_text(encoding="utf-8")
    wide = text.replace('"-20 mm", "20 mm"', '"-900 mm", "900 mm"')
    assert wide != text
    (campaign / "campaign.toml").write_text(wide, encoding="utf-8")
    said = refused(capsys, "reduce", str(campaign), "--out", str(out))
    assert "[axis] integrate" in said
    assert "-900 to 900 mm" in said
    assert not out.exists()


def test_a_file_in_place_of_the_folder_is_left_alone(campaign, tmp_path, capsys):
    taken = tmp_path / "taken"
    taken.write_text("mine", encoding="utf-8")
    assert "expected a folder" in refused(capsys, "reduce", str(campaign), "--out", str(taken))
    assert taken.read_text(encoding="utf-8") == "mine"


def test_a_fault_of_the_kit_is_one_sentence(campaign, tmp_path, capsys, monkeypatch):
    monkeypatch.setattr(fieldmap, "stitch", lambda *_, **__: 1 / 0)
    said = refused(capsys, "reduce", str(campaign), "--out", str(tmp_path / "out"))
    assert "ZeroDivisionError" in said
    assert not (tmp_path / "out").exists()


def test_unknown_arguments_and_the_version(capsys):
    for wrong in (["reduce", "x", "--out", "y", "--bogus"], ["undo"], []):
        with pytest.raises(SystemExit) as ended:
            main(wrong)
        assert ended.value.code == 2
    with pytest.raises(SystemExit) as ended:
        main(["--version"])
    assert ended.value.code == 0
    assert fieldmap.__version__ in capsys.readouterr().out


def test_demo_shows_the_truth_and_keeps_what_was_edited(tmp_path, capsys):
    folder = tmp_path / "demo"
    mine = folder / "notebooks" / "map_fringe_field.ipynb"
    mine.parent.mkdir(parents=True)
    mine.write_text("edited", encoding="utf-8")
    assert main(["demo", str(folder)]) == 0
    assert "truth" in capsys.readouterr().out
    assert mine.read_text(encoding="utf-8") == "edited"
    assert (folder / "notebooks" / "check_magnetic_length.ipynb").is_file()
    assert (folder / "demo_data" / "gap_dipole" / "reduced" / "map.nc").is_file()
