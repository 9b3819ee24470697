"""Comparison of maps with maps and with designs."""

import json
from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate import stitch
from fieldmap.estimate.store import save_map
from fieldmap.magnet.comparison.compare import compare
from fieldmap.magnet.handover.export import export_table
from fieldmap.magnet.sampling import chosen_line
from tests.pairs import BUMP, SOFT, WIDE, errors_of, map_of, plain_map
from tests.shop import MAGNET, measured, planned

S = np.linspace(-0.4, 0.4, 321)
CHANGED = 1.001 * SOFT.shifted(5e-4)


@pytest.fixture(scope="module")
def fmap():
    return plain_map()


@pytest.fixture(scope="module")
def changed():
    return map_of(CHANGED, 7, bench=errors_of(1))


def test_a_map_beside_itself(fmap):
    found = compare(fmap, fmap)
    assert found.shift.value == pytest.approx(0, abs=1e-9)
    assert found.scale.value == pytest.approx(0, abs=1e-9)
    assert found.stretches == ()
    assert set(found.results) == {"integrated_field", "central_field", "magnetic_length"}
    for one in found.results.values():
        assert one.difference.value == 0
        assert one.difference.u == pytest.approx(np.sqrt(2) * one.first.u, rel=1e-6)
        assert not one.significant


def test_shift_and_scale_of_a_changed_magnet(fmap, changed):
    found = compare(changed, fmap, same_bench=True)
    assert abs(found.shift.value - 5e-4) < 3 * found.shift.u
    assert abs(found.scale.value - 1e-3) < 3 * found.scale.u
    assert found.shift.u == pytest.approx(np.sqrt(2) * 5e-5, rel=0.05)  # the stage's offset, twice
    assert found.before.stretches
    assert found.after is found.judged
    assert found.stretches == ()
    assert abs(found.correlation) < 1


def test_one_bench_tells_more_than_two(fmap, changed):
    one, two = (compare(changed, fmap, same_bench=same) for same in (True, False))
    assert one.scale.u < 0.1 * two.scale.u
    assert two.scale.u == pytest.approx(np.sqrt(2) * 4e-4, rel=0.05)  # the wire's length, twice
    assert one.results["integrated_field"].significant
    assert not two.results["integrated_field"].significant
    assert "gain wire, scale" in one.remarks[0]
    assert two.remarks == ()


def test_only_what_is_stated_alike_is_common(fmap, changed):
    other = changed.copy()
    facts = json.loads(other.attrs["lines"])
    for unknown in facts[0]["unknowns"]:
        if unknown["kind"] == "gain":
            unknown["where"] = "another wire"
        if unknown["kind"] == "scale":
            unknown["sd"] *= 2
    other.attrs["lines"] = json.dumps(facts)
    found = compare(fmap, other, same_bench=True)
    assert "no probe or stage" in found.remarks[0]
    apart = compare(fmap, other)
    assert found.scale == apart.scale


def test_a_local_change_is_found(fmap):
    found = compare(map_of(SOFT + BUMP, 11, bench=errors_of(1)), fmap, same_bench=True)
    widest = max(found.stretches, key=lambda one: abs(one.difference))
    assert widest.start < 0.07 < widest.stop
    assert abs(widest.difference) > widest.half_width
    assert widest.difference == pytest.approx(float(BUMP.field(0.07)), rel=0.4)


def test_as_they_stand(fmap, changed):
    found = compare(changed, fmap, same_bench=True, align=False)
    assert (found.shift, found.scale, found.after) == (None, None, None)
    assert found.judged is found.before
    assert found.stretches
    np.testing.assert_allclose(found.first - found.second, found.before.difference, atol=1e-15)


def test_part_of_the_line(fmap, changed):
    found = compare(changed, fmap, span=(-0.3, 0.1))
    assert (found.before.s[0], found.before.s[-1]) == (-0.3, 0.1)
    assert found.after.s[0] >= -0.3
    assert found.after.s[-1] <= 0.1
    wide = compare(changed, fmap, span=(-3.0, 3.0))
    assert (wide.before.s[0], wide.before.s[-1]) == pytest.approx((-0.4, 0.4), abs=1e-6)


def test_the_moved_profile_is_not_taken_beyond_its_end(fmap):
    inside = np.abs(S) <= 0.3
    found = compare(fmap, (S[inside] - 0.02, SOFT.field(S[inside])))
    assert found.shift.value == pytest.approx(0.02, abs=3 * found.shift.u)
    assert found.after.s.min() >= -0.32 + found.shift.value - 1e-9
    assert found.after.s.max() <= 0.28 + found.shift.value + 1e-9


@pytest.mark.parametrize("form", ["arrays", "csv", "nc"])
def test_a_design_in_any_form(fmap, tmp_path, form):
    b = SOFT.field(S)
    given = (S, b)
    if form == "csv":
        given = tmp_path / "design.csv"
        rows = "".join(f"{z * 1e3:.9g},{t:.12g}\n" for z, t in zip(S, b, strict=True))
        given.write_text("position [mm],field [T]\n" + rows, encoding="utf-8")
    elif form == "nc":
        given = tmp_path / "design.nc"
        xr.Dataset(
            {"B": ("z", b, {"units": "T"})}, coords={"z": ("z", S, {"units": "m"})}
        ).to_netcdf(given, engine="h5netcdf")
    found = compare(fmap, given)
    assert found.names[1] == {"arrays": "profile", "csv": "design.csv", "nc": "design.nc"}[form]
    assert abs(found.shift.value) < 3 * found.shift.u
    assert abs(found.scale.value) < 3 * found.scale.u
    assert found.scale.u == pytest.approx(4e-4, rel=0.05)
    assert found.stretches == ()
    assert found.results["integrated_field"].second.value == pytest.approx(0.15, abs=1e-7)
    assert found.results["integrated_field"].second.u == 0


def test_a_map_file_is_a_map(fmap, changed, tmp_path):
    path = tmp_path / "map.nc"
    save_map(fmap, path)
    found, same = compare(changed, path, same_bench=True), compare(changed, fmap, same_bench=True)
    assert found.shift == same.shift
    assert str(path) != found.names[1] == "shop"
    assert compare(changed, str(path)).names[1] == "shop"


def test_uncertainties_of_a_table_count_and_are_remarked(fmap, tmp_path):
    exact = compare(fmap, (S, SOFT.field(S)))
    vague = compare(fmap, (S, SOFT.field(S), np.full(len(S), 1e-3)))
    assert vague.scale.u > exact.scale.u
    assert np.all(vague.before.u > exact.before.u)
    assert "independent from point to point" in vague.remarks[0]
    path = tmp_path / "field.csv"
    export_table(fmap, path)
    own = compare(fmap, path)
    assert "compare with that map itself" in own.remarks[0]
    assert abs(own.shift.value) < own.shift.u


def test_a_coarse_table_is_remarked(fmap):
    coarse = np.linspace(-0.4, 0.4, 33)
    found = compare(fmap, (coarse, SOFT.field(coarse)))
    assert any("coarse" in one for one in found.remarks)


def test_opposite_signs_are_remarked(fmap):
    found = compare(fmap, (S, -SOFT.field(S)))
    assert found.scale.value == pytest.approx(-2, abs=2e-3)
    assert "opposite signs" in found.remarks[0]


def test_results_only_where_both_reach(fmap):
    inside = np.abs(S) <= 0.2
    found = compare(fmap, (S[inside], SOFT.field(S[inside])))
    assert found.results == {}
    assert any("outside one of the profiles" in one for one in found.remarks)


def test_second_lines():
    passes = [
        *planned((-0.4, 0.4), (0.4, -0.4), rate=20.0),
        *planned((-0.4, 0.4), (0.4, -0.4), x=0.01, rate=20.0),
    ]
    two = stitch(measured(passes, source=SOFT, magnet=WIDE), knot_spacing=0.008)
    assert compare(two, two, line=1).stretches == ()
    with pytest.raises(InputError, match="line: found 1"):
        compare(two, plain_map(), line=1)


BAD = [
    ((S[:3], S[:3]), "found 3 points, expected at least 4"),
    ((S,), "found 1 arrays"),
    ((S, S, S, S), "found 4 arrays"),
    ((S, np.where(S > 0, np.nan, 1.0)), "finite"),
    ((np.r_[S, 0.1], np.r_[S, 0.1]), "a second time"),
    ((S + 5, SOFT.field(S)), "nothing in common: -400 to 400 mm and 4600 to 5400 mm"),
    (42, "an object of type int"),
    (None, "an object of type NoneType"),
    (xr.Dataset(), "an object of type Dataset"),
]


@pytest.mark.parametrize(("other", "words"), BAD)
def test_what_cannot_be_compared_is_one_sentence(fmap, other, words):
    with pytest.raises(InputError) as caught:
        compare(fmap, other)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_other_components_and_spans_are_refused(fmap):
    campaign = measured(planned((-0.4, 0.4), rate=20.0), magnet=replace(MAGNET, component="Bx"))
    with pytest.raises(InputError, match="component Bx along z in the second"):
        compare(fmap, stitch(campaign, knot_spacing=0.008))
    with pytest.raises(InputError, match="within the part asked for"):
        compare(fmap, fmap, span=(0.5, 0.6))
    with pytest.raises(InputError, match="lower end first"):
        compare(fmap, fmap, span=(0.1, -0.1))


def test_what_cannot_be_aligned_is_refused(fmap):
    flat = (S, np.full(len(S), 0.5))
    with pytest.raises(RefusedError) as caught:
        compare(fmap, flat, span=(-0.05, 0.05))
    assert caught.value.code == "not-aligned"
    assert compare(fmap, flat, span=(-0.05, 0.05), align=False).stretches == ()


def test_damaged_files_are_one_sentence(fmap, tmp_path):
    path = tmp_path / "bad.nc"
    save_map(fmap, path)
    whole = path.read_bytes()
    for content in (whole[: len(whole) // 2], b"CDF\x01", b"\x89HDF\r\n\x1a\nxx", b"\x00\x01"):
        path.write_bytes(content)
        with pytest.raises(InputError) as caught:
            compare(fmap, path)
        assert "\n" not in str(caught.value)


def test_nothing_given_is_changed(fmap):
    before = fmap.copy(deep=True)
    line = chosen_line(fmap, 0)
    compare(fmap, fmap, same_bench=True)
    xr.testing.assert_identical(fmap, before)
    np.testing.assert_array_equal(chosen_line(fmap, 0).covariance, line.covariance)
