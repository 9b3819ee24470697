"""map.nc: back to the last digit, whole or not at all, one sentence for every bad file."""

from __future__ import annotations

import contextlib
import subprocess
import sys
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray as xr

import fieldmap
from fieldmap.errors import FieldmapError, InputError
from fieldmap.estimate import map_lines, stitch, store
from fieldmap.estimate.store import load_map, save_map
from fieldmap.magnet import evaluate
from fieldmap.readings import Axis, Limit, PointReference
from tests.shop import RECT, measured, planned


@pytest.fixture(scope="module")
def campaign():
    passes = [
        *planned((-0.4, 0.4), (0.4, -0.35), x=0.0, rate=20.0),
        *planned((-0.35, 0.4), x=0.01, y=-0.005, probe=RECT, rate=20.0),
    ]
    point = PointReference(0.0, 0.5, 1e-5, 0.01, -0.005)
    limit = Limit("magnetic_length", 0.29, 0.31)
    axis = Axis("z", (-0.34, 0.34), (-0.05, 0.05))
    return measured(passes, [point], limits=[limit], axis=axis)


@pytest.fixture(scope="module")
def fmap(campaign):
    return stitch(campaign, knot_spacing=0.01)


@pytest.fixture
def saved(fmap, tmp_path):
    path = tmp_path / "map.nc"
    save_map(fmap, path)
    return path


def test_results_come_back_to_the_last_digit(campaign, fmap, saved):
    back = load_map(saved)
    expected = evaluate(fmap, campaign).as_dict()
    assert evaluate(back, campaign).as_dict() == expected
    assert evaluate(back).as_dict() == expected  # limits and axis are kept in the map


def test_every_array_and_attribute_comes_back(fmap, saved):
    back = load_map(saved)
    assert set(back.variables) == set(fmap.variables)
    for name in fmap.variables:
        assert back[name].dims == fmap[name].dims
        assert back[name].dtype == fmap[name].dtype
        np.testing.assert_array_equal(back[name], fmap[name], err_msg=name)
        assert back[name].attrs == fmap[name].attrs, name
    assert {k: v for k, v in back.attrs.items() if k != "history"} == fmap.attrs
    assert "fieldmap" in back.attrs["history"]


def test_the_map_given_is_left_as_it_was(fmap, saved):
    assert saved.is_file()
    assert "history" not in fmap.attrs


def test_saved_again_the_history_grows(saved, tmp_path):
    save_map(load_map(saved), tmp_path / "again.nc")
    assert len(load_map(tmp_path / "again.nc").attrs["history"].splitlines()) == 2


def test_the_file_is_closed_after_loading(saved):
    back = load_map(saved)
    saved.unlink()
    assert np.isfinite(float(back["B"].sel(x=0.0, y=0.0, z=0.0, method="nearest")))


def test_plain_xarray_reads_it(fmap, saved):
    with xr.open_dataset(saved) as opened:
        np.testing.assert_array_equal(opened["B"], fmap["B"])
        assert opened["B"].attrs["units"] == "T"


def damaged_files(whole):
    rng = np.random.default_rng(0)
    yield "empty", b""
    yield "truncated", whole[: len(whole) // 2]
    yield "only a signature", whole[:8]
    yield "text", b"time [s],position [mm]\n0,0\n"
    yield "noise", rng.bytes(4096)
    torn = bytearray(whole)
    for at in rng.integers(0, len(whole), 400):
        torn[at] ^= 0xFF
    yield "torn", bytes(torn)


@pytest.mark.parametrize(
    "kind", ["empty", "truncated", "only a signature", "text", "noise", "torn"]
)
def test_damaged_files_are_one_sentence(saved, tmp_path, kind):
    content = dict(damaged_files(saved.read_bytes()))[kind]
    path = tmp_path / "bad.nc"
    path.write_bytes(content)
    with pytest.raises(InputError) as caught:
        evaluate(load_map(path))
    text = str(caught.value)
    assert "bad.nc" in text
    assert "\n" not in text
    assert "Traceback" not in text


@pytest.mark.parametrize("seed", range(12))
def test_single_torn_bytes_are_noticed_or_harmless(saved, tmp_path, seed):
    # a number that changed unnoticed is beyond any reader; a crash is not
    rng = np.random.default_rng(seed)
    torn = bytearray(saved.read_bytes())
    torn[rng.integers(len(torn))] ^= 1 << int(rng.integers(8))
    path = tmp_path / "bad.nc"
    path.write_bytes(torn)
    with contextlib.suppress(FieldmapError):
        assert len(map_lines(load_map(path))) == 2


def test_foreign_files_are_one_sentence(tmp_path):
    foreign = tmp_path / "foreign.nc"
    xr.Dataset({"B": ("z", [1.0, 2.0])}).to_netcdf(foreign, engine="h5netcdf")
    with pytest.raises(InputError, match=r"foreign.nc: found format None, expected format"):
        load_map(foreign)


def test_a_file_that_only_claims_to_be_a_map(tmp_path):
    liar = tmp_path / "liar.nc"
    claims = xr.Dataset({"B": ("z", [1.0, 2.0])}, attrs={"format": "fieldmap-map/1"})
    claims.to_netcdf(liar, engine="h5netcdf")
    with pytest.raises(InputError):
        evaluate(load_map(liar))


def test_a_later_format_is_refused(fmap, tmp_path):
    later = tmp_path / "later.nc"
    fmap.assign_attrs(format="fieldmap-map/2").to_netcdf(later, engine="h5netcdf")
    with pytest.raises(InputError, match="fieldmap-map/2"):
        load_map(later)


def test_no_file_and_a_folder(tmp_path):
    with pytest.raises(InputError, match=r"nowhere.nc: found no such file"):
        load_map(tmp_path / "nowhere.nc")
    with pytest.raises(InputError):
        load_map(tmp_path)


def test_no_folder_to_write_to(fmap, tmp_path):
    with pytest.raises(InputError, match="cannot be written"):
        save_map(fmap, tmp_path / "nowhere" / "map.nc")


def test_an_existing_file_stays_whole_when_writing_fails(fmap, saved, monkeypatch):
    before = saved.read_bytes()

    def full(_, path, __):
        path.write_bytes(b"half a fi")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(store, "write_netcdf_file", full)
    with pytest.raises(InputError, match="No space left on device"):
        save_map(fmap, saved)
    assert saved.read_bytes() == before
    assert list(saved.parent.iterdir()) == [saved]


def test_an_existing_file_stays_whole_when_writing_is_interrupted(fmap, saved, monkeypatch):
    before = saved.read_bytes()

    def stopped(_, path, __):
        path.write_bytes(b"half a fi")
        raise KeyboardInterrupt

    monkeypatch.setattr(store, "write_netcdf_file", stopped)
    with pytest.raises(KeyboardInterrupt):
        save_map(fmap, saved)
    assert saved.read_bytes() == before
    assert list(saved.parent.iterdir()) == [saved]


def test_it_is_netcdf_4(saved):
    with h5py.File(saved) as opened:
        assert opened["B"].shape == (2, 2, 161)


def test_public_names():
    assert fieldmap.save_map is save_map
    assert fieldmap.load_map is load_map


def test_strict_cf_compliance(saved):
    pytest.importorskip("compliance_checker")
    command = ["compliance-checker", "-t", "cf:1.11", "-c", "strict", str(saved)]
    script = Path(sys.executable).parent / command[0]
    done = subprocess.run([script, *command[1:]], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
