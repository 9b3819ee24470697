"""Whatever writes may be killed at any instant; and the study would see it if it did harm."""

from __future__ import annotations

import os

import numpy as np
import pytest

from fieldmap.atomic import settle
from fieldmap.folder_lock import fcntl, locked
from fieldmap.show.handover import write_reduction
from tests.study.killing import can_trace
from tests.study.kills import (
    BAD,
    Site,
    contents,
    leftovers,
    prepared,
    quick,
    reduced,
    run,
    study,
    table,
)

POINTS = 90 if os.environ.get("FIELDMAP_STUDY", "whole") == "sample" else 300


@pytest.mark.slow
def test_kills_leave_the_old_files_or_the_new_ones():
    rows = run(POINTS, seed=1)
    print("\n" + table(rows))
    for name, *_, counts in rows:
        assert not any(counts[one] for one in BAD), name
        assert counts["old"], name
        assert counts["new"] + counts["finished later"], name
    (reduction,) = (counts for name, *_, counts in rows if name == "reduction")
    assert reduction["finished later"], "no kill fell between the steps of putting a set in place"


@pytest.mark.slow
@pytest.mark.skipif(fcntl is None, reason="needs locks")
def test_reductions_at_the_same_time_do_not_mix(tmp_path):
    out = tmp_path / "out"
    with quick():
        one, two = reduced(1), reduced(2)
        wholes = [
            prepared("", None, lambda f, of=of: write_reduction(*of[1:], f), out).new
            for of in (one, two)
        ]
        out.mkdir()
        children = []
        for number in range(4):
            child = os.fork()
            if child == 0:
                for _ in range(25):
                    write_reduction(*(one, two)[number % 2][1:], out)
                os._exit(0)
            children.append(child)
        looks = 0
        while children:
            ended, status = os.waitpid(children[0], os.WNOHANG)
            if ended:
                assert status == 0
                children.pop(0)
            if (out / "map.nc").exists():
                settle(out)
                with locked(out):
                    assert contents(out) in wholes
                looks += 1
    assert looks > 10
    assert contents(out) in wholes
    assert not leftovers(out)


@pytest.mark.slow
def test_the_study_sees_what_is_not_written_whole(tmp_path):
    def careless(letter):
        def write(folder):
            for name in ("map.nc", "results.json", "report.html"):
                with (folder / name).open("w") as file:
                    file.write(letter * 100)
                    file.flush()
                    os.fsync(file.fileno())
                    file.write(letter * 100)

        return write

    with quick():
        writer = prepared("reduction", careless("a"), careless("b"), tmp_path / "out")
        rng = np.random.default_rng(3)
        counts = study(Site(writer, tmp_path / "out"), 30, rng, trace=can_trace())[-1]
    assert counts["half"]
    assert counts["mixed"]
