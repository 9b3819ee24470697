"""Fields off the axis against magpylib, a reference library: a rod and a pair of sheets.

The field of a thin solenoid is that of a rod magnetised along its axis whose polarisation is
mu0 N I / L (surface currents, common practice).
"""

import numpy as np
import pytest

from fieldmap.bench.sources import Solenoid
from fieldmap.magnet.comparison.design_profile import design_profile
from fieldmap.magnet.handover.expansion import off_axis
from fieldmap.readings import Axis, Magnet

magpylib = pytest.importorskip("magpylib")

AXIS = Axis("z", (-0.3, 0.3), (-0.02, 0.02))
S = np.linspace(-0.3, 0.3, 121)
GRID = np.arange(-200, 201) * 2e-3


@pytest.mark.parametrize("r", [0.01, 0.02])
def test_solenoid_against_the_rod(r):
    coil = Solenoid(radius=0.1, length=0.3, turns=500, current=10.0)
    rod = magpylib.magnet.Cylinder(polarization=(0, 0, coil.total / 0.3), dimension=(0.2, 0.3))
    found = off_axis(
        design_profile(GRID, coil.field(GRID)).line, Magnet("solenoid", "Bz", 0.2), AXIS, S, r
    )
    true = rod.getB(np.column_stack([np.full_like(S, r), 0 * S, S]))
    top = coil.field(0.0)
    assert np.abs(found.mapped.value - true[:, 2]).max() < 0.5 * top * (r / 0.1) ** 4 + 1e-6 * top
    assert np.abs(found.other.value - true[:, 0]).max() < 0.5 * top * (r / 0.1) ** 5 + 1e-5 * top
    assert np.abs(found.other.value).max() > 0.02 * top


def test_wide_poles_against_blocks():
    # two blocks polarised across a gap of 60 mm, ten times wider than long: plane to a few 1e-5
    blocks = magpylib.Collection(
        *(
            magpylib.magnet.Cuboid(
                polarization=(0, 1.2, 0), dimension=(4.0, 0.05, 0.2), position=(0, side * 0.055, 0)
            )
            for side in (-1, 1)
        )
    )

    def field(s, y):
        return blocks.getB(np.column_stack([0 * s, np.full_like(s, y), s]))

    y = 0.006
    line = design_profile(GRID, field(GRID, 0.0)[:, 1]).line
    found = off_axis(line, Magnet("dipole", "By", 0.06), AXIS, S, y)
    true, top = field(S, y), np.abs(field(S, 0.0)[:, 1]).max()
    assert np.abs(found.mapped.value - true[:, 1]).max() < 1.5e-3 * top
    assert np.abs(found.other.value - true[:, 2]).max() < 1.5e-3 * top
    beside = np.abs(field(S, 0.0)[:, 1] - true[:, 1]).max()
    assert np.abs(found.mapped.value - true[:, 1]).max() < 0.2 * beside
