"""Each pass against the map of all: sums, levels, noise, and the pass that disagrees."""

from dataclasses import replace

import numpy as np
import pytest
from matplotlib.figure import Figure

from fieldmap import stitch
from fieldmap.estimate.noise import total
from fieldmap.estimate.provenance import map_evidence
from fieldmap.readings import PointReference
from fieldmap.show import captions, figures, look
from fieldmap.show.overlaps import overlaps_of
from fieldmap.show.picture import blank_figure
from fieldmap.show.plots import draw_overlaps

from .shop import measured, out_and_back, planned

REFERENCE = [PointReference(0.0, 0.5, 1e-5)]
KNOTS = 6e-3
BUMP = 4e-5  # V s


@pytest.fixture(scope="module")
def campaign():
    return measured((*out_and_back(rate=20.0), *planned((-0.4, 0.4), rate=20.0)), REFERENCE)


@pytest.fixture(scope="module")
def fmap(campaign):
    return stitch(campaign, knot_spacing=KNOTS)


@pytest.fixture(scope="module")
def spoiled(campaign):
    """The second pass gains flux between +80 and +120 mm, and loses it again."""
    one = campaign.passes[1]
    bump = BUMP * np.exp(-(((one.position - 0.1) / 0.01) ** 2))
    worse = replace(one, flux=one.flux + bump)
    passes = (campaign.passes[0], worse, campaign.passes[2])
    return stitch(replace(campaign, passes=passes), knot_spacing=KNOTS)


def test_increments_are_those_that_the_solve_left(fmap):
    evidence = map_evidence(fmap)
    for index, one in enumerate(overlaps_of(fmap)):
        own = evidence.owner == index
        middles = np.diff(one.difference)  # between the middles of two neighbours
        assert one.difference.mean() == pytest.approx(0, abs=1e-12)
        white = fmap["residual"].values[fmap["residual_pass"].values == index]
        noise = total(evidence.noise)
        first, last = np.flatnonzero(own)[[0, -1]]
        block = type(noise)(noise.diagonal[first : last + 1], noise.off[first:last])
        # the whitened increments give back the increments, and their sums the difference
        pivots, multipliers = block.factor()
        left = white * np.sqrt(pivots)
        for i in range(len(left) - 1, 0, -1):
            left[i] += multipliers[i - 1] * (white[i - 1] * np.sqrt(pivots[i - 1]))
        np.testing.assert_allclose(middles, 0.5 * (left[1:] + left[:-1]), atol=2e-10)


def test_noise_is_that_of_the_levelled_sum(fmap):
    """Against drawn noise with the covariance that the solve used."""
    evidence, rng = map_evidence(fmap), np.random.default_rng(5)
    own = np.flatnonzero(evidence.owner == 0)
    noise = total(evidence.noise)
    n = len(own)
    dense = np.diag(noise.diagonal[:n]) + np.diag(noise.off[: n - 1], 1)
    dense = dense + np.diag(noise.off[: n - 1], -1)
    drawn = rng.multivariate_normal(np.zeros(n), dense, size=2000)
    sums = np.cumsum(drawn, axis=1) - 0.5 * drawn
    sums -= sums.mean(axis=1, keepdims=True)
    np.testing.assert_allclose(overlaps_of(fmap)[0].sd, sums.std(axis=0), rtol=0.1)


def test_sound_passes_differ_by_their_noise(fmap):
    found = overlaps_of(fmap)
    assert len(found) == 3
    assert all(0.3 < one.ratio < 1.3 for one in found)


def test_a_pass_that_disagrees_stands_out_where_it_does(fmap, spoiled):
    before, after = overlaps_of(fmap), overlaps_of(spoiled)
    ratios = [one.ratio for one in after]
    assert int(np.argmax(ratios)) == 1
    assert ratios[1] > 1.5 * before[1].ratio
    worst = after[1]
    i = int(np.abs(worst.difference).argmax())
    assert worst.position[i] == pytest.approx(0.1, abs=0.01)
    assert worst.difference[i] > 0.4 * BUMP
    for other in (after[0], after[2]):  # the map gives way a little, the others show it
        near = np.abs(other.position - 0.1) < 0.01
        assert other.difference[near].mean() < 0


def test_passes_are_drawn_in_their_styles(fmap):
    ax, found = Figure().subplots(), overlaps_of(fmap)
    drawn = draw_overlaps(ax, found, "z", (0, 3, 4))
    for line, one, index in zip(drawn, found, (0, 3, 4), strict=True):
        style = look.pass_style(index)
        assert (line.get_color(), line.get_marker()) == (style.colour, style.marker)
        np.testing.assert_allclose(line.get_xdata(), one.position * 1e3)
    assert ax.get_ylabel() in {"recorded − predicted (µV·s)", "recorded − predicted (nV·s)"}
    factor = 1e6 if "µ" in ax.get_ylabel() else 1e9
    np.testing.assert_allclose(drawn[0].get_ydata(), found[0].difference * factor)


def test_words_name_the_pass_and_the_place(spoiled):
    words = captions.overlaps_words(overlaps_of(spoiled))
    name = overlaps_of(spoiled)[1].name
    assert words.startswith("Recorded less predicted flux of 3 passes")
    assert f"µV·s in {name} at " in words
    assert words.split("if sound: ")[1].startswith(name)
    assert captions.overlaps_words([]) == "No overlaps: nothing but references."


def test_figure_and_picture(fmap):
    figure = blank_figure()
    words = figures.overlaps_figure(figure, fmap, marks=(2, 3, 4))
    assert figure.axes[0].lines[1].get_color() == look.pass_style(2).colour
    assert figures.overlaps_picture(fmap).words == words
