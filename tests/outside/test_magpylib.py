"""Every source that the magpylib library can represent, against it."""

from __future__ import annotations

import magpylib
import numpy as np
import pytest
from scipy.constants import mu_0

from fieldmap.bench.sources import Block, Loop, Slot, Solenoid, loop_field

S = np.linspace(-0.6, 0.6, 241)
# the library may carry another edition of the magnetic constant
SAME_AMPERES = mu_0 / magpylib.mu_0
CORNERS = 1e-15  # the corner terms of a block are of the order of its polarisation, about 1 T


def line(x=0.0, y=0.0, s=S):
    """Positions along z."""
    return np.stack([np.full_like(s, x), np.full_like(s, y), s], axis=-1)


def cuboid(block, z=0.0):
    """The library's block in the same place, seen from the scan line."""
    return magpylib.magnet.Cuboid(
        dimension=(block.width, block.height, block.length),
        polarization=(0.0, block.polarisation, 0.0),
        position=(-block.x, -block.y, z),
    )


def circle(loop, z=0.0):
    """The library's loop in the same place, seen from the scan line."""
    return magpylib.current.Circle(
        diameter=2 * loop.radius, current=loop.current * SAME_AMPERES, position=(-loop.offset, 0, z)
    )


def agree(got, expected, rounding=None):
    """Agree to 1e-11 of each value, beyond the rounding of the library's own terms (T)."""
    rounding = 1e-14 * np.max(np.abs(expected)) if rounding is None else rounding
    np.testing.assert_allclose(got, expected, rtol=1e-11, atol=rounding)


@pytest.mark.parametrize("offset", [0.0, 1e-7, 0.04, 0.097, 0.12, 0.5])
def test_loop(offset):
    loop = Loop(0.1, 300.0, offset)
    agree(loop.field(S), circle(loop).getB(line())[:, 2])


@pytest.mark.parametrize("rho", [1e-6, 0.05, 0.0999, 0.3])
def test_radial_field_of_a_loop(rho):
    expected = circle(Loop(0.1, 300.0)).getB(line(x=rho))[:, 0]
    agree(loop_field(0.1, 300.0, rho, S)[0], expected)


def test_solenoid_is_an_axially_polarised_cylinder():
    solenoid = Solenoid(0.1, 0.4, turns=500, current=10.0)
    cylinder = magpylib.magnet.Cylinder(
        dimension=(0.2, 0.4), polarization=(0, 0, mu_0 * 500 * 10.0 / 0.4)
    )
    agree(solenoid.field(S), cylinder.getB(line())[:, 2])


@pytest.mark.parametrize(("x", "y"), [(0.0, 0.02), (0.013, -0.018), (0.05, 0.0101), (-0.2, 0.3)])
def test_block(x, y):
    block = Block(1.2, 0.04, 0.02, 0.1, y=y, x=x)
    agree(block.field(S), cuboid(block).getB(line())[:, 1], CORNERS)


def test_slot():
    slot = Slot(1.2, width=0.01, height=0.02, length=0.008, gap=0.0012)
    s = np.linspace(-0.03, 0.03, 241)
    blocks = [cuboid(Block(1.2, 0.01, 0.02, 0.008, y=y)) for y in (0.0106, -0.0106)]
    agree(slot.field(s), magpylib.getB(blocks, line(s=s), sumup=True)[:, 1], CORNERS)


def test_a_set_of_loops_and_blocks():
    coil, block = Loop(0.08, 900.0, 0.01), Block(0.9, 0.03, 0.01, 0.02, y=0.012, x=0.004)
    places = (-0.2, -0.05, 0.1, 0.31)
    loops = sum(coil.shifted(z) for z in places)
    blocks = sum((-1) ** i * block.shifted(z) for i, z in enumerate(places))
    twins = magpylib.Collection(*(circle(coil, z) for z in places))
    agree(loops.field(S), twins.getB(line())[:, 2])
    signed = [(-1) ** i * cuboid(block, z).getB(line())[:, 1] for i, z in enumerate(places)]
    agree(blocks.field(S), np.sum(signed, axis=0), CORNERS)


@pytest.mark.parametrize(
    ("source", "twin", "component"),
    [
        (Loop(0.1, 300.0, 0.06), circle(Loop(0.1, 300.0, 0.06)), 2),
        (Loop(0.1, 300.0, 0.15), circle(Loop(0.1, 300.0, 0.15)), 2),
        (Block(1.2, 0.04, 0.02, 0.1, 0.02), cuboid(Block(1.2, 0.04, 0.02, 0.1, 0.02)), 1),
    ],
    ids=["loop", "loop outside", "block"],
)
def test_integrals_of_the_library_field(source, twin, component):
    borders = np.linspace(-0.5, 0.5, 201)
    nodes, weights = np.polynomial.legendre.leggauss(16)
    half, middle = np.diff(borders) / 2, (borders[1:] + borders[:-1]) / 2
    s = middle[:, None] + half[:, None] * nodes
    values = twin.getB(line(s=s.ravel()))[:, component].reshape(s.shape)
    expected = np.cumsum(half * (values @ weights))
    got = source.integral(borders[1:]) - source.integral(borders[0])
    np.testing.assert_allclose(got, expected, rtol=0, atol=1e-13 * np.max(np.abs(expected)))
