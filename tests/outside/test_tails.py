"""Tails and fringe integrals against closed forms and published figures, through field lines.

Solenoid shares: design figures, both ends together; the partial integral beside them is
(mu0 N I/L)(sqrt(R^2 + (Z + L/2)^2) - sqrt(R^2 + (Z - L/2)^2)), the total is Ampere's mu0 N I.
Linear ramp: Brown, SLAC-75. Quadrupole Enge set: Berz, Erdelyi, Makino, PRST-AB 3, 124001 (2000).
Dipole Enge set: in common use, no source at hand.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.constants import mu_0

from fieldmap.bench.bench_errors import draw_errors
from fieldmap.bench.sources import Block, EngeMagnet, Loop, Plates, Solenoid, TanhMagnet
from fieldmap.bench.twin import read_point, record
from fieldmap.estimate import stitch
from fieldmap.magnet import evaluate
from fieldmap.magnet.functionals import line_functionals
from fieldmap.readings import Axis, Coil, Magnet
from tests.profiles import line_through
from tests.shop import MAIN, STAGE, plan, planned

SOLENOID = Solenoid(radius=0.1, length=0.4, turns=500, current=10.0)
TOTAL = mu_0 * 500 * 10.0
SHARES = {0.5: 0.02280, 1.0: 0.005166, 2.0: 0.001260, 5.0: 0.0002003}
QUADRUPOLE_SET = (0.296471, 4.533219, -2.270982, 1.068627, -0.036391, 0.022261)
DIPOLE_SET = (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111)


def functionals(source, reach, *, gap, spacing=None, flat=None, low=None):
    """Results of an exact profile between -reach and reach."""
    low = -reach if low is None else low
    line = line_through(source.field, low, reach, spacing or gap / 10)
    flat = flat or (-gap / 10, gap / 10)
    return line_functionals(line, Axis("z", (low, reach), flat), gap)


def covered(result, true, least_u=0.0):
    return abs(result.value - true) <= 2 * max(result.u, least_u)


@pytest.mark.parametrize(("reach", "share"), SHARES.items())
def test_solenoid_shares(reach, share):
    found = functionals(SOLENOID, reach, gap=0.2)
    tails = found["tail_in"].value + found["tail_out"].value
    measured = math.hypot(0.1, reach + 0.2) - math.hypot(0.1, reach - 0.2)
    assert found["integrated_field"].value == pytest.approx(TOTAL / 0.4 * measured, rel=1e-7)
    assert covered(found["tail_in"], share * TOTAL / 2)
    assert covered(found["tail_out"], share * TOTAL / 2)
    assert covered(found["integrated_field_total"], TOTAL)
    assert tails / TOTAL == pytest.approx(share, rel=0.03)
    assert found["integrated_field_total"].value == pytest.approx(TOTAL, rel=0.03 * share)
    assert found["integrated_field_total"].u < 0.08 * share * TOTAL


@pytest.mark.parametrize("reach", [0.5, 1.0])
@pytest.mark.parametrize("seed", range(4))
def test_solenoid_through_a_noisy_campaign(reach, seed):
    rng = np.random.default_rng([seed, 9])
    coil = Coil("coil", "round", effective_area=0.5, u_effective_area=5e-5, window=0.02)
    scan = reach + 0.005
    travels = planned((-scan, scan), (scan, -scan), probe=coil, integrator=MAIN, rate=20.0)
    axis = Axis("z", (-reach, reach), (-0.02, 0.02))
    magnet = Magnet("solenoid", "Bz", gap=0.2)
    point = read_point(SOLENOID, 0.0, 1e-7, rng)
    campaign = plan(travels, (point,), stage=STAGE, axis=axis, magnet=magnet)
    measured = record(campaign, SOLENOID, rng, draw_errors(campaign, rng))
    found = evaluate(stitch(measured, knot_spacing=0.02), measured)
    share = SHARES[reach]
    assert covered(found["tail_in"], share * TOTAL / 2)
    assert covered(found["tail_out"], share * TOTAL / 2)
    assert covered(found["integrated_field_total"], TOTAL)
    assert found["integrated_field_total"].u < 0.3 * share * TOTAL
    assert abs(found["integrated_field"].value - TOTAL) > 4 * found["integrated_field"].u


@pytest.mark.parametrize("gap", [0.01, 0.03, 0.1])
@pytest.mark.parametrize("gaps_outside", [2.0, 6.0, 20.0, 60.0])
def test_plates_have_no_total(gap, gaps_outside):
    # between plates the field falls as 1/s: its integral diverges, wherever it is cut off
    edge = Plates(0.8, gap).shifted(6 * gap)
    two_sided = TwoEdges(edge, Plates(0.8, gap).shifted(6 * gap))
    found = functionals(two_sided, (6 + gaps_outside) * gap, gap=gap)
    assert "integrated_field" in found
    assert not {"tail_in", "tail_out", "integrated_field_total"} & set(found)


class TwoEdges:
    """A magnet of wide plates with two ends: the product of its edges."""

    def __init__(self, edge, mirrored):
        self.edge, self.mirrored = edge, mirrored

    def field(self, s):
        return self.edge.field(s) * self.mirrored.field(-s) / 0.8


@pytest.mark.parametrize("gaps", [1.2, 1.5, 2.0, 3.0])
@pytest.mark.parametrize("lam", [0.6, 1.0])
def test_tanh_magnet(gaps, lam):
    # total B0 L
    gap = 0.03
    magnet = TanhMagnet(0.5, 0.3, lam * gap)
    reach = 0.15 + gaps * gap
    found = functionals(magnet, reach, gap=gap, spacing=gap / 15, flat=(-0.05, 0.05))
    true = magnet.total / 2 - magnet.between(0.0, reach)
    assert covered(found["tail_out"], true, 1e-10)
    assert covered(found["integrated_field_total"], 0.5 * 0.3, 1e-9)


@pytest.mark.parametrize("coefficients", [QUADRUPOLE_SET, DIPOLE_SET])
@pytest.mark.parametrize("gaps", [1.6, 2.0, 2.5, 4.0])
def test_enge_magnet(coefficients, gaps):
    magnet = EngeMagnet(0.5, 0.3, 0.03, coefficients)
    reach = 0.15 + gaps * 0.03
    found = functionals(magnet, reach, gap=0.03, spacing=0.001, flat=(-0.05, 0.05))
    true = magnet.total / 2 - magnet.between(0.0, reach)
    assert covered(found["tail_in"], true, 1e-9)
    assert covered(found["tail_out"], true, 1e-9)
    assert found["tail_out"].u < 2e-3 * magnet.total


@pytest.mark.parametrize("reach", [0.35, 0.5, 1.0, 3.0])
def test_loop(reach):
    # Ampere: mu0 I; tail mu0 I/2 (1 - z/sqrt(R^2 + z^2))
    found = functionals(Loop(0.1, 1000.0), reach, gap=0.2, spacing=0.008)
    true = mu_0 * 1000.0 / 2 * (1 - reach / math.hypot(0.1, reach))
    assert covered(found["tail_out"], true)
    assert covered(found["integrated_field_total"], mu_0 * 1000.0)
    assert found["tail_out"].value == pytest.approx(true, rel=0.1)


@pytest.mark.parametrize("width", [0.04, 0.4, 1000.0])
@pytest.mark.parametrize("reach", [0.2, 0.4, 1.0])
def test_block_polarised_across_the_travel(width, reach):
    # total (Jc/pi)[atan(a/2(y0 - b/2)) - atan(a/2(y0 + b/2))]: zero where it is endlessly wide,
    # when the field falls with n = 2 only
    block = Block(1.2, width=width, height=0.02, length=0.1, y=0.02)
    angles = math.atan(width / 2 / 0.01) - math.atan(width / 2 / 0.03)
    total = 1.2 * 0.1 / math.pi * angles
    found = functionals(block, reach, gap=0.02, spacing=0.002)
    true = total / 2 - block.between(0.0, reach)
    assert covered(found["tail_out"], true)
    assert covered(found["integrated_field_total"], total)


def test_linear_ramp_over_one_gap():
    gap = 0.04

    class Ramp:
        def field(self, s):
            return 0.8 * np.clip(0.5 + (0.2 - np.abs(s)) / gap, 0.0, 1.0)

    found = functionals(Ramp(), 0.4, gap=gap, spacing=gap / 80, flat=(-0.05, 0.05))
    assert found["fringe_integral_in"].value == pytest.approx(1 / 6, rel=1e-4)
    assert found["fringe_integral_out"].value == pytest.approx(1 / 6, rel=1e-4)


@pytest.mark.parametrize(
    ("coefficients", "expected"), [(QUADRUPOLE_SET, 0.21641), (DIPOLE_SET, 0.36946)]
)
def test_enge_sets(coefficients, expected):
    magnet = EngeMagnet(0.8, 0.4, 0.04, coefficients)
    found = functionals(magnet, 0.4, gap=0.04, spacing=0.001, flat=(-0.05, 0.05))
    for side in ("in", "out"):
        assert found[f"fringe_integral_{side}"].value == pytest.approx(expected, abs=5e-6)


@pytest.mark.parametrize(("c0", "c1"), [(0.0, 2.0), (0.4, 2.2), (-0.7, 5.0)])
def test_two_term_enge(c0, c1):
    # elementary: 1/c1
    magnet = EngeMagnet(0.8, 0.8, 0.04, (c0, c1))
    found = functionals(magnet, 0.9, gap=0.04, spacing=0.002, flat=(-0.05, 0.05))
    for side in ("in", "out"):
        assert found[f"fringe_integral_{side}"].value == pytest.approx(1 / c1, rel=1e-6)
