"""Profiles that are no maps: what is read, and what is refused in one sentence."""

import numpy as np
import pytest
import xarray as xr

from fieldmap.bench.sources import TanhMagnet
from fieldmap.errors import InputError
from fieldmap.magnet.comparison import design_profile as module
from fieldmap.magnet.comparison.design_profile import design_profile, read_design

MAGNET = TanhMagnet(0.5, length=0.3, lam=0.02)
S = np.arange(-200, 201) * 2e-3


def write(tmp_path, text, name="design.csv"):
    path = tmp_path / name
    path.write_text(text, encoding="utf-8")
    return path


def rows(*columns):
    return "".join(
        ",".join(f"{value:.12g}" for value in row) + "\n" for row in zip(*columns, strict=True)
    )


def test_it_goes_through_the_points_and_between_them():
    found = design_profile(S, MAGNET.field(S))
    np.testing.assert_allclose(found.line.field(S), MAGNET.field(S), atol=1e-13)
    fine = np.linspace(-0.4, 0.4, 5001)
    off = np.abs(found.line.field(fine) - MAGNET.field(fine)).max()
    assert off < 3e-6
    assert off / 4 < found.between_points < 4 * off
    assert found.spacing == pytest.approx(2e-3)
    assert found.line.integral(-0.4, 0.4)[0] == pytest.approx(MAGNET.between(-0.4, 0.4), abs=1e-8)
    assert not found.line.covariance.any()


def test_uneven_points():
    s = np.sort(np.random.default_rng(1).uniform(-0.4, 0.4, 700))
    found = design_profile(s, MAGNET.field(s))
    np.testing.assert_allclose(found.line.field(s), MAGNET.field(s), atol=3e-5)


def test_the_order_does_not_matter():
    order = np.random.default_rng(1).permutation(len(S))
    mixed = design_profile(S[order], MAGNET.field(S)[order], 1e-5 * (1 + order / 400))
    plain = design_profile(S, MAGNET.field(S), 1e-5 * (1 + np.arange(len(S)) / 400))
    np.testing.assert_allclose(mixed.line.b, plain.line.b, atol=1e-15)
    np.testing.assert_allclose(mixed.line.covariance, plain.line.covariance, atol=1e-25)


def test_uncertainties_come_back_at_the_points():
    u = np.linspace(1e-5, 2e-5, len(S))
    found = design_profile(S, MAGNET.field(S), u)
    np.testing.assert_allclose(found.line.u_field(S), u, rtol=1e-9)
    # independent points: the integral's u is that of a sum
    step_sum = 2e-3 * np.sqrt(np.sum(u**2))
    assert found.line.integral(-0.4, 0.4)[1] == pytest.approx(step_sum, rel=0.02)


def test_very_fine_tables_are_sampled():
    s = np.linspace(-0.4, 0.4, 100_001)
    found = design_profile(s, MAGNET.field(s), np.full(len(s), 1e-5))
    assert found.line.spline.size == module.MOST_PIECES + 3
    probe = np.linspace(-0.4, 0.4, 777)
    np.testing.assert_allclose(found.line.field(probe), MAGNET.field(probe), atol=1e-8)


def test_csv_with_units(tmp_path):
    path = write(
        tmp_path,
        "# a design\nposition [mm],field [mT],u_field [uT]\n"
        + rows(S * 1e3, MAGNET.field(S) * 1e3, np.full(len(S), 3.0)),
    )
    found = read_design(path)
    np.testing.assert_allclose(found.line.field(S), MAGNET.field(S), atol=1e-11)
    np.testing.assert_allclose(found.line.u_field(S), 3e-6, rtol=1e-9)


@pytest.mark.parametrize(("place", "field"), [("position", "field"), ("z", "B"), ("s", "B")])
def test_netcdf_with_units(tmp_path, place, field):
    path = tmp_path / "design.nc"
    xr.Dataset(
        {field: (place, MAGNET.field(S) * 1e4, {"units": "gauss"})},
        coords={place: (place, S * 1e3, {"units": "mm"})},
    ).to_netcdf(path, engine="h5netcdf")
    np.testing.assert_allclose(read_design(path).line.field(S), MAGNET.field(S), atol=1e-13)


BAD = [
    ("position [mm],field [T]\n0,1\n1,1\n2,1\n", "found 3 points, expected at least 4"),
    ("position [mm],field [T]\n0,1\n1,1\n2,1\n1.0,2\n", "design.csv, line 5: found the position 1"),
    ("position [mm],field [T]\n0,1\n1,nan\n2,1\n3,2\n", "design.csv, line 3"),
    (
        "position [mm],field [T]\n0,1\n1,1e999\n2,1\n3,2\n",
        "line 3: found a value that is not a fin",
    ),
    ("position,field [T]\n0,1\n1,1\n2,1\n3,1\n", "column 'position': found no unit"),
    ("position [T],field [T]\n0,1\n1,1\n2,1\n3,1\n", "column 'position'"),
    ("position [mm],volt [V]\n0,1\n1,1\n2,1\n3,1\n", "no column for the field"),
    ("position [mm],field [T],B [T]\n0,1,1\n1,1,1\n", "2 columns for the field"),
    ("position [mm],field [T],u_field [T]\n0,1,1\n1,1,-1\n2,1,1\n3,1,1\n", "negative uncertainty"),
    ("position [mm],field [T]\n0,1\n1\n2,1\n", "line 3: found 1 cell"),
    ("position [mm],field [T]\n", "no rows"),
    ("", "an empty file"),
]


@pytest.mark.parametrize(("text", "words"), BAD)
def test_bad_tables_are_one_sentence(tmp_path, text, words):
    with pytest.raises(InputError) as caught:
        read_design(write(tmp_path, text))
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_files_that_are_none(tmp_path):
    with pytest.raises(InputError, match="no such file"):
        read_design(tmp_path / "nowhere.csv")
    with pytest.raises(InputError):
        read_design(tmp_path)
    for name, data in (
        ("a.nc", b"\x89HDF\r\n\x1a\n" + b"0" * 99),
        ("b.nc", b"CDF\x01"),
        ("c", b"\xff\xfe"),
    ):
        (tmp_path / name).write_bytes(data)
        with pytest.raises(InputError):
            read_design(tmp_path / name)


@pytest.mark.parametrize(
    "arrays",
    [
        ([0, 1, 2, 3], [1, 2, 3]),
        ([0, 1, 2, np.nan], [1, 2, 3, 4]),
        ([0, 1, 2, 3], [1, 2, np.inf, 4]),
        ([0, 1, 2, 2], [1, 2, 3, 4]),
        ([[0, 1, 2, 3]], [[1, 2, 3, 4]]),
        (["a", "b"], [1, 2]),
        ([0, 1, 2, 3], [1, 2, 3, 4], [1e-5, 1e-5, -1e-5, 0]),
        ([0, 1, 2, 3], [1, 2, 3, 4], [1e-5, 1e-5]),
    ],
)
def test_bad_arrays_are_one_sentence(arrays):
    with pytest.raises(InputError) as caught:
        design_profile(*arrays)
    assert "\n" not in str(caught.value)
