"""The labelled map: hand-made lines give hand-checked arrays and attributes."""

from __future__ import annotations

import json
from dataclasses import asdict, replace

import numpy as np
import pytest
from scipy import sparse

from fieldmap.errors import InputError
from fieldmap.estimate.evidence import Evidence
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.fit import LineFit, PassFit
from fieldmap.estimate.map import (
    FORMAT,
    MappedLine,
    build_map,
    check_map,
    map_axis,
    map_findings,
    map_limits,
    map_lines,
    map_magnet,
    map_passes,
    with_axis,
)
from fieldmap.estimate.noise import Tridiagonal
from fieldmap.estimate.parameters import Nuisance
from fieldmap.estimate.spline import UniformSpline
from fieldmap.estimate.variance import NoiseLevel
from fieldmap.readings import Axis, Campaign, Limit, Magnet, Pass, Stage
from tests.shop import MAIN, WIRE

CAMPAIGN = Campaign(
    name="by hand",
    magnet=Magnet("dipole", "By", 0.03, 0.27, 85.0),
    axis=Axis("z", (0.0, 0.02), (0.005, 0.015)),
    stage=Stage(u_scale=2e-5),
    limits=(Limit("integrated_field", 0.01, None),),
    sha256="c0ffee",
)
LEVEL = NoiseLevel(2e-7, 5e-8, walk_known=True, read_known=False)
UNKNOWNS = [Nuisance("drift", "p.csv", 0.0, 1e-6), Nuisance("gain", "wire", 0.0, 4e-4)]
REMARK = Finding("residuals-too-large", "warn", "p.csv", "a sentence.")


def evidence(size, count=2):
    """Two increments that see the first three unknowns and the gain, and one reference."""
    rows = np.zeros((count, size + 2))
    rows[:, :3], rows[:, -1] = [1.0, 2.0, 3.0], 0.5
    one = np.ones(count)
    return Evidence(
        design=sparse.csr_array(rows),
        target=np.arange(1.0, count + 1),
        owner=np.zeros(count, dtype=int),
        noise={cause: Tridiagonal(2 * one, -one[:-1]) for cause in ("walk", "read", "jitter")},
        references=np.ones((1, size + 2)),
        reference_target=np.array([4.0]),
        prior=np.array([0.0, 0.0]),
        frame=np.zeros((size, 2)),
        shift=np.zeros((2, 2)),
        roughness=np.ones(size - 3),
        smooth_effect=np.zeros((size - 3, 2)),
        smooth_origin=np.zeros(size - 3),
    )


def line(x=0.0, y=0.0, low=0.0, high=0.02, level=1.0, u=1e-3, spacing=0.01):
    """A line of even field `level`, its coefficients independent with uncertainty u."""
    spline = UniformSpline.covering(low, high, spacing)
    n = spline.size
    covariance = np.zeros((n + 2, n + 2))
    covariance[:n, :n] = u**2 * np.eye(n)
    covariance[n:, n:] = np.diag([(0.5e-6) ** 2, (3e-4) ** 2])
    covariance[0, n + 1] = covariance[n + 1, 0] = 1e-8
    position = np.array([low, low, low + 0.004, high])
    one = Pass("p.csv", WIRE, MAIN, np.arange(4.0), position, np.zeros(4), x=x, y=y, sha256="beef")
    fitted = PassFit(one, np.array([low, high]), np.array([0.5, -1.5]), 1.25, LEVEL)
    fit = LineFit(
        spline=spline,
        unknowns=UNKNOWNS,
        values=np.concatenate([np.full(n, level), [2e-6, 1e-4]]),
        covariance=covariance,
        roughness=np.ones(n - 3),
        passes=[fitted],
        evidence=evidence(n),
    )
    return MappedLine(x, y, low, high, fit, (REMARK,))


def test_an_even_field_by_hand():
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    np.testing.assert_allclose(fmap["z"], [0.0, 0.01, 0.02], atol=1e-15)
    np.testing.assert_allclose(fmap["B"], [[[1.0, 1.0, 1.0]]], rtol=1e-14)
    # at a knot the cubic's weights are 1/6, 4/6, 1/6
    u = 1e-3 * np.sqrt(18 / 36)
    np.testing.assert_allclose(fmap["B_se"], [[[u, u, u]]], rtol=1e-12)
    np.testing.assert_array_equal(fmap["n_readings"], [[[3, 0, 1]]])
    assert fmap["n_readings"].dtype == np.int32
    np.testing.assert_array_equal(fmap["coefficient"], [[[1.0] * 5]])
    np.testing.assert_array_equal(fmap["coefficient_covariance"][0, 0], 1e-6 * np.eye(5))
    # drift and gain in units of what was known of them before
    np.testing.assert_allclose(fmap["nuisance"], [[[2.0, 0.25]]], rtol=1e-12)
    np.testing.assert_allclose(
        fmap["nuisance_covariance"][0, 0], np.diag([0.25, 0.5625]), rtol=1e-12
    )
    assert fmap["shared_covariance"][0, 0, 0, 1] == pytest.approx(1e-8 / 4e-4)
    np.testing.assert_array_equal(fmap["mapped_range"], [[[0.0, 0.02]]])
    np.testing.assert_allclose(fmap["knots"], [[[0.0, 0.01, 5.0]]], atol=1e-15)
    np.testing.assert_array_equal(fmap["residual"], [0.5, -1.5])
    np.testing.assert_array_equal(fmap["residual_position"], [0.0, 0.02])
    np.testing.assert_array_equal(fmap["residual_pass"], [0, 0])


def test_names_dimensions_and_units():
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    expected = {
        "B": (("y", "x", "z"), "T"),
        "B_se": (("y", "x", "z"), "T"),
        "n_readings": (("y", "x", "z"), "1"),
        "coefficient": (("y", "x", "basis"), "T"),
        "coefficient_covariance": (("y", "x", "basis", "basis_2"), "T2"),
        "x": (("x",), "m"),
        "y": (("y",), "m"),
        "z": (("z",), "m"),
    }
    for name, (dims, units) in expected.items():
        assert fmap[name].dims == dims
        assert fmap[name].attrs["units"] == units
    for name in fmap.variables:
        assert fmap[name].attrs["long_name"], name
        assert fmap[name].attrs["units"], name
        assert "axis" not in fmap[name].attrs  # x is no CF axis here
    assert fmap["B"].attrs["long_name"] == "flux density, component By"
    assert set(fmap["B"].attrs["ancillary_variables"].split()) == {"B_se", "n_readings"}


def test_attributes_of_the_whole():
    fmap = build_map(CAMPAIGN, [line()], [REMARK, REMARK], step=0.01)
    attrs = fmap.attrs
    assert attrs["Conventions"] == "CF-1.11"
    assert attrs["format"] == FORMAT
    assert attrs["title"] == "Field map: by hand"
    campaign = json.loads(attrs["campaign"])
    assert campaign.pop("limits") == [asdict(CAMPAIGN.limits[0])]
    axis = campaign.pop("axis")
    assert (axis["travel"], axis["integrate"], axis["flat"]) == ("z", [0.0, 0.02], [0.005, 0.015])
    assert campaign == {
        "name": "by hand",
        "sha256": "c0ffee",
        "magnet": {
            "kind": "dipole",
            "component": "By",
            "gap": 0.03,
            "iron_length": 0.27,
            "current": 85.0,
        },
        "stage": {
            "u_scale": 2e-5,
            "u_position": 0.0,
            "u_offset": 0.0,
            "u_lag": 0.0,
            "u_backlash": 0.0,
        },
        "probes": [],
        "integrators": [],
        "references": [],
    }
    (kept,) = map_passes(fmap)
    assert kept["name"] == "p.csv"
    assert kept["sha256"] == "beef"
    assert kept["readings"] == 4
    assert (kept["walk_noise"], kept["read_noise"]) == (2e-7, 5e-8)
    assert (kept["chi_square"], kept["freedom"]) == (2.5, 1.25)
    (facts,) = json.loads(attrs["lines"])
    assert [one["kind"] for one in facts["unknowns"]] == ["drift", "gain"]
    assert [one["sd"] for one in facts["unknowns"]] == [1e-6, 4e-4]


def test_the_version_that_made_the_map_is_kept():
    import fieldmap

    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    assert any(fieldmap.__version__ in str(value) for value in fmap.attrs.values())


def test_what_is_read_back():
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    assert map_axis(fmap) == CAMPAIGN.axis
    assert map_limits(fmap) == CAMPAIGN.limits
    assert map_magnet(fmap) == CAMPAIGN.magnet
    assert map_findings(fmap) == [REMARK]
    (back,) = map_lines(fmap)
    assert (back.x, back.y, back.low, back.high) == (0.0, 0.0, 0.0, 0.02)
    assert back.spline == line().fit.spline
    value, u = back.integral(0.0, 0.02)
    assert value == pytest.approx(0.02, rel=1e-12)
    assert 0 < u < 2e-5


def test_the_same_remark_stands_once():
    fmap = build_map(CAMPAIGN, [line(), line(x=0.01)], [REMARK], step=0.01)
    assert map_findings(fmap) == [REMARK]


def test_lines_of_unequal_length_and_knots_on_a_grid_with_a_hole():
    short = line(x=0.0, y=0.0, level=1.0)
    long = line(x=0.01, y=-0.01, low=-0.02, high=0.03, level=2.0, spacing=0.005)
    fmap = build_map(CAMPAIGN, [long, short], [], step=0.01)
    assert dict(fmap.sizes) | {"y": 2, "x": 2, "z": 6, "basis": 13} == dict(fmap.sizes)
    np.testing.assert_allclose(fmap["z"], np.arange(-2, 4) * 0.01, atol=1e-15)
    nan = np.nan
    np.testing.assert_allclose(fmap["B"].sel(x=0.0, y=0.0), [nan, nan, 1, 1, 1, nan])
    np.testing.assert_allclose(fmap["B"].sel(x=0.01, y=-0.01), [2.0] * 6)
    assert np.isnan(fmap["B"].sel(x=0.01, y=0.0)).all()
    assert np.isnan(fmap["B_se"].sel(x=0.0, y=-0.01)).all()
    assert int(fmap["n_readings"].sel(x=0.01, y=0.0).sum()) == 0
    assert int(fmap["n_readings"].sel(x=0.01, y=-0.01).sum()) == 4
    found = map_lines(fmap)
    assert [(one.x, one.y) for one in found] == [(0.01, -0.01), (0.0, 0.0)]
    assert [one.spline for one in found] == [long.fit.spline, short.fit.spline]
    for one in found:
        assert np.isfinite(one.b).all()
        assert np.isfinite(one.covariance).all()


@pytest.mark.parametrize(
    ("low", "high", "spacing", "step", "first"),
    [
        (0.0, 0.02, 0.01, 0.005, 0.0),
        (-0.013, 0.02, 0.0031, 0.001, -0.013),
        (1.0, 1.00012, 0.00001, 5e-6, 1.0),
        (-7.3, 11.0, 0.9, 0.2, -7.2),
    ],
)
def test_grid_points_are_plain_multiples_of_a_plain_step(low, high, spacing, step, first):
    fmap = build_map(CAMPAIGN, [line(low=low, high=high, spacing=spacing)], [])
    z = fmap["z"].values
    np.testing.assert_allclose(np.diff(z), step, rtol=1e-6)
    assert z[0] == pytest.approx(first, abs=1e-9)
    assert low - 1e-9 <= z[0]
    assert z[-1] <= high + 1e-9
    assert np.isfinite(fmap["B"]).all()


@pytest.mark.parametrize("step", [0.0, -1e-3, 1.0, np.nan])
def test_refuses_a_step_that_makes_no_grid(step):
    with pytest.raises(InputError, match="step"):
        build_map(CAMPAIGN, [line()], [], step=step)


def refused(fmap):
    with pytest.raises(InputError) as caught:
        check_map(fmap, "some.nc")
    text = str(caught.value)
    assert text.startswith("some.nc: ")
    assert "\n" not in text
    return text


@pytest.mark.parametrize("name", ["lines", "campaign", "passes", "findings"])
@pytest.mark.parametrize("damage", [None, "", "{", "17", "null", '"text"'])
def test_damaged_attributes_are_one_sentence(name, damage):
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    check_map(fmap, "some.nc")
    if damage is None:
        del fmap.attrs[name]
    else:
        fmap.attrs[name] = damage
    refused(fmap)


@pytest.mark.parametrize(
    ("name", "damage"),
    [
        ("lines", "[]"),
        ("lines", '[{"x": 0}]'),
        ("lines", '[{"x": 7.0, "y": 0.0, "unknowns": []}]'),
        ("campaign", "{}"),
        ("campaign", '{"name": 1, "sha256": 2, "axis": 3}'),
        ("findings", '[{"x": 0}]'),
        ("findings", "[1]"),
    ],
)
def test_attributes_of_the_wrong_shape_are_one_sentence(name, damage):
    refused(build_map(CAMPAIGN, [line()], [], step=0.01).assign_attrs({name: damage}))


@pytest.mark.parametrize("name", ["coefficient", "coefficient_covariance", "knots", "mapped_range"])
def test_a_map_without_what_it_needs_is_one_sentence(name):
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    refused(fmap.drop_vars(name))
    fmap[name][:] = np.nan
    refused(fmap)


def test_knots_that_do_not_fit_the_coefficients_are_one_sentence():
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    for size in (7.0, 2.0, -3.0, 1e12):
        damaged = fmap.copy(deep=True)
        damaged["knots"][0, 0, 2] = size
        refused(damaged)
    backwards = fmap.copy(deep=True)
    backwards["knots"][0, 0, 1] = -0.01
    refused(backwards)


def test_campaign_and_line_are_left_alone():
    one = line()
    before = one.fit.covariance.copy()
    fmap = build_map(replace(CAMPAIGN), [one], [], step=0.01)
    fmap["coefficient_covariance"][:] = 0.0
    np.testing.assert_array_equal(one.fit.covariance, before)


def test_with_another_axis_only_what_is_taken_changes():
    fmap = build_map(CAMPAIGN, [line()], [], step=0.01)
    axis, note = Axis("z", (0.001, 0.019), (0.006, 0.014)), Finding("code", "note", "here", "text.")
    before = dict(fmap.attrs)
    moved = with_axis(fmap, axis, [note])
    assert map_axis(moved) == axis
    assert map_findings(moved) == [*map_findings(fmap), note]
    assert map_limits(moved) == map_limits(fmap)
    assert fmap.attrs == before
    assert moved["B"].variable._data is fmap["B"].variable._data
    assert map_findings(with_axis(moved, map_axis(fmap))) == map_findings(moved)
