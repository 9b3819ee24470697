"""Work in the background: the newest request wins, stop keeps the last good map, no deadlocks."""

import threading
import time

import ipywidgets
import pytest

import fieldmap
from fieldmap.bench.sources import TanhMagnet
from fieldmap.errors import RefusedError
from fieldmap.readings import Axis, Limit, Magnet, PointReference
from fieldmap.show.panels import MagneticLengthPanel
from fieldmap.show.panels.state import Reduction
from fieldmap.show.panels.worker import Stopped, Worker

from .shop import RECT, measured, planned

SOON = 20.0
WIDE = TanhMagnet(0.5, length=0.3, lam=0.08)
STITCH = fieldmap.stitch


@pytest.fixture(scope="module")
def campaign():
    return measured(
        (*planned((-0.4, 0.1), (0.4, -0.1), rate=20.0), *planned((-0.4, 0.4), probe=RECT)),
        [PointReference(0.0, float(WIDE.field(0.0)), 1e-5)],
        source=WIDE,
        magnet=Magnet("dipole", "By", gap=0.08),
        axis=Axis("z", (-0.4, 0.4), (-0.02, 0.02)),
        limits=[Limit("magnetic_length", 0.2, 0.4)],
    )


class Gate:
    """A stitch that goes on telling until it is let through, and counts who is inside."""

    def __init__(self):
        self.open, self.entered = threading.Event(), threading.Event()
        self.open.set()
        self.asked, self.inside, self.most = [], 0, 0
        self.known = {}

    def shut(self):
        self.open.clear()
        self.entered.clear()

    def __call__(self, campaign, *, knot_spacing=None, tell):
        names = tuple(one.name for one in campaign.passes)
        self.asked.append(names)
        self.inside += 1
        self.most = max(self.most, self.inside)
        try:
            self.entered.set()
            round_ = 0
            while not self.open.is_set():
                round_ += 1
                tell(f"solving for 9 coefficients, round {round_}")
                time.sleep(0.002)
            if names not in self.known:
                self.known[names] = STITCH(campaign, knot_spacing=knot_spacing)
            return self.known[names]
        finally:
            self.inside -= 1


@pytest.fixture(scope="module")
def shared():
    return {}


@pytest.fixture
def gate(monkeypatch, shared):
    one = Gate()
    one.known = shared
    monkeypatch.setattr("fieldmap.show.panels.state.stitch", one)
    yield one
    one.open.set()
    ipywidgets.Widget.close_all()


@pytest.fixture
def panel(gate, campaign):
    one = MagneticLengthPanel()
    one.state.background = True
    one.open(campaign)
    assert one.wait(SOON)
    assert one.state.error == ""
    yield one
    gate.open.set()
    assert one.wait(SOON)


def displayed(widget):
    return widget.layout.display != "none"


def test_jobs_run_one_at_a_time_and_the_thread_ends():
    worker, done = Worker(), []
    assert worker.idle
    worker.ask(lambda: done.append(threading.current_thread().name))
    assert worker.wait(SOON)
    assert done == ["fieldmap"]
    assert worker.idle
    assert "fieldmap" not in [one.name for one in threading.enumerate() if one.is_alive()]


def test_a_newer_job_ends_the_older_one_and_skips_those_between():
    worker, done, inside = Worker(), [], threading.Event()

    def long():
        inside.set()
        while True:
            worker.check()
            time.sleep(0.001)

    worker.ask(long)
    assert inside.wait(SOON)
    for name in ("second", "third"):
        worker.ask(lambda name=name: done.append(name))
    assert worker.wait(SOON)
    assert done[-1] == "third"
    assert len(done) <= 2


def test_a_lasting_job_is_neither_stopped_nor_skipped():
    worker, done, inside, go = Worker(), [], threading.Event(), threading.Event()

    def write():
        inside.set()
        go.wait(SOON)
        worker.check()
        done.append("written")

    worker.ask(write, lasting=True)
    assert inside.wait(SOON)
    worker.ask(lambda: done.append("solved"))
    worker.stop()
    worker.ask(lambda: done.append("written again"), lasting=True)
    worker.ask(lambda: done.append("solved again"))
    assert worker.stoppable
    go.set()
    assert worker.wait(SOON)
    assert done == ["written", "written again", "solved again"]


def test_a_job_that_fails_does_not_end_the_others(caplog):
    worker, done = Worker(), []
    worker.ask(lambda: 1 / 0)
    assert worker.wait(SOON)
    assert "a job failed" in caplog.text
    worker.ask(lambda: done.append(1))
    assert worker.wait(SOON)
    assert done == [1]


def test_waiting_within_a_job_does_not_hang():
    worker, said = Worker(), []
    worker.ask(lambda: said.append(worker.wait()))
    assert worker.wait(SOON)
    assert said == [False]


def test_waiting_takes_no_longer_than_told():
    worker, go = Worker(), threading.Event()
    worker.ask(lambda: go.wait(SOON))
    assert not worker.wait(0.02)
    go.set()
    assert worker.wait(SOON)


def test_nothing_stops_a_thread_that_is_not_the_worker():
    worker = Worker()
    worker.stop()
    worker.check()
    worker.ask(worker.check)
    assert worker.wait(SOON)


def test_opening_in_the_background_gives_what_calls_give(panel, campaign):
    by_calls = fieldmap.evaluate(panel.state.fmap, campaign, fringe=False)
    assert panel.state.results.as_dict() == by_calls.as_dict()
    assert "Solved: 3 of 3 passes in use." in panel.status.widget.value
    assert not displayed(panel.status.controls)


def test_what_is_shown_meanwhile_is_marked_as_out_of_date(panel, gate):
    before = panel.state.results
    gate.shut()
    panel.passes.boxes[1].value = False  # comes back at once
    assert panel.state.stale
    assert panel.state.results is before
    assert "Out of date" in panel.results.table.value
    assert "Out of date" in panel.results.verdicts.value
    assert "to be solved" in panel.passes.notes[0].value
    assert panel.state.map_marks == (0, 1, 2)  # of the map that is shown
    assert gate.entered.wait(SOON)
    gate.open.set()
    assert panel.wait(SOON)
    assert not panel.state.stale
    assert "Out of date" not in panel.results.table.value
    assert panel.state.map_marks == (0, 2)
    assert "2 of 3 passes" in panel.status.widget.value


def test_progress_is_told_while_it_solves(panel, gate):
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    until(lambda: "round" in panel.status.widget.value)
    assert displayed(panel.status.controls)
    assert displayed(panel.status.stop)
    assert not displayed(panel.status.solve)
    assert '<progress class="fm-progress" aria-label="solving for 9' in panel.status.bar.value
    assert "value=" not in panel.status.bar.value  # nobody knows how many rounds there will be
    until(lambda: panel.state.elapsed > 1.0)
    until(lambda: ", 1 s" in panel.status.widget.value)


def test_counted_work_has_a_counted_bar(panel):
    with panel.state.lock:
        panel.state._long = "reading pass 3 of 6"
        panel.state._tell("busy")
        assert 'max="6" value="3"' in panel.status.bar.value
        panel.state._long = ""


def test_stop_keeps_the_last_good_map_and_says_so(panel, gate):
    fmap, results = panel.state.fmap, panel.state.results
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    panel.status.stop.click()
    assert panel.wait(SOON)
    assert panel.state.fmap is fmap
    assert panel.state.results is results
    assert panel.state.stale
    assert panel.state.error == ""
    assert "Out of date" in panel.status.widget.value
    assert "Out of date" in panel.results.table.value
    assert displayed(panel.status.solve)
    assert not displayed(panel.status.stop)
    gate.open.set()
    panel.status.solve.click()
    assert panel.wait(SOON)
    assert not panel.state.stale
    assert "2 of 3 passes" in panel.status.widget.value


def test_taking_the_choice_back_after_a_stop_needs_no_solving(panel, gate):
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    panel.status.stop.click()
    assert panel.wait(SOON)
    asked = len(gate.asked)
    panel.passes.boxes[1].value = True
    assert panel.wait(SOON)
    assert not panel.state.stale
    assert len(gate.asked) == asked
    assert "3 of 3 passes" in panel.status.widget.value


def test_the_newest_choice_wins_and_two_are_never_solved_at_once(panel, gate, campaign):
    gate.shut()
    for index, used in ((1, False), (0, False), (1, True), (1, False)):
        panel.passes.boxes[index].value = used
        assert gate.entered.wait(SOON)
    gate.open.set()
    assert panel.wait(SOON)
    assert gate.most == 1
    assert gate.asked[-1] == (campaign.passes[2].name,)
    assert panel.state.passes == (campaign.passes[2],)
    assert "1 of 3 passes" in panel.status.widget.value


def test_limits_move_at_once_while_it_solves(panel, gate):
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    panel.limits.integrate.low.value = -300.0
    assert panel.state.axis.integrate[0] == -0.3
    narrower = panel.state.results["integrated_field"].value
    assert panel.state.stale
    gate.open.set()
    assert panel.wait(SOON)
    assert panel.limits.integrate.low.value == -300.0
    again = panel.state.results["integrated_field"]
    assert again.value == pytest.approx(narrower, abs=5 * again.u)


def test_what_is_refused_in_the_background_is_said_and_nothing_old_stays(panel, monkeypatch):
    def refuse(*_, **__):
        raise RefusedError("code", "pass_02.csv", "found nothing of use.")

    monkeypatch.setattr("fieldmap.show.panels.state.stitch", refuse)
    panel.passes.boxes[0].value = False
    assert panel.wait(SOON)
    assert panel.state.error == "pass_02.csv: found nothing of use."
    assert panel.state.results is None
    assert "No results." in panel.results.table.value
    assert not displayed(panel.status.controls)


def test_a_failure_in_the_background_is_said_in_words(panel, monkeypatch, caplog):
    monkeypatch.setattr("fieldmap.show.panels.state.stitch", lambda *_, **__: 1 / 0)
    panel.passes.boxes[0].value = False
    assert panel.wait(SOON)
    assert "ZeroDivisionError: division by zero" in panel.status.widget.value
    assert "Traceback" in caplog.text


def test_files_are_not_written_from_a_map_that_is_out_of_date(panel, gate, tmp_path):
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    panel.status.stop.click()
    assert panel.wait(SOON)
    panel.save.folder.value = str(tmp_path / "out")
    panel.save.write.click()
    assert panel.wait(SOON)
    assert "found a map that is out of date" in panel.state.error
    assert not (tmp_path / "out").exists()


def test_files_are_written_in_the_background_whatever_comes_later(panel, tmp_path):
    panel.save.folder.value = str(tmp_path / "out")
    shown = panel.state.results.as_dict()["lines"][0]["results"]
    panel.save.write.click()
    panel.passes.boxes[1].value = False
    assert panel.wait(SOON)
    assert sorted(file.name for file in (tmp_path / "out").iterdir()) == [
        "map.nc",
        "report.html",
        "results.json",
    ]
    written = fieldmap.evaluate(fieldmap.load_map(tmp_path / "out" / "map.nc"), fringe=False)
    assert written.as_dict()["lines"][0]["results"] == shown
    assert "2 of 3 passes" in panel.status.widget.value


def test_stopping_the_first_solve_leaves_a_way_on(gate, campaign):
    gate.shut()
    panel = MagneticLengthPanel()
    panel.state.background = True
    panel.open(campaign)
    assert gate.entered.wait(SOON)
    panel.status.stop.click()
    assert panel.wait(SOON)
    assert panel.state.fmap is None
    assert "Not solved. Press Solve." in panel.status.widget.value
    gate.open.set()
    panel.status.solve.click()
    assert panel.wait(SOON)
    assert "3 of 3 passes" in panel.status.widget.value


def test_opening_another_campaign_ends_the_solve_of_the_first(panel, gate, tmp_path):
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    panel.open(tmp_path / "missing.toml")
    assert panel.wait(SOON)
    assert "missing.toml" in panel.state.error
    assert panel.state.fmap is None
    assert panel.passes.boxes == ()


def test_a_solve_that_begins_when_its_campaign_is_gone_leaves_no_trace(panel, tmp_path):
    with panel.state.lock:  # the job waits for the lock while another campaign is opened
        panel.passes.boxes[1].value = False
        time.sleep(0.05)
        panel.open(tmp_path / "missing.toml")
    assert panel.wait(SOON)
    assert panel.state.error.startswith("missing.toml: found no such file")


@pytest.mark.slow
def test_many_threads_do_not_deadlock(panel, gate):
    rounds = 6

    def tick(index):
        for i in range(rounds):
            panel.passes.boxes[index].value = i % 2 == 1
            panel.limits.integrate.low.value = -300.0 - index - i
            panel.figure.kind.value = ("passes", "profile")[i % 2]

    threads = [threading.Thread(target=tick, args=(i,), daemon=True) for i in range(3)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(2 * SOON)
        assert not thread.is_alive()
    assert panel.wait(SOON)
    assert panel.state.error == ""
    assert gate.most == 1
    assert all(panel.state.active)
    assert not panel.state.stale
    axis = panel.state.axis
    again = fieldmap.evaluate(panel.state.fmap, panel.state.campaign, axis=axis, fringe=False)
    assert panel.state.results["integrated_field"] == again["integrated_field"]


@pytest.mark.usefixtures("gate")
def test_showing_comes_back_with_results(campaign, monkeypatch):
    monkeypatch.setattr("IPython.display.display", lambda *_, **__: None)
    panel = MagneticLengthPanel()
    panel.show(campaign)
    assert panel.state.background
    assert panel.state.results["magnetic_length"].unit == "m"
    panel.passes.boxes[1].value = False
    assert panel.wait(SOON)
    assert panel.state.map_marks == (0, 2)


def test_closing_ends_what_goes_on(panel, gate):
    gate.shut()
    panel.passes.boxes[1].value = False
    assert gate.entered.wait(SOON)
    panel.close()
    assert panel.state.wait(SOON)
    assert gate.inside == 0


@pytest.mark.usefixtures("gate")
def test_a_state_without_background_solves_at_once(campaign):
    state = Reduction()
    state.open(campaign)
    assert state.results is not None
    assert state.wait(0.0)
    assert not state.working


def test_a_stop_is_no_error_of_the_kit(panel):
    with pytest.raises(Stopped):
        panel.state.attempt("trying", lambda: (_ for _ in ()).throw(Stopped))
    assert panel.state.error == ""


def until(true, seconds=SOON):
    end = time.monotonic() + seconds
    while not true():
        assert time.monotonic() < end
        time.sleep(0.005)
