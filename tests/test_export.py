"""Hand-over tables: what stands in them, and what is refused."""

import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from fieldmap.bench.sources import Solenoid
from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate import stitch
from fieldmap.magnet.comparison.design_profile import read_design
from fieldmap.magnet.handover import export
from fieldmap.magnet.handover.export import export_table
from fieldmap.magnet.sampling import chosen_line
from fieldmap.readings.layout import TableLayout
from fieldmap.readings.text_table import open_text
from tests.pairs import plain_map
from tests.shop import MAGNET, measured, out_and_back


@pytest.fixture(scope="module")
def fmap():
    return plain_map()


def columns(path):
    """The columns of a text table, read by the reader of pass tables."""
    table = open_text(path.read_bytes(), path.name, TableLayout())
    values = table.read(range(len(table.headings)))
    return {heading.text: values[i] for i, heading in enumerate(table.headings)}


def comments(path):
    lines = path.read_text(encoding="utf-8").splitlines()
    count = next(i for i, line in enumerate(lines) if not line.startswith("#"))
    assert not any("#" in line for line in lines[count:])
    return lines[:count]


def test_left_alone_it_is_the_grid_of_the_map(fmap, tmp_path):
    path = tmp_path / "field.csv"
    table = export_table(fmap, path)
    read = columns(path)
    assert list(read) == ["position [m]", "field [T]", "u_field [T]"]
    own = fmap.isel(x=0, y=0)
    assert table.rows == own.sizes["z"]
    np.testing.assert_allclose(read["position [m]"], own["z"], rtol=0, atol=1e-15)
    assert np.abs(read["field [T]"] - own["B"].values).max() < 1e-3 * own["B_se"].values.min()
    np.testing.assert_allclose(read["u_field [T]"], own["B_se"], rtol=1e-4)


def test_positions_are_plain_multiples_and_the_ends_are_exact(fmap, tmp_path):
    path = tmp_path / "field.csv"
    export_table(fmap, path, step=0.003, limits=(-0.1005, 0.25))
    texts = [row.split(",")[0] for row in path.read_text("utf-8").splitlines() if row[0] in "-0"]
    assert texts[:3] == ["-0.1005", "-0.0990", "-0.0960"]
    assert texts[-2:] == ["0.2490", "0.2500"]
    assert "0.0000" in texts
    assert "-0.0000" not in texts
    export_table(fmap, path, step=0.01, limits=(-0.1, 0.1))
    assert columns(path)["position [m]"].tolist() == [round(k * 0.01, 2) for k in range(-10, 11)]


def test_the_statement_on_the_integral_holds(fmap, tmp_path):
    path = tmp_path / "field.csv"
    table = export_table(fmap, path, step=0.003, limits=(-0.2005, 0.25))
    read = columns(path)
    mine = np.trapezoid(read["field [T]"], read["position [m]"])
    exact, u = chosen_line(fmap, 0).integral(-0.2005, 0.25)
    found = table.integral
    assert found.table == pytest.approx(mine, abs=1e-15)
    assert (found.exact, found.u) == (exact, u)
    assert any(found.words() in line for line in comments(path))
    assert f"difference {mine - exact:+.1e} T m" in found.words()


@pytest.mark.parametrize("step", [0.0005, 0.002, 0.006, 0.01])
def test_the_step_explains_the_difference(fmap, tmp_path, step):
    # limits in the fringes, where the slope differs most between the ends
    table = export_table(fmap, tmp_path / "field.nc", step=step, limits=(-0.151, 0.0))
    found = table.integral
    assert found.rounding == 0
    assert abs(found.expected) > 1e-10
    assert found.difference == pytest.approx(found.expected, rel=0.2)


def test_rounding_is_bounded(fmap, tmp_path):
    rounded = export_table(fmap, tmp_path / "field.csv", step=0.001)
    kept = export_table(fmap, tmp_path / "field.nc", step=0.001)
    away = abs(rounded.integral.table - kept.integral.table)
    assert 0 < away <= rounded.integral.rounding
    assert rounded.integral.rounding < 1e-3 * rounded.integral.u


def test_comments_come_first_and_say_what_it_is(fmap, tmp_path):
    path = tmp_path / "field.csv"
    export_table(fmap, path, step=0.01)
    told = "\n".join(comments(path))
    assert told.startswith("# Field map: shop\n# Component By along z")
    assert "# 81 points every 10 mm, from -400 to 400 mm" in told


@pytest.mark.parametrize(
    "name", ["=1+1", "+cmd|' /C calc'!A0", "-2", "@SUM(A1)", "a\n=b\r=c\x0b=d"]
)
def test_names_from_files_are_no_formulas(fmap, tmp_path, name):
    bad = fmap.copy()
    bad.attrs["campaign"] = bad.attrs["campaign"].replace('"shop"', __import__("json").dumps(name))
    path = tmp_path / "field.csv"
    table = export_table(bad, path, step=0.01)
    text = path.read_bytes().decode()
    assert text.splitlines() == text.split("\n")[:-1]
    numbers = [line for line in text.splitlines() if not line.startswith("# ")]
    assert numbers[0].startswith("position [m],")
    assert len(numbers) == table.rows + 1


def test_netcdf_holds_everything_to_the_last_digit(fmap, tmp_path):
    path = tmp_path / "field.nc"
    table = export_table(fmap, path, step=0.004, off_axis=0.01)
    with xr.open_dataset(path) as read:
        np.testing.assert_array_equal(read["z"], table.s)
        np.testing.assert_array_equal(read["B"], table.field)
        np.testing.assert_array_equal(read["B_se"], table.u)
        np.testing.assert_array_equal(read["off_axis_field"], table.off_axis.mapped.value)
        np.testing.assert_array_equal(read["off_axis_transverse_se"], table.off_axis.other.u)
        assert read["B"].attrs["units"] == "T"
        assert read["B"].attrs["ancillary_variables"] == "B_se"
        assert read["z"].attrs["units"] == "m"
        assert table.integral.words() in read.attrs["comment"]
        assert read.attrs["integral_of_map"] == table.integral.exact
        assert read.attrs["Conventions"] == "CF-1.11"


@pytest.mark.parametrize("off_axis", [None, 0.01])
def test_strict_cf_compliance(fmap, tmp_path, off_axis):
    pytest.importorskip("compliance_checker")
    path = tmp_path / "field.nc"
    export_table(fmap, path, off_axis=off_axis)
    script = Path(sys.executable).parent / "compliance-checker"
    command = [script, "-t", "cf:1.11", "-c", "strict", str(path)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr


@pytest.mark.parametrize("suffix", [".csv", ".nc"])
def test_a_table_comes_back_as_a_profile(fmap, tmp_path, suffix):
    path = tmp_path / f"field{suffix}"
    export_table(fmap, path, step=0.002)
    line, s = chosen_line(fmap, 0), np.linspace(-0.35, 0.35, 71)
    back = read_design(path).line
    # both splines have other knots; far below the uncertainty they agree
    assert np.abs(back.field(s) - line.field(s)).max() < 0.05 * line.u_field(s).max()


def test_off_axis_columns(fmap, tmp_path):
    path = tmp_path / "field.csv"
    table = export_table(fmap, path, step=0.002, off_axis=0.01)
    read = columns(path)
    assert list(read)[3:] == [
        "off_axis_field [T]",
        "u_off_axis_field [T]",
        "next_term_off_axis_field [T]",
        "off_axis_transverse [T]",
        "u_off_axis_transverse [T]",
        "next_term_off_axis_transverse [T]",
    ]
    beside = table.off_axis
    for name, one in (("field", beside.mapped), ("transverse", beside.other)):
        assert np.abs(read[f"off_axis_{name} [T]"] - one.value).max() < 1e-3 * one.u.min()
    assert any("By and Bz at y = 10 mm" in line for line in comments(path))
    assert read["position [m]"][0] > -0.4  # not up to the ends of the map


@pytest.mark.slow
def test_off_axis_uncertainties_are_true():
    coil = Solenoid(0.05, 0.2, 500, 10.0)
    magnet = replace(MAGNET, kind="solenoid", component="Bz", gap=0.1, iron_length=None)
    s, r = np.linspace(-0.3, 0.3, 31), 0.01
    from fieldmap.bench.sources import loop_field
    from fieldmap.estimate.map import map_axis, map_magnet
    from fieldmap.magnet.handover.expansion import off_axis

    places = (np.arange(800) + 0.5) / 800 * 0.2 - 0.1
    radial, axial = (b.sum(axis=1) for b in loop_field(0.05, 5000 / 800, r, s[:, None] - places))
    errors = []
    for seed in range(20):
        campaign = measured(out_and_back(rate=20.0), seed=seed, source=coil, magnet=magnet)
        fmap = stitch(campaign, knot_spacing=0.006)
        line = chosen_line(fmap, 0)
        found = off_axis(line, map_magnet(fmap), map_axis(fmap), s, r)
        left = np.hypot(found.mapped.u, found.mapped.next_term)
        across = np.hypot(found.other.u, found.other.next_term)
        errors.append([(found.mapped.value - axial) / left, (found.other.value - radial) / across])
    rms = np.sqrt(np.mean(np.square(errors), axis=(0, 2)))
    assert np.all((rms > 0.3) & (rms < 1.2)), rms


BAD = [
    ({"path": "field.xls"}, r"found the suffix '.xls', expected one of .csv and .nc"),
    ({"path": "field"}, "found the suffix ''"),
    ({"step": 0.0}, "step above zero"),
    ({"step": -0.001}, "step above zero"),
    ({"step": np.nan}, "step above zero"),
    ({"step": 0.9}, "up to the length of the table, 800 mm"),
    ({"step": 1e-9}, r"8e\+08 rows, expected at most 5000000 rows"),
    ({"step": 0.1, "limits": (0.0, 0.05)}, "up to the length of the table, 50 mm"),
    ({"limits": (-0.5, 0.1)}, "within the mapped range -400 to 400 mm"),
    ({"limits": (0.1, -0.1)}, "lower end first"),
    ({"limits": (np.nan, 0.1)}, "lower end first"),
    ({"line": 2}, "line: found 2, expected 0"),
    ({"path": "nowhere/field.csv"}, "cannot be written"),
]


@pytest.mark.parametrize(("options", "words"), BAD)
def test_what_does_not_fit_is_one_sentence(fmap, tmp_path, options, words):
    options = dict(options)
    with pytest.raises(InputError, match=words) as caught:
        export_table(fmap, tmp_path / options.pop("path", "field.csv"), **options)
    assert "\n" not in str(caught.value)
    assert list(tmp_path.iterdir()) == []


def test_what_cannot_be_expanded_is_not_written(fmap, tmp_path):
    with pytest.raises(RefusedError):
        export_table(fmap, tmp_path / "field.csv", off_axis=0.02)
    with pytest.raises(RefusedError):
        export_table(fmap, tmp_path / "field.csv", off_axis=0.01, limits=(-0.4, 0.4))
    assert list(tmp_path.iterdir()) == []


def test_an_existing_file_stays_whole_when_writing_fails(fmap, tmp_path, monkeypatch):
    path = tmp_path / "field.csv"
    path.write_text("mine", encoding="utf-8")

    def full(_, aside):
        aside.write_text("half", encoding="utf-8")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(export, "write_csv", full)
    with pytest.raises(InputError, match="No space left on device"):
        export_table(fmap, path)
    assert path.read_text(encoding="utf-8") == "mine"
    assert list(tmp_path.iterdir()) == [path]
