"""Figures, sentences and tables of passes, dwells, pairs and corrections."""

from dataclasses import replace

import numpy as np
import pytest
from matplotlib import pyplot as plt
from matplotlib.figure import Figure

import fieldmap
from fieldmap.errors import InputError
from fieldmap.estimate.agreement import pass_agreement
from fieldmap.estimate.dwell_noise import Line
from fieldmap.estimate.spectrum import allan_curve, noise_allan, noise_density, voltage_spectrum
from fieldmap.magnet.corrections import corrections
from fieldmap.readings import Axis, PointReference, Wire, make_pass
from fieldmap.show import explore_plots as plots
from fieldmap.show import explore_tables as tables
from fieldmap.show import explore_words as words
from fieldmap.show.explore import Level, hear, mains_words, pass_index
from fieldmap.show.look import BLUE, INK, MM, VERMILION, pass_style
from fieldmap.show.picture import blank_figure

from .shop import DIPOLE, MAIN, RECT, STAGE, measured, planned

SCANS = (
    *planned((-0.4, 0.1), (0.4, -0.1), rate=20.0, dwell=3.0),
    *planned((-0.4, 0.4), probe=RECT, rate=20.0, dwell=3.0),
)
POINT = PointReference(0.0, float(DIPOLE.field(0.0)), 1e-5)


@pytest.fixture(scope="module")
def campaign():
    return measured(SCANS, [POINT])


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign, knot_spacing=6e-3)


@pytest.fixture
def ax():
    return Figure().subplots()


@pytest.fixture(autouse=True)
def _no_figure_stays_open():
    yield
    assert plt.get_fignums() == []


def test_levels_to_compare(campaign, fmap):
    one = campaign.passes[0]
    assert [level.name for level in hear(one).levels] == ["this dwell", "stated"]
    stated = hear(one).levels[1]
    assert stated.walk == MAIN.walk_noise
    assert stated.read == pytest.approx(np.hypot(MAIN.read_noise, MAIN.resolution / np.sqrt(12)))
    inside = hear(one, 2, fmap)  # the dwell at 100 mm, in the field
    slope = WIRE_GAIN * float(DIPOLE.field(0.1))
    assert inside.jitter == pytest.approx(slope * STAGE.u_position, rel=1e-2)
    assert inside.levels[1].name == "stated, with jitter"
    assert inside.levels[1].read == pytest.approx(np.hypot(stated.read, inside.jitter))


WIRE_GAIN = SCANS[0].probe.gain


def test_levels_that_the_map_found(campaign):
    silent = replace(MAIN, read_noise=None, walk_noise=None)
    passes = tuple(replace(one, integrator=silent) for one in campaign.passes)
    fmap = fieldmap.stitch(replace(campaign, passes=passes), knot_spacing=6e-3)
    assert [level.name for level in hear(passes[0]).levels] == ["this dwell"]
    names = [level.name for level in hear(passes[0], 1, fmap).levels]
    assert names[0] == "this dwell"
    assert names[1].startswith("found by the map")


def test_a_pass_that_the_map_does_not_have(campaign, fmap):
    other = replace(campaign.passes[0], name="other.csv")
    assert pass_index(fmap, other) is None
    assert hear(other, 1, fmap).jitter == 0.0
    assert [pass_index(fmap, one) for one in campaign.passes] == [0, 1, 2]


def test_drift_that_the_map_found(campaign, fmap):
    value, u = hear(campaign.passes[0], 1, fmap).drift
    assert abs(value) < 4 * u < 4 * MAIN.u_drift


@pytest.mark.parametrize(
    ("frequency", "rate", "expected"),
    [
        (50.0, 1000.0, "mains, 50 Hz"),
        (120.0, 1000.0, "mains, 120 Hz"),
        (10.0, 40.0, "mains, 50 Hz seen at 10 Hz"),
        (37.0, 1000.0, ""),
    ],
)
def test_lines_of_the_mains(frequency, rate, expected):
    assert mains_words(frequency, rate, 0.5) == expected


@pytest.mark.parametrize("quantity", ["flux", "increments", "voltage", "speed"])
@pytest.mark.parametrize("against", ["position", "time"])
def test_readings_are_drawn_as_they_are(ax, campaign, quantity, against):
    lines = plots.draw_readings(ax, campaign.passes, quantity, against)
    assert [line.get_color() for line in lines] == [pass_style(i).colour for i in range(3)]
    assert len({line.get_marker() for line in lines}) == 3
    one, (x, y) = campaign.passes[0], lines[0].get_data()
    steps, lasting = np.diff(one.flux), np.diff(one.time)
    expected = {
        "flux": one.flux - one.flux[0],
        "increments": steps,
        "voltage": steps / lasting,
        "speed": np.diff(one.position) * MM / lasting,
    }[quantity]
    # drawn in a handy unit: one factor for all
    factor = y[np.abs(y).argmax()] / expected[np.abs(expected).argmax()]
    np.testing.assert_allclose(y, factor * expected, rtol=1e-9, atol=1e-12 * np.abs(y).max())
    assert factor == pytest.approx(10 ** np.round(np.log10(factor)))
    last = one.time[-1] - one.time[0] if against == "time" else one.position[-1] * MM
    assert x[-1] == pytest.approx(last, abs=3.0 if against == "position" else 0.06)
    label = ax.get_xlabel()
    assert ("time" in label) == (against == "time")


def test_two_readings_of_one_time_have_no_rate(ax):
    times = [0.0, 1.0, 1.0, 2.0]
    one = make_pass([0, 1, 2, 3], [0, 1, 2, 3], times, probe=Wire("w", 1, 0.05))
    (line,) = plots.draw_readings(ax, [one], "voltage", "time")
    assert np.all(np.isfinite(line.get_ydata()))
    assert len(line.get_ydata()) == 2


def test_difference_and_band(ax, fmap):
    found = pass_agreement(fmap, 0, 1)
    line, band = plots.draw_agreement(ax, found)
    assert line.get_color() == VERMILION
    scale = line.get_ydata()[7] / found.difference[7]
    np.testing.assert_allclose(line.get_ydata(), found.difference * scale)
    top = band.get_paths()[0].vertices[:, 1].max()
    assert top == pytest.approx(2 * found.u.max() * scale)
    assert band.get_hatch() == "///"


def test_spectrum_with_its_levels(ax, campaign, fmap):
    heard = hear(campaign.passes[0], 1, fmap)
    found = voltage_spectrum(heard.dwell)
    spectrum, own, stated = plots.draw_spectrum(ax, heard, found)
    assert (ax.get_xscale(), ax.get_yscale()) == ("log", "log")
    np.testing.assert_array_equal(spectrum.get_ydata(), found.density)
    for line, level in ((own, heard.levels[0]), (stated, heard.levels[1])):
        expected = noise_density(found.frequency, level.walk, level.read, heard.dwell.step)
        np.testing.assert_array_equal(line.get_ydata(), expected)
    assert (spectrum.get_color(), own.get_color(), stated.get_color()) == (BLUE, VERMILION, INK)
    assert own.get_linestyle() != stated.get_linestyle()


def test_allan_deviation_with_its_levels(ax, campaign, fmap):
    heard = hear(campaign.passes[0], 1, fmap)
    found = allan_curve(heard.dwell)
    curve, own, _ = plots.draw_allan(ax, heard, found)
    np.testing.assert_array_equal(curve.get_ydata(), found.deviation)
    level = heard.levels[0]
    expected = noise_allan(found.time, level.walk, level.read)
    np.testing.assert_array_equal(own.get_ydata(), expected)


def humming():
    rng, rate = np.random.default_rng(8), 500.0
    time = np.arange(3000) / rate
    voltage = 3e-6 * np.sin(2 * np.pi * 50 * time) + 2e-7 * rng.standard_normal(3000)
    return make_pass(0 * time, np.cumsum(voltage) / rate, time, probe=Wire("w", 1, 1), name="hum")


def test_mains_are_recognised():
    picture = plots.spectrum_picture(humming())
    assert "Lines at 50 Hz (mains, 50 Hz), 2" in picture.words
    shown = tables.dwell_table(humming())
    assert "Lines, left out of the noise: 50 Hz (mains, 50 Hz), 2" in shown.text


def test_every_figure_has_its_words(campaign, fmap):
    figure, heard = blank_figure(), hear(campaign.passes[0], 1, fmap)
    told = [
        plots.readings_figure(figure, campaign.passes, "voltage", "time"),
        plots.agreement_figure(figure, pass_agreement(fmap, 0, 1)),
        plots.spectrum_figure(figure, heard),
        plots.allan_figure(figure, heard),
    ]
    assert len(figure.axes) == 1
    assert "Voltage against time: " in told[0]
    assert "They agree: chance explains the difference" in told[1]
    assert told[2].startswith("Power spectral density of the voltage, ")
    assert "No line stands out" in told[2]
    assert told[3].startswith("Allan deviation of the voltage, ")
    assert all(len(one) > 100 for one in told)


def test_pictures_for_a_cell(campaign, fmap):
    for picture in (
        plots.readings_picture(campaign.passes),
        plots.agreement_picture(fmap, 0, 2),
        plots.spectrum_picture(campaign.passes[0], 1, fmap),
        plots.allan_picture(campaign.passes[0], 1, fmap),
    ):
        assert picture.png.startswith(b"\x89PNG")
        assert 'alt="' in picture._repr_html_()


def test_passes_that_do_not_agree_are_said_so(fmap):
    found = replace(pass_agreement(fmap, 0, 2), chi_square=900.0)
    text = words.agreement_words(found)
    assert "They do not agree" in text
    assert "probability below 0.01 %" in text
    assert "its mean is not told by a coil" in text


def test_names_from_files_are_escaped(campaign):
    evil = replace(campaign.passes[0], name="<b>&\n.csv")
    html = tables.dwell_table(evil).html
    assert "<b>&" not in html
    assert "&lt;b&gt;&amp;" in html


def test_numbers_of_a_dwell(campaign, fmap):
    shown = tables.dwell_table(campaign.passes[0], 1, fmap)
    lines = shown.text.splitlines()
    assert lines[0].startswith(f"{campaign.passes[0].name}, dwell 1 at -400 mm: ")
    assert [line.split()[0] for line in lines[3:6]] == ["drift", "walk", "read"]
    assert "The map found a drift of " in shown.text
    assert 'data-kind="dwell"' in shown.html


def test_numbers_of_a_voltage_have_no_read_noise():
    samples, probe = 1e-6 * np.random.default_rng(4).standard_normal(200), Wire("w", 1, 1)
    one = make_pass(np.zeros(200), samples, rate=50.0, probe=probe, record="voltage")
    text = tables.dwell_table(one).text
    assert "walk noise" in text
    assert "read noise" not in text


def test_numbers_of_a_pair(fmap):
    shown = tables.agreement_table(fmap, 0, 1)
    assert "set before comparing" in shown.text
    assert "gain wire" in shown.text
    assert "gain coil" not in shown.text
    assert "They agree" in shown.html


def test_numbers_of_the_corrections(fmap):
    found = corrections(fmap)
    shown = tables.corrections_shown(found, "integrated_field")
    rows = shown.text.splitlines()[3:-1]
    shares = [abs(float(row.split()[-1])) for row in rows]
    assert shares == sorted(shares, reverse=True)
    assert "± U" in shown.text
    with pytest.raises(InputError, match="result: found 'nothing', expected one of integrated_"):
        tables.corrections_shown(found, "nothing")


def test_corrections_follow_the_limits(fmap):
    axis = Axis("z", (-0.3, 0.3), (-0.02, 0.02))
    assert tables.corrections_table(fmap, "integrated_field", axis=axis).text != (
        tables.corrections_table(fmap, "integrated_field").text
    )


def test_words_of_levels_and_lines():
    assert words.level_words(Level("stated", 2e-7, 5e-8)) == (
        "stated: walk 0.2 µV·s/√s, read noise 50 nV·s"
    )
    assert words.line_words(Line(37.0, 2e-6), 1000.0, 0.2) == "37 Hz, 2 µV rms"
