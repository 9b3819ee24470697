"""`fieldmap export` as a user meets it."""

import numpy as np
import pytest

import fieldmap
from fieldmap.cli import main
from fieldmap.magnet.comparison.design_profile import read_design
from tests.pairs import plain_map
from tests.test_cli import refused


@pytest.fixture
def saved(tmp_path):
    path = tmp_path / "map.nc"
    fieldmap.save_map(plain_map(), path)
    return path


def test_it_writes_and_says_what(saved, tmp_path, capsys):
    out = tmp_path / "field.csv"
    arguments = ["--step", "1 mm", "--from", "-300 mm", "--to", "300 mm", "--line", "0"]
    assert main(["export", str(saved), "--out", str(out), *arguments]) == 0
    said = capsys.readouterr().out
    assert "601 points every 1 mm, from -300 to 300 mm" in said
    assert "Integral by trapezoids over the table 0.1" in said
    assert "expected from the step" in said
    assert str(out) in said
    assert read_design(out).line.low == pytest.approx(-0.3)


def test_positions_without_a_blank_and_open_ends(saved, tmp_path, capsys):
    out = tmp_path / "field.nc"
    assert main(["export", str(saved), "--out", str(out), "--from", "-100mm"]) == 0
    assert "from -100 to 400 mm" in capsys.readouterr().out
    assert main(["export", str(saved), "--out", str(out), "--to=-.1m"]) == 0
    assert "from -400 to -100 mm" in capsys.readouterr().out


def test_a_folder_stands_for_its_map(saved, tmp_path):
    assert main(["export", str(saved.parent), "--out", str(tmp_path / "field.csv")]) == 0


def test_off_axis_with_one_limit(saved, tmp_path, capsys):
    out = tmp_path / "field.csv"
    arguments = ["--off-axis", "5 mm", "--from", "-100 mm", "--step", "1 mm"]
    assert main(["export", str(saved), "--out", str(out), *arguments]) == 0
    assert "from -100 to 391 mm" in capsys.readouterr().out


def test_off_axis(saved, tmp_path, capsys):
    out = tmp_path / "field.csv"
    assert main(["export", str(saved), "--out", str(out), "--off-axis", "-5mm"]) == 0
    assert "By and Bz at y = -5 mm" in capsys.readouterr().out
    header = next(row for row in out.read_text("utf-8").splitlines() if row[0] != "#")
    assert "off_axis_transverse [T]" in header


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--step", "1"], "--step: found '1' without a unit"),
        (["--step", "1 T"], "--step"),
        (["--from", "-2 m"], "mapped range -400 to 400 mm"),
        (["--step", "1 nm"], "at most 5000000 rows"),
        (["--off-axis", "2 cm"], "a quarter of the gap"),
        (["--line", "7"], "line: found 7"),
    ],
)
def test_what_is_refused_is_one_sentence(saved, tmp_path, capsys, arguments, words):
    out = tmp_path / "field.csv"
    assert words in refused(capsys, "export", str(saved), "--out", str(out), *arguments)
    assert not out.exists()


def test_bad_maps_and_names(saved, tmp_path, capsys):
    out = tmp_path / "field.csv"
    assert "no such file" in refused(capsys, "export", str(tmp_path / "no.nc"), "--out", str(out))
    noise = tmp_path / "noise.nc"
    noise.write_bytes(np.random.default_rng(0).bytes(500))
    assert "noise.nc" in refused(capsys, "export", str(noise), "--out", str(out))
    assert "suffix" in refused(capsys, "export", str(saved), "--out", str(tmp_path / "a.dat"))
    before = saved.read_bytes()
    assert "the map itself" in refused(capsys, "export", str(saved), "--out", str(saved))
    assert saved.read_bytes() == before
