"""The fault campaign: is any number silently wrong that the readings could have shown to be?

Every kind of fault at every severity on random campaigns, one line a kind, on two cores in about an
hour; it goes on from its file where it was stopped:

    python -m tests.study.faults --each 6 --workers 2 --out faults.jsonl

One trial alone, with what the kit says of it:

    python -m tests.study.faults --only lag --severity 3 --draw mixed+point --seed 7

A campaign is drawn and reduced without a fault once; each fault is then put into the same readings.
"Revealable" is what the ideal observer of `fieldmap.bench.faults.ideal` could have told.
"""

from __future__ import annotations

import argparse
import itertools
import json
import math
import os
import signal
import time
import zlib
from collections import Counter
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import dataclass
from functools import lru_cache, partial
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

import fieldmap
from fieldmap.bench.bench_errors import Noise
from fieldmap.bench.fault_outcome import Outcome, Twin, reduced, twin_of, unsaid
from fieldmap.bench.faults import FAULTS, SEVERITIES, Setting, inject
from fieldmap.bench.faults.ideal import REVEALABLE, Observer
from fieldmap.errors import FieldmapError
from fieldmap.estimate import map_passes
from tests.study.calibration import truth
from tests.study.draw import KINDS, draw_campaign

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator

    from fieldmap.bench.sources import Source
    from fieldmap.readings import Campaign

FIRST_SEED = 2000
LONGEST = 24.0  # gaps: longer lines take too long to be solved ten thousand times
LIMIT = 60.0  # s of processor time for one trial: a kit that takes longer hangs
NO_PLACE = "no place"  # a kind that a campaign cannot have: counted nowhere
COLUMNS = (
    "harmless",
    "found",
    "refused",
    "off",
    "silent, revealable",
    "silent, not revealable",
    "crashed",
)


@dataclass(frozen=True, eq=False)
class Drawn:
    """A campaign without a fault, and what every trial on it shares."""

    setting: Setting
    twin: Twin
    observer: Observer


@dataclass(frozen=True)
class Trial:
    """One fault in one campaign; `fault` "none" is the fault-free campaign itself."""

    fault: str
    severity: int
    draw: str
    seed: int
    outcome: str
    errors: dict[str, float]
    z: float
    said: tuple[str, ...]

    @property
    def key(self) -> tuple[str, int, str, int]:
        """What makes it again."""
        return self.fault, self.severity, self.draw, self.seed

    @property
    def revealable(self) -> bool:
        """Whether any test could have shown it."""
        return self.z >= REVEALABLE and FAULTS[self.fault].revealed_by != "nothing"

    @property
    def column(self) -> str:
        """Where it counts."""
        if self.outcome != "silent":
            return self.outcome
        return COLUMNS[4] if self.revealable else COLUMNS[5]


@lru_cache(maxsize=2)
def drawn(draw: str, seed: int) -> Drawn:
    """Draw one campaign and reduce it without a fault."""
    campaign, source = draw_campaign(draw, seed)
    fmap = fieldmap.stitch(campaign)
    known = {(0, key): value for key, value in truth(source, campaign).items()}
    twin = twin_of(fieldmap.evaluate(fmap, campaign, fringe=False), known)
    setting = setting_of(campaign, source, fmap)
    return Drawn(setting, twin, Observer(setting, fmap))


def setting_of(campaign: Campaign, source: Source, fmap) -> Setting:
    """What faults are put into: the campaign, its true field, the noise that was found."""
    noise = {one["name"]: Noise(one["walk_noise"], one["read_noise"]) for one in map_passes(fmap)}
    return Setting(campaign, lambda _: source, noise)


def rng_of(fault: str, severity: int, draw: str, seed: int) -> np.random.Generator:
    """A generator for each trial alone; severities of one kind share pass, instant and sign."""
    del severity
    return np.random.default_rng([zlib.crc32(fault.encode()), KINDS.index(draw), seed])


def run_one(fault: str, severity: int, draw: str, seed: int) -> Trial | None:
    """One fault in one campaign; None where it has no place."""
    drawn(draw, seed)  # not within the limit
    signal.signal(signal.SIGPROF, _stop)
    signal.setitimer(signal.ITIMER_PROF, LIMIT)
    try:
        return _run_one(fault, severity, draw, seed)
    except Exception as error:  # noqa: BLE001 - what the kit must never do is counted, too
        said = (f"{type(error).__name__}: {error}",)
        return Trial(fault, severity, draw, seed, "crashed", {}, math.inf, said)
    finally:
        signal.setitimer(signal.ITIMER_PROF, 0.0)


def _stop(*_) -> None:
    raise TimeoutError(f"no end within {LIMIT:g} s")


def _run_one(fault: str, severity: int, draw: str, seed: int) -> Trial | None:
    whole = drawn(draw, seed)
    z = math.inf
    try:
        faulty = inject(whole.setting, fault, severity, rng_of(fault, severity, draw, seed))
    except FieldmapError as error:  # what the reader of tables says
        outcome = Outcome("refused", said=(str(error),))
    else:
        if faulty is None:
            return None
        outcome = reduced(faulty.campaign, whole.twin)
        if outcome.name in ("off", "silent"):
            rng = rng_of(fault, severity, draw, seed)
            z = whole.observer.statistic(fault, severity, rng)
    return trial(fault, severity, draw, seed, outcome, z)


def trial(
    fault: str, severity: int, draw: str, seed: int, outcome: Outcome, z: float = math.inf
) -> Trial:
    """What is kept of a trial."""
    errors = {key: round(error, 2) for (_, key), error in outcome.errors.items()}
    return Trial(fault, severity, draw, seed, outcome.name, errors, z, outcome.said)


def run_draw(
    draw: str, seed: int, wanted: list[tuple[str, int]], out: Path | None = None
) -> list[Trial]:
    """All wanted faults in one campaign; "none" is the campaign itself. Each is written at once."""
    made = []
    for fault, severity in wanted:
        one = _whole(draw, seed) if fault == "none" else run_one(fault, severity, draw, seed)
        one = one or Trial(fault, severity, draw, seed, NO_PLACE, {}, 0.0, ())
        made.append(one)
        if out:
            write(out, [one])
    return made


def _whole(draw: str, seed: int) -> Trial:
    """The campaign without a fault."""
    own = drawn(draw, seed).twin
    said = tuple(sorted(" ".join(one).strip() for one in own.said))
    return trial("none", 0, draw, seed, Outcome(unsaid(own.errors), own.errors, said))


def run(
    each: int,
    first_seed: int = FIRST_SEED,
    faults: Iterable[str] = FAULTS,
    severities: Iterable[int] = SEVERITIES,
    draws: Iterable[str] = KINDS,
    workers: int = 1,
    out: Path | None = None,
) -> list[Trial]:
    """Every fault on `each` campaigns of every kind; goes on from `out` where it was stopped."""
    kept = list(read(out)) if out and out.exists() else []
    done = {one.key for one in kept}
    wanted = [("none", 0), *((fault, severity) for fault in faults for severity in severities)]
    tasks = []
    for draw, seed in _rounds(each, first_seed, tuple(draws)):
        left = [one for one in wanted if (*one, draw, seed) not in done]
        tasks += [(draw, seed, left, out)] if left else []
    for made in _streamed(tasks, workers):
        kept += made
    return kept


def _rounds(each: int, first_seed: int, draws: tuple[str, ...]) -> Iterator[tuple[str, int]]:
    """`each` short campaigns of every kind, one of each kind after the other."""
    short = {draw: filter(partial(_is_short, draw), itertools.count(first_seed)) for draw in draws}
    for _ in range(each):
        for draw in draws:
            yield draw, next(short[draw])


def _is_short(draw: str, seed: int) -> bool:
    """Whether a campaign is quickly solved: its line is not too many gaps long."""
    campaign, _ = draw_campaign(draw, seed)
    ends = [(one.position.min(), one.position.max()) for one in campaign.passes]
    length = max(high for _, high in ends) - min(low for low, _ in ends)
    return bool(length < LONGEST * campaign.magnet.gap)


def _streamed(tasks: list, workers: int) -> Iterator[list[Trial]]:
    """The tasks' trials as they come."""
    began = time.monotonic()
    if workers == 1:
        for number, task in enumerate(tasks, 1):
            yield run_draw(*task)
            _tell(number, len(tasks), began)
        return
    os.environ["OMP_NUM_THREADS"] = "1"  # for the workers: they share the cores
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    with ProcessPoolExecutor(workers) as pool:
        waiting = [pool.submit(run_draw, *task) for task in tasks]
        for number, task in enumerate(as_completed(waiting), 1):
            yield task.result()
            _tell(number, len(tasks), began)


def _tell(count: int, of: int, began: float) -> None:
    spent = time.monotonic() - began
    left = spent / count * (of - count)
    print(f"campaign {count} of {of}, {spent / 60:.1f} min, {left / 60:.0f} min left", flush=True)


def write(out: Path, trials: Iterable[Trial]) -> None:
    """Append trials, one line each."""
    text = "".join(json.dumps({**vars(one), "z": _finite(one.z)}) + "\n" for one in trials)
    with out.open("a", encoding="utf-8") as file:
        file.write(text)


def read(out: Path) -> Iterator[Trial]:
    """Trials of a file; a last line cut short is left out."""
    for line in out.read_text(encoding="utf-8").splitlines():
        try:
            facts = json.loads(line)
        except ValueError:
            continue
        z = math.inf if facts["z"] is None else facts["z"]
        yield Trial(**{**facts, "z": z, "said": tuple(facts["said"])})


def _finite(z: float) -> float | None:
    return round(z, 2) if math.isfinite(z) else None


def _faulty(trials: Iterable[Trial]) -> list[Trial]:
    return [one for one in trials if one.fault != "none" and one.outcome != NO_PLACE]


def table(trials: Iterable[Trial]) -> str:
    """Outcomes of each kind, and of all, as a Markdown table."""
    faulty = _faulty(trials)
    groups = {kind: [one for one in faulty if one.fault == kind] for kind in FAULTS}
    groups["all"] = faulty
    lines = [f"| fault | n | {' | '.join(COLUMNS)} |", "|---|---|" + "---|" * len(COLUMNS)]
    for name, chosen in groups.items():
        if chosen:
            count = Counter(one.column for one in chosen)
            cells = " | ".join(str(count[column]) for column in COLUMNS)
            lines.append(f"| {name} | {len(chosen)} | {cells} |")
    return "\n".join(lines)


def severity_table(trials: Iterable[Trial]) -> str:
    """Outcomes by severity: each cell harmless/found/refused/off/silent/silent unrevealable."""
    faulty = _faulty(trials)
    head = " | ".join(f"severity {severity}" for severity in SEVERITIES)
    lines = [f"| fault | {head} |", "|---|" + "---|" * len(SEVERITIES)]
    for name in (*FAULTS, "all"):
        chosen = [one for one in faulty if name in (one.fault, "all")]
        if not chosen:
            continue
        cells = []
        for severity in SEVERITIES:
            count = Counter(one.column for one in chosen if one.severity == severity)
            cells.append("/".join(str(count[column]) for column in COLUMNS))
        lines.append(f"| {name} | {' | '.join(cells)} |")
    return "\n".join(lines)


def silent_list(trials: Iterable[Trial]) -> str:
    """The silently wrong ones, those that could be revealed first, and how to see each again."""
    silent = [one for one in trials if one.outcome == "silent" and one.fault != "none"]
    silent.sort(key=lambda one: (not one.revealable, one.fault, one.severity, -one.z))
    return "\n".join(
        f"{'revealable' if one.revealable else 'not revealable'}: --only {one.fault} "
        f"--severity {one.severity} --draw {one.draw} --seed {one.seed}: "
        f"z {one.z:.3g}; {_errors_text(one)}"
        for one in silent
    )


def _errors_text(one: Trial) -> str:
    return ", ".join(f"{key} {error:+.1f} u" for key, error in one.errors.items())


def false_alarms(trials: Iterable[Trial]) -> str:
    """What was said of the campaigns without a fault."""
    clean = [one for one in trials if one.fault == "none"]
    count = Counter(code.partition(" ")[0] for one in clean for code in set(one.said))
    said = ", ".join(f"{code} {times}" for code, times in count.most_common()) or "nothing"
    return f"{len(clean)} campaigns without a fault; warnings among them: {said}"


def report(trials: list[Trial]) -> str:
    """All that the study says."""
    parts = (table(trials), severity_table(trials), silent_list(trials), false_alarms(trials))
    return "\n\n".join(part for part in parts if part)


def show_one(fault: str, severity: int, draw: str, seed: int) -> str:
    """One trial with every warning in full."""
    whole = drawn(draw, seed)
    kind = FAULTS[fault]
    size = f"{kind.size(severity):g} {kind.of}"
    lines = [f"{fault}, {kind.words}: size {size}", f"drawn: {draw} {seed}"]
    try:
        faulty = inject(whole.setting, fault, severity, rng_of(fault, severity, draw, seed))
    except FieldmapError as error:
        return "\n".join([*lines, f"refused by the reader: {error}"])
    if faulty is None:
        return "\n".join([*lines, "no place for it in this campaign"])
    lines += [f"put into: {', '.join(faulty.where)}"]
    z = whole.observer.statistic(fault, severity, rng_of(fault, severity, draw, seed))
    lines += [f"ideal statistic: {z:.3g} (told from {REVEALABLE:g})"]
    outcome = reduced(faulty.campaign, whole.twin)
    before = {key: round(error, 2) for (_, key), error in whole.twin.errors.items()}
    after = {key: round(error, 2) for (_, key), error in outcome.errors.items()}
    lines += [f"outcome: {outcome.name}", f"errors without it, u: {before}", f"with it, u: {after}"]
    lines += [f"new: {said}" for said in outcome.said]
    lines += [f"said anyway: {code} {where}" for code, where in sorted(whole.twin.said)]
    return "\n".join(lines)


def main() -> None:
    """Command line of the study."""
    parser = argparse.ArgumentParser(description="Fault campaign of the whole chain.")
    parser.add_argument("--each", type=int, default=6, help="campaigns of every kind")
    parser.add_argument("--seed", type=int, default=FIRST_SEED, help="first seed")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--out", type=Path, help="file of trials, to go on with")
    parser.add_argument("--only", action="append", choices=list(FAULTS), help="kinds of fault")
    parser.add_argument("--severity", action="append", type=int, choices=SEVERITIES)
    parser.add_argument("--draw", action="append", choices=KINDS, help="kinds of campaign")
    parser.add_argument("--list", action="store_true", help="kinds of fault, and what reveals them")
    parser.add_argument("--report", action="store_true", help="only what stands in the file")
    chosen = parser.parse_args()
    if chosen.list:
        for kind in FAULTS.values():
            print(f"{kind.key}: {kind.words}; {kind.sizes} {kind.of}; {kind.revealed_by}")
        return
    faults, severities = chosen.only or list(FAULTS), chosen.severity or list(SEVERITIES)
    draws = chosen.draw or list(KINDS)
    single = [len(given or ()) for given in (chosen.only, chosen.severity, chosen.draw)]
    if single == [1, 1, 1] and not chosen.out:
        print(show_one(faults[0], severities[0], draws[0], chosen.seed))
        return
    each = 0 if chosen.report else chosen.each
    print(report(run(each, chosen.seed, faults, severities, draws, chosen.workers, chosen.out)))


if __name__ == "__main__":
    main()
