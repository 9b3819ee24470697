"""Campaigns without any fault: how often is one warned of all the same?

    python -m tests.study.clean --each 200

2000 campaigns, 200 of every kind. Warnings that state a fact of the plan (a tail that is cut off, a
drift that nothing separates from the field) are no alarms and stand apart.
"""

from __future__ import annotations

import argparse
import os
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from itertools import product

from scipy import stats

import fieldmap
from tests.study.draw import KINDS, draw_campaign

FACTS = {
    "drift-not-separated",
    "knots-not-settled",
    "sampling-too-coarse",
    "window-too-long",
    "tail-cut-off",
    "tail-not-converging",
    "fringe-poorly-fitted",
    "length-implausible",
}
FIRST_SEED = 5000

Said = tuple[str, int, tuple[str, ...]]


def run_one(job: tuple[int, str]) -> Said:
    """Codes of all warnings of one campaign."""
    seed, kind = job
    campaign, _ = draw_campaign(kind, seed)
    results = fieldmap.evaluate(fieldmap.stitch(campaign), campaign)
    return (
        kind,
        seed,
        tuple(sorted({one.code for one in results.findings if one.severity == "warn"})),
    )


def run(each: int, first_seed: int = FIRST_SEED, workers: int | None = None) -> list[Said]:
    """`each` campaigns of every kind on all cores, one thread a process."""
    os.environ["OMP_NUM_THREADS"] = "1"
    jobs = product(range(first_seed, first_seed + each), KINDS)
    with ProcessPoolExecutor(max_workers=workers or os.cpu_count()) as pool:
        return list(pool.map(run_one, jobs, chunksize=4))


def alarms(said: list[Said]) -> list[Said]:
    """Campaigns that were warned of for what their readings show."""
    return [one for one in said if set(one[2]) - FACTS]


def report(said: list[Said]) -> str:
    """Rate of false alarms, and what was said."""
    false, n = alarms(said), len(said)
    most = stats.beta.ppf(0.95, len(false) + 1, n - len(false))
    count = Counter(code for _, _, codes in said for code in codes)
    lines = [
        f"{len(false)} of {n} clean campaigns warned of; below {most:.2%} with 95 % confidence"
    ]
    lines += [f"  {kind} {seed}: {', '.join(codes)}" for kind, seed, codes in false]
    facts = ", ".join(f"{code} {times}" for code, times in count.most_common() if code in FACTS)
    return "\n".join([*lines, f"facts of the plan: {facts or 'none'}"])


def main() -> None:
    """Run from the shell."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--each", type=int, default=200)
    parser.add_argument("--seed", type=int, default=FIRST_SEED)
    chosen = parser.parse_args()
    print(report(run(chosen.each, chosen.seed)))


if __name__ == "__main__":
    main()
