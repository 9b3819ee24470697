"""Following a folder: passes that come late, grow, vanish or change are never read half."""

import os
import subprocess
import sys
import textwrap
import threading
import time

import numpy as np
import pytest

from fieldmap.errors import InputError
from fieldmap.readings import load
from fieldmap.readings.campaign import load_part
from fieldmap.readings.follow import Follower
from fieldmap.readings.settled import Settling, stamp_of

HEAD = "time [s],position [mm],flux [uV s]\n"
CAMPAIGN = """\
format = "fieldmap-campaign/1"
name = "While measuring"

[magnet]
kind = "dipole"
component = "By"
gap = "30 mm"

[axis]
travel = "z"
integrate = ["-100 mm", "100 mm"]
flat = ["-10 mm", "10 mm"]

[probes.wire]
kind = "wire"
turns = 20
active_length = "50 mm"

[probes.coil]
kind = "coil"
shape = "rectangular"
effective_area = "0.3 m^2"
window = "10 mm"

[[passes]]
file = "pass_01.csv"
probe = "wire"
x = "2 mm"

[[passes]]
file = "pass_02.csv"
probe = "wire"
"""
ROWS = 50


def table(rows=ROWS, offset=0.0, column="flux [uV s]"):
    lines = [f"{0.1 * i:.1f},{-100 + 2 * i:.3f},{offset + i * i:.3f}\n" for i in range(rows)]
    return f"time [s],position [mm],{column}\n" + "".join(lines)


class Clock:
    def __init__(self):
        self.now = 100.0

    def __call__(self):
        return self.now


@pytest.fixture
def clock():
    return Clock()


@pytest.fixture
def folder(tmp_path):
    (tmp_path / "campaign.toml").write_text(CAMPAIGN)
    return tmp_path


@pytest.fixture
def follower(folder, clock):
    return Follower(folder / "campaign.toml", clock=clock)


@pytest.fixture
def look(follower, clock):
    """Looks again after some seconds."""

    def later(seconds=1.5):
        clock.now += seconds
        return follower.look()

    return later


def names(news):
    return [one.name for one in news.campaign.passes]


def why(news):
    return {one.name: one.why for one in news.waiting}


def test_a_plain_load_refuses_what_is_awaited(folder):
    with pytest.raises(InputError, match=r"pass_01\.csv: found no such file"):
        load(folder)
    part = load_part(folder, lambda _, __: None)
    assert part.campaign.passes == ()
    assert part.awaited == ("pass_01.csv", "pass_02.csv")


def test_a_part_has_the_passes_of_a_whole_load(folder):
    for i in (1, 2):
        (folder / f"pass_0{i}.csv").write_text(table())
    part = load_part(folder, lambda _, read: read())
    whole = load(folder)
    assert part.awaited == ()
    assert part.campaign.sha256 == whole.sha256
    for one, other in zip(part.campaign.passes, whole.passes, strict=True):
        assert (one.name, one.x, one.sha256) == (other.name, other.x, other.sha256)
        np.testing.assert_array_equal(one.flux, other.flux)


def test_passes_come_one_by_one(folder, look):
    first = look()
    assert first.campaign is None
    assert why(first) == {"pass_01.csv": "it is not there", "pass_02.csv": "it is not there"}
    assert names(look()) == []
    (folder / "pass_01.csv").write_text(table())
    news = look()
    assert news.campaign is None
    assert why(news)["pass_01.csv"] == "it has to stand still for a while"
    news = look()
    assert names(news) == ["pass_01.csv"]
    assert news.campaign.passes[0].x == 0.002
    assert why(news) == {"pass_02.csv": "it is not there"}
    assert look().campaign is None  # nothing new
    (folder / "pass_02.csv").write_text(table())
    look()
    assert names(look()) == ["pass_01.csv", "pass_02.csv"]


def test_a_pass_is_read_once(folder, look):
    (folder / "pass_01.csv").write_text(table())
    look()
    one = look().campaign.passes[0]
    (folder / "pass_02.csv").write_text(table())
    look()
    assert look().campaign.passes[0] is one


def test_two_looks_within_a_second_are_not_enough(folder, look):
    look(), look()
    (folder / "pass_01.csv").write_text(table())
    for _ in range(4):
        assert look(0.3).campaign is None
    assert names(look(0.3)) == ["pass_01.csv"]


def test_a_file_that_grows_is_not_taken(folder, look):
    look(), look()
    text = table()
    for part in range(1, 5):
        (folder / "pass_01.csv").write_text(text[: len(HEAD) + 100 * part])
        news = look()
        assert news.campaign is None
        assert "pass_01.csv" in why(news)
    assert why(news)["pass_01.csv"] == "it is being written"


def test_a_line_without_end_is_waited_for_and_said(folder, look):
    look(), look()
    (folder / "pass_01.csv").write_text(table().rstrip("\n"))
    for _ in range(5):
        news = look()
        assert news.campaign is None
    assert "its last line has no end" in why(news)["pass_01.csv"]
    assert "add one, or stop following" in why(news)["pass_01.csv"]
    with (folder / "pass_01.csv").open("a") as file:
        file.write("\n")
    look()
    assert names(look()) == ["pass_01.csv"]  # no pause to learn from: it was known to be open


def test_a_slow_writer_teaches_patience(folder, look):
    """A bench that goes on after 3 s is not taken as done after 3 s again."""
    look(), look()
    text = table()
    cuts = [text.index("\n", len(text) * k // 4) + 1 for k in (1, 2, 3)]
    file = folder / "pass_01.csv"
    file.write_text(text[: cuts[0]])
    look(0.1)
    file.write_text(text[: cuts[1]])
    look(3.0)  # it has gone on after a pause of 3 s
    assert look(3.0).campaign is None
    file.write_text(text[: cuts[2]])
    look(2.0)
    file.write_text(text)
    assert look(0.5).campaign is None
    assert look(4.0).campaign is None
    news = look(8.0)
    assert len(news.campaign.passes[0].time) == ROWS


def test_a_file_taken_up_after_a_long_time_teaches_nothing(folder, look):
    file = folder / "pass_01.csv"
    file.write_text(table())
    look(), look(3600.0)
    with file.open("a") as more:
        more.write("5.0,0.0,2500.0\n")
    look(), look()
    assert look().campaign is None  # given by the look before
    (folder / "pass_02.csv").write_text(table())
    look()
    assert names(look()) == ["pass_01.csv", "pass_02.csv"]


def test_a_file_that_goes_on_after_it_was_read_is_left_out_again(folder, look):
    text = table()
    half = text.index("\n", len(text) // 2) + 1
    (folder / "pass_01.csv").write_text(text[:half])
    look()
    assert len(look().campaign.passes[0].time) < ROWS
    (folder / "pass_01.csv").write_text(text)
    news = look()
    assert names(news) == []
    assert why(news)["pass_01.csv"] == "it is being written"
    assert len(look(60.0).campaign.passes[0].time) == ROWS


def test_a_file_that_vanishes_is_left_out_until_it_is_back(folder, look):
    file = folder / "pass_01.csv"
    file.write_text(table())
    look(), look()
    file.unlink()
    news = look()
    assert names(news) == []
    assert why(news)["pass_01.csv"] == "it is not there"
    file.write_text(table())
    look()
    assert names(look()) == ["pass_01.csv"]


def test_a_replaced_file_is_read_anew_even_of_equal_size_and_time(folder, look):
    file = folder / "pass_01.csv"
    file.write_text(table())
    look()
    before = look().campaign.passes[0].sha256
    stamp = file.stat()
    aside = folder / "aside.part"
    aside.write_text(table(offset=1.0).replace("1.000", "2.000", 1)[: stamp.st_size])
    aside.write_text(table().replace("100.000,0.000", "100.000,5.000"))
    os.utime(aside, ns=(stamp.st_atime_ns, stamp.st_mtime_ns))
    assert aside.stat().st_size == stamp.st_size
    aside.replace(file)
    assert names(look()) == []
    after = look().campaign.passes[0]
    assert after.sha256 != before
    assert after.flux[0] == pytest.approx(5e-6)


def test_renamed_into_place_it_is_taken_whole(folder, look):
    look(), look()
    (folder / "pass_01.csv.part").write_text(table())
    news = look()
    assert why(news)["pass_01.csv"] == "it is not there"
    (folder / "pass_01.csv.part").rename(folder / "pass_01.csv")
    look()
    assert len(look().campaign.passes[0].time) == ROWS


def test_written_to_while_it_is_read_it_waits(folder, look, monkeypatch):
    file = folder / "pass_01.csv"
    file.write_text(table())
    look()

    def slow(path, *args, **more):
        found = read(path, *args, **more)
        if path.name == "pass_01.csv":
            with file.open("a") as more_of_it:
                more_of_it.write("5.0,0.0,2500.0\n")
        return found

    from fieldmap.readings import campaign

    read = campaign.read_table
    monkeypatch.setattr(campaign, "read_table", slow)
    news = look()
    assert names(news) == []
    assert why(news)["pass_01.csv"] == "it was written to while it was read"
    monkeypatch.undo()
    look()
    assert len(look(30.0).campaign.passes[0].time) == ROWS + 1


def test_a_bad_table_is_said_and_the_others_go_on(folder, look):
    (folder / "pass_01.csv").write_text(table().replace(",1.000\n", ",what\n"))
    (folder / "pass_02.csv").write_text(table())
    look()
    news = look()
    assert names(news) == ["pass_02.csv"]
    assert "pass_01.csv, line 3" in why(news)["pass_01.csv"]
    (folder / "pass_01.csv").write_text(table())
    look()
    assert names(look()) == ["pass_01.csv", "pass_02.csv"]


def test_an_empty_file_waits(folder, look):
    (folder / "pass_01.csv").touch()
    look()
    assert why(look())["pass_01.csv"] == "it is empty"


def test_a_folder_or_a_link_to_nowhere_is_no_file(folder, look):
    (folder / "pass_01.csv").mkdir()
    (folder / "pass_02.csv").symlink_to(folder / "nowhere")
    look()
    assert set(why(look()).values()) == {"it is not there"}


def test_a_new_entry_in_the_campaign_file_is_taken_up(folder, look):
    (folder / "pass_01.csv").write_text(table())
    look(), look()
    (folder / "pass_03.csv").write_text(table(column="dflux [uV s]"))
    entry = '\n[[passes]]\nfile = "pass_03.csv"\nprobe = "coil"\nrecord = "increments"\n'
    (folder / "campaign.toml").write_text(CAMPAIGN + entry)
    assert why(look()) == {"campaign.toml": "it is being written"}
    look()
    assert names(look()) == ["pass_01.csv", "pass_03.csv"]


def test_a_broken_campaign_file_is_said_and_mended(folder, look):
    look(), look()
    (folder / "campaign.toml").write_text(CAMPAIGN.replace('"30 mm"', "30"))
    look()
    news = look()
    assert news.campaign is None
    assert "[magnet]" in news.error
    (folder / "campaign.toml").write_text(CAMPAIGN[:100])
    look()
    assert "campaign.toml" in look().error
    (folder / "campaign.toml").unlink()
    look()
    assert "no such file" in look().error
    (folder / "campaign.toml").write_text(CAMPAIGN)
    look()
    news = look()
    assert news.error == ""
    assert news.campaign is not None


@pytest.mark.parametrize(
    ("column", "record"),
    [("flux [uV s]", "cumulative"), ("dflux [uV s]", "increments"), ("voltage [mV]", "voltage")],
)
def test_tables_that_nobody_names_are_offered(folder, look, follower, column, record):
    look(), look()
    (folder / "extra.txt").write_text(table(column=column))
    assert look().offers == ()
    news = look()
    assert [(one.name, one.record) for one in news.offers] == [("extra.txt", record)]
    assert news.probes == ("wire", "coil")
    follower.adopt("extra.txt", "wire", record)
    news = look()
    assert names(news) == ["extra.txt"]
    one = news.campaign.passes[0]
    assert (one.probe.name, one.record, one.x) == ("wire", record, 0.0)
    assert news.added == ("extra.txt",)
    assert news.offers == ()
    assert follower.adopted == {"extra.txt": "wire"}


def test_what_is_no_table_is_not_offered(folder, look):
    (folder / "notes.txt").write_text("no table\n")
    (folder / "half.csv").write_text(table()[:-5])
    (folder / ".hidden.csv").write_text(table())
    (folder / "table.dat").write_text(table())
    (folder / "deeper").mkdir()
    (folder / "deeper" / "pass.csv").write_text(table())
    look()
    assert look().offers == ()


def test_a_netcdf_table_is_offered(folder, look):
    xr = pytest.importorskip("xarray")
    columns = {
        "time": ("i", np.arange(20.0), {"units": "s"}),
        "position": ("i", np.arange(20.0), {"units": "mm"}),
        "flux": ("i", np.arange(20.0), {"units": "uV s"}),
    }
    xr.Dataset(columns).to_netcdf(folder / "pass_09.nc", engine="h5netcdf")
    look()
    assert [(one.name, one.record) for one in look().offers] == [("pass_09.nc", "cumulative")]


def test_a_file_named_later_is_not_taken_twice(folder, look, follower):
    (folder / "extra.csv").write_text(table())
    look()
    follower.adopt("extra.csv", "coil")
    assert names(look()) == ["extra.csv"]
    entry = '\n[[passes]]\nfile = "./extra.csv"\nprobe = "coil"\n'
    (folder / "campaign.toml").write_text(CAMPAIGN + entry)
    look()
    news = look()
    assert news.error == ""
    assert names(news) == ["./extra.csv"]
    assert news.added == ()


def test_what_was_taken_in_and_makes_no_sense_any_more_is_passed_over(folder, look, follower):
    follower.adopt("gone.csv", "wire")
    (folder / "other.csv").write_text(table())
    follower.adopt("other.csv", "no such probe")
    look()
    news = look()
    assert news.error == ""
    assert names(news) == []


@pytest.mark.parametrize("name", ["../pass.csv", "/etc/passwd", "a/b.csv", "", ".."])
def test_only_files_of_the_folder_are_taken_in(follower, name):
    with pytest.raises(InputError, match="a file in the folder of the campaign"):
        follower.adopt(name, "wire")


def test_stamps_tell_files_apart(tmp_path):
    file = tmp_path / "a"
    assert stamp_of(file) is None
    assert stamp_of(tmp_path) is None
    file.write_text("x")
    before = stamp_of(file)
    file.write_text("xy")
    assert stamp_of(file) != before


def test_a_clock_that_stands_lets_nothing_through(tmp_path):
    file = tmp_path / "a.csv"
    file.write_text("x\n")
    settling = Settling(clock=lambda: 5.0)
    assert all(settling.why_not(file) for _ in range(4))


WRITER = """
import sys, time
path, pause, text = sys.argv[1], float(sys.argv[2]), sys.stdin.read()
with open(path, "w") as file:
    for start in range(0, len(text), 97):  # seldom at the end of a line
        file.write(text[start : start + 97])
        file.flush()
        time.sleep(pause)
"""


def test_a_process_that_writes_in_chunks_is_never_read_half(folder):
    """With real clocks: whatever the looks hit upon, a pass has all of its rows or is not there."""
    rows = 150
    follower, seen = Follower(folder / "campaign.toml", still=0.25), []
    writer = subprocess.Popen(
        [sys.executable, "-c", textwrap.dedent(WRITER), str(folder / "pass_01.csv"), "0.02"],
        stdin=subprocess.PIPE,
        text=True,
    )
    feeding = threading.Thread(target=writer.communicate, args=(table(rows),))
    feeding.start()
    end = time.monotonic() + 20
    while time.monotonic() < end and rows_of(seen) != rows:
        news = follower.look()
        if news.campaign is not None:
            seen.append([len(one.time) for one in news.campaign.passes])
        time.sleep(0.03)
    feeding.join()
    assert writer.returncode == 0
    assert seen[-1] == [rows]
    assert all(counts in ([], [rows]) for counts in seen)


def rows_of(seen):
    return seen[-1][0] if seen and seen[-1] else 0


def test_a_thread_that_replaces_files_over_and_over_is_never_read_half(folder):
    follower, seen = Follower(folder / "campaign.toml", still=0.1), []
    stop = threading.Event()

    def write():
        for i in range(12):
            aside = folder / "aside.tmp"
            aside.write_text(table(40 + i))
            aside.replace(folder / "pass_02.csv")
            if stop.wait(0.12):
                return

    writer = threading.Thread(target=write)
    writer.start()
    end = time.monotonic() + 10
    while time.monotonic() < end and rows_of(seen) != 51:
        news = follower.look()
        if news.campaign is not None:
            seen.append([len(one.time) for one in news.campaign.passes])
        time.sleep(0.02)
    stop.set()
    writer.join()
    assert seen[-1] == [51]
    assert all(not counts or 40 <= counts[0] <= 51 for counts in seen)
