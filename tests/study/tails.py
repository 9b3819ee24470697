"""Tails and fringe integrals in the calibration study: do their uncertainties hold up?

    python -m tests.study.tails --each 100

The campaigns are those of `tests.study.calibration`. The uncertainty of a tail covers the choice
of the law by which the field dies away, so it is a bound rather than a scatter: an rms of error/u
below 1 is right, an interval of ±2u that leaves out more than one truth in twenty is not.
"""

from __future__ import annotations

import argparse
import os
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass

import numpy as np

import fieldmap
from fieldmap.bench.truth import true_results
from fieldmap.estimate import map_lines
from fieldmap.magnet.functionals import line_functionals
from tests.study.calibration import FIRST_SEED
from tests.study.draw import KINDS, draw_campaign

RESULTS = (
    "integrated_field_total",
    "tail_in",
    "tail_out",
    "fringe_integral_in",
    "fringe_integral_out",
)


@dataclass(frozen=True)
class Outcome:
    """Errors of one campaign in units of u, for the results that are given."""

    kind: str
    magnet: str
    errors: dict[str, float]


@dataclass(frozen=True)
class Figures:
    """How many are given, rms of error/u, and the share within 2u."""

    count: int
    given: int
    rms: float
    coverage: float


def run_one(job: tuple[str, int]) -> Outcome:
    """Draw, reduce and compare one campaign."""
    kind, seed = job
    campaign, source = draw_campaign(kind, seed)
    known = true_results(source, campaign.axis, campaign.magnet.gap)
    (line,) = map_lines(fieldmap.stitch(campaign))
    found = line_functionals(line, campaign.axis, campaign.magnet.gap)
    errors = {
        key: (found[key].value - known[key]) / found[key].u for key in RESULTS if key in found
    }
    return Outcome(kind, type(getattr(source, "source", source)).__name__, errors)


def run(each: int, first_seed: int = FIRST_SEED, workers: int | None = None) -> list[Outcome]:
    """Run `each` campaigns of every kind on all cores, one thread a process."""
    os.environ["OMP_NUM_THREADS"] = "1"  # for the workers: they share the cores
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    jobs = [(kind, seed) for seed in range(first_seed, first_seed + each) for kind in KINDS]
    with ProcessPoolExecutor(max_workers=workers or os.cpu_count()) as pool:
        return list(pool.map(run_one, jobs))


def figures(outcomes: list[Outcome], result: str) -> Figures:
    """What the study says of one result over some campaigns."""
    errors = np.array([one.errors[result] for one in outcomes if result in one.errors])
    if not errors.size:
        return Figures(len(outcomes), 0, np.nan, np.nan)
    rms = float(np.sqrt(np.mean(errors**2)))
    return Figures(len(outcomes), errors.size, rms, float(np.mean(np.abs(errors) <= 2)))


def table(outcomes: list[Outcome]) -> str:
    """Figures by kind of campaign and by magnet, and of all, as a Markdown table."""
    lines = [
        "| kind | n | " + " | ".join(name.replace("_", " ") for name in RESULTS) + " |",
        "|---|---|" + "---|" * len(RESULTS),
    ]
    groups = {kind: [one for one in outcomes if one.kind == kind] for kind in KINDS}
    for magnet in sorted({one.magnet for one in outcomes}):
        groups[magnet] = [one for one in outcomes if one.magnet == magnet]
    groups["all"] = outcomes
    for name, chosen in groups.items():
        cells = [_cell(figures(chosen, result)) for result in RESULTS]
        lines.append(f"| {name} | {len(chosen)} | " + " | ".join(cells) + " |")
    return "\n".join(lines)


def _cell(found: Figures) -> str:
    """Rms of error/u, coverage of ±2u, and how many were refused."""
    refused = found.count - found.given
    return f"{found.rms:.2f}, {found.coverage:.0%}" + (f", {refused} refused" if refused else "")


def main() -> None:
    """Command line of the study."""
    parser = argparse.ArgumentParser(description="Calibration study of tails.")
    parser.add_argument("--each", type=int, default=100, help="campaigns of every kind")
    parser.add_argument("--seed", type=int, default=FIRST_SEED, help="first seed")
    parser.add_argument("--workers", type=int, default=None, help="processes")
    chosen = parser.parse_args()
    print(table(run(chosen.each, chosen.seed, chosen.workers)))


if __name__ == "__main__":
    main()
