"""Make the demo campaigns: ``python -m fieldmap.bench.demo FOLDER``.

Every campaign has random numbers of its own from a fixed seed, so the same version of the kit
makes the same files.
"""

from __future__ import annotations

import math
import sys
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.bench.bench_errors import draw_errors
from fieldmap.bench.demo_campaigns import DEMOS
from fieldmap.bench.truth import truth_text
from fieldmap.bench.twin import read_point, record
from fieldmap.bench.writing import write_campaign
from fieldmap.errors import FieldmapError

if TYPE_CHECKING:
    import os
    from collections.abc import Sequence

    from fieldmap.bench.demo_campaigns import Demo
    from fieldmap.readings.passes import PointReference

__all__ = ["main", "make_demos"]


def make_demos(folder: str | os.PathLike[str], *, overwrite: bool = False) -> list[Path]:
    """Simulate the demo campaigns and write each to a folder of its own.

    Parameters
    ----------
    folder : path
        Where to; made if it is not there.
    overwrite : bool
        Whether files that are there may be replaced.

    Returns
    -------
    list of Path
        The campaign files. Beside each stands a ``truth.json`` with the true results.

    Raises
    ------
    InputError
        If a campaign's folder is not empty and `overwrite` is not set, or cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> [file.parent.name for file in make_demos(tempfile.mkdtemp())][:2]
    ['gap_dipole', 'solenoid_fringe']
    """
    return [_make(demo, Path(folder) / demo.folder, overwrite=overwrite) for demo in DEMOS]


def main(arguments: Sequence[str] | None = None) -> int:
    """Make the demo campaigns in the folder that is the only argument.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the command line if left out.

    Returns
    -------
    int
        Exit code: 0, or 2 where nothing was asked for or it was refused.
    """
    given = list(sys.argv[1:] if arguments is None else arguments)
    if len(given) != 1 or given[0].startswith("-"):
        sys.stderr.write("usage: python -m fieldmap.bench.demo FOLDER\n")
        return 2
    try:
        files = make_demos(given[0])
    except FieldmapError as error:
        sys.stderr.write(f"{error}\n")
        return 2
    sys.stdout.writelines(f"{file}\n" for file in files)
    return 0


def _make(demo: Demo, folder: Path, *, overwrite: bool) -> Path:
    """Simulate and write one campaign."""
    rng = np.random.default_rng(demo.seed)
    points = tuple(_point(demo, at, u, rng) for at, u in demo.points)
    plan = replace(demo.plan, references=demo.plan.references + points)
    errors = draw_errors(plan, rng, demo.noise)
    campaign = record(plan, demo.source, rng, errors, current=demo.current)
    about = f"{campaign.name}: {demo.about}; true values of a simulated campaign"
    text = truth_text(demo.source, campaign.axis, about, campaign.magnet.gap)
    return write_campaign(
        campaign,
        folder,
        layout=demo.layout,
        preamble=demo.preamble,
        units=demo.units,
        overwrite=overwrite,
        beside={"truth.json": text},
    )


def _point(demo: Demo, at: float, u: float, rng: np.random.Generator) -> PointReference:
    """Read a point with a magnetometer that shows a hundredth of its uncertainty."""
    read = read_point(demo.source, at, u, rng)
    return replace(read, field=round(read.field, 2 - math.floor(math.log10(u))))


if __name__ == "__main__":
    sys.exit(main())
