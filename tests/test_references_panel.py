"""References in the panel: what they say, how the map agrees, each to be switched off."""

from dataclasses import replace

import ipywidgets
import numpy as np
import pytest

import fieldmap
from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate.provenance import map_evidence, reference_fits
from fieldmap.readings import Axis, Magnet, PointReference, ZeroReference
from fieldmap.readings.passes import FlipReference
from fieldmap.show.panels import MagneticLengthPanel
from fieldmap.show.panels.departures import reference_words

from .shop import RECT, measured, planned

WIDE = TanhMagnet(0.5, length=0.3, lam=0.08)
TRUE = float(WIDE.field(0.0))


def shop(*references, travels=None):
    return measured(
        travels or planned((-0.4, 0.4), (0.4, -0.4), probe=RECT, rate=20.0),
        references,
        source=WIDE,
        magnet=Magnet("dipole", "By", gap=0.08),
        axis=Axis("z", (-0.4, 0.4), (-0.02, 0.02)),
    )


@pytest.fixture(scope="module")
def campaign():
    return shop(
        PointReference(0.0, TRUE, 1e-5),
        PointReference(0.05, float(WIDE.field(0.05)) + 4e-4, 5e-5),  # eight times its u off
        PointReference(-0.05, float(WIDE.field(-0.05)), 5e-5),
    )


@pytest.fixture
def panel(campaign):
    one = MagneticLengthPanel()
    one.open(campaign)
    yield one
    ipywidgets.Widget.close_all()


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign)


def test_differences_are_those_of_the_profile(campaign, fmap):
    """The row of a point is the field there: by the profile itself, no evidence needed."""
    for fit, reference in zip(reference_fits(fmap), campaign.references, strict=True):
        line = fieldmap.estimate.map_lines(fmap)[0]
        by_hand = (line.field(np.array([reference.at]))[0] - reference.field) / reference.u
        assert fit.difference == pytest.approx(by_hand, abs=0.02)
        assert fit.line == 0


def test_the_expected_spread_is_that_of_least_squares(fmap):
    """The variance of a residual is 1 less its leverage, 1 - u(map)^2/u(reference)^2."""
    line = fieldmap.estimate.map_lines(fmap)[0]
    for fit, (at, u) in zip(
        reference_fits(fmap), [(0.0, 1e-5), (0.05, 5e-5), (-0.05, 5e-5)], strict=True
    ):
        leverage = (line.u_field(np.array([at]))[0] / u) ** 2
        assert fit.told == pytest.approx(1 - leverage, abs=0.02)


def test_there_is_one_row_of_evidence_for_each(fmap):
    assert map_evidence(fmap).references.shape[0] == len(reference_fits(fmap)) == 3


def test_what_is_off_is_marked(panel):
    assert [box.description for box in panel.references.boxes] == [
        reference_words(one) for one in panel.state.campaign.references
    ]
    _, second, third = (note.value for note in panel.references.notes)  # it pulls at the first
    assert "fits" in third
    assert "map − reference = -" in second
    assert "look at it" in second
    assert "▲" in second


def test_leaving_one_out_solves_again_and_is_noted(panel, campaign):
    before = panel.state.results["central_field"]
    panel.references.boxes[1].value = False
    assert panel.state.error == ""
    assert panel.state.trusted == (True, False, True)
    expected = fieldmap.evaluate(
        fieldmap.stitch(
            replace(campaign, references=campaign.references[::2]),
            knot_spacing=float(panel.state.fmap["knots"].values[0, 0, 1]),
        )
    )
    assert panel.state.results["central_field"] == expected["central_field"]
    assert panel.state.results["central_field"].value != before.value
    assert "not used" in panel.references.notes[1].value
    assert all("look at it" not in panel.references.notes[i].value for i in (0, 2))
    assert "2 of 3 references in use" in panel.status.widget.value
    codes = {finding.code: finding for finding in panel.state.results.findings}
    assert codes["references-left-out"].where == "[[references]] 2"
    assert "point at 50 mm" in codes["references-left-out"].text
    panel.references.boxes[1].value = True
    assert panel.state.results["central_field"] == before
    assert "references-left-out" not in panel.results.findings.value


def test_without_any_level_it_is_refused_in_words(panel):
    for box in panel.references.boxes:
        box.value = False
    assert "level" in panel.state.error
    assert "alert" in panel.status.widget.value
    assert panel.state.results is None
    assert "No results." in panel.results.table.value
    panel.references.boxes[0].value = True
    assert panel.state.error == ""
    assert "nothing else tells as much, so it must agree" in panel.references.notes[0].value


def test_every_kind_says_what_it_is():
    flip = FlipReference(RECT, 0.01, 0.3, 2e-6, x=0.0, y=0.002)
    assert reference_words(flip) == (
        "flip of coil at 10 mm: 0.3 V s, u = 2e-06 V s, line x = 0 mm, y = 2 mm"
    )
    zero = ZeroReference(0.38, 0.4, 5e-6)
    assert reference_words(zero) == "zero field from 380 to 400 mm: u = 5e-06 T"


def test_references_of_two_lines_are_told_by_their_numbers():
    travels = [
        replace(one, x=x, name=f"x_{x}")
        for x in (0.0, 0.01)
        for one in planned((-0.4, 0.4), probe=RECT, rate=20.0)
    ]
    point = PointReference(0.0, TRUE, 1e-5, x=0.01, y=0.0)
    panel = MagneticLengthPanel()
    panel.open(shop(point, replace(point, x=0.0), replace(point, x=0.01, at=0.02), travels=travels))
    assert panel.state.error == ""
    numbers = [(fit.line, fit.number) for fit in reference_fits(panel.state.fmap)]
    assert numbers == [(0, 2), (1, 1), (1, 3)]
    panel.references.boxes[0].value = False
    assert panel.state.error == ""
    assert "not used" in panel.references.notes[0].value
    assert all("map − reference" in note.value for note in panel.references.notes[1:])
    ipywidgets.Widget.close_all()


def test_a_campaign_without_references_says_so():
    panel = MagneticLengthPanel()
    panel.open(measured(planned((-0.4, 0.4), rate=20.0), source=WIDE))
    (said,) = panel.references.widget.children
    assert "No reference" in said.value
    panel.open(shop(PointReference(0.0, TRUE, 1e-5)))
    assert len(panel.references.boxes) == 1
    panel.open("no/such.toml")
    assert panel.references.boxes == ()
    assert panel.references.widget.children == (said,)
    ipywidgets.Widget.close_all()
