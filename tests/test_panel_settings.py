"""What was set by hand outlives the kernel, and a broken settings file is only a sentence."""

import json
import os
from html import unescape

import ipywidgets
import pytest

import fieldmap
from fieldmap.bench.sources import TanhMagnet
from fieldmap.bench.writing import write_campaign
from fieldmap.readings import Axis, Magnet, PointReference
from fieldmap.shipped import demo_folder
from fieldmap.show.panels import FringeMapPanel, MagneticLengthPanel
from fieldmap.show.panels.places import settings_file
from fieldmap.show.panels.settings import Settings

from .shop import measured, planned

WIDE = TanhMagnet(0.5, length=0.3, lam=0.08)
STITCH = fieldmap.stitch


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    campaign = measured(
        planned((-0.4, 0.4), (0.4, -0.4), (-0.4, 0.4), rate=10.0),
        [PointReference(0.0, float(WIDE.field(0.0)), 1e-5), PointReference(0.05, 0.4, 1e-1)],
        source=WIDE,
        magnet=Magnet("dipole", "By", gap=0.08),
        axis=Axis("z", (-0.4, 0.4), (-0.02, 0.02)),
    )
    place = tmp_path_factory.mktemp("bench") / "magnet"
    write_campaign(campaign, place)
    return place


@pytest.fixture(scope="module")
def known():
    return {}


@pytest.fixture(autouse=True)
def _once(monkeypatch, known):
    def stitch(campaign, **more):
        key = (len(campaign.references), *(one.name for one in campaign.passes))
        if key not in known:
            known[key] = STITCH(campaign, **more)
        return known[key]

    monkeypatch.setattr("fieldmap.show.panels.state.stitch", stitch)


@pytest.fixture
def bench(written, tmp_path, monkeypatch):
    """A copy of the campaign to keep settings beside."""
    place = tmp_path / "magnet"
    place.mkdir()
    for file in written.iterdir():
        (place / file.name).write_bytes(file.read_bytes())
    (tmp_path / "elsewhere").mkdir()
    monkeypatch.chdir(tmp_path / "elsewhere")
    yield place
    ipywidgets.Widget.close_all()


def opened(place, kind=MagneticLengthPanel):
    panel = kind()
    panel.open(place)
    assert panel.state.error == ""
    return panel


def kept(place):
    return json.loads((place / "campaign.panel.json").read_text(encoding="utf-8"))


def test_opening_writes_nothing(bench):
    before = sorted(bench.iterdir())
    opened(bench)
    assert sorted(bench.iterdir()) == before


def test_everything_set_by_hand_comes_back(bench, tmp_path):
    panel = opened(bench)
    name = panel.state.campaign.passes[1].name
    panel.passes.boxes[1].value = False
    panel.references.boxes[1].value = False
    panel.limits.integrate.low.value = -300.0
    panel.limits.flat.high.value = 33.0
    panel.figure.kind.value = "residuals"
    panel.live.target.result.value = "integrated_field"
    panel.live.target.wanted.value = 0.5
    panel.save.folder.value = str(tmp_path / "out")
    panel.live.every.value = 7.0
    shown = panel.state.results.as_dict()
    assert kept(bench) == {
        "format": "fieldmap-panel/1",
        "campaign": str((bench / "campaign.toml").resolve()),
        "passes_off": [name],
        "references_off": ["point at 50 mm: 0.4 T, u = 0.1 T"],
        "integrate": [-0.3, 0.4],
        "flat": [-0.02, 0.033],
        "figure": "residuals",
        "target": {"result": "integrated_field", "U": 0.0005},
        "folder": str(tmp_path / "out"),
        "every": 7.0,
    }
    ipywidgets.Widget.close_all()  # the kernel is gone

    again = opened(bench)
    assert again.state.active == (True, False, True)
    assert again.state.trusted == (True, False)
    assert [box.value for box in again.passes.boxes] == [True, False, True]
    assert [box.value for box in again.references.boxes] == [True, False]
    assert again.state.axis.integrate == (-0.3, 0.4)
    assert again.limits.flat.high.value == 33.0
    assert again.figure.kind.value == "residuals"
    assert again.live.target.wanted.value == 0.5
    assert "Integrated field".lower() in again.live.target.told.value
    assert again.save.folder.value == str(tmp_path / "out")
    assert again.live.every.value == 7.0
    assert again.state.results.as_dict()["lines"] == shown["lines"]
    assert "Settings taken up from campaign.panel.json." in again.status.widget.value
    assert "2 of 3 passes" in again.status.widget.value
    assert kept(bench)["figure"] == "residuals"


def test_as_in_the_file_forgets(bench):
    panel = opened(bench)
    panel.passes.boxes[1].value = False
    panel.references.boxes[1].value = False
    panel.limits.integrate.low.value = -300.0
    panel.figure.kind.value = "residuals"
    panel.campaign.reset.click()
    assert all(panel.state.active)
    assert all(panel.state.trusted)
    assert panel.state.axis == panel.state.campaign.axis
    assert panel.figure.kind.value == "profile"
    assert [box.value for box in panel.passes.boxes] == [True] * 3
    assert set(kept(bench)) == {"format", "campaign"}
    assert opened(bench).state.notice == ""


def test_limits_as_in_the_file_are_not_kept(bench):
    panel = opened(bench)
    panel.limits.integrate.low.value = -300.0
    assert "integrate" in kept(bench)
    panel.limits.back.click()
    assert "integrate" not in kept(bench)


def test_names_of_another_panel_are_left_alone(bench):
    fringe = opened(bench, FringeMapPanel)
    fringe.part.value = "out"
    fringe.decades.value = True
    panel = opened(bench)
    panel.passes.boxes[0].value = False
    assert kept(bench)["part"] == "out"
    again = opened(bench, FringeMapPanel)
    assert again.part.value == "out"
    assert again.figure.part == "out"
    assert again.decades.value
    assert again.state.active == (False, True, True)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("{", "are not taken up"),
        ("", "are not taken up: campaign.panel.json: found an empty file"),
        ("[1]", "found no table, expected the format"),
        ('{"format": "fieldmap-panel/9"}', "found 'fieldmap-panel/9', expected the format"),
        ("[" * 100_000, "are not taken up"),
        ("\xff\xfe", "are not taken up"),
    ],
)
def test_a_broken_file_is_a_sentence(bench, text, words):
    (bench / "campaign.panel.json").write_text(text, encoding="latin-1")
    panel = opened(bench)
    assert words in panel.state.notice
    assert "Solved: 3 of 3 passes in use. " in panel.status.widget.value
    assert "campaign.panel.json are not taken up" in panel.status.widget.value
    panel.passes.boxes[0].value = False
    assert kept(bench)["passes_off"] == [panel.state.campaign.passes[0].name]


@pytest.mark.parametrize(
    "values",
    [
        {"passes_off": 3},
        {"passes_off": [1]},
        {"references_off": {"a": 1}},
        {"integrate": [1.0]},
        {"integrate": ["a", "b"]},
        {"integrate": [0.3, -0.3]},
        {"flat": [float("nan"), 1.0]},
        {"figure": "no such figure"},
        {"folder": 5},
        {"target": {"result": "beauty", "U": 1}},
        {"target": {"result": "magnetic_length", "U": -1}},
        {"every": "often"},
        {"live": "perhaps"},
        {"adopted": [1]},
    ],
)
def test_a_wrong_value_is_told_and_the_rest_taken_up(bench, values):
    good = {"format": "fieldmap-panel/1", "unknown": [1], "passes_off": ["nowhere.csv"]}
    file = bench / "campaign.panel.json"
    file.write_text(json.dumps(good | {"figure": "residuals"} | values), encoding="utf-8")
    panel = opened(bench)
    assert panel.state.notice.count("was not taken up") == 1
    shown = unescape(panel.status.widget.value)
    assert f"The setting '{next(iter(values))}' was not taken up" in shown
    assert all(panel.state.active)
    if "figure" not in values:
        assert panel.figure.kind.value == "residuals"


@pytest.mark.usefixtures("bench")
def test_the_demo_stays_as_it_came(tmp_path):
    panel = opened(demo_folder() / "slot")
    panel.limits.integrate.low.value = panel.limits.integrate.low.value + 1.0
    file = tmp_path / "elsewhere" / "fieldmap-results" / "slot" / "campaign.panel.json"
    assert json.loads(file.read_text())["integrate"][0] == panel.state.axis.integrate[0]
    assert not list(demo_folder().rglob("*.panel.json"))
    assert opened(demo_folder() / "slot").state.axis == panel.state.axis


def test_a_folder_that_is_read_only_is_written_elsewhere(bench, tmp_path, monkeypatch):
    access = os.access
    monkeypatch.setattr(os, "access", lambda path, mode: path != bench and access(path, mode))
    assert settings_file(bench / "campaign.toml") == (
        tmp_path / "elsewhere" / "fieldmap-results" / "magnet" / "campaign.panel.json"
    )


def test_settings_of_another_folder_of_that_name_are_not_taken(bench, tmp_path, monkeypatch):
    monkeypatch.setattr(os, "access", lambda *_: False)
    opened(bench).passes.boxes[0].value = False
    twin = tmp_path / "twin" / "magnet"
    twin.mkdir(parents=True)
    for file in bench.iterdir():
        (twin / file.name).write_bytes(file.read_bytes())
    assert all(opened(twin).state.active)
    assert not all(opened(bench).state.active)


def test_what_cannot_be_written_is_said_and_nothing_fails(bench, tmp_path, monkeypatch):
    monkeypatch.setattr(os, "access", lambda *_: False)
    (tmp_path / "elsewhere" / "fieldmap-results").write_text("in the way")
    panel = opened(bench)
    panel.passes.boxes[0].value = False
    assert panel.state.error == ""
    assert "Settings are not kept" in panel.status.widget.value
    assert "2 of 3 passes" in panel.status.widget.value


def test_a_campaign_without_a_file_keeps_nothing(bench, tmp_path):
    panel = MagneticLengthPanel()
    panel.open(fieldmap.load(bench).__class__(**(vars(fieldmap.load(bench)) | {"path": None})))
    panel.passes.boxes[0].value = False
    assert list((tmp_path / "elsewhere").iterdir()) == []
    assert not (bench / "campaign.panel.json").exists()


def test_reading_again_keeps_what_was_set(bench):
    panel = opened(bench)
    panel.passes.boxes[1].value = False
    panel.campaign.again.click()
    assert panel.state.active == (True, False, True)


def test_restoring_is_not_keeping(bench):
    panel = opened(bench)
    panel.figure.kind.value = "residuals"
    panel.limits.integrate.low.value = -300.0
    file = bench / "campaign.panel.json"
    stamp = file.stat().st_mtime_ns
    opened(bench)
    assert file.stat().st_mtime_ns == stamp


def test_other_parts_name_what_they_keep():
    settings, box = Settings(), {"cursor": 0.1}
    settings.remember("cursor", lambda: box["cursor"], lambda at: box.update(cursor=at))
    assert settings.changed() == {}
    box["cursor"] = 0.2
    assert settings.changed() == {"cursor": 0.2}
    assert settings.restore(settings.usual()) == []
    assert box == {"cursor": 0.1}


def test_a_part_that_cannot_tell_its_setting_stops_nothing(bench, caplog):
    panel = opened(bench)
    panel.state.remember("odd", lambda: None, lambda _: None)
    panel.state.settings._entries["odd"] = panel.state.settings._entries["odd"]._replace(
        get=lambda: 1 / 0
    )
    panel.passes.boxes[0].value = False
    assert "2 of 3 passes in use. Settings are not kept: a failure" in panel.status.widget.value
    assert "ZeroDivisionError" in caplog.text
