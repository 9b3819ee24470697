"""Two passes against each other: agreement by chance, a difference where there is one."""

from dataclasses import replace

import numpy as np
import pytest

import fieldmap
from fieldmap.bench.bench_errors import draw_errors
from fieldmap.errors import InputError
from fieldmap.estimate.agreement import Agreement, pass_agreement
from fieldmap.readings import PointReference

from .shop import DIPOLE, MAIN, RECT, WIRE, measured, plan, planned

SCANS = (
    *planned((-0.4, 0.1), (0.4, -0.1), rate=20.0),
    *planned((-0.4, 0.4), (0.3, -0.3), probe=RECT, rate=20.0),
)
POINT = PointReference(0.0, float(DIPOLE.field(0.0)), 1e-5)
PAIRS = ((0, 1), (0, 2), (3, 1), (2, 3))  # wires, wire and coil, coil and wire, coils
SPACING = 6e-3


def mapped(seed=0, change=None):
    rng = np.random.default_rng(seed)
    errors = draw_errors(plan(SCANS, [POINT]), rng)
    campaign = measured(SCANS, [POINT], seed=seed + 1000, errors=errors)
    if change is not None:
        campaign = replace(campaign, passes=tuple(map(change, campaign.passes)))
    return fieldmap.stitch(campaign, knot_spacing=SPACING)


@pytest.fixture(scope="module")
def fmap():
    return mapped()


@pytest.mark.parametrize("pair", PAIRS)
def test_sound_passes_agree(fmap, pair):
    found = pass_agreement(fmap, *pair)
    assert found.agree
    assert 0.01 <= found.probability <= 1.0
    share = np.mean(np.abs(found.difference) <= 2 * found.u)
    assert share > 0.7


@pytest.mark.slow
def test_chi_square_is_what_chance_makes():
    """Over 40 benches with all their errors: mean within four standard errors of one."""
    ratios = {pair: [] for pair in PAIRS}
    sizes = {pair: [] for pair in PAIRS}
    for seed in range(40):
        fmap = mapped(seed)
        for pair in PAIRS:
            found = pass_agreement(fmap, *pair)
            ratios[pair].append(found.chi_square / found.freedom)
            sizes[pair].append(np.mean((found.difference / found.u) ** 2))
    for pair in PAIRS:
        assert np.mean(ratios[pair]) == pytest.approx(1.0, abs=0.18)
        assert np.sqrt(np.mean(sizes[pair])) == pytest.approx(0.95, abs=0.2)


def test_turned_round_the_difference_changes_its_sign(fmap):
    one, other = pass_agreement(fmap, 0, 2), pass_agreement(fmap, 2, 0)
    np.testing.assert_allclose(one.difference, -other.difference, atol=1e-3 * one.u.max())
    np.testing.assert_allclose(one.u, other.u, rtol=1e-6)
    assert one.chi_square == pytest.approx(other.chi_square, rel=1e-6)
    assert (one.first, one.second) == (other.second, other.first)


def test_where_both_were(fmap):
    found = pass_agreement(fmap, 0, 1)
    assert found.resolution == pytest.approx(4 * SPACING, rel=0.1)
    half = found.resolution / 2
    assert found.position[0] == pytest.approx(-0.1 + half, abs=5e-3)
    assert found.position[-1] == pytest.approx(0.1 - half, abs=5e-3)


def test_a_level_is_told_by_two_wires_only(fmap):
    assert pass_agreement(fmap, 0, 1).level_known
    for pair in PAIRS[1:]:
        found = pass_agreement(fmap, *pair)
        assert not found.level_known
        assert np.mean(found.difference) == pytest.approx(0.0, abs=1e-3 * found.u.min())


HEIGHT, PLACE, WIDTH = 4e-3, 0.03, 0.03


def bump(position):
    """A field that one pass alone saw: its running integral."""
    return HEIGHT * WIDTH * np.tanh((position - PLACE) / WIDTH)


def seen(one):
    """The pass of a wire that stands second, with the bump in its readings."""
    if one.probe != WIRE or one.position[0] < 0:
        return one
    return replace(one, flux=one.flux + one.probe.gain * bump(one.position))


@pytest.mark.parametrize("pair", [(0, 1), (3, 1)])
def test_what_one_pass_alone_saw_is_shown(pair):
    found = pass_agreement(mapped(change=seen), *pair)
    assert not found.agree
    expected = -HEIGHT / np.cosh((found.position - PLACE) / WIDTH) ** 2
    if not found.level_known:
        expected = expected - expected.mean()
    # drift and gain take their share of it, within their priors; what is left piles up at the ends
    inside = slice(40, -40)
    assert np.corrcoef(found.difference[inside], expected[inside])[0, 1] > 0.9
    np.testing.assert_allclose(found.difference[inside], expected[inside], atol=0.25 * HEIGHT)


def test_a_drift_within_its_prior_is_no_disagreement():
    def drifting(one):
        late = one.time - one.time[0]
        return replace(one, flux=one.flux + (2 * MAIN.u_drift * late if one.position[0] > 0 else 0))

    found = pass_agreement(mapped(change=drifting), 0, 1)
    assert found.agree
    drifts = {unknown.where: value for unknown, value in found.removed if unknown.kind == "drift"}
    assert set(drifts) == {found.first, found.second}


def test_what_was_set_belongs_to_the_two(fmap):
    found = pass_agreement(fmap, 0, 1)
    names = {unknown.name for unknown, _ in found.removed}
    assert "gain wire" in names
    assert "gain coil" not in names
    assert {"lag", "scale", "offset"} <= names


def test_resolution_by_hand(fmap):
    found = pass_agreement(fmap, 2, 3, resolution=0.1)
    assert found.resolution == pytest.approx(0.1, rel=0.1)
    assert found.freedom < 12
    for wrong in (0.0, np.nan, -1.0):
        with pytest.raises(InputError, match="expected a length above zero"):
            pass_agreement(fmap, 2, 3, resolution=wrong)


@pytest.mark.parametrize(
    ("pair", "words"),
    [
        ((0, 0), "found the same pass twice, expected two passes"),
        ((0, 9), "found pass number 10, expected one of the 4 of the map"),
        ((-1, 0), "found pass number 0, expected one of the 4 of the map"),
    ],
)
def test_a_wrong_choice_is_said(fmap, pair, words):
    with pytest.raises(InputError, match=words):
        pass_agreement(fmap, *pair)


def test_passes_that_do_not_meet():
    scans = planned((-0.4, -0.1), (0.4, 0.1), (-0.2, 0.2), rate=20.0)
    fmap = fieldmap.stitch(measured(scans), knot_spacing=SPACING)
    with pytest.raises(InputError, match="found no stretch that both travelled"):
        pass_agreement(fmap, 0, 1)


def test_passes_of_several_lines():
    scans = (
        *planned((-0.4, 0.4), (0.4, -0.4), rate=20.0, y=0.01),
        *planned((-0.4, 0.4), (0.4, -0.4), rate=20.0),
    )
    fmap = fieldmap.stitch(measured(scans), knot_spacing=SPACING)
    for pair in ((0, 1), (2, 3)):
        assert pass_agreement(fmap, *pair).agree
    with pytest.raises(InputError, match="found different lines"):
        pass_agreement(fmap, 1, 2)


@pytest.mark.parametrize(("chi_square", "agree"), [(10.0, True), (23.2, True), (23.3, False)])
def test_one_percent_is_the_limit(chi_square, agree):
    # quantile of chi-square with 10 degrees of freedom at 99 %: 23.209 (tables, memory)
    zeros = (np.zeros(1),) * 3
    found = Agreement("a", "b", *zeros, level_known=True, resolution=0.1,
                      chi_square=chi_square, freedom=10.0, removed=())  # fmt: skip
    assert found.agree == agree
