"""What a reduction leaves behind: both files or neither."""

from __future__ import annotations

import json

import pytest
import xarray as xr

from fieldmap.errors import InputError
from fieldmap.estimate import stitch
from fieldmap.estimate.store import load_map
from fieldmap.magnet import evaluate
from fieldmap.magnet import reduction as reduction_module
from fieldmap.magnet.reduction import save_reduction
from tests.shop import measured, planned


@pytest.fixture(scope="module")
def reduced():
    campaign = measured(planned((-0.4, 0.4), rate=20.0))
    fmap = stitch(campaign, knot_spacing=0.01)
    return fmap, evaluate(fmap, campaign)


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_both_files(reduced, tmp_path):
    fmap, results = reduced
    files = save_reduction(fmap, results, tmp_path / "new" / "folder")
    assert names(tmp_path / "new" / "folder") == ["map.nc", "results.json"]
    assert [path.name for path in files] == ["map.nc", "results.json"]
    assert json.loads(files[1].read_text("utf-8")) == results.as_dict()
    assert evaluate(load_map(files[0])) == results


@pytest.mark.parametrize("broken", ["write_map", "write_results"])
def test_neither_file_where_one_fails(reduced, tmp_path, monkeypatch, broken):
    save_reduction(*reduced, tmp_path)
    before = {path.name: path.read_bytes() for path in tmp_path.iterdir()}

    def full(_, path):
        path.write_bytes(b"half")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(reduction_module, broken, full)
    with pytest.raises(InputError, match="No space left on device"):
        save_reduction(*reduced, tmp_path)
    assert {path.name: path.read_bytes() for path in tmp_path.iterdir()} == before


def test_a_failure_leaves_an_empty_folder_empty(reduced, tmp_path, monkeypatch):
    def stopped(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr(xr.Dataset, "to_netcdf", stopped)
    with pytest.raises(KeyboardInterrupt):
        save_reduction(*reduced, tmp_path)
    assert names(tmp_path) == []


def test_a_file_in_the_place_of_the_folder(reduced, tmp_path):
    (tmp_path / "out").write_bytes(b"")
    with pytest.raises(InputError, match="found a file, expected a folder"):
        save_reduction(*reduced, tmp_path / "out")
