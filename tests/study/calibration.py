"""The calibration study: are the stated uncertainties true, and is the joint estimate worth it?

The whole study, one line a kind of campaign, then the verdict over all:

    python -m tests.study.calibration --each 100

Every campaign is drawn with a seed of its own (magnet, layout, noise, record kinds); the
estimator is told what stands in the campaign file and nothing else. Errors are counted in the
uncertainty u that the kit states, so 1 means that u is right; the errors of the plain and of the
careful script (`tests/study/plain.py`) are counted in the same u and stand as ratios to the kit's.
"""

from __future__ import annotations

import argparse
import os
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

import fieldmap
from fieldmap.estimate import map_lines
from tests.study.draw import KINDS, draw_campaign
from tests.study.plain import plain_results

if TYPE_CHECKING:
    from fieldmap.bench.sources import Source
    from fieldmap.readings import Campaign

RESULTS = ("integrated_field", "central_field", "magnetic_length")
PROFILE_POINTS = 241
FIRST_SEED = 100  # the scripts were written looking at the seeds below
COVERED = 1.959964  # 95 % of a normal distribution


@dataclass(frozen=True)
class Outcome:
    """Errors of one campaign in units of the stated u: kit, both scripts, and the profile."""

    kind: str
    kit: tuple[float, ...]
    plain: tuple[float, ...]
    careful: tuple[float, ...]
    profile: tuple[float, ...]


@dataclass(frozen=True)
class Figures:
    """What the study says of a set of campaigns, for each result and the profile."""

    count: int
    rms: dict[str, float]
    coverage: dict[str, float]
    plain: dict[str, float]
    careful: dict[str, float]


def truth(source: Source, campaign: Campaign) -> dict[str, float]:
    """True results by the closed form."""
    low, high = campaign.axis.integrate
    left, right = campaign.axis.flat
    total = float(source.between(low, high))
    level = float(source.between(left, right)) / (right - left)
    return {
        "integrated_field": total,
        "central_field": level,
        "magnetic_length": total / level,
    }


def run_one(job: tuple[str, int]) -> Outcome:
    """Draw, reduce and compare one campaign."""
    kind, seed = job
    campaign, source = draw_campaign(kind, seed)
    known = truth(source, campaign)
    fmap = fieldmap.stitch(campaign)
    results = fieldmap.evaluate(fmap, campaign)
    scripts = [plain_results(campaign, careful=careful) for careful in (False, True)]
    (line,) = map_lines(fmap)
    z = np.linspace(*campaign.axis.integrate, PROFILE_POINTS)
    profile = (line.field(z) - source.field(z)) / line.u_field(z)
    kit, plain, careful = (
        tuple((found[key] - known[key]) / results[key].u for key in RESULTS)
        for found in ({key: results[key].value for key in RESULTS}, *scripts)
    )
    return Outcome(kind, kit, plain, careful, tuple(profile.tolist()))


def run(each: int, first_seed: int = FIRST_SEED, workers: int | None = None) -> list[Outcome]:
    """Run `each` campaigns of every kind on all cores, one thread a process."""
    os.environ["OMP_NUM_THREADS"] = "1"  # for the workers: they share the cores
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    jobs = [(kind, seed) for seed in range(first_seed, first_seed + each) for kind in KINDS]
    with ProcessPoolExecutor(max_workers=workers or os.cpu_count()) as pool:
        return list(pool.map(run_one, jobs))


def figures(outcomes: list[Outcome]) -> Figures:
    """Rms of error/u, coverage of the 95 % interval, and the scripts' errors over ours."""
    kit = np.array([one.kit for one in outcomes])
    profile = np.array([one.profile for one in outcomes])
    rms = dict(zip(RESULTS, _rms(kit).tolist(), strict=True))
    covered = dict(zip(RESULTS, (np.abs(kit) < COVERED).mean(axis=0).tolist(), strict=True))
    rms["profile"] = float(np.sqrt(np.mean(profile**2)))
    covered["profile"] = float((np.abs(profile) < COVERED).mean())
    plain, careful = (
        dict(zip(RESULTS, (_rms(np.array(errors)) / _rms(kit)).tolist(), strict=True))
        for errors in ([one.plain for one in outcomes], [one.careful for one in outcomes])
    )
    return Figures(len(outcomes), rms, covered, plain, careful)


def _rms(errors: np.ndarray) -> np.ndarray:
    return np.sqrt(np.mean(errors**2, axis=0))


def table(outcomes: list[Outcome]) -> str:
    """The figures of every kind, of coils, of mixed passes and of all, as a Markdown table."""
    columns = (*RESULTS, "profile")
    lines = [
        "| kind | n | " + " | ".join(name.replace("_", " ") for name in columns) + " |",
        "|---|---|" + "---|" * len(columns),
    ]
    groups = {kind: (kind,) for kind in KINDS}
    groups |= {"all coils": ("rectangular", "round"), "all mixed": ("mixed",), "all": ("",)}
    for name, starts in groups.items():
        chosen = [one for one in outcomes if one.kind.startswith(starts)]
        exact = [one for one in chosen if one.kind == name] or chosen
        found = figures(exact)
        cells = [_cell(found, column) for column in columns]
        lines.append(f"| {name} | {found.count} | " + " | ".join(cells) + " |")
    return "\n".join(lines)


def _cell(found: Figures, column: str) -> str:
    """Rms of error/u, coverage, and the plain and careful scripts' errors over the kit's."""
    text = f"{found.rms[column]:.3f}, {found.coverage[column]:.1%}"
    if column in found.plain:
        text += f"; {found.plain[column]:.3g}, {found.careful[column]:.3g}"
    return text


def main() -> None:
    """Command line of the study."""
    parser = argparse.ArgumentParser(description="Calibration study of the whole chain.")
    parser.add_argument("--each", type=int, default=100, help="campaigns of every kind")
    parser.add_argument("--seed", type=int, default=FIRST_SEED, help="first seed")
    chosen = parser.parse_args()
    print(table(run(chosen.each, chosen.seed)))


if __name__ == "__main__":
    main()
