"""The panel while the bench measures: passes come in, and word of what is still missing."""

import json
import threading
import time

import ipywidgets
import pytest

import fieldmap
from fieldmap.bench.sources import TanhMagnet
from fieldmap.bench.writing import write_campaign
from fieldmap.readings import Axis, Magnet, PointReference
from fieldmap.show.panels import MagneticLengthPanel
from fieldmap.show.panels.live import LivePanel
from fieldmap.show.panels.state import Reduction
from fieldmap.show.panels.target import target_words

from .shop import measured, planned

WIDE = TanhMagnet(0.5, length=0.3, lam=0.08)
STITCH = fieldmap.stitch


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    campaign = measured(
        planned((-0.4, 0.4), (0.4, -0.4), (-0.4, 0.4), rate=10.0),
        [PointReference(0.0, float(WIDE.field(0.0)), 1e-5)],
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
def solves(monkeypatch, known):
    asked = []

    def stitch(campaign, **more):
        key = tuple((one.name, one.sha256) for one in campaign.passes)
        asked.append(tuple(one.name for one in campaign.passes))
        if key not in known:
            known[key] = STITCH(campaign, **more)
        return known[key]

    monkeypatch.setattr("fieldmap.show.panels.state.stitch", stitch)
    yield asked
    ipywidgets.Widget.close_all()


@pytest.fixture
def bench(written, tmp_path):
    """The campaign as it is while the first pass is being measured, and what comes later."""
    place = tmp_path / "magnet"
    place.mkdir()
    for name in ("campaign.toml", "pass_01.csv"):
        (place / name).write_bytes((written / name).read_bytes())
    return place


@pytest.fixture
def bring(written, bench):
    def bring(name, to=None):
        (bench / (to or name)).write_bytes((written / name).read_bytes())

    return bring


class Bench:
    """A panel whose clock and looks are the test's own."""

    def __init__(self):
        self.now = 0.0
        self.state = Reduction(keeps=True)
        self.live = LivePanel(self.state, clock=lambda: self.now)

    def look(self, seconds=1.5):
        self.now += seconds
        self.live.look()

    def names(self):
        return [one.name for one in self.state.campaign.passes]


@pytest.fixture
def one(monkeypatch):
    monkeypatch.setattr(LivePanel, "_rounds", lambda *_: None)
    return Bench()


def following(one, place):
    one.state.open(place)
    assert "found no such file" in one.state.error
    assert one.state.campaign is None
    one.live.on.value = True
    one.look(0.0)
    one.look()


def test_a_campaign_with_missing_passes_opens_once_it_is_followed(one, bench):
    following(one, bench)
    assert one.state.error == ""
    assert one.names() == ["pass_01.csv"]
    assert one.state.results is not None
    assert "1 passes are there, 2 awaited" in one.live.told.value
    assert "pass_02.csv: it is not there." in one.live.told.value


def test_a_refused_campaign_tells_of_following(one, bench):
    one.state.open(bench)
    assert "Follow the folder to open the campaign with those that are there" in one.live.told.value
    one.state.open(bench / "no_such_file.toml")
    assert one.live.told.value == ""


def test_new_passes_make_the_uncertainty_smaller(one, bench, bring):
    following(one, bench)
    before = one.state.results["integrated_field"].u
    bring("pass_02.csv")
    one.look()
    assert "pass_02.csv: it has to stand still" in one.live.told.value
    one.look()
    assert one.names() == ["pass_01.csv", "pass_02.csv"]
    assert one.state.results["integrated_field"].u < before
    assert "2 passes are there, 1 awaited" in one.live.told.value


def test_nothing_is_solved_again_without_news(one, bench, solves):
    following(one, bench)
    for _ in range(4):
        one.look()
    assert solves == [("pass_01.csv",)]


def test_following_a_whole_campaign_leaves_it_alone(one, bench, bring, solves):
    bring("pass_02.csv")
    bring("pass_03.csv")
    one.state.open(bench)
    campaign = one.state.campaign
    one.live.on.value = True
    for _ in range(3):
        one.look()
    assert one.state.campaign is campaign
    assert len(solves) == 1
    assert "3 passes are there." in one.live.told.value


def test_what_was_chosen_stays_by_name_when_a_pass_comes(one, bench, bring):
    bring("pass_03.csv")
    following(one, bench)
    assert one.names() == ["pass_01.csv", "pass_03.csv"]
    one.state.use(1, used=False)
    one.state.move(integrate=(-0.3, 0.3))
    bring("pass_02.csv")
    one.look()
    one.look()
    assert one.names() == ["pass_01.csv", "pass_02.csv", "pass_03.csv"]
    assert one.state.active == (True, True, False)
    assert one.state.axis.integrate == (-0.3, 0.3)


def test_a_pass_that_vanishes_leaves_the_map(one, bench, bring):
    bring("pass_02.csv")
    following(one, bench)
    (bench / "pass_02.csv").unlink()
    one.look()
    assert one.names() == ["pass_01.csv"]
    assert "pass_02.csv: it is not there" in one.live.told.value


def test_without_any_pass_it_says_so_and_waits(one, bench, bring):
    (bench / "pass_01.csv").unlink()
    one.state.open(bench)
    one.live.on.value = True
    one.look(0.0)
    one.look()
    assert "found no measured pass" in one.state.error
    bring("pass_01.csv")
    one.look()
    one.look()
    assert one.state.error == ""
    assert one.state.results is not None


def test_a_table_that_nobody_names_is_taken_in_with_a_chosen_probe(one, bench, bring):
    bring("pass_02.csv")
    bring("pass_03.csv")
    bring("pass_02.csv", "again.csv")
    one.state.open(bench)
    one.live.on.value = True
    one.look(0.0)
    one.look()
    (line,) = one.live.offers.children
    probe, use = line.children
    assert probe.description == "again.csv"
    assert list(probe.options) == ["wire"]
    assert "again.csv" in use.tooltip
    use.click()
    assert one.names() == ["pass_01.csv", "pass_02.csv", "pass_03.csv", "again.csv"]
    assert one.live.offers.children == ()
    codes = {finding.code: finding for finding in one.state.results.findings}
    assert codes["passes-added"].where == "again.csv"
    kept = json.loads((bench / "campaign.panel.json").read_text())
    assert kept["adopted"] == {"again.csv": "wire"}
    assert kept["live"] is True

    later = Bench()  # the kernel was started again
    later.state.open(bench)
    assert later.live.on.value
    later.look(0.0)
    later.look()
    assert later.names()[-1] == "again.csv"


def test_following_is_kept_though_the_campaign_was_refused_at_first(one, bench):
    following(one, bench)
    assert json.loads((bench / "campaign.panel.json").read_text())["live"] is True
    later = Bench()
    later.state.open(bench)
    assert "found no such file" in later.state.error
    assert later.live.on.value
    later.look(0.0)
    later.look()
    assert later.names() == ["pass_01.csv"]


def test_switching_off_ends_it(one, bench, bring):
    following(one, bench)
    one.live.on.value = False
    assert one.live.told.value == ""
    bring("pass_02.csv")
    one.look()
    one.look()
    assert one.names() == ["pass_01.csv"]


def test_another_campaign_is_followed_in_its_own_folder(one, bench, tmp_path):
    following(one, bench)
    other = tmp_path / "other"
    other.mkdir()
    for file in bench.iterdir():
        if file.suffix != ".json":
            (other / file.name).write_bytes(file.read_bytes())
    one.state.open(other)
    one.look(0.0)
    one.look()
    assert one.state.campaign.path == other / "campaign.toml"
    assert one.names() == ["pass_01.csv"]


def test_opening_the_same_again_while_following_recovers(one, bench):
    following(one, bench)
    one.state.open(bench)  # refused: two passes are awaited
    assert one.state.campaign is None
    one.look()
    assert one.names() == ["pass_01.csv"]
    assert one.state.error == ""


def test_without_a_file_there_is_nothing_to_follow(one):
    one.live.on.value = True
    assert "Open a campaign file first" in one.live.told.value
    one.look()


def test_a_broken_campaign_file_is_said(one, bench):
    following(one, bench)
    (bench / "campaign.toml").write_text("nonsense = [")
    one.look()
    one.look()
    assert "text that is not TOML" in one.live.told.value
    assert one.names() == ["pass_01.csv"]


def test_a_failure_while_looking_is_said_and_it_goes_on(one, bench, bring, monkeypatch, caplog):
    following(one, bench)
    with monkeypatch.context() as patch:
        patch.setattr(one.live._follower, "look", lambda: 1 / 0)
        one.look()
    assert "ZeroDivisionError" in one.live.told.value
    assert "Traceback" in caplog.text
    bring("pass_02.csv")
    one.look()
    one.look()
    assert one.names() == ["pass_01.csv", "pass_02.csv"]


def test_hostile_names_stay_text(one, bench, written):
    (bench / "<b>x<b>.csv").write_bytes((written / "pass_01.csv").read_bytes())
    text = (bench / "campaign.toml").read_text().replace("pass_02.csv", "<i>2</i>.csv")
    (bench / "campaign.toml").write_text(text)
    one.state.open(bench)
    one.live.on.value = True
    one.look(0.0)
    one.look()
    assert "<i>" not in one.live.told.value
    assert "&lt;i&gt;" in one.live.told.value


def test_the_target_is_judged_in_words(one, bench):
    target = one.live.target
    assert target.told.value == ""
    following(one, bench)
    result = one.state.results["magnetic_length"]
    u = result.expanded(2.0) * 1e3
    target.wanted.value = float(f"{0.9 * u:.2g}")
    words = target.told.value
    assert f"magnetic length: U = {u:#.3g} mm, target {target.wanted.value:g} mm: not yet." in words
    target.wanted.value = float(f"{1.2 * u:.2g}")
    assert "mm: reached." in target.told.value
    assert "fm-accept" in target.told.value
    target.result.value = "homogeneity"
    assert "homogeneity: U =" in target.told.value
    assert target.unit.value == ""
    target.wanted.value = 0.0
    assert target.told.value == ""


def test_the_target_is_judged_anew_when_a_pass_comes(one, bench, bring):
    following(one, bench)
    before = one.state.results["integrated_field"].expanded(2.0) * 1e3
    bring("pass_02.csv")
    bring("pass_03.csv")
    one.live.target.result.value = "integrated_field"
    one.live.target.wanted.value = 0.97 * before
    assert "not yet" in one.live.target.told.value
    one.look()
    one.look()
    after = one.state.results["integrated_field"].expanded(2.0) * 1e3
    assert after < 0.97 * before
    assert "reached" in one.live.target.told.value


def test_a_target_without_results_is_not_reached(one):
    assert target_words(one.state, "peak_field", 0.1) == (
        "peak field: no result yet, target 0.1 mT.",
        False,
    )


def test_with_real_clock_and_thread_beside_a_slow_writer(bench, written):
    """The whole of it: a thread follows, the worker solves, another thread writes a pass slowly."""
    panel = MagneticLengthPanel()
    panel.live._clock = time.monotonic
    panel.state.background = True
    panel.open(bench)
    panel.wait(20)
    panel.live.every.value = 0.2
    panel.live.on.value = True
    text = (written / "pass_02.csv").read_text(encoding="utf-8")
    seen = set()
    panel.state.listen(lambda _: seen.add(lengths(panel)))

    def write():
        with (bench / "pass_02.csv").open("w", encoding="utf-8") as file:
            for start in range(0, len(text), 1500):
                file.write(text[start : start + 1500])
                file.flush()
                time.sleep(0.1)

    writer = threading.Thread(target=write)
    writer.start()
    end = time.monotonic() + 30
    while len(panel.passes.boxes) < 2 or panel.state.stale or panel.state.working:
        assert time.monotonic() < end
        time.sleep(0.05)
    writer.join()
    assert "2 passes are there, 1 awaited" in panel.live.told.value
    assert panel.state.error == ""
    assert panel.state.map_marks == (0, 1)
    assert "2 of 2 passes in use" in panel.status.widget.value
    whole = tuple(len(one.time) for one in panel.state.campaign.passes)
    assert seen <= {(), whole[:1], whole}
    panel.close()
    until_no_thread("fieldmap-follow")


def lengths(panel):
    campaign = panel.state.campaign
    return tuple(len(one.time) for one in campaign.passes) if campaign else ()


def until_no_thread(name):
    end = time.monotonic() + 5
    while any(one.name == name for one in threading.enumerate()):
        assert time.monotonic() < end
        time.sleep(0.02)
