"""Full and read-only disks, odd places, runs side by side: old files stay, one sentence tells."""

from __future__ import annotations

import contextlib
import os
import shutil
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import pytest

import fieldmap
from fieldmap import atomic, cli, folder_lock
from fieldmap.atomic import DONE, replacing, replacing_set, settle
from fieldmap.bench.writing import write_campaign
from fieldmap.errors import InputError
from fieldmap.estimate import netcdf
from fieldmap.estimate.store import load_map, save_map
from fieldmap.folder_lock import locked
from fieldmap.readings import load
from fieldmap.readings.table_section import write_table_section
from fieldmap.show.handover import save_reduction
from fieldmap.show.panels.settings import Settings
from fieldmap.show.report import page
from tests.shop import measured, planned

FULL, READ_ONLY = "full", "read-only"
SET = ("map.nc", "report.html", "results.json")


@pytest.fixture(scope="module")
def campaign():
    return measured(planned((-0.4, 0.4), rate=20.0))


@pytest.fixture(scope="module")
def fmap(campaign):
    return fieldmap.stitch(campaign, knot_spacing=0.02)


@pytest.fixture(scope="module")
def source(campaign, fmap, tmp_path_factory):
    """A campaign in files, and its map."""
    folder = tmp_path_factory.mktemp("source")
    write_campaign(campaign, folder)
    save_map(fmap, folder / "map.nc")
    return folder


@pytest.fixture
def quick(monkeypatch, fmap):
    """What is solved and shown is known already."""
    results, report = fieldmap.evaluate(fmap, fringe=False), "<!doctype html>" + "x" * 40_000
    monkeypatch.setattr(fieldmap, "stitch", lambda *_, **__: fmap)
    monkeypatch.setattr(fieldmap, "evaluate", lambda *_, **__: results)
    monkeypatch.setattr(page, "report_of", lambda *_: report)
    monkeypatch.setattr(page, "report_html", lambda *_, **__: report)


@pytest.fixture(params=[FULL, READ_ONLY])
def disk(request, tmp_path, monkeypatch):
    """Where writing fails, after `arm` was called: a disk of its own if one may be mounted."""
    place = tmp_path / "disk"
    place.mkdir()
    mounted = _mount(place, "size=200k")

    def fill():
        if not mounted:
            monkeypatch.setattr(atomic, "_sync", _raising(28, "No space left on device"))
            return
        with (place / "filler").open("wb", buffering=0) as file, contextlib.suppress(OSError):
            while True:
                file.write(b"0" * 1024)

    def protect():
        if mounted:
            subprocess.run(["mount", "-o", "remount,ro", str(place)], check=True)
        else:
            monkeypatch.setattr(Path, "mkdir", _raising(30, "Read-only file system"))

    yield place, fill if request.param == FULL else protect
    if mounted:
        subprocess.run(["umount", "-l", str(place)], check=True)


def _mount(place, options):
    if sys.platform != "linux" or os.geteuid() != 0 or shutil.which("mount") is None:
        return False
    command = ["mount", "-t", "tmpfs", "-o", options, "none", str(place)]
    return subprocess.run(command, check=False, capture_output=True).returncode == 0


def _raising(number, text):
    def fail(*_, **__):
        raise OSError(number, text)

    return fail


def all_files(folder):
    return {
        p.relative_to(folder).as_posix(): p.read_bytes() for p in folder.rglob("*") if p.is_file()
    }


def all_names(folder):
    return sorted(p.relative_to(folder).as_posix() for p in folder.rglob("*"))


def reduce(source, folder):
    return cli.main(["reduce", str(source), "--out", str(folder / "out")])


def report(source, folder):
    return cli.main(["report", str(source / "map.nc"), "--out", str(folder / "out")])


def export_text(source, folder):
    return cli.main(
        ["export", str(source / "map.nc"), "--out", str(folder / "b.csv"), "--step=50um"]
    )


def export_netcdf(source, folder):
    return cli.main(
        ["export", str(source / "map.nc"), "--out", str(folder / "b.nc"), "--step=50um"]
    )


def demo(_, folder):
    return cli.main(["demo", str(folder / "out")])


VERBS = [reduce, report, export_text, export_netcdf, demo]


@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("verb", VERBS)
def test_where_nothing_can_be_written(verb, source, disk, capsys):
    folder, arm = disk
    for name in ("out/map.nc", "out/report.html", "out/results.json", "b.csv", "b.nc"):
        (folder / name).parent.mkdir(exist_ok=True)
        (folder / name).write_bytes(b"old")
    arm()
    before, names = all_files(folder), all_names(folder)
    capsys.readouterr()
    assert verb(source, folder) == 2
    told = capsys.readouterr().err
    assert told.count("\n") == 1, told
    assert told.startswith("fieldmap: /")
    assert "No space left on device" in told or "Read-only file system" in told
    assert "fault of its own" not in told
    assert all_files(folder) == before
    assert all_names(folder) == names


@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("verb", VERBS)
def test_a_new_folder_goes_again_where_nothing_can_be_written(verb, source, disk):
    folder, arm = disk
    arm()
    names = all_names(folder)
    assert verb(source, folder / "new" if "export" not in verb.__name__ else folder) == 2
    assert all_names(folder) == names


@pytest.mark.usefixtures("quick")
def test_panels_say_where_nothing_can_be_written(disk, campaign, fmap, monkeypatch):
    folder, arm = disk
    monkeypatch.chdir(folder)  # where settings go that cannot stand beside the campaign
    write_campaign(campaign, folder / "campaign")
    file = folder / "campaign" / "campaign.toml"
    arm()
    before, names = all_files(folder), all_names(folder)
    settings = Settings()
    settings.remember("figure", lambda: "profile", lambda _: None)
    told = settings.write(file, {"figure": "x" * 5000})
    assert told.startswith("Settings are not kept: ")
    assert told.count("found") == 1
    with pytest.raises(InputError, match=r"No space left|Read-only"):
        save_reduction(fmap, fieldmap.evaluate(fmap), folder / "new" / "out")
    with pytest.raises(InputError, match=r"No space left|Read-only"):
        write_table_section(file, {"delimiter": ";"})
    with pytest.raises(InputError, match=r"No space left|Read-only"):
        write_campaign(campaign, folder / "campaign", overwrite=True)
    assert all_files(folder) == before
    assert all_names(folder) == names


@pytest.fixture
def odd(tmp_path):
    """Places where no folder can be made."""
    (tmp_path / "file").write_bytes(b"mine")
    (tmp_path / "nowhere").symlink_to(tmp_path / "gone" / "away")
    return {
        "a file": tmp_path / "file",
        "below a file": tmp_path / "file" / "out",
        "a link that leads nowhere": tmp_path / "nowhere",
        "a device": Path("/dev/null"),
        "a long name": tmp_path / ("x" * 300),
    }


PLACES = ["a file", "below a file", "a link that leads nowhere", "a device", "a long name"]


@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("place", PLACES)
@pytest.mark.parametrize("verb", ["reduce", "report", "demo"])
def test_places_for_no_folder(odd, place, verb, source, tmp_path, capsys):
    given = {"reduce": str(source), "report": str(source / "map.nc")}.get(verb)
    options = [given, "--out", str(odd[place])] if given else [str(odd[place])]
    names = all_names(tmp_path)
    assert cli.main([verb, *options]) == 2
    told = capsys.readouterr().err
    assert told.count("\n") == 1
    assert "fault of its own" not in told
    assert all_names(tmp_path) == names
    assert (tmp_path / "file").read_bytes() == b"mine"


@pytest.mark.parametrize("verb", ["reduce", "report", "export"])
def test_a_source_whose_name_is_too_long(verb, tmp_path, capsys):
    out = tmp_path / ("out.csv" if verb == "export" else "out")
    assert cli.main([verb, "x" * 300, "--out", str(out)]) == 2
    told = capsys.readouterr().err
    assert "File name too long" in told
    assert "fault of its own" not in told
    assert all_names(tmp_path) == []


@pytest.mark.parametrize("suffix", [".csv", ".nc"])
@pytest.mark.parametrize("kind", ["a link", "a folder", "a device", "a long name"])
def test_places_for_no_table(kind, suffix, source, tmp_path, capsys):
    place = tmp_path / f"out{suffix}"
    if kind == "a link":
        place.symlink_to(tmp_path / "gone.csv")
    elif kind == "a folder":
        place.mkdir()
    elif kind == "a device":
        os.mkfifo(place)
    else:
        place = tmp_path / f"{'x' * 300}{suffix}"
    names = all_names(tmp_path)
    assert cli.main(["export", str(source / "map.nc"), "--out", str(place)]) == 2
    told = capsys.readouterr().err
    assert told.count("\n") == 1
    assert "fault of its own" not in told
    assert kind in told or "File name too long" in told
    assert all_names(tmp_path) == names


def test_the_longest_name_can_be_written(source, tmp_path):
    place = tmp_path / f"{'x' * 251}.csv"
    assert cli.main(["export", str(source / "map.nc"), "--out", str(place)]) == 0
    assert all_names(tmp_path) == [place.name]


@pytest.mark.usefixtures("quick")
@pytest.mark.parametrize("blocked", SET)
def test_no_file_of_a_set_where_one_place_is_taken(blocked, source, tmp_path, capsys):
    out = tmp_path / "out"
    (out / blocked).mkdir(parents=True)
    assert reduce(source, tmp_path) == 2
    assert "found a folder, expected a file or nothing" in capsys.readouterr().err
    assert all_names(out) == [blocked]


def test_the_map_library_writes_to_memory_only(fmap, tmp_path, monkeypatch):
    """On a full disk HDF5 cannot close its file any more, and takes the process down."""
    monkeypatch.setattr(netcdf, "_in_memory", lambda *_: memoryview(b"whole"))
    save_map(fmap, tmp_path / "map.nc")
    assert (tmp_path / "map.nc").read_bytes() == b"whole"


def write_set(folder, letter, names=SET):
    with replacing_set(folder, names) as asides:
        for aside in asides:
            aside.write_bytes(letter * 1000)


def broken_off(folder, moved):
    """A folder as a kill left it that came after `moved` files of a new set were in place."""
    write_set(folder, b"a")
    (folder / DONE).mkdir()
    for i, name in enumerate(SET):
        place = folder if i < moved else folder / DONE
        (place / name).write_bytes(b"b" * 1000)


def held_bytes(folder):
    return {(folder / name).read_bytes()[:1] for name in SET}


@pytest.mark.parametrize("moved", range(4))
def test_what_was_broken_off_is_finished_by_the_next_reader(moved, tmp_path):
    broken_off(tmp_path, moved)
    with pytest.raises(InputError):
        load_map(tmp_path / "map.nc")  # it is none, but the set is whole now
    assert all_names(tmp_path) == sorted(SET)
    assert held_bytes(tmp_path) == {b"b"}


@pytest.mark.parametrize("moved", range(4))
def test_what_was_broken_off_is_finished_by_the_next_writer(moved, tmp_path):
    broken_off(tmp_path, moved)
    with replacing(tmp_path / "other") as aside:
        assert held_bytes(tmp_path) == {b"b"}
        aside.write_bytes(b"c")
    assert all_names(tmp_path) == sorted([*SET, "other"])


def test_a_campaign_whose_writing_was_broken_off_is_read_whole(campaign, tmp_path):
    write_campaign(campaign, tmp_path)
    (tmp_path / DONE).mkdir()
    text = (tmp_path / "campaign.toml").read_text("utf-8")
    (tmp_path / DONE / "campaign.toml").write_text(text.replace('"shop"', '"new"'), "utf-8")
    assert load(tmp_path).name == "new"
    assert not (tmp_path / DONE).exists()


def test_what_cannot_be_finished_is_said(tmp_path):
    broken_off(tmp_path, 1)
    (tmp_path / "report.html").unlink()
    (tmp_path / "report.html").mkdir()
    with pytest.raises(InputError, match="new files on the way to their places"):
        load_map(tmp_path / "map.nc")
    (tmp_path / "report.html").rmdir()
    settle(tmp_path)
    assert held_bytes(tmp_path) == {b"b"}


def test_a_failure_between_the_files_of_a_set_is_said_and_made_good(tmp_path, monkeypatch):
    write_set(tmp_path, b"a")
    usual, calls = Path.replace, []

    def failing(self, target):
        calls.append(target)
        if len(calls) == 2:
            raise OSError(5, "Input/output error")
        return usual(self, target)

    with monkeypatch.context() as patched:
        patched.setattr(Path, "replace", failing)
        with pytest.raises(InputError, match="new files on the way") as caught:
            write_set(tmp_path, b"b")
    assert "nothing was replaced" not in str(caught.value)
    settle(tmp_path)
    assert held_bytes(tmp_path) == {b"b"}
    assert all_names(tmp_path) == sorted(SET)


def test_stopped_by_hand_between_the_files_of_a_set(tmp_path, monkeypatch):
    write_set(tmp_path, b"a")
    usual, calls = Path.replace, []

    def stopped(self, target):
        calls.append(target)
        if len(calls) == 2:
            raise KeyboardInterrupt
        return usual(self, target)

    monkeypatch.setattr(Path, "replace", stopped)
    with pytest.raises(KeyboardInterrupt):
        write_set(tmp_path, b"b")
    assert held_bytes(tmp_path) == {b"b"}
    assert all_names(tmp_path) == sorted(SET)


def stray(folder, host=folder_lock.HOST, age=0.0):
    place = folder / f".fieldmap-{host}-0123456789abcdef.part"
    place.mkdir()
    (place / "map.nc").write_bytes(b"half")
    then = place.stat().st_mtime - age
    os.utime(place, (then, then))
    return place


def test_what_a_killed_run_left_is_removed_by_the_next(tmp_path):
    stray(tmp_path)
    write_set(tmp_path, b"a")
    assert all_names(tmp_path) == sorted(SET)


def test_what_a_living_run_writes_is_left_alone(tmp_path):
    with replacing(tmp_path / "slow") as slow:
        slow.write_bytes(b"slow")
        write_set(tmp_path, b"a")
    assert (tmp_path / "slow").read_bytes() == b"slow"
    assert all_names(tmp_path) == sorted([*SET, "slow"])


@pytest.mark.parametrize(("age", "there"), [(3600.0, True), (2 * 86_400.0, False)])
def test_what_another_machine_writes_is_left_alone_for_a_day(tmp_path, age, there):
    place = stray(tmp_path, host="ffffffff", age=age)
    write_set(tmp_path, b"a")
    assert place.exists() is there


def test_links_and_files_that_look_like_ours_are_left_alone(tmp_path):
    far = tmp_path / "far"
    far.mkdir()
    (far / "map.nc").write_bytes(b"far")
    out = tmp_path / "out"
    out.mkdir()
    (out / f".fieldmap-{folder_lock.HOST}-0.part").symlink_to(far)
    (out / f".fieldmap-{folder_lock.HOST}-1.part").write_bytes(b"mine")
    with replacing(out / "map.nc") as aside:
        aside.write_bytes(b"new")
    assert (far / "map.nc").read_bytes() == b"far"
    assert len(all_names(out)) == 3
    (out / DONE).symlink_to(far)
    with pytest.raises(InputError):
        write_set(out, b"a")
    assert (far / "map.nc").read_bytes() == b"far"
    assert (out / "map.nc").read_bytes() == b"new"


def test_strays_are_no_campaign(campaign, tmp_path):
    stray(tmp_path)
    write_campaign(campaign, tmp_path)
    assert not any(name.startswith(".") for name in all_names(tmp_path))
    with pytest.raises(InputError, match="not empty"):
        write_campaign(campaign, tmp_path)


def in_children(count, act):
    children = []
    for number in range(count):
        child = os.fork()
        if child == 0:
            try:
                act(number)
            except BaseException as error:  # noqa: BLE001 - a child tells and ends
                os.write(2, f"{error!r}\n".encode())
                os._exit(1)
            os._exit(0)
        children.append(child)
    return [os.waitpid(child, 0)[1] for child in children]


@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs fork")
def test_runs_into_one_folder_do_not_mix(tmp_path):
    write_set(tmp_path, b"z")

    def act(number):
        for _ in range(12):
            if number < 4:
                write_set(tmp_path, b"abcd"[number : number + 1])
            else:
                settle(tmp_path)
                with locked(tmp_path):
                    found = [(tmp_path / name).read_bytes() for name in SET]
                assert {one[:1] for one in found} == {found[0][:1]}
                assert {len(one) for one in found} == {1000}

    assert in_children(5, act) == [0] * 5
    assert len(held_bytes(tmp_path)) == 1
    assert held_bytes(tmp_path) != {b"z"}
    assert all_names(tmp_path) == sorted(SET)


@pytest.mark.skipif(folder_lock.fcntl is None, reason="needs locks")
def test_a_folder_that_another_run_holds_is_said(tmp_path, monkeypatch):
    write_set(tmp_path, b"a")
    monkeypatch.setattr(folder_lock, "WAIT", 0.1)
    with (
        locked(tmp_path),
        pytest.raises(InputError, match="another run has been putting files there") as caught,
    ):
        write_set(tmp_path, b"b")
    assert "nothing was replaced" in str(caught.value)
    assert held_bytes(tmp_path) == {b"a"}
    write_set(tmp_path, b"b")
    assert all_names(tmp_path) == sorted(SET)


@pytest.mark.skipif(folder_lock.fcntl is None, reason="needs locks")
def test_a_lock_ends_with_its_process(tmp_path):
    def act(_):
        with locked(tmp_path):
            os.kill(os.getpid(), 9)

    assert in_children(1, act) == [9]
    write_set(tmp_path, b"a")
    assert held_bytes(tmp_path) == {b"a"}


def test_without_locks_files_are_whole_all_the_same(tmp_path, monkeypatch):
    monkeypatch.setattr(folder_lock, "fcntl", None)
    young, old = stray(tmp_path), stray(tmp_path, host="eeeeeeee", age=2 * 86_400.0)
    write_set(tmp_path, b"a")
    write_set(tmp_path, b"b")
    assert held_bytes(tmp_path) == {b"b"}
    assert young.exists()
    assert not old.exists()


def test_a_disk_without_locks(tmp_path, monkeypatch):
    class Unable:
        LOCK_EX = LOCK_NB = 0

        @staticmethod
        def flock(*_):
            raise OSError(37, "No locks available")

    monkeypatch.setattr(folder_lock, "fcntl", Unable)
    write_set(tmp_path, b"a")
    write_set(tmp_path, b"b")
    assert held_bytes(tmp_path) == {b"b"}
    assert all_names(tmp_path) == sorted(SET)


def test_files_and_names_are_brought_to_the_disk_in_order(tmp_path, monkeypatch):
    """Contents before the name that makes them count, names before the next step."""
    done = []
    monkeypatch.setattr(atomic, "_sync", lambda path: done.append(f"sync {path.name}"))
    monkeypatch.setattr(atomic, "_sync_folder", lambda path: done.append(f"sync {_kind(path)}"))
    for name in ("replace", "rename"):
        usual = getattr(Path, name)

        def told(self, target, *, usual=usual):
            done.append(f"move to {_kind(Path(target))}")
            return usual(self, target)

        monkeypatch.setattr(Path, name, told)

    def _kind(path):
        return path.name if path.name in (*SET, DONE) else "part" if "part" in path.name else "out"

    write_set(tmp_path, b"a")
    assert done == [
        *(f"sync {name}" for name in SET),
        "sync part",
        f"move to {DONE}",
        "sync out",
        *(f"move to {name}" for name in SET),
        "sync out",
    ]
    assert all(a != b for a, b in pairwise(done))


def test_the_demo_copies_a_folder_whole_or_not_at_all(tmp_path, monkeypatch):
    """A table that was copied half would be kept for good: what is there is not copied again."""
    usual, calls = Path.write_bytes, []

    def failing(self, content):
        calls.append(self)
        if len(calls) == 4:
            usual(self, content[:10])
            raise OSError(28, "No space left on device")
        return usual(self, content)

    with monkeypatch.context() as patched:
        patched.setattr(Path, "write_bytes", failing)
        with pytest.raises(InputError, match="No space left on device"):
            cli._copy_demo(tmp_path / "demo")
    cli._copy_demo(tmp_path / "demo")
    for origin in fieldmap.shipped.demo_folder().rglob("*.csv"):
        copy = tmp_path / "demo" / "demo_data" / origin.relative_to(fieldmap.shipped.demo_folder())
        assert copy.read_bytes() == origin.read_bytes()
