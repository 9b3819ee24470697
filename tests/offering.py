"""A finding that offers corrections, put beside the kit's own: what follows from it is tested."""

from __future__ import annotations

import shutil
import sys

from fieldmap.bench.sources import TanhMagnet
from fieldmap.estimate.findings import Finding, pass_findings
from fieldmap.readings import Axis, Correction, Magnet, PointReference
from fieldmap.shipped import demo_folder
from tests.shop import measured

LATE = Correction("lag", "pass_02.csv", 1e-3, 2e-3)
TURNED = Correction("polarity", "pass_01.csv")


WIDE = TanhMagnet(0.5, length=0.3, lam=0.08)


def small(scans):
    """A campaign in a field so smooth that few knots do."""
    return measured(
        scans,
        [PointReference(0.0, float(WIDE.field(0.0)), 1e-5)],
        source=WIDE,
        magnet=Magnet("dipole", "By", gap=0.08),
        axis=Axis("z", (-0.4, 0.4), (-0.02, 0.02)),
    )


def offer(monkeypatch, *corrections):
    """Let every map say that each correction is needed, until it is made."""

    def found(passes, *more):
        done = {each for one in passes for each in one.corrections}
        names = {one.name for one in passes}
        return pass_findings(passes, *more) + [
            Finding("test-fault", "warn", one.where, "something is off.", one)
            for one in corrections
            if one not in done and one.where in names
        ]

    # the package has a function of the name of this module
    monkeypatch.setattr(sys.modules["fieldmap.estimate.stitch"], "pass_findings", found)


def turned_demo(folder):
    """A copy of the demo's gap dipole, the flux of its second pass of the other sign."""
    shutil.copytree(demo_folder() / "gap_dipole", folder)
    table = folder / "pass_02.csv"
    lines = table.read_text("utf-8").splitlines()
    head = next(i for i, line in enumerate(lines) if line.startswith("time"))
    column = [name.split()[0] for name in lines[head].split(",")].index("flux")
    for i, line in enumerate(lines[head + 1 :], start=head + 1):
        cells = line.split(",")
        cells[column] = repr(-float(cells[column]))
        lines[i] = ",".join(cells)
    table.write_text("\n".join(lines) + "\n", encoding="utf-8")
