"""A comparison as a person sees it: text, HTML and figure."""

import re
from dataclasses import replace

import numpy as np
import pytest

from fieldmap.magnet.comparison.compare import compare
from fieldmap.magnet.comparison.outcome import ComparedResult, Comparison, DifferenceProfile
from fieldmap.magnet.quantity import Quantity
from fieldmap.show.comparison import comparison_html, comparison_text, show_comparison
from fieldmap.show.comparison_plots import comparison_figure, comparison_picture, comparison_words
from fieldmap.show.picture import blank_figure
from tests.pairs import SOFT, plain_map

S = np.linspace(-0.1, 0.1, 41)
HOSTILE = '<script>alert("1")</script>\n$x^$'


def band(bump=0.0):
    difference = 1e-6 * np.sin(40 * S)
    difference[20:24] += bump
    return DifferenceProfile(S, difference, np.full(41, 2e-6), 3.0)


FOUND = Comparison(
    names=("May", "June"),
    component="By",
    travel="z",
    same_bench=True,
    first=0.5 - S**2,
    second=0.5 - S**2,
    shift=Quantity(3.214e-4, 7.1e-5, "m"),
    scale=Quantity(1.004e-3, 2.1e-5, "1"),
    correlation=0.25,
    before=band(),
    after=band(5e-5),
    results={
        "integrated_field": ComparedResult(
            Quantity(0.2, 6e-5, "T m"),
            Quantity(0.1998, 6e-5, "T m"),
            Quantity(2e-4, 2e-6, "T m"),
        ),
        "magnetic_length": ComparedResult(
            Quantity(0.4, 1e-5, "m"), Quantity(0.4, 1e-5, "m"), Quantity(2e-7, 1.4e-5, "m")
        ),
    },
    remarks=("Errors common to both maps: gain wire.",),
)

GOLDEN = """\
By of May (first) less June (second), z from -100 to 100 mm.

Results before any alignment; U is the expanded uncertainty, k = 2; a difference is
  significant beyond it.
result                first     second  difference        ± U  unit  significant
----------------  ---------  ---------  ----------  ---------  ----  -----------
Integrated field  0.2000000  0.1998000   0.0002000  0.0000040   T·m          YES
Magnetic length     400.000    400.000       0.000      0.028    mm           no

The second fits the first best when moved by 0.32 ± 0.14 mm and enlarged by (10.04 ±
  0.42)·1e-4 (k = 2, correlation 0.25).
After that, the difference leaves its simultaneous 95 % band on 1 stretch.

from (mm)  to (mm)  largest at (mm)  difference  ± band  unit
---------  -------  ---------------  ----------  ------  ----
        0       15               15        50.6     6.0    µT

Errors common to both maps: gain wire."""


def test_text():
    assert comparison_text(FOUND) == GOLDEN


def test_text_without_alignment_and_differences():
    text = comparison_text(replace(FOUND, shift=None, scale=None, after=None, results={}))
    assert "compared as they stand" in text
    assert "Nowhere does the difference leave" in text
    assert "significant" not in text


def test_html_says_the_same():
    html = comparison_html(FOUND)
    assert '<tr data-key="integrated_field">' in html
    assert '<tr data-key="stretch-1">' in html
    words = " ".join(re.sub(r"<[^>]*>", " ", html).split())
    for part in ("0.32 ± 0.14 mm", "on 1 stretch", "gain wire", "YES", "50.6"):
        assert part in words
    assert "<script" not in html


def test_hostile_names():
    bad = replace(FOUND, names=(HOSTILE, HOSTILE), component=HOSTILE, remarks=(HOSTILE,))
    assert "<script" not in comparison_html(bad)
    assert HOSTILE not in comparison_text(bad)
    picture = comparison_picture(bad)
    assert picture.png.startswith(b"\x89PNG")
    assert "\n" not in picture.words


def test_shown_in_a_cell():
    shown = show_comparison(FOUND)
    assert repr(shown) == GOLDEN
    assert "fm-comparison" in shown._repr_html_()


def test_figure_has_both_profiles_bands_and_marks():
    figure = blank_figure()
    words = comparison_figure(figure, FOUND)
    upper, lower = figure.axes
    one, two = upper.lines
    assert one.get_linestyle() != two.get_linestyle()
    np.testing.assert_allclose(one.get_xdata(), S * 1e3)
    names = [text.get_text() for text in lower.get_legend().get_texts()]
    assert names == ["aligned", "95 % band", "±2u", "as they stand", "significant"]
    (mark,) = lower.patches
    assert mark.get_hatch()
    low, high = mark.get_x(), mark.get_x() + mark.get_width()
    assert low == pytest.approx(-2.5)
    assert high == pytest.approx(17.5)
    assert "mT" in upper.get_ylabel() or "T" in upper.get_ylabel()
    assert words == comparison_words(FOUND)


def test_the_legend_stays_inside_the_figure():
    figure = blank_figure()
    comparison_figure(figure, FOUND)
    figure.draw_without_rendering()
    for ax in figure.axes:
        box = ax.get_legend().get_window_extent()
        assert box.x1 <= figure.bbox.x1
        assert box.y1 <= figure.bbox.y1


def test_drawn_again_the_figure_is_the_same():
    figure = blank_figure()
    comparison_figure(figure, FOUND)
    comparison_figure(figure, replace(FOUND, after=None, shift=None, scale=None))
    assert len(figure.axes) == 2
    assert not figure.axes[1].patches


def test_words():
    assert comparison_words(FOUND) == (
        "By of May and of June, z from -100 to 100 mm, and their difference after alignment: "
        "largest 50.565 µT at 15 mm, where the simultaneous 95 % band is ±6.000 µT; it leaves the "
        "band from 0 to 15 mm."
    )
    many = DifferenceProfile(S, np.where(np.arange(41) % 4, 0, 1e-3), np.full(41, 1e-6), 3.0)
    assert "and on 7 more stretches" in comparison_words(replace(FOUND, after=many))


def test_a_true_comparison_is_shown():
    fmap = plain_map()
    s = np.linspace(-0.4, 0.4, 321)
    found = compare(fmap, (s, SOFT.field(s)))
    assert "nowhere does the difference leave" in comparison_text(found)
    assert comparison_picture(found).words.endswith("it leaves the band nowhere.")
