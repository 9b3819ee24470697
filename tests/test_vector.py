"""Figures inside a page: the same bytes every time, nothing from outside, ids of their own."""

import re
from html.parser import HTMLParser

import numpy as np
import pytest
from matplotlib.figure import Figure

from fieldmap.show import vector
from fieldmap.show.vector import inline_svg


def scatter(count=50):
    figure = Figure()
    ax = figure.subplots()
    ax.plot(np.arange(count), np.arange(count) % 7, linestyle="none", marker="o", label="a -- b")
    ax.bar([1, 2], [3, 4], hatch="//")
    ax.set_title("<script>alert(1)</script>", parse_math=False)
    ax.legend()
    return figure


class Tags(HTMLParser):
    def __init__(self, html):
        super().__init__()
        self.tags = []
        self.feed(html)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))


def test_the_same_figure_gives_the_same_bytes():
    assert inline_svg(scatter(), "dots", "a") == inline_svg(scatter(), "dots", "a")


def test_several_figures_share_no_id_and_use_only_their_own():
    for name in ("a", "b"):
        text = inline_svg(scatter(), "dots", name)
        ids = re.findall(r'\bid="([^"]*)"', text)
        used = set(re.findall(r'(?:href="#|url\(#)([^")]*)', text))
        assert len(set(ids)) == len(ids)
        assert all(one.startswith(f"{name}-") for one in ids)
        assert used == set(ids)


@pytest.mark.parametrize("count", [50, vector.MOST_POINTS + 1])
def test_nothing_comes_from_outside_and_nothing_runs(count):
    text = inline_svg(scatter(count), "dots", "a")
    for word in ("http", "<!--", "<style", "<metadata", "<script", "alert", "<?xml", "<!DOCTYPE"):
        assert word not in text
    for tag, attributes in Tags(text).tags:
        assert not any(name.startswith("on") for name in attributes), tag
        assert attributes.get("href", "#").startswith(("#", "data:image/png;base64,"))


def test_thousands_of_marks_become_one_picture():
    few, many = (inline_svg(scatter(n), "dots", "a") for n in (50, 20_000))
    assert "<image" not in few
    assert many.count("<image") == 1
    assert len(many) < 10 * len(few)


def test_words_are_its_text_alternative():
    text = inline_svg(scatter(), 'dots & "lines" <b>', "a")
    tag, attributes = Tags(text).tags[0]
    assert (tag, attributes["role"]) == ("svg", "img")
    assert attributes["aria-label"] == 'dots & "lines" <b>'
    assert attributes["viewbox"]
    assert not {"width", "height"} & set(attributes)
