"""Error rates of verdicts on series of magnets: counted, and by the formula of JCGM 106.

    python -m tests.study.verdicts --each 400

Two series. In the first, true values come from a process, readings from a normal distribution
around them: many items, every decision by the kit's `decide`. In the second every item is a whole
campaign: a magnet whose length varies about the nominal, bench errors drawn from the stated
uncertainties, recorded, stitched and evaluated; its verdict rests on the u that the kit states.
"""

from __future__ import annotations

import argparse
import os
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np
from scipy.stats import binom

import fieldmap
from fieldmap.bench.bench_errors import draw_errors
from fieldmap.bench.sources import TanhMagnet
from fieldmap.bench.truth import true_results
from fieldmap.bench.twin import read_point, record
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.risk import Risks, risks
from fieldmap.magnet.verdict import decide
from fieldmap.readings import Integrator, Limit, Stage
from tests.shop import plan, planned

if TYPE_CHECKING:
    from collections.abc import Sequence

GUARDS: Final = (0.0, 0.5, 1.0, 1.5)
DRAWS: Final = 200_000
EACH: Final = 400
FIRST_SEED: Final = 5000
CHANCE: Final = 1e-4  # of a count outside its bounds, if the formula is right

NOMINAL: Final = 0.3  # m, of the magnets' lengths
PROCESS_SD: Final = 40e-6  # m
TOLERANCE: Final = 50e-6  # m
KNOTS: Final = 0.004  # m
# a bench whose length is uncertain by about half of what the process varies: scale and noise
STAGE: Final = Stage(u_scale=50e-6, u_position=5e-6, u_offset=5e-5, u_lag=5e-4)
MAIN: Final = Integrator("main", read_noise=1e-7, walk_noise=1.5e-6, u_drift=1e-6)


@dataclass(frozen=True)
class Item:
    """One magnet of a series: its true value, and what the kit says of it (m)."""

    true: float
    value: float
    u: float


@dataclass(frozen=True)
class Count:
    """How often one kind of wrong decision was made, and how often it should be."""

    guard: float
    name: str
    items: int
    counted: int
    expected: float

    @property
    def bounds(self) -> tuple[int, int]:
        """Counts that chance allows, if the formula is right."""
        share = self.expected / self.items
        low, high = binom.ppf([CHANCE / 2, 1 - CHANCE / 2], self.items, share)
        return int(low), int(high)

    @property
    def agrees(self) -> bool:
        """Whether the count is one that chance allows."""
        low, high = self.bounds
        return low <= self.counted <= high


def drawn_series(count: int = DRAWS, seed: int = 1) -> list[Item]:
    """Items of the first series: a process, and readings normal around its values."""
    rng = np.random.default_rng(seed)
    true = rng.normal(NOMINAL, PROCESS_SD, count)
    u = 0.5 * PROCESS_SD
    shown = rng.normal(true, u)
    return [Item(*pair, u) for pair in zip(true.tolist(), shown.tolist(), strict=True)]


def measured_series(count: int, seed: int = FIRST_SEED, workers: int | None = None) -> list[Item]:
    """Items of the second series: whole campaigns."""
    os.environ["OMP_NUM_THREADS"] = "1"  # for the workers: they share the cores
    with ProcessPoolExecutor(max_workers=workers or os.cpu_count()) as pool:
        return list(pool.map(measured_item, range(seed, seed + count), chunksize=4))


def measured_item(seed: int) -> Item:
    """Make, measure and reduce one magnet."""
    rng = np.random.default_rng(seed)
    length = NOMINAL + PROCESS_SD * rng.standard_normal()
    magnet = TanhMagnet(0.5, length=length, lam=0.03 / np.pi)
    travels = planned((-0.4, 0.4), (0.4, -0.4), integrator=MAIN, rate=25.0, dwell=2.0)
    point = read_point(magnet, 0.0, 2e-5, rng)
    campaign = plan(travels, (point,), stage=STAGE)
    measured = record(campaign, magnet, rng, draw_errors(campaign, rng))
    fmap = fieldmap.stitch(measured, knot_spacing=KNOTS)
    found = fieldmap.evaluate(fmap, measured, fringe=False)
    result = found["magnetic_length"]
    return Item(true_results(magnet, campaign.axis)["magnetic_length"], result.value, result.u)


def counts(items: Sequence[Item], guards: Sequence[float] = GUARDS) -> list[Count]:
    """Wrong decisions of every kind for each guard band, beside the formula."""
    found = []
    u = float(np.sqrt(np.mean([item.u**2 for item in items])))
    for guard in guards:
        limit = Limit("magnetic_length", NOMINAL - TOLERANCE, NOMINAL + TOLERANCE, guard=guard)
        expected = risks(limit, u, NOMINAL, PROCESS_SD)
        wrong = _wrong(limit, items)
        found += [
            Count(guard, name, len(items), wrong[name], getattr(expected, name) * len(items))
            for name in Risks.__dataclass_fields__
        ]
    return found


def _wrong(limit: Limit, items: Sequence[Item]) -> dict[str, int]:
    """Numbers of wrong decisions, by the names of `Risks`."""
    wrong = dict.fromkeys(Risks.__dataclass_fields__, 0)
    for item in items:
        decision = decide(limit, Quantity(item.value, item.u, "m")).decision
        conforms = abs(item.true - NOMINAL) <= TOLERANCE
        wrong["consumer"] += decision == "accept" and not conforms
        wrong["producer"] += decision != "accept" and conforms
        wrong["rejected"] += decision == "reject" and conforms
    return wrong


def table(found: Sequence[Count]) -> str:
    """The counts as a Markdown table: accepted wrongly, rejected wrongly, good but not accepted."""
    lines = [
        "| guard | items | bad, yet accepted | good, yet rejected | good, not accepted |",
        "|---|---|---|---|---|",
    ]
    for guard in dict.fromkeys(one.guard for one in found):
        own = {one.name: one for one in found if one.guard == guard}
        cells = [_cell(own[name]) for name in ("consumer", "rejected", "producer")]
        lines.append(f"| {guard:g} | {own['consumer'].items} | " + " | ".join(cells) + " |")
    return "\n".join(lines)


def _cell(one: Count) -> str:
    """Count, what is expected, and what chance allows."""
    low, high = one.bounds
    return f"{one.counted} ({one.expected:.1f}; {low} to {high})"


def spread(items: Sequence[Item]) -> str:
    """What the series is made of, in words."""
    error = np.array([(item.value - item.true) / item.u for item in items])
    u = np.sqrt(np.mean([item.u**2 for item in items])) * 1e6
    return (
        f"{len(items)} items; rms of u {u:.2f} um beside {PROCESS_SD * 1e6:g} um of the process; "
        f"rms of error/u {np.sqrt(np.mean(error**2)):.3f}"
    )


def main() -> None:
    """Command line of the study."""
    parser = argparse.ArgumentParser(description="Error rates of verdicts.")
    parser.add_argument("--each", type=int, default=EACH, help="campaigns of the second series")
    parser.add_argument("--seed", type=int, default=FIRST_SEED, help="its first seed")
    chosen = parser.parse_args()
    for items in (drawn_series(), measured_series(chosen.each, chosen.seed)):
        print(spread(items), table(counts(items)), sep="\n\n", end="\n\n")


if __name__ == "__main__":
    main()
