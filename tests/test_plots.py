"""Figures: what is drawn, in which units, and what is said about it."""

import itertools
import warnings

import numpy as np
import pytest
from matplotlib import pyplot as plt
from matplotlib.figure import Figure

from fieldmap import evaluate, stitch
from fieldmap.errors import InputError
from fieldmap.readings import Axis, PointReference, Wire, make_pass
from fieldmap.show import captions, figures, look
from fieldmap.show.field_plots import (
    draw_cursor,
    draw_decay,
    draw_profile,
    draw_uncertainty,
)
from fieldmap.show.picture import blank_figure, paint
from fieldmap.show.plots import draw_passes, draw_residuals, thinned
from fieldmap.show.profile import Profile, field_at, line_of, profile_of

from .shop import AXIS, DIPOLE, RECT, measured, planned

SCANS = (
    *planned((-0.4, 0.1), (0.4, -0.1), rate=20.0),
    *planned((-0.4, 0.4), probe=RECT, rate=20.0),
)


@pytest.fixture(scope="module")
def campaign():
    return measured(SCANS, [PointReference(0.0, 0.5, 1e-5)])


@pytest.fixture(scope="module")
def fmap(campaign):
    return stitch(campaign, knot_spacing=6e-3)


@pytest.fixture(scope="module")
def results(fmap):
    return evaluate(fmap).lines[0].results


@pytest.fixture
def ax():
    return Figure().subplots()


@pytest.fixture(autouse=True)
def _nothing_left_behind():
    before = dict(plt.rcParams)
    yield
    assert plt.get_fignums() == []
    assert dict(plt.rcParams) == before


def legend_of(ax):
    return [text.get_text() for text in ax.get_legend().get_texts()]


def test_passes_are_drawn_as_recorded(ax, campaign):
    drawn = draw_passes(ax, campaign.passes)
    for line, one in zip(drawn, campaign.passes, strict=True):
        np.testing.assert_allclose(line.get_xdata(), one.position * 1e3)
        np.testing.assert_allclose(line.get_ydata(), one.flux)  # a dipole's flux is in V·s
    assert ax.get_xlabel() == "position z (mm)"
    assert ax.get_ylabel() == "flux as recorded (V·s)"
    assert legend_of(ax) == [one.name for one in campaign.passes]


def test_small_flux_gets_a_small_unit(ax):
    one = make_pass([0, 0.1, 0.2], [0, 3e-6, 1e-6], rate=1.0, probe=Wire("w", 1, 0.05))
    (line,) = draw_passes(ax, [one])
    np.testing.assert_allclose(line.get_ydata(), [0, 3, 1])
    assert ax.get_ylabel() == "flux as recorded (µV·s)"


def test_passes_differ_by_more_than_colour():
    styles = [look.pass_style(i) for i in range(24)]
    assert len(set(styles)) == 24
    assert len({(style.colour, style.dash) for style in styles}) == 24
    for one, other in itertools.pairwise(styles):
        assert one.colour != other.colour
        assert one.dash != other.dash
        assert one.marker != other.marker


def test_style_follows_the_place_in_the_campaign(ax, campaign):
    (line,) = draw_passes(ax, campaign.passes[2:], marks=(2,))
    assert line.get_color() == look.pass_style(2).colour


@pytest.mark.parametrize("name", ["$x$_y^{", "_hidden.csv", r"\frac{1", "a" * 80])
def test_names_of_files_are_no_formulas(name):
    one = make_pass([0, 0.1, 0.2], [0, 1, 2], rate=1.0, probe=Wire("w", 1, 0.05), name=name)
    figure = blank_figure()
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        words = figures.passes_figure(figure, [one])
        assert paint(figure, words).png.startswith(b"\x89PNG")
    assert legend_of(figure.axes[0]) == [look.short(name)]
    assert name in words


def test_many_passes_share_a_short_legend(ax, campaign):
    many = campaign.passes[:1] * 30
    assert len(draw_passes(ax, many)) == 30
    assert len(legend_of(ax)) == 12
    assert legend_of(ax)[-1] == "… and 19 more"
    assert captions.passes_words(many).endswith("and 18 more.")


def test_thinning_keeps_order_and_extremes():
    rng = np.random.default_rng(3)
    position, flux = np.arange(50_000.0), rng.normal(size=50_000)
    x, y = thinned(position, flux, 200)
    assert len(x) <= 200
    assert (np.diff(x) > 0).all()
    assert y.min() == flux.min()
    assert y.max() == flux.max()
    np.testing.assert_array_equal(y, flux[x.astype(int)])


def test_profile_shows_field_band_limits_and_window(ax, fmap, results):
    profile = profile_of(fmap)
    drawn = draw_profile(ax, profile, AXIS, results, "By")
    x, y = drawn.line.get_data()
    np.testing.assert_allclose(y, DIPOLE.field(np.asarray(x) / 1e3), atol=2e-3)
    assert [line.get_xdata()[0] for line in drawn.limits] == [-400, 400]
    assert (drawn.flat.get_x(), drawn.flat.get_width()) == (-50, 100)
    edge = drawn.band.get_paths()[0].vertices
    at = np.flatnonzero(np.isclose(edge[:, 0], x[600]))
    half = (edge[at, 1].max() - edge[at, 1].min()) / 2
    assert half == pytest.approx(2 * profile.u[600], rel=1e-6)
    assert ax.get_ylabel() == "By (T)"
    assert legend_of(ax) == ["By ± 2u", "limits of integration", "flat window", "magnetic length"]


def test_outline_has_the_integral_of_the_field(ax, fmap, results):
    outline = draw_profile(ax, profile_of(fmap), AXIS, results).equivalent
    x, y = outline.get_data()
    assert (x[2] - x[1]) / 1e3 * y[1] == pytest.approx(results["integrated_field"].value, rel=1e-9)


def test_without_a_length_there_is_no_outline(ax, fmap):
    assert draw_profile(ax, profile_of(fmap), AXIS).equivalent is None


def test_uncertainty_is_twice_u(ax, fmap):
    profile = profile_of(fmap)
    line = draw_uncertainty(ax, profile, AXIS, "By").line
    np.testing.assert_allclose(line.get_ydata(), 2e3 * profile.u)
    assert ax.get_ylabel() == "2u(By) (mT)"
    assert ax.get_yscale() == "log"


def test_certain_field_has_a_linear_scale(ax):
    s = np.linspace(0, 1, 5)
    draw_uncertainty(ax, Profile(s, s, 0 * s))
    assert ax.get_yscale() == "linear"


def test_profile_and_uncertainty_are_those_of_the_map(fmap):
    profile, line = profile_of(fmap), line_of(fmap)
    np.testing.assert_array_equal(profile.b, line.field(profile.s))
    np.testing.assert_allclose(profile.u, line.u_field(profile.s), rtol=0.05)
    value, u = field_at(fmap, 0.123)
    assert value == pytest.approx(float(np.interp(0.123, profile.s, profile.b)), rel=1e-3)
    assert u == pytest.approx(float(line.u_field(np.array([0.123]))[0]))


def test_residuals_are_drawn_pass_by_pass(ax, fmap):
    drawn = draw_residuals(ax, fmap)
    owner = fmap["residual_pass"].values
    assert len(drawn) == 3
    for i, line in enumerate(drawn):
        np.testing.assert_array_equal(line.get_ydata(), fmap["residual"].values[owner == i])
        np.testing.assert_allclose(
            line.get_xdata(), fmap["residual_position"].values[owner == i] * 1e3
        )
    levels = {line.get_ydata()[0] for line in ax.lines[3:]}
    assert levels == {-2, 0, 2}
    low, high = ax.get_ylim()
    assert low < fmap["residual"].values.min() < fmap["residual"].values.max() < high


def test_decay_shows_size_and_floor(ax, fmap):
    profile = profile_of(fmap, span=(0.05, 0.4))
    drawn = draw_decay(ax, profile, "z", "By")
    line, floor = drawn.line, drawn.floor
    np.testing.assert_allclose(line.get_ydata(), np.abs(profile.b))
    np.testing.assert_allclose(floor.get_ydata(), 2 * profile.u)
    assert ax.get_yscale() == "log"
    assert ax.get_ylabel() == "|By| (T)"


def test_cursor_marks_the_field(ax, fmap):
    profile = profile_of(fmap)
    draw_profile(ax, profile, AXIS)
    value, _ = field_at(fmap, 0.15)
    drawn = draw_cursor(ax, profile, 0.15, value)
    assert drawn.line.get_xdata()[0] == pytest.approx(150)
    assert drawn.point.get_ydata()[0] == pytest.approx(value)


def test_weak_fields_are_in_millitesla(ax):
    s = np.linspace(-1, 1, 11)
    profile = Profile(s, 0.02 * s, 1e-6 + 0 * s)
    drawn = draw_profile(ax, profile, Axis("x", (-1, 1), (-0.1, 0.1)), component="Bx")
    np.testing.assert_allclose(drawn.line.get_ydata(), 20 * s)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("position x (mm)", "Bx (mT)")
    cursor = draw_cursor(ax, profile, 0.5, 0.01)
    assert cursor.point.get_ydata()[0] == pytest.approx(10)


@pytest.mark.parametrize(
    ("draw", "share"),
    [
        (lambda figure, fmap, _: figures.residuals_figure(figure, fmap), "within ±2"),
        (
            lambda figure, fmap, _: figures.profile_figure(figure, fmap, AXIS),
            "limits of integration",
        ),
        (lambda figure, fmap, _: figures.uncertainty_figure(figure, fmap, AXIS), "median"),
        (lambda figure, fmap, _: figures.decay_figure(figure, fmap, AXIS), "logarithmic"),
        (lambda figure, _, passes: figures.passes_figure(figure, passes), "3 passes"),
    ],
)
def test_a_second_drawing_replaces_the_first(campaign, fmap, draw, share):
    figure = blank_figure()
    assert share in draw(figure, fmap, campaign.passes)
    before = [(len(ax.lines), len(ax.collections), len(ax.patches)) for ax in figure.axes]
    first = paint(figure, "").png
    figures.decay_figure(figure, fmap, AXIS, span=(0.1, 0.3), cursor=0.2)
    draw(figure, fmap, campaign.passes)
    draw(figure, fmap, campaign.passes)
    after = [(len(ax.lines), len(ax.collections), len(ax.patches)) for ax in figure.axes]
    assert after == before
    assert paint(figure, "").png == first


def test_words_carry_the_main_numbers(fmap, results):
    profile = profile_of(fmap)
    words = captions.profile_words(profile, AXIS, results, "By")
    assert "By along z from -400 mm to 400 mm: largest 0.5000" in words
    assert "limits of integration -400 mm and 400 mm, flat window -50 mm to 50 mm" in words
    length = results["magnetic_length"].value * 1e3
    assert f"magnetic length {length:.3f} ± 0.0" in words
    assert captions.cursor_words(0.2, -0.25, 1e-5, "By") == (
        "By at 200 mm is -0.250000 ± 0.000020 T (k = 2)."
    )


def test_words_on_residuals_name_the_largest(fmap):
    worse = fmap.copy(deep=True)
    worse["residual"][0] = -9.0
    words = captions.residuals_words(worse)
    assert f"largest -9.0 in {'pass_01.csv'} at -400 mm" in words
    assert captions.residuals_words(fmap).startswith("Normalised residuals of 3 passes, ")


def test_words_on_decay_tell_where_the_field_is_known():
    s = np.linspace(0, 1, 101)
    profile = Profile(s, np.where(s < 0.495, 1.0, 1e-6), np.full(101, 1e-3))
    assert "on 50 % of that stretch it exceeds 2u" in captions.decay_words(profile)


def test_picture_carries_its_words_escaped():
    figure = blank_figure()
    figure.subplots().plot([0, 1])
    picture = paint(figure, 'a < b & "c"')
    assert 'alt="a &lt; b &amp; &quot;c&quot;"' in picture._repr_html_()
    assert repr(picture) == 'a < b & "c"'
    assert "<script" not in picture.html


def test_pictures_by_one_call(campaign, fmap):
    for picture in (
        figures.passes_picture(campaign),
        figures.profile_picture(fmap),
        figures.uncertainty_picture(fmap),
        figures.residuals_picture(fmap),
        figures.decay_picture(fmap, span=(0.1, 0.4)),
    ):
        assert picture.png.startswith(b"\x89PNG")
        assert picture.words.endswith(".")


def test_what_is_not_mapped_cannot_be_shown(fmap):
    with pytest.raises(InputError, match="within the mapped range"):
        profile_of(fmap, span=(0.5, 0.6))
    with pytest.raises(InputError, match="position of the cursor: found 500 mm"):
        field_at(fmap, 0.5)
    with pytest.raises(InputError, match="line: found 1, expected an index from 0 to 0"):
        profile_of(fmap, line=1)
