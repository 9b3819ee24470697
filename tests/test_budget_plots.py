"""The budget chart: what it shows, and that it shows it twice."""

import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_hex
from matplotlib.figure import Figure

from fieldmap.errors import InputError
from fieldmap.estimate import stitch
from fieldmap.magnet.budget import Budget, Contribution, budget
from fieldmap.show.budget_plots import budget_figure, budget_picture, budget_words, draw_budget
from fieldmap.show.look import BLUE, ORANGE
from fieldmap.show.picture import blank_figure
from tests.shop import measured, planned

HOSTILE = "$\\frac{a}{b}$"
ONE = Budget(
    "magnetic_length",
    0.4,
    "m",
    (
        Contribution("read noise", "", "A", 3e-6),
        Contribution("scale", "", "B", 4e-6),
        Contribution(HOSTILE, "", "B", 1e-6),
    ),
)


@pytest.fixture(scope="module")
def fmap():
    return stitch(measured(planned((-0.4, 0.4), rate=20.0)), knot_spacing=0.01)


def test_bars_are_the_shares_with_the_largest_on_top():
    ax = Figure().subplots()
    bars = draw_budget(ax, ONE)
    assert [float(bar.get_width()) for bar in bars] == pytest.approx(
        [100 * 16 / 26, 100 * 9 / 26, 100 / 26]
    )
    low, high = ax.get_ylim()
    assert low > high  # the first bar stands at the top
    assert [text.get_text() for text in ax.get_yticklabels()] == ["scale", "read noise", HOSTILE]


def test_types_differ_by_colour_and_by_hatch():
    stated, found, _ = draw_budget(Figure().subplots(), ONE)
    assert to_hex(stated.get_facecolor()).lower() == BLUE.lower()
    assert to_hex(found.get_facecolor()).lower() == ORANGE.lower()
    assert stated.get_hatch() != found.get_hatch()


def test_every_bar_carries_its_numbers():
    ax = Figure().subplots()
    draw_budget(ax, ONE)
    told = [text.get_text() for text in ax.texts]
    assert told == ["61.5 %   u = 4.00 µm", "34.6 %   u = 3.00 µm", "3.9 %   u = 1.00 µm"]
    names = [text.get_text() for text in ax.get_legend().get_texts()]
    assert names == ["type B: stated", "type A: from readings"]


def test_a_formula_in_a_name_is_printed_as_it_is():
    figure = blank_figure()
    draw_budget(figure.subplots(), ONE)
    figure.draw_without_rendering()


def test_words_tell_the_main_numbers():
    assert budget_words(ONE).startswith(
        "Uncertainty of magnetic length 400.000 ± 0.010 mm (k = 2): scale 61.5 % of the variance, "
        "type B; read noise 34.6 %, type A;"
    )
    assert "Nothing uncertain" in budget_words(Budget("magnetic_length", 0.4, "m", ()))


def test_an_exact_result_is_drawn_empty():
    assert draw_budget(Figure().subplots(), Budget("magnetic_length", 0.4, "m", ())) == []


def test_the_figure_of_a_map_shows_its_budget(fmap):
    figure = blank_figure()
    figure.subplots(2)
    words = budget_figure(figure, fmap, "integrated_field")
    (ax,) = figure.axes
    one = budget(fmap)["integrated_field"]
    assert words == budget_words(one)
    first = ax.patches[0]
    assert float(first.get_width()) == pytest.approx(100 * one.share(one.by_cause()[0]))


def test_no_text_leaves_the_picture(fmap):
    for result in ("magnetic_length", "homogeneity", "peak_position"):
        figure = blank_figure()
        budget_figure(figure, fmap, result)
        renderer = FigureCanvasAgg(figure).get_renderer()
        figure.draw(renderer)
        width = figure.bbox.width
        texts = [*figure.axes[0].texts, *figure.axes[0].get_yticklabels()]
        for text in texts:
            box = text.get_window_extent(renderer)
            assert box.x0 >= 0, text.get_text()
            assert box.x1 <= width, text.get_text()


def test_a_picture_and_a_refusal(fmap):
    picture = budget_picture(fmap)
    assert picture.png.startswith(b"\x89PNG")
    with pytest.raises(InputError, match="found 'lenght', expected one that this map gives"):
        budget_picture(fmap, "lenght")
