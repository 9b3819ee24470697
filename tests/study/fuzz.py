"""Spoilt input: does every file give the right numbers or one clear sentence?

    python -m tests.study.fuzz --count 100000 --seed 1
    python -m tests.study.fuzz --seed 1 --only 4711

Every input is a sound file with a few mutations, drawn from the seed and its own number, so that
one can be tried again alone. Workers run under a limit of memory; a worker that dies or stands
still is harm, and another one goes on behind that input. Also counted as harm: an exception that
is no sentence of the kit, more than ten seconds, more memory than four times the file and a fixed
base, a process or a connection started, a file written outside the folder, a number that is not
what the file says, text of a file as markup in a report.
"""

from __future__ import annotations

import argparse
import json
import os
import resource
import subprocess
import sys
import tempfile
import time
import traceback
from collections import Counter, defaultdict
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

SLOWEST = 10.0  # s of the processor
IDLE = 30.0  # s by the clock, beside other work of the machine
DEAD = 120.0  # s without a word from a worker
ALONE = "FIELDMAP_FUZZ_KIND"
MEMORY = 4  # times the file
BASE = 250_000_000  # bytes beside that: a solve, a figure, a library that is loaded
ADDRESSES = 6_000_000_000  # bytes of address space
FORBIDDEN = (
    "os.system", "os.exec", "os.posix_spawn", "os.spawn", "os.fork", "subprocess.Popen",
    "socket.connect", "socket.bind", "ctypes.dlopen", "webbrowser.open", "shutil.move",
)  # fmt: skip


@dataclass
class Tally:
    """What became of the inputs."""

    outcomes: dict[str, Counter[str]] = field(default_factory=lambda: defaultdict(Counter))
    harm: list[tuple[int, str, str]] = field(default_factory=list)
    slowest: tuple[float, int, str] = (0.0, -1, "")
    largest: tuple[float, int, str] = (0.0, -1, "")

    def add(self, told: dict) -> None:
        """Take in one input."""
        kind, number = told["kind"], told["number"]
        self.outcomes[kind][told["outcome"]] += 1
        if told["outcome"] == "harm":
            self.harm.append((number, kind, told["why"]))
        self.slowest = max(self.slowest, (told["seconds"], number, kind))
        self.largest = max(self.largest, (told["memory"], number, kind))


def chosen(seed: int, number: int) -> tuple[str, np.random.Generator]:
    """Kind and generator of one input; the environment may ask for one kind alone."""
    from tests.study.fuzz_cases import CASES

    rng = np.random.default_rng([seed, number])
    alone = os.environ.get(ALONE)
    if alone:
        return alone, rng
    shares = np.array([share for share, _, _ in CASES.values()])
    return str(rng.choice(list(CASES), p=shares / shares.sum())), rng


def work(seed: int, numbers: range) -> None:
    """Be a worker: one line of JSON for each input, and one before it."""
    from tests.study.fuzz_cases import Bench
    from tests.study.hostile_seeds import make_seeds

    with tempfile.TemporaryDirectory() as home:
        seeds = make_seeds(_made(Path(home) / "sound"))
        bench = Bench(seeds, _made(Path(home) / "case"))
        _furnish(bench)
        sys.stdout.flush()
        out = os.fdopen(os.dup(1), "w", buffering=1)
        os.dup2(os.open(os.devnull, os.O_WRONLY), 2)
        _try_all(bench, seed)  # libraries are loaded, caches are warm
        resource.setrlimit(resource.RLIMIT_AS, (ADDRESSES, ADDRESSES))
        watch = _Watch(Path(home))
        for number in numbers:
            kind, _ = chosen(seed, number)
            print(json.dumps({"begins": number, "kind": kind}), file=out)
            print(json.dumps(one_input(seed, number, bench, watch)), file=out)


def one_input(seed: int, number: int, bench, watch: _Watch) -> dict:
    """Try one input, and say what became of it."""
    from tests.study.fuzz_cases import CASES, outcome

    kind, rng = chosen(seed, number)
    resident = _reset_peak()
    began, used, why = time.perf_counter(), time.process_time(), ""
    watch.seen.clear()
    watch.on = True
    try:
        found = outcome(CASES[kind][2], bench, rng)
    except BaseException as error:  # noqa: BLE001 - everything else is harm
        found, why = "harm", _told(error)
    finally:
        watch.on = False
    seconds, memory = time.process_time() - used, _peak() - resident
    waited = time.perf_counter() - began
    allowed = MEMORY * sum(bench.sizes) + BASE
    for wrong in (
        f"{seconds:.1f} s" if seconds > SLOWEST else "",
        f"{waited:.1f} s of waiting" if waited > IDLE else "",
        f"{memory:.3g} bytes for {sum(bench.sizes)}" if memory > allowed else "",
        f"{watch.seen[0]}" if watch.seen else "",
        "code of the file was run" if Path("FUZZED").exists() else "",
    ):
        if wrong and found != "harm":
            found, why = "harm", wrong
    return {
        "kind": kind, "number": number, "outcome": found, "why": why, "seconds": seconds,
        "memory": memory,
    }  # fmt: skip


def _told(error: BaseException) -> str:
    last = traceback.extract_tb(error.__traceback__)[-1]
    where = f"{Path(last.filename).name}:{last.lineno}"
    return " ".join(f"{type(error).__name__} at {where}: {error}".split())[:400]


class _Watch:
    """Hears what Python does: processes, connections, files written outside the home."""

    def __init__(self, home: Path) -> None:
        self.home, self.on, self.seen = str(home.resolve()), False, []
        sys.addaudithook(self._heard)

    def _heard(self, event: str, arguments: tuple) -> None:
        if not self.on:
            return
        if event in FORBIDDEN:
            self.seen.append(f"{event} {arguments!r:.100}")
        elif event == "open":
            path, mode, flags = arguments
            writes = (mode and set(mode) & set("wax+")) or (flags and flags & os.O_ACCMODE)
            if writes and isinstance(path, (str, bytes)):
                self._check(os.fsdecode(path), event)
        elif event in {"os.remove", "os.rename", "os.mkdir", "os.truncate", "os.chmod"}:
            if any(isinstance(one, int) and one >= 0 for one in arguments[1:]):
                return  # a name within an open folder, as when a tree is removed
            for path in arguments[:2]:
                if isinstance(path, (str, bytes)):
                    self._check(os.fsdecode(path), event)

    def _check(self, path: str, event: str) -> None:
        whole = os.path.abspath(path)  # noqa: PTH100 - a hook makes no new objects than it must
        if not whole.startswith((self.home, "/dev/null")) and "__pycache__" not in whole:
            self.seen.append(f"{event} outside the folder: {whole!r:.100}")


def _made(path: Path) -> Path:
    path.mkdir()
    return path


def _furnish(bench) -> None:
    """Sound tables, links and a pipe beside the spoilt file."""
    for file in bench.seeds.folder.iterdir():
        target = bench.folder / file.name
        if file.is_symlink():
            target.symlink_to(file.readlink())
        elif file.is_fifo():
            os.mkfifo(target)
        elif file.is_dir():
            target.mkdir()
        else:
            target.write_bytes(file.read_bytes())


def _try_all(bench, seed: int) -> None:
    from tests.study.fuzz_cases import CASES, outcome

    for i, (_, _, case) in enumerate(CASES.values()):
        for k in range(2):
            try:
                outcome(case, bench, np.random.default_rng([seed, i, k]))
            except Exception:  # noqa: BLE001 - counted where it comes up again
                continue


def _reset_peak() -> int:
    """Forget the peak of memory; what is resident now, bytes."""
    try:
        Path("/proc/self/clear_refs").write_text("5", encoding="ascii")
    except OSError:
        return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    return _status("VmRSS")


def _peak() -> int:
    return _status("VmHWM")


def _status(key: str) -> int:
    text = Path("/proc/self/status").read_text(encoding="ascii", errors="replace")
    return int(text.split(f"{key}:")[1].split()[0]) * 1024


def run(count: int, seed: int, workers: int, minutes: float = 1e6) -> Tally:
    """Try all inputs with a few workers, each on its own share, or as many as time allows."""
    from concurrent.futures import ThreadPoolExecutor

    tally, end = Tally(), time.monotonic() + 60 * minutes
    shares = [range(i, count, workers) for i in range(workers)]
    with ThreadPoolExecutor(workers) as pool:
        for part in pool.map(lambda share: _supervised(seed, share, end), shares):
            for told in part:
                tally.add(told)
    return tally


def _supervised(seed: int, numbers: range, end: float) -> list[dict]:
    """Run workers over a share of the inputs until all have been tried."""
    found: list[dict] = []
    while numbers:
        told, at, kind, code = _one_worker(seed, numbers, end)
        found += told
        if at is None:
            break
        why = f"the process stood still or died (exit {code})"
        found.append(
            {"kind": kind, "number": at, "outcome": "harm", "why": why, "seconds": 0, "memory": 0}
        )
        numbers = range(at + numbers.step, numbers.stop, numbers.step)
    return found


def _one_worker(seed: int, numbers: range, end: float) -> tuple[list[dict], int | None, str, int]:
    """Lines of one worker; the input at which it died or stood still."""
    command = [sys.executable, "-m", "tests.study.fuzz", "--seed", str(seed), "--work"]
    command += [f"{numbers.start}:{numbers.stop}:{numbers.step}"]
    environment = os.environ | {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
    with subprocess.Popen(
        command, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, env=environment
    ) as worker:
        import threading

        told: list[dict] = []
        heard = [time.monotonic() + DEAD]
        open_at: list[tuple[int, str]] = []
        over = threading.Event()

        def watch() -> None:
            while not over.wait(1.0):
                if time.monotonic() - heard[0] > DEAD:
                    worker.kill()

        threading.Thread(target=watch, daemon=True).start()
        for line in worker.stdout:
            heard[0] = time.monotonic()
            if heard[0] > end:
                worker.kill()
                over.set()
                return told, None, "", 0
            one = json.loads(line)
            if "begins" in one:
                open_at[:] = [(one["begins"], one["kind"])]
            else:
                told.append(one)
                open_at.clear()
        over.set()
        worker.wait()
    if open_at:
        return told, *open_at[0], worker.returncode
    left = told[-1]["number"] + numbers.step if told else numbers.start
    if left < numbers.stop:
        return told, left, chosen(seed, left)[0], worker.returncode
    return told, None, "", 0


def table(tally: Tally) -> str:
    """The outcome as a Markdown table."""
    from tests.study.fuzz_cases import CASES

    lines = ["| input | n | accepted | refused | harm |", "|---|---|---|---|---|"]
    total: Counter[str] = Counter()
    for kind, (_, words, _) in CASES.items():
        own = tally.outcomes.get(kind, Counter())
        total.update(own)
        lines.append(_row(words, own))
    return "\n".join([*lines, _row("all", total)])


def _row(words: str, own: Counter[str]) -> str:
    count = sum(own.values())
    return f"| {words} | {count} | {own['accepted']} | {own['refused']} | {own['harm']} |"


def main() -> None:
    """Run the study and print its table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--count", type=int, default=5000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--workers", type=int, default=os.cpu_count() or 1)
    parser.add_argument("--minutes", type=float, default=1e6, help="stop after that long")
    parser.add_argument("--only", type=int, help="try one input again, and show what it raises")
    parser.add_argument("--work", help=argparse.SUPPRESS)
    chosen_options = parser.parse_args()
    if chosen_options.work:
        work(chosen_options.seed, range(*map(int, chosen_options.work.split(":"))))
    elif chosen_options.only is not None:
        again(chosen_options.seed, chosen_options.only)
    else:
        began = time.perf_counter()
        tally = run(
            chosen_options.count,
            chosen_options.seed,
            chosen_options.workers,
            chosen_options.minutes,
        )
        print(table(tally))
        seconds, number, kind = tally.slowest
        print(f"\nSlowest: {seconds:.1f} s ({kind}, input {number}).", end=" ")
        memory, number, kind = tally.largest
        print(f"Most memory: {memory / 1e6:.0f} MB ({kind}, input {number}).", end=" ")
        print(f"In all {time.perf_counter() - began:.0f} s.")
        for number, kind, why in sorted(tally.harm)[:200]:
            print(f"harm: {kind}, input {number}: {why}")


def again(seed: int, number: int) -> None:
    """Try one input in this process, with its traceback."""
    from tests.study.fuzz_cases import CASES, Bench
    from tests.study.hostile_seeds import make_seeds

    kind, rng = chosen(seed, number)
    with tempfile.TemporaryDirectory() as home:
        bench = Bench(make_seeds(_made(Path(home) / "sound")), _made(Path(home) / "case"))
        _furnish(bench)
        try:
            CASES[kind][2](bench, rng)
        finally:
            kept = Path(tempfile.gettempdir()) / f"spoilt_{number}"
            kept.mkdir(exist_ok=True)
            for file in bench.folder.iterdir():
                if file.is_file() and not file.is_symlink():
                    (kept / file.name).write_bytes(file.read_bytes())
            print(f"{kind}: files kept in {kept}")


if __name__ == "__main__":
    main()
