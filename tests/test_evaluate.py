"""From a map to results, remarks and verdicts."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

from fieldmap.bench.sources import Solenoid, Uniform
from fieldmap.errors import FieldmapError, InputError, RefusedError
from fieldmap.estimate import map_lines, stitch
from fieldmap.magnet import evaluate
from fieldmap.readings import Axis, Limit, Magnet
from fieldmap.readings.sections import RESULT_UNITS
from tests.shop import AXIS, DIPOLE, MAGNET, measured, out_and_back, truth


@pytest.fixture(scope="module")
def campaign():
    limits = [
        Limit("magnetic_length", 0.299, 0.301),
        Limit("central_field", None, 0.4),
        Limit("integrated_field", 0.15, None),
    ]
    return measured(out_and_back(), limits=limits)


@pytest.fixture(scope="module")
def fmap(campaign):
    return stitch(campaign, knot_spacing=0.004)


def test_results_of_the_design(campaign, fmap):
    results = evaluate(fmap, campaign)
    (line,) = results.lines
    for key, quantity in line.results.items():
        assert quantity.unit == RESULT_UNITS[key], key
        assert quantity.u >= 0
    for key, value in truth(DIPOLE, AXIS).items():
        assert abs(results[key].value - value) < 4 * results[key].u
    assert {"boundary_in", "boundary_out", "magnetic_centre"} <= set(line.results)
    assert {"peak_field", "peak_position", "homogeneity"} <= set(line.results)
    assert (results.campaign, results.sha256) == (campaign.name, campaign.sha256)


def test_the_map_alone_gives_the_same(campaign, fmap):
    assert evaluate(fmap) == evaluate(fmap, campaign)


def test_verdicts(campaign, fmap):
    verdicts = evaluate(fmap, campaign).verdicts
    assert [(one.result, one.line, one.decision) for one in verdicts] == [
        ("magnetic_length", 0, "accept"),
        ("central_field", 0, "reject"),
        ("integrated_field", 0, "undecided"),
    ]
    assert verdicts[0].probability > 0.999
    assert verdicts[1].probability < 1e-6
    assert 0.001 < verdicts[2].probability < 0.999


def test_coverage_factor_of_the_verdicts(campaign, fmap):
    u = evaluate(fmap, campaign)["magnetic_length"].u
    value = evaluate(fmap, campaign)["magnetic_length"].value
    tight = replace(campaign, limits=(Limit("magnetic_length", value - 2.5 * u, None),))
    assert evaluate(fmap, tight, k=2.0).verdicts[0].decision == "accept"
    assert evaluate(fmap, tight, k=3.0).verdicts[0].decision == "undecided"


def test_other_limits_of_the_integral(campaign, fmap):
    inner = Axis("z", (-0.05, 0.05), (-0.02, 0.02))
    results = evaluate(fmap, campaign, axis=inner)
    assert results["magnetic_length"].value == pytest.approx(0.1, rel=1e-4)
    moved = replace(campaign, axis=inner)
    assert evaluate(fmap, moved) == results


def test_refuses_limits_outside_the_map(campaign, fmap):
    with pytest.raises(RefusedError) as caught:
        evaluate(fmap, campaign, axis=Axis("z", (-0.5, 0.4), (-0.05, 0.05)))
    assert caught.value.code == "limits-outside-map"


@pytest.mark.parametrize(
    "axis", [Axis("z", (0.4, -0.4), (-0.05, 0.05)), Axis("z", (-0.4, 0.4), (0.01, 0.01))]
)
def test_refuses_limits_that_enclose_nothing(campaign, fmap, axis):
    with pytest.raises(FieldmapError):
        evaluate(fmap, campaign, axis=axis)


def test_refuses_a_limit_on_what_the_map_does_not_give(campaign, fmap):
    other = replace(campaign, limits=(Limit("sextupole", None, 1e-6),))
    with pytest.raises(InputError, match="sextupole"):
        evaluate(fmap, other)


def test_the_reason_why_a_result_is_withheld_is_told(fmap, campaign):
    tail = Axis("z", (-0.39, 0.39), (0.35, 0.39))  # no central field there, hence no length
    limited = replace(campaign, limits=(Limit("magnetic_length", 0.299, 0.301),))
    words = "magnetic_length', which is withheld here .the mean field in the flat window is not"
    with pytest.raises(InputError, match=words):
        evaluate(fmap, limited, axis=tail)


def test_every_result_given_can_be_judged(campaign, fmap):
    given = evaluate(fmap, campaign, fringe=False).lines[0].results
    assert {"integrated_field_total", "tail_in", "fringe_integral_out"} <= set(given)
    wide = tuple(Limit(key, q.value - 3 * q.u, q.value + 3 * q.u) for key, q in given.items())
    verdicts = evaluate(fmap, replace(campaign, limits=wide), fringe=False).verdicts
    assert [(one.result, one.decision) for one in verdicts] == [(key, "accept") for key in given]
    assert [one.probability for one in verdicts] == pytest.approx([0.9973] * len(given), abs=1e-4)


def test_a_limit_of_its_own_rule(campaign, fmap):
    length = evaluate(fmap, campaign)["magnetic_length"]
    lower = length.value - 2.5 * length.u
    rules = {(2.0, 1.0): "accept", (3.0, 1.0): "undecided", (3.0, 0.8): "accept"}
    for (k, guard), decision in rules.items():
        limit = Limit("magnetic_length", lower, None, k=k, guard=guard)
        judged = evaluate(fmap, replace(campaign, limits=(limit,)), k=1.0)
        assert judged.verdicts[0].decision == decision
        assert judged.verdicts[0].band == pytest.approx(guard * k * length.u)


def test_a_length_far_from_iron_plus_gap_is_remarked(campaign):
    def codes(iron_length):
        magnet = replace(MAGNET, iron_length=iron_length)
        again = stitch(replace(campaign, magnet=magnet), knot_spacing=0.01)
        return {one.code: one for one in evaluate(again).findings}

    assert "length-implausible" not in codes(0.27)  # one gap more than the iron
    found = codes(0.35)
    assert "length-implausible" in found
    assert found["length-implausible"].severity == "warn"  # never a verdict


def test_no_central_field_is_remarked(campaign, fmap):
    tail = Axis("z", (-0.39, 0.39), (0.35, 0.39))
    results = evaluate(fmap, replace(campaign, limits=()), axis=tail)
    assert "magnetic_length" not in results.lines[0].results
    assert "no-central-field" in {one.code for one in results.findings}


@pytest.fixture(scope="module")
def leaking():
    """A magnet in a background field, whose integral has no end."""
    return measured(out_and_back(), source=DIPOLE + Uniform(2e-3))


def test_tails_and_total_of_a_magnet_whose_field_ends(campaign, fmap):
    results = evaluate(fmap, campaign)
    for key in ("tail_in", "tail_out"):
        assert abs(results[key].value) < 2 * results[key].u  # 10 decay lengths outside
    total = results["integrated_field_total"]
    assert abs(total.value - DIPOLE.total) < 3 * total.u
    assert total.u > results["integrated_field"].u
    assert list(results.lines[0].results)[-5:] == [
        "tail_in",
        "tail_out",
        "integrated_field_total",
        "fringe_integral_in",
        "fringe_integral_out",
    ]
    # tanh with lam = g/pi: lam/2g
    for side in ("in", "out"):
        fringe = results[f"fringe_integral_{side}"]
        assert abs(fringe.value - 1 / (2 * np.pi)) < 3 * fringe.u
    assert not {one.code for one in results.findings} & {"tail-cut-off", "tail-not-converging"}


def test_ends_without_a_tail_are_remarked(leaking):
    results = evaluate(stitch(leaking, knot_spacing=0.01))
    assert "integrated_field" in results.lines[0].results
    assert not {"tail_in", "tail_out", "integrated_field_total"} & set(results.lines[0].results)
    found = [one for one in results.findings if one.code == "tail-not-converging"]
    assert [one.severity for one in found] == ["warn", "warn"]
    assert "0.40% of the central field" in found[0].text


def test_a_limit_on_a_total_that_is_withheld_says_why(leaking):
    limited = replace(leaking, limits=(Limit("integrated_field_total", 0.1, 0.2),))
    with pytest.raises(InputError, match="cannot be estimated: tail_in and integrated_field_total"):
        evaluate(stitch(leaking, knot_spacing=0.01), limited)


def test_tails_known_otherwise_go_with_the_map(leaking):
    known = replace(AXIS, tail_in=1e-5, u_tail_in=1e-6, tail_out=2e-5, u_tail_out=0.0)
    campaign = replace(leaking, axis=known)
    fmap = stitch(campaign, knot_spacing=0.01)
    results = evaluate(fmap)
    assert results.lines[0].results == evaluate(fmap, campaign).lines[0].results
    total = results["integrated_field"].value + 3e-5
    assert results["integrated_field_total"].value == pytest.approx(total, rel=1e-12)
    assert "tail-not-converging" not in {one.code for one in results.findings}


def test_a_tail_cut_off_is_remarked_by_what_the_limits_ask():
    solenoid = Solenoid(0.05, 0.2, turns=100, current=500.0)
    axis = Axis("z", (-0.39, 0.39), (-0.01, 0.01))
    magnet = Magnet("solenoid", "Bz", gap=0.1)
    campaign = measured(out_and_back(), source=solenoid, axis=axis, magnet=magnet)
    fmap = stitch(campaign, knot_spacing=0.01)

    def severities(*limits):
        found = evaluate(fmap, replace(campaign, limits=limits)).findings
        return [one.severity for one in found if one.code == "tail-cut-off"]

    length = evaluate(fmap, campaign)["magnetic_length"].value
    assert severities() == ["note", "note"]
    assert severities(Limit("magnetic_length", length - 1e-4, length + 1e-4)) == ["warn", "warn"]
    assert severities(Limit("magnetic_length", length - 0.1, length + 0.1)) == []


def test_results_as_json(campaign, fmap):
    content = json.loads(json.dumps(evaluate(fmap, campaign).as_dict(), allow_nan=False))
    assert list(content) == ["format", "campaign", "lines", "findings", "verdicts"]
    assert content["format"] == "fieldmap-results/1"
    assert content["campaign"] == {"name": "shop", "sha256": ""}
    (line,) = content["lines"]
    assert (line["x"], line["y"]) == (0.0, 0.0)
    assert set(line["results"]["integrated_field"]) == {"value", "u", "unit"}
    assert set(content["verdicts"][0]) == {"result", "line", "decision", "probability"}
    for finding in content["findings"]:
        assert set(finding) == {"code", "severity", "where", "text"}


def test_a_short_cut_to_the_first_line(campaign, fmap):
    results = evaluate(fmap, campaign)
    assert results["central_field"] is results.lines[0].results["central_field"]
    assert results["central_field"].expanded() == 2 * results["central_field"].u
    assert results["central_field"].expanded(3) == 3 * results["central_field"].u


def test_lines_taken_once_give_the_same_results(campaign, fmap):
    profiles = map_lines(fmap)
    for flat in ((-0.05, 0.05), (-0.02, 0.03)):
        axis = AXIS.moved(flat=flat)
        again = evaluate(fmap, campaign, axis=axis, fringe=False, profiles=profiles)
        fresh = evaluate(fmap, campaign, axis=axis, fringe=False)
        assert again.as_dict() == fresh.as_dict()
