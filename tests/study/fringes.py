"""The study of fringes: are the coefficients within what is stated, and is the order found?

    python -m tests.study.fringes --each 20

Magnets with Enge and tanh ends, drawn as for the calibration study, with the same benches,
layouts and probes. The curve is fitted at the order that it truly has; the last columns say how
often the evidence chooses it. Errors are counted in the standard uncertainty that is stated.
"""

from __future__ import annotations

import argparse
import os
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from unittest.mock import patch

import numpy as np

import fieldmap
from fieldmap.bench.sources import EngeMagnet, TanhMagnet
from fieldmap.magnet.fringe.enge import EngeCurve
from fieldmap.magnet.fringe.fitted import fringes
from fieldmap.magnet.fringe.pair import compare_ends
from tests.study import draw, magnets

MOVED = ("wire+point", "wire+zero", "rectangular+point", "round+point", "mixed+point")
SHAPES = ("enge", "tanh")
SCALARS = ("boundary", "fringe integral", "B0")
FIRST_SEED = 700
COVERED = 1.959964  # 95 % of a normal distribution


@dataclass(frozen=True)
class Outcome:
    """One end of one campaign: errors in u, chi-squares per degree of freedom, orders."""

    kind: str
    shape: str
    scalars: tuple[float, ...]
    shape_square: float
    shape_freedom: int
    misfit: float
    freedom: int
    truth_order: int
    chosen_order: int
    difference: tuple[float, float]


def draw_fringes(kind: str, shape: str, seed: int):
    """A campaign of a magnet with the given shape of ends, and its true field."""
    family = {"enge": magnets._enge, "tanh": magnets._tanh}[shape]
    with patch.object(draw, "draw_magnet", lambda rng, **_: family(rng)):
        return draw.draw_campaign(kind, seed)


def true_curve(source, gap, end):
    """Curve about its boundary, boundary position (m), field inside (T)."""
    sign = 1 if end == "out" else -1
    if isinstance(source, TanhMagnet):
        curve = EngeCurve(np.array([0.0, 2 * gap / source.lam]))
        height = source.B0 * -np.expm1(-2 * source.length / source.lam)
        return curve.canonical(), sign * source.length / 2, height
    assert isinstance(source, EngeMagnet)
    own = source.coefficients_out if sign > 0 else source.coefficients_in
    found = EngeCurve(np.array(own)).canonical()
    return found, sign * (source.length / 2 + gap * found.boundary), source.B0


def run_one(job: tuple[str, str, int]) -> list[Outcome]:
    """Draw, reduce and compare the two ends of one campaign."""
    kind, shape, seed = job
    campaign, source = draw_fringes(kind, shape, seed)
    gap = campaign.magnet.gap
    fmap = fieldmap.stitch(campaign)
    order = 1 if shape == "tanh" else 5
    fitted, refused = fringes(fmap, orders=dict.fromkeys(("in", "out"), order))
    chosen, _ = fringes(fmap)
    both = compare_ends(fitted["in"], fitted["out"]) if len(fitted) == 2 else None
    outcomes = []
    for end, one in fitted.items():
        curve, boundary, height = true_curve(source, gap, end)
        scalars = (
            (one.boundary.value - boundary) / one.boundary.u,
            (one.integral.value - curve.integral) / one.integral.u,
            (one.level.value - height) / one.level.u,
        )
        error = (one.coefficients - curve.coefficients)[1:] / one.u[1:]
        correlation = one.covariance[1:, 1:] / np.outer(one.u[1:], one.u[1:])
        apart = (0.0, 0.0)
        if both is not None and end == "in":
            truths = [true_curve(source, gap, e)[0] for e in ("in", "out")]
            step = both.integral.value - (truths[0].integral - truths[1].integral)
            offs = (both.difference - (truths[0].coefficients - truths[1].coefficients))[1:]
            scaled = both.covariance[1:, 1:] / np.outer(both.u[1:], both.u[1:])
            square = offs / both.u[1:] @ np.linalg.solve(scaled, offs / both.u[1:])
            apart = (step / both.integral.u, float(square) / order)
        outcomes.append(
            Outcome(
                kind=kind,
                shape=shape,
                scalars=tuple(float(value) for value in scalars),
                shape_square=float(error @ np.linalg.solve(correlation, error)),
                shape_freedom=order,
                misfit=one.chi_square,
                freedom=one.freedom,
                truth_order=order,
                chosen_order=chosen[end].order if end in chosen else 0,
                difference=apart,
            )
        )
    for end, error in refused.items():
        print(job, end, error)
    return outcomes


def run(each: int, first_seed: int = FIRST_SEED, workers: int | None = None) -> list[Outcome]:
    """Run `each` campaigns of every kind and shape, one thread a process."""
    os.environ["OMP_NUM_THREADS"] = "1"  # for the workers: they share the cores
    os.environ["OPENBLAS_NUM_THREADS"] = "1"
    seeds = range(first_seed, first_seed + each)
    jobs = [(kind, shape, seed) for seed in seeds for kind in MOVED for shape in SHAPES]
    if workers == 1:
        return [one for job in jobs for one in run_one(job)]
    with ProcessPoolExecutor(max_workers=workers or os.cpu_count()) as pool:
        return [one for found in pool.map(run_one, jobs) for one in found]


def figures(outcomes: list[Outcome]) -> dict[str, float]:
    """Rms of error/u, coverages, chi-squares per degree, share of orders found."""
    scalars = np.array([one.scalars for one in outcomes])
    apart = np.array([one.difference for one in outcomes if one.difference != (0.0, 0.0)])
    found = dict(zip(SCALARS, np.sqrt(np.mean(scalars**2, axis=0)).tolist(), strict=True))
    for name, column in zip(SCALARS, scalars.T, strict=True):
        found[f"{name} covered"] = float(np.mean(np.abs(column) < COVERED))
    found["coefficients"] = float(
        np.sqrt(
            sum(one.shape_square for one in outcomes) / sum(one.shape_freedom for one in outcomes)
        )
    )
    found["misfit"] = sum(one.misfit for one in outcomes) / sum(one.freedom for one in outcomes)
    found["order found"] = float(np.mean([one.chosen_order == one.truth_order for one in outcomes]))
    found["difference"] = float(np.sqrt(np.mean(apart[:, 0] ** 2)))
    found["difference of shape"] = float(np.sqrt(np.mean(apart[:, 1])))
    return found


def table(outcomes: list[Outcome]) -> str:
    """The figures of every kind and shape, and of all, as a Markdown table."""
    columns = list(figures(outcomes))
    lines = ["| kind | n | " + " | ".join(columns) + " |", "|---" * (len(columns) + 2) + "|"]
    groups = [(kind, shape) for kind in (*MOVED, "") for shape in (*SHAPES, "")]
    for kind, shape in groups:
        chosen = [one for one in outcomes if one.kind.startswith(kind) and shape in one.shape]
        if chosen:
            cells = [f"{value:.3f}" for value in figures(chosen).values()]
            name = f"{kind or 'all'} {shape or 'both'}"
            lines.append(f"| {name} | {len(chosen)} | " + " | ".join(cells) + " |")
    return "\n".join(lines)


def main() -> None:
    """Command line of the study."""
    parser = argparse.ArgumentParser(description="Study of the fitted fringes.")
    parser.add_argument("--each", type=int, default=20, help="campaigns of every kind and shape")
    parser.add_argument("--seed", type=int, default=FIRST_SEED, help="first seed")
    parser.add_argument("--workers", type=int, default=None, help="processes")
    chosen = parser.parse_args()
    print(table(run(chosen.each, chosen.seed, chosen.workers)))


if __name__ == "__main__":
    main()
