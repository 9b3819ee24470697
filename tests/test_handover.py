"""What a reduction leaves behind: all files or none, and all of them tell the same."""

from __future__ import annotations

import hashlib
import json
from dataclasses import replace

import pytest
import xarray as xr

from fieldmap.errors import InputError
from fieldmap.estimate import stitch
from fieldmap.estimate.map import map_axis
from fieldmap.estimate.store import load_map
from fieldmap.magnet import evaluate
from fieldmap.show import handover
from fieldmap.show.handover import save_reduction
from fieldmap.show.report import page as report_module
from fieldmap.show.report.page import report_html
from tests.shop import measured, planned


@pytest.fixture(scope="module")
def reduced():
    campaign = measured(planned((-0.4, 0.4), rate=20.0))
    fmap = stitch(campaign, knot_spacing=0.01)
    return fmap, evaluate(fmap, campaign)


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_all_files(reduced, tmp_path):
    fmap, results = reduced
    files = save_reduction(fmap, results, tmp_path / "new" / "folder")
    assert names(tmp_path / "new" / "folder") == ["map.nc", "report.html", "results.json"]
    assert [path.name for path in files] == ["map.nc", "results.json", "report.html"]
    assert json.loads(files[1].read_text("utf-8")) == results.as_dict()
    loaded = load_map(files[0])
    assert evaluate(loaded).as_dict() == results.as_dict()
    assert files[2].read_text("utf-8") == report_html(loaded)


@pytest.mark.parametrize("broken", ["write_map", "write_results", "write_report"])
def test_no_file_where_one_fails(reduced, tmp_path, monkeypatch, broken):
    save_reduction(*reduced, tmp_path)
    before = {path.name: path.read_bytes() for path in tmp_path.iterdir()}

    def full(_, path):
        path.write_bytes(b"half")
        raise OSError(28, "No space left on device")

    owner = report_module if broken == "write_report" else handover
    monkeypatch.setattr(owner, broken, full)
    with pytest.raises(InputError, match="No space left on device"):
        save_reduction(*reduced, tmp_path)
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == before


def test_a_failure_leaves_an_empty_folder_empty(reduced, tmp_path, monkeypatch):
    def stopped(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(xr.Dataset, "dump_to_store", stopped)
    with pytest.raises(KeyboardInterrupt):
        save_reduction(*reduced, tmp_path)
    assert names(tmp_path) == []


def test_a_file_in_the_place_of_the_folder(reduced, tmp_path):
    (tmp_path / "out").write_bytes(b"")
    with pytest.raises(InputError, match="found a file, expected a folder"):
        save_reduction(*reduced, tmp_path / "out")


def test_results_of_other_limits_are_refused(reduced, tmp_path):
    fmap, results = reduced
    other = evaluate(fmap, axis=replace(map_axis(fmap), integrate=(-0.3, 0.3)))
    with pytest.raises(InputError, match="others than the map gives"):
        save_reduction(fmap, other, tmp_path / "out")
    assert not (tmp_path / "out").exists()
    with pytest.raises(InputError, match="others than the map gives"):
        save_reduction(fmap, replace(results, campaign="another"), tmp_path / "out")


def test_another_coverage_factor(reduced, tmp_path):
    fmap, _ = reduced
    files = save_reduction(fmap, evaluate(fmap, k=3.0), tmp_path, k=3.0)
    assert "k = 3 (about 99.7 % coverage)" in files[2].read_text("utf-8")


def test_a_pass_table_is_never_replaced(tmp_path):
    campaign = measured(planned((-0.4, 0.4), rate=20.0))
    table = tmp_path / "map.nc"
    table.write_bytes(b"a pass table that happens to bear this name")
    own = hashlib.sha256(table.read_bytes()).hexdigest()
    passes = tuple(replace(one, sha256=own) for one in campaign.passes)
    fmap = stitch(replace(campaign, passes=passes), knot_spacing=0.01)
    with pytest.raises(InputError, match="one of the pass tables"):
        save_reduction(fmap, evaluate(fmap), tmp_path)
    assert names(tmp_path) == ["map.nc"]
    assert hashlib.sha256(table.read_bytes()).hexdigest() == own
