"""Kill what writes, at many instants: each file stays the old or the new one, each set whole.

    python -m tests.study.kills --points 1000

A child process writes new files over old ones and is killed before its k-th system call, for
every k (for evenly spread ones where there are more than points to spend), then before every
step that Python announces, then after random times. Where system calls cannot be traced the
steps take their share.
"""

from __future__ import annotations

import argparse
import contextlib
import datetime as dt
import itertools
import os
import shutil
import sys
import tempfile
from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING
from unittest.mock import patch

import numpy as np

from fieldmap import cli
from fieldmap.atomic import DONE, PREFIX, replacing, settle
from fieldmap.bench.writing import write_campaign
from fieldmap.estimate import netcdf, stitch, store
from fieldmap.magnet import evaluate
from fieldmap.magnet.handover import export_table, write_table
from fieldmap.readings.table_section import write_table_section
from fieldmap.show.handover import write_reduction
from fieldmap.show.panels.settings import Settings
from fieldmap.show.report import page, save_report
from tests.shop import measured, planned
from tests.study.killing import can_trace, duration, killed_after, killed_at_call, killed_at_step

if TYPE_CHECKING:
    from collections.abc import Callable

OUTCOMES = ("old", "new", "finished later", "mixed", "half", "stray", "failed")
BAD = ("mixed", "half", "stray", "failed")
BESIDE = "notes.txt"  # somebody else's file in the same folder
# shares of the points
SHARES = {
    "reduction": 0.34, "first reduction": 0.14, "report": 0.06, "table, text": 0.07,
    "table, NetCDF": 0.09, "settings": 0.06, "campaign": 0.1, "[table] section": 0.06, "demo": 0.08,
}  # fmt: skip


@dataclass(frozen=True)
class Writer:
    """What writes, over what, and what has to stand there in the end."""

    name: str
    write: Callable[[Path], object]
    old: dict[str, bytes]
    new: dict[str, bytes]


class _Noon(dt.datetime):
    """A clock that stands, so that the same map gives the same bytes."""

    @classmethod
    def now(cls, tz=None):
        return cls(2026, 1, 1, 12, tzinfo=tz)


class _Clock:
    UTC, datetime = dt.UTC, _Noon


def _once(function, key):
    """What is made in memory is made once, so that the time goes into writing."""
    made = {}

    def known(*arguments, **options):
        name = key(arguments[0])
        if name not in made:
            made[name] = function(*arguments, **options)
        return made[name]

    return known


@contextlib.contextmanager
def quick():
    """No time passes for what is written, and nothing is put into a form twice."""
    sealed = _once(netcdf._in_memory, lambda dataset: (dataset.attrs["title"], len(dataset)))
    shown = _once(page.report_html, lambda fmap: fmap.attrs["title"])
    with (
        patch.object(store, "dt", _Clock),
        patch.object(write_table, "dt", _Clock),
        patch.object(netcdf, "_in_memory", sealed),
        patch.object(page, "report_html", shown),
    ):
        yield


def contents(folder):
    """Relative name and bytes of all files in a folder, but for what is on its way."""
    return {
        file.relative_to(folder).as_posix(): file.read_bytes()
        for file in sorted(folder.rglob("*"))
        if file.is_file() and not any(p.startswith(PREFIX) or p == DONE for p in file.parts)
    }


def leftovers(folder):
    """Folders of files that are on their way."""
    return [p for p in folder.rglob(".*") if p.name.startswith(PREFIX) or p.name == DONE]


def prepared(name, old, new, folder):
    """A writer with what it leaves: `old` and `new` write into a folder."""
    folder.mkdir()
    if old is not None:
        old(folder)
    before = contents(folder)
    new(folder)
    after = contents(folder)
    shutil.rmtree(folder)
    before = {one: before[one] for one in after if one in before}
    return Writer(name, new, before, after)


def reduced(seed):
    """A small map with its results and report."""
    campaign = measured(planned((-0.4, 0.4), rate=20.0), seed=seed)
    campaign = replace(campaign, name=f"Magnet {seed}")
    fmap = stitch(campaign, knot_spacing=0.02)
    return campaign, fmap, evaluate(fmap, campaign), page.report_html(fmap)


def writers(place):
    """All that writes files in the kit, each with what it leaves in one folder."""
    one, two = reduced(1), reduced(2)
    pairs = {
        "reduction": [lambda f, m=m: write_reduction(*m[1:], f) for m in (one, two)],
        "first reduction": [None, lambda f: write_reduction(*two[1:], f)],
        "report": [lambda f, m=m: save_report(m[1], f) for m in (one, two)],
        "table, text": [lambda f, m=m: export_table(m[1], f / "b.csv") for m in (one, two)],
        "table, NetCDF": [lambda f, m=m: export_table(m[1], f / "b.nc") for m in (one, two)],
        "settings": [lambda f, v=v: write_settings(f, v) for v in ("profile", "budget")],
        "campaign": [lambda f, m=m: write_campaign(m[0], f, overwrite=True) for m in (one, two)],
        "[table] section": [lambda f, v=v: write_section(f, v) for v in (";", "\t")],
        "demo": [None, cli._copy_demo],
    }
    return [prepared(name, old, new, place) for name, (old, new) in pairs.items()]


def write_settings(folder, value):
    """What a panel keeps."""
    kept = Settings()
    kept.remember("figure", lambda: "", lambda _: None)
    told = kept.write(folder / "campaign.toml", {"figure": value})
    assert told == ""


def write_section(folder, delimiter):
    """One section into a campaign file that is there."""
    file = folder / "campaign.toml"
    if not file.exists():
        file.write_text(planned_text(), encoding="utf-8")
    write_table_section(file, {"delimiter": delimiter})


def planned_text():
    """Text of a campaign file."""
    with tempfile.TemporaryDirectory() as place:
        file = write_campaign(measured(planned((-0.4, 0.4), rate=20.0)), place)
        return file.read_text(encoding="utf-8")


class Site:
    """A folder in which one writer is killed again and again."""

    def __init__(self, writer, folder):
        self.writer, self.folder, self.counts = writer, folder, Counter()

    def write(self):
        self.writer.write(self.folder)

    def reset(self):
        """The old files, and one that is none of the writer's business."""
        shutil.rmtree(self.folder, ignore_errors=True)
        self.folder.mkdir()
        for name, content in {**self.writer.old, BESIDE: b"mine"}.items():
            (self.folder / name).parent.mkdir(parents=True, exist_ok=True)
            (self.folder / name).write_bytes(content)

    def judge(self, status):
        """Look at what the killed child left, then let the next run come."""
        if status > 0:
            self.counts["failed"] += 1
            return
        whole, pending = (
            contents(self.folder),
            [p for p in leftovers(self.folder) if p.name == DONE],
        )
        outcome = self._state(whole, {p.parent for p in pending})
        for place in [self.folder, *(p for p in self.folder.rglob("*") if p.is_dir())]:
            if not any(part.startswith(".fieldmap") for part in place.parts):
                settle(place)
        after = self._state(contents(self.folder), set())
        if after in BAD or (pending and after != "new" and self.writer.name != "demo"):
            outcome = after if after in BAD else "mixed"
        elif pending and outcome not in BAD:
            outcome = "finished later"
        if not self._cleaned():
            outcome = "stray"
        self.counts[outcome] += 1

    def _state(self, found, pending):
        """Old, new, mixed or half; folders where a set is on its way may be mixed."""
        old, new = self.writer.old, self.writer.new
        if found.pop(BESIDE, None) != b"mine" or not set(found) <= set(old) | set(new):
            return "half"
        states = {}
        for name in new:
            content = found.get(name)
            if content not in (old.get(name), new[name]):
                return "half"
            if old.get(name) != new[name]:
                kind = "new" if content == new[name] else "old"
                states.setdefault((self.folder / name).parent, set()).add(kind)
        if any(len(kinds) > 1 and place not in pending for place, kinds in states.items()):
            return "mixed"
        return "new" if all(kinds == {"new"} for kinds in states.values()) else "old"

    def _cleaned(self):
        """Whether the next run in the folder leaves nothing but the files."""
        if self.writer.name in {"demo", "first reduction"}:
            self.write()
        for place in {p.parent for p in leftovers(self.folder)} | {self.folder}:
            with replacing(place / BESIDE) as aside:
                aside.write_bytes(b"mine")
        return not leftovers(self.folder)


def study(site, points, rng, *, trace):
    """Kill one writer; the row of the table."""
    writer = site.writer
    calls, at_calls = 0, 0
    if trace:
        site.reset()
        status, calls = killed_at_call(site.write, None)
        assert status == 0, f"{writer.name} fails when it is not killed"
        chosen = np.unique(np.linspace(1, calls, min(calls, points * 2 // 3)).round())
        for k in chosen.astype(int).tolist():
            site.reset()
            site.judge(killed_at_call(site.write, k)[0])
        at_calls = len(chosen)
    at_steps = _at_steps(site, max(points // 6 if trace else points * 2 // 3, 1))
    site.reset()
    longest = duration(site.write)
    at_random = max(points - at_calls - at_steps, points // 6)
    for seconds in rng.uniform(0.0, longest, at_random):
        site.reset()
        site.judge(killed_after(site.write, float(seconds)))
    assert sum(site.counts.values()) == at_calls + at_steps + at_random
    return writer.name, calls, at_calls, at_steps, at_random, site.counts


def _at_steps(site, most):
    """Kill at steps from the last ones: those are where files take their places."""
    steps = 0
    for k in itertools.count(1):
        site.reset()
        status = killed_at_step(site.write, k * 16)
        if status == 0:
            steps = k * 16
            break
    tried = 0
    for k in range(steps, 0, -1):
        site.reset()
        status = killed_at_step(site.write, k)
        if status == 0:
            continue
        site.judge(status)
        tried += 1
        if tried == most:
            break
    return tried


def table(rows):
    """The counts in Markdown."""
    head = ("writer", "system calls", "killed at a call", "at a step", "at random", *OUTCOMES)
    lines = [head, ["---"] * len(head)]
    for name, calls, *killed, counts in rows:
        lines.append([name, calls or "not traced", *killed, *(counts[one] for one in OUTCOMES)])
    total = sum((counts for *_, counts in rows), Counter())
    sums = [sum(row[i] for row in rows) for i in (2, 3, 4)]
    lines.append(["all", "", *sums, *(total[one] for one in OUTCOMES)])
    return "\n".join(f"| {' | '.join(str(cell) for cell in line)} |" for line in lines)


def run(points, seed=0, names=None):
    """Rows of the table for about so many kills in all."""
    rng, trace, rows = np.random.default_rng(seed), can_trace(), []
    with quick(), tempfile.TemporaryDirectory() as place:
        folder = Path(place) / "out"
        for writer in writers(folder):
            if names is None or writer.name in names:
                share = max(int(points * SHARES[writer.name]), 6)
                rows.append(study(Site(writer, folder), share, rng, trace=trace))
    return rows


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("--points", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=0)
    chosen = parser.parse_args()
    rows = run(chosen.points, chosen.seed)
    print(table(rows))
    return 1 if any(counts[one] for *_, counts in rows for one in BAD) else 0


if __name__ == "__main__":
    os.environ.setdefault("OMP_NUM_THREADS", "1")
    sys.exit(main())
