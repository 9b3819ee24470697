"""Fringes of a map: what is found, in which convention, what is refused, both ends compared."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.bench.sources import EngeMagnet, Solenoid, TanhMagnet
from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.map import map_lines
from fieldmap.estimate.provenance import map_evidence, map_joint
from fieldmap.magnet.fringe.enge import EngeCurve
from fieldmap.magnet.fringe.findings import line_fringes
from fieldmap.magnet.fringe.fitted import fringe, fringes
from fieldmap.magnet.fringe.information import Whitened, displacing, information_on
from fieldmap.magnet.fringe.pair import compare_ends
from fieldmap.readings import Axis, Magnet, PointReference
from tests.shop import AXIS, DIPOLE, MAGNET, measured, out_and_back, planned

GAP = MAGNET.gap
LEVEL = PointReference(0.0, 0.5, 1e-5)
UNEQUAL = EngeMagnet(0.5, 0.3, GAP, (0.45, 1.9, -1.1, 1.6, -1.05, 0.32), (0.1, 2.6, -0.3, 0.5))


@pytest.fixture(scope="module")
def tanh_map():
    return fieldmap.stitch(measured(out_and_back(), [LEVEL], seed=3))


@pytest.fixture(scope="module")
def unequal_map():
    return fieldmap.stitch(measured(out_and_back(), [LEVEL], seed=4, source=UNEQUAL))


def test_tanh_edges_are_found_as_such(tanh_map):
    found, refused = fringes(tanh_map)
    assert not refused
    for end, sign in (("in", -1), ("out", 1)):
        one = found[end]
        assert one.model == "tanh"
        assert one.coefficients[0] == pytest.approx(0.0, abs=1e-12)
        assert abs(one.length.value - DIPOLE.lam) < 4 * one.length.u
        assert abs(one.boundary.value - sign * DIPOLE.length / 2) < 4 * one.boundary.u
        assert abs(one.integral.value - DIPOLE.lam / (2 * GAP)) < 4 * one.integral.u
        assert one.length.u < 1e-3 * DIPOLE.lam
        assert one.excess == 0.0
        assert one.probability > 1e-4
        assert one.field(np.array([one.boundary.value]))[0] == pytest.approx(one.level.value / 2)


def test_orders_of_unequal_ends(unequal_map):
    found, _ = fringes(unequal_map)
    assert (found["in"].order, found["out"].order) == (5, 3)
    for end, own in (("in", UNEQUAL.coefficients_in), ("out", UNEQUAL.coefficients_out)):
        true = EngeCurve(np.array(own)).canonical()
        one = found[end]
        assert np.all(np.abs(one.coefficients - true.coefficients) < 4 * one.u)
        assert abs(one.integral.value - true.integral) < 4 * one.integral.u


def test_offset_of_the_stage_moves_the_boundary_only(tanh_map):
    one = fringe(tanh_map, "out")
    # the campaign states 0.05 mm for where zero is, and nothing in the readings checks it
    assert one.boundary.u == pytest.approx(5e-5, rel=0.1)
    assert one.integral.u < 1e-3


def test_covariance_has_no_direction_that_moves_the_boundary(unequal_map):
    one = fringe(unequal_map, "in", order=5)
    to_boundary = EngeCurve(one.coefficients).canonical().jacobian[6]
    scale = one.u * np.abs(to_boundary)
    assert to_boundary @ one.covariance @ to_boundary < 1e-12 * scale @ scale


def test_given_order(tanh_map):
    assert len(fringe(tanh_map, "out", order=3).coefficients) == 4
    assert fringe(tanh_map, "in", order=1).model == "tanh"


def test_as_dict_is_json(unequal_map):
    facts = json.loads(json.dumps(fringe(unequal_map, "out").as_dict(), allow_nan=False))
    assert facts["model"] == "enge"
    assert facts["unit"] == "1"
    assert len(facts["value"]) == len(facts["u"]) == 4
    assert facts["boundary"]["unit"] == "m"
    assert set(facts["fringe_integral"]) == {"value", "u", "unit"}
    assert facts["freedom"] > 10


def test_saved_map_gives_the_same(unequal_map, tmp_path):
    fieldmap.save_map(unequal_map, tmp_path / "map.nc")
    again = fringe(fieldmap.load_map(tmp_path / "map.nc"), "in")
    assert again == fringe(unequal_map, "in")
    assert again != fringe(unequal_map, "out")
    assert hash(again) == hash(fringe(unequal_map, "in"))


def test_negative_field_gives_the_same_shape():
    campaign = measured(
        out_and_back(), [PointReference(0.0, -0.5, 1e-5)], seed=3, source=DIPOLE * -1.0
    )
    found = fringe(fieldmap.stitch(campaign), "out")
    assert found.level.value < 0
    assert abs(found.length.value - DIPOLE.lam) < 4 * found.length.u


def test_short_magnet_counts_the_other_end():
    source = TanhMagnet(0.5, length=0.09, lam=0.027)
    axis = Axis("z", (-0.3, 0.3), (-0.005, 0.005))
    passes = planned((-0.3, 0.3), (0.3, -0.3))
    reference = PointReference(0.0, float(source.field(0.0)), 1e-5)
    fmap = fieldmap.stitch(measured(passes, [reference], seed=5, source=source, axis=axis))
    found, _ = fringes(fmap, orders={"in": 1, "out": 1})
    assert source.field(0.0) < 0.94 * source.B0
    # the product of both edges is tanh's difference but for this factor
    level = source.B0 * -np.expm1(-2 * source.length / source.lam)
    for one in found.values():
        assert abs(one.level.value - level) < 4 * one.level.u
        assert abs(one.length.value - source.lam) < 4 * one.length.u
        assert one.probability > 1e-4


@pytest.fixture(scope="module")
def half_map():
    passes = planned((-0.1, 0.4), (0.4, -0.1))
    axis = replace(AXIS, integrate=(-0.1, 0.4))
    return fieldmap.stitch(measured(passes, [LEVEL], seed=6, axis=axis))


def test_middle_of_a_magnet_is_no_end(half_map):
    with pytest.raises(RefusedError, match="still 100% of the central field") as caught:
        fringe(half_map, "in")
    assert caught.value.code == "no-fringe-end"
    assert caught.value.where == "fringe_in"
    assert fringe(half_map, "out").model == "tanh"


def test_cut_off_end_is_refused():
    passes = planned((-0.4, 0.158), (0.158, -0.4))
    axis = replace(AXIS, integrate=(-0.4, 0.158))
    fmap = fieldmap.stitch(measured(passes, [LEVEL], seed=7, axis=axis))
    with pytest.raises(RefusedError, match="scan further out") as caught:
        fringe(fmap, "out")
    assert caught.value.code == "fringe-cut-off"


def test_flat_window_outside_the_magnet_is_refused(tanh_map):
    with pytest.raises(RefusedError) as caught:
        fringe(tanh_map, "out", axis=replace(AXIS, flat=(0.36, 0.39)))
    assert caught.value.code in {"no-central-field", "no-fringe-end"}


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"end": "middle"}, "'in' or 'out'"),
        ({"end": "in", "order": 0}, "1 to 7"),
        ({"end": "in", "order": 8}, "1 to 7"),
        ({"end": "in", "order": 2.5}, "1 to 7"),
        ({"end": "in", "order": True}, "1 to 7"),
        ({"end": "in", "reach": (0.0, 4.0)}, "above 0"),
        ({"end": "in", "reach": (2.0, float("nan"))}, "above 0"),
        ({"end": "in", "line": 3}, "line"),
    ],
)
def test_arguments(tanh_map, arguments, words):
    with pytest.raises(InputError, match=words):
        fringe(tanh_map, **arguments)


def test_evaluate_gives_both_and_can_leave_them_out(tanh_map):
    results = fieldmap.evaluate(tanh_map)
    facts = results.as_dict()["lines"][0]["results"]
    assert facts["fringe_in"]["model"] == facts["fringe_out"]["model"] == "tanh"
    assert not [one for one in results.findings if one.code.startswith("fringe-")]
    without = fieldmap.evaluate(tanh_map, fringe=False)
    assert not without.lines[0].fringes
    assert "fringe_in" not in without.as_dict()["lines"][0]["results"]


def test_what_is_refused_becomes_a_note(half_map):
    results = fieldmap.evaluate(half_map)
    (note,) = [one for one in results.findings if one.code == "fringe-not-fitted"]
    assert (note.severity, note.where) == ("note", "fringe_in")
    assert set(results.lines[0].fringes) == {"fringe_out"}


def test_map_without_evidence_gives_a_note(tanh_map):
    found, (note,) = line_fringes(tanh_map.drop_vars("design"), AXIS, 0)
    assert not found
    assert note.code == "fringe-not-fitted"


def test_a_field_of_another_shape_is_poorly_fitted():
    source = Solenoid(0.02, 0.16, turns=1000, current=20.0)
    axis = Axis("z", (-0.3, 0.3), (-0.01, 0.01))
    campaign = measured(
        planned((-0.3, 0.3), (0.3, -0.3)),
        [PointReference(0.0, float(source.field(0.0)), 1e-5)],
        seed=8,
        source=source,
        axis=axis,
        magnet=Magnet("solenoid", "Bz", 0.036),
    )
    found, notes = line_fringes(fieldmap.stitch(campaign), axis, 0)
    assert [note.code for note in notes] == ["fringe-poorly-fitted"] * 2
    one = found["fringe_out"]
    assert one.chi_square > 10 * one.freedom
    assert one.excess > 1e-4
    assert one.departure < 0.05  # it still runs through the middle of the profile
    assert f"{one.chi_square:.3g}" in notes[1].text


def test_ends_that_are_alike(tanh_map):
    found, _ = fringes(tanh_map)
    both = compare_ends(found["in"], found["out"])
    assert both.freedom == both.order == 1
    assert both.probability > 1e-3
    assert abs(both.integral.value) < 4 * both.integral.u
    assert "agree within" in both.text
    assert json.loads(json.dumps(both.as_dict()))["unit"] == "1"


def test_ends_that_differ(unequal_map):
    found, _ = fringes(unequal_map)
    both = compare_ends(found["in"], found["out"])
    assert both.order == 5  # the exit fitted again with the entrance's order
    true = [
        EngeCurve(np.array(one)).canonical().integral
        for one in (UNEQUAL.coefficients_in, UNEQUAL.coefficients_out)
    ]
    assert abs(both.integral.value - (true[0] - true[1])) < 4 * both.integral.u
    assert both.probability < 1e-10
    assert "differ by more than" in both.text


def test_ends_of_different_fits_are_not_compared(tanh_map):
    one, other = fringe(tanh_map, "in"), fringe(tanh_map, "out")
    with pytest.raises(InputError, match="not fitted together"):
        compare_ends(one, other)


def test_information_agrees_with_the_map(tanh_map):
    # with all smoothness put back on the stretch, the map's own estimate is the best
    evidence, joint = map_evidence(tanh_map), map_joint(tanh_map)
    squares, smoothness = evidence.squares(), evidence.smoothness()
    precision = squares.matrix + smoothness.rows.T @ smoothness.rows
    scale = np.sqrt(np.diagonal(joint.covariance))
    unity = precision @ joint.covariance * scale[None, :] ** -1 * scale[:, None]
    assert np.abs(unity - np.eye(len(scale))).max() < 1e-3
    gradient = squares.right - squares.matrix @ joint.values
    gradient += smoothness.rows.T @ (smoothness.target - smoothness.rows @ joint.values)
    assert float(gradient @ joint.covariance @ gradient) < 1e-4


def test_free_profile_leaves_the_excess_that_smoothness_costs(tanh_map):
    evidence = map_evidence(tanh_map)
    about = evidence.recorded(map_joint(tanh_map).values)
    stretch = np.arange(40, 90)
    found = information_on(evidence, [stretch], about)
    nuisances = about[evidence.size + displacing(evidence)]
    excess = found.misfit(np.concatenate([about[stretch], nuisances]))
    assert 0 <= excess < 2 * len(stretch)
    assert displacing(evidence).size >= 2  # offset and scale at least


def test_information_on_a_part():
    rng = np.random.default_rng(1)
    both = Whitened(rng.standard_normal((9, 5)), rng.standard_normal(9))
    precision = both.rows.T @ both.rows
    schur = precision[:3, :3] - precision[:3, 3:] @ np.linalg.solve(
        precision[3:, 3:], precision[3:, :3]
    )
    part = both.on(slice(0, 3))
    assert part.rows.T @ part.rows == pytest.approx(schur, abs=1e-10)
    best = np.linalg.lstsq(both.rows, both.target, rcond=None)[0]
    assert part.misfit(best[:3]) == pytest.approx(0.0, abs=1e-20)


def test_widened_information():
    rng = np.random.default_rng(2)
    one = Whitened(rng.standard_normal((6, 6)), rng.standard_normal(6))
    excess = np.diag(rng.uniform(0.1, 1.0, 6))
    wide = one.widened(excess)
    expected = np.linalg.inv(np.linalg.inv(one.rows.T @ one.rows) + excess)
    assert wide.rows.T @ wide.rows == pytest.approx(expected, abs=1e-9)


def test_map_line_is_untouched_by_fits(tanh_map):
    before = map_lines(tanh_map)[0].b.copy()
    fringes(tanh_map)
    assert np.array_equal(before, map_lines(tanh_map)[0].b)
