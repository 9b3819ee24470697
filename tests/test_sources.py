"""Closed-form sources: field and integral belong together, algebra, tails, refusals."""

from __future__ import annotations

import math
import pickle
import warnings
from dataclasses import FrozenInstanceError, replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldmap.bench import sources
from fieldmap.bench.sources import (
    Block,
    EngeMagnet,
    Loop,
    Plates,
    Shifted,
    Slot,
    Solenoid,
    Sum,
    TanhMagnet,
    TwoTermEnge,
    Uniform,
    loop_field,
)
from fieldmap.bench.sources.quadrature import RunningQuadrature
from fieldmap.errors import InputError, RefusedError

QUADRUPOLE_SET = (0.296471, 4.533219, -2.270982, 1.068627, -0.036391, 0.022261)
DIPOLE_SET = (0.478959, 1.911289, -1.185953, 1.630554, -1.082657, 0.318111)

SYMMETRIC = {
    "loop": Loop(0.1, 1000.0),
    "loop beside": Loop(0.1, 1000.0, offset=0.06),
    "loop outside": Loop(0.1, 1000.0, offset=-0.17),
    "solenoid": Solenoid(0.1, 0.4, turns=500, current=10.0),
    "block": Block(1.2, width=0.04, height=0.02, length=0.1, y=0.02),
    "block beside": Block(-1.2, width=0.04, height=0.02, length=0.1, y=-0.015, x=0.03),
    "slot": Slot(1.2, width=0.01, height=0.02, length=0.008, gap=0.0012),
    "tanh": TanhMagnet(0.5, 0.4, 0.02),
    "sharp tanh": TanhMagnet(-0.5, 0.4, 0.0004),
    "enge": EngeMagnet(0.5, 0.4, 0.03, DIPOLE_SET),
    "short enge": EngeMagnet(0.5, 0.01, 0.03, QUADRUPOLE_SET),
}
ENDLESS = {
    "two-term enge": TwoTermEnge(0.5, 0.03, 0.4, 2.0),
    "plates": Plates(0.5, 0.03),
    "uniform": Uniform(50e-6),
}
LOPSIDED = {"two enge sets": EngeMagnet(0.5, 0.2, 0.03, DIPOLE_SET, (0.1, 3.0))}
EVERY = SYMMETRIC | ENDLESS | LOPSIDED
FINITE = SYMMETRIC | LOPSIDED

every = pytest.mark.parametrize("source", EVERY.values(), ids=EVERY.keys())
finite = pytest.mark.parametrize("source", FINITE.values(), ids=FINITE.keys())
symmetric = pytest.mark.parametrize("source", SYMMETRIC.values(), ids=SYMMETRIC.keys())
positions = st.floats(-2.0, 2.0)


@every
def test_integral_is_that_of_the_field(source):
    borders = np.linspace(-0.8, 0.8, 8001)
    nodes, weights = np.polynomial.legendre.leggauss(20)
    half, middle = np.diff(borders) / 2, (borders[1:] + borders[:-1]) / 2
    cells = half * (source.field(middle[:, None] + half[:, None] * nodes) @ weights)
    scale = np.abs(cells).sum()
    np.testing.assert_allclose(np.diff(source.integral(borders)), cells, rtol=0, atol=4e-14 * scale)


@every
def test_slope_of_the_integral_is_the_field(source):
    s, step = np.linspace(-0.4, 0.4, 997), 1e-5
    slope = (source.integral(s + step) - source.integral(s - step)) / (2 * step)
    field = source.field(s)
    np.testing.assert_allclose(slope, field, rtol=0, atol=2e-4 * np.max(np.abs(field)))


@every
def test_shape_is_kept_and_scalars_are_welcome(source):
    grid = np.linspace(-0.3, 0.3, 12).reshape(3, 4)
    assert source.field(grid).shape == source.integral(grid).shape == (3, 4)
    assert float(source.field(0.1)) == source.field([0.1])[0]
    assert float(source.integral(0)) == source.integral([0.0])[0]
    assert source.field([]).shape == (0,)


@every
def test_far_away_nothing_overflows(source):
    far = np.array([-1e9, -1e4, -30.0, 30.0, 1e4, 1e9])
    with np.errstate(over="raise", invalid="raise", divide="raise"):
        assert np.all(np.isfinite(source.field(far)))
        assert np.all(np.isfinite(source.integral(far)))


@finite
def test_total_is_the_integral_over_the_whole_line(source):
    reach = source.between(-1e6, 1e6)
    scale = np.max(np.abs(source.integral(np.linspace(-1, 1, 99))))
    assert reach == pytest.approx(source.total, rel=1e-11, abs=1e-11 * scale)


@symmetric
def test_field_is_even_and_integral_odd(source):
    s = np.linspace(0.0, 0.7, 301)
    field, rise = source.field(s), source.integral(s) - source.integral(0.0)
    fall = source.integral(0.0) - source.integral(-s)
    np.testing.assert_allclose(source.field(-s), field, rtol=1e-13, atol=1e-300)
    np.testing.assert_allclose(fall, rise, rtol=1e-12, atol=1e-14 * np.max(np.abs(rise)))


@symmetric
def test_effective_length_is_total_over_central_field(source):
    assert source.effective_length == pytest.approx(source.total / float(source.field(0.0)), 1e-13)


@pytest.mark.parametrize("source", ENDLESS.values(), ids=ENDLESS.keys())
def test_endless_sources_say_so(source):
    assert source.total == math.inf
    assert (-source).total == -math.inf
    assert replace(source, B0=0.0).total == 0.0
    assert source.effective_length == math.inf


@every
def test_sources_are_immutable_values(source):
    assert source == pickle.loads(pickle.dumps(source))
    assert hash(source) == hash(replace(source))
    with pytest.raises(FrozenInstanceError):
        source.B0 = 2.0


@given(
    a=st.sampled_from(list(EVERY.values())),
    b=st.sampled_from(list(EVERY.values())),
    factor=st.floats(-10, 10),
    by=st.floats(-0.5, 0.5),
    s=positions,
)
def test_algebra(a, b, factor, by, s):
    combined = (factor * a + b).shifted(by) - a * 0.25
    for name in ("field", "integral"):
        expected = (
            factor * getattr(a, name)(s - by) + getattr(b, name)(s - by) - getattr(a, name)(s) / 4
        )
        assert float(getattr(combined, name)(s)) == pytest.approx(float(expected), 1e-12, 1e-15)


@given(source=st.sampled_from(list(EVERY.values())), a=positions, b=positions, c=positions)
def test_integrals_add_over_a_split(source, a, b, c):
    whole = source.between(a, c)
    scale = abs(source.between(-2.0, 2.0)) + 1e-6
    assert source.between(a, b) + source.between(b, c) == pytest.approx(whole, abs=1e-13 * scale)
    assert source.between(c, a) == -whole


def test_totals_and_lengths_follow_the_algebra():
    magnet = TanhMagnet(0.5, 0.4, 0.02)
    assert (2 * magnet).total == 0.4
    assert (2 * magnet).effective_length == magnet.effective_length
    assert magnet.shifted(0.3).total == 0.2
    assert magnet.shifted(0.3).centre == 0.3
    assert magnet.shifted(0.3).effective_length == magnet.effective_length
    assert (magnet + 3 * magnet).total == pytest.approx(0.8)
    assert (magnet + Uniform(0.0)).total == 0.2
    assert (0.0 * Uniform(1.0)).total == 0.0
    assert (magnet + magnet).effective_length == magnet.effective_length


def test_sums_stay_flat_and_python_sum_works():
    parts = [Loop(0.1, float(i)) for i in range(1, 4)]
    assert sum(parts) == Sum(tuple(parts))
    assert parts[0] + (parts[1] + parts[2]) == Sum(tuple(parts))


def test_numpy_factor_gives_a_source_not_an_array():
    assert np.float64(2.0) * Uniform(1.0) == 2.0 * Uniform(1.0)
    assert Uniform(1.0).shifted(np.float64(0.2)) == Shifted(Uniform(1.0), 0.2)


def test_adding_a_number_is_not_understood():
    with pytest.raises(TypeError):
        Uniform(1.0) + 1.0
    with pytest.raises(TypeError):
        1.0 + Uniform(1.0)


def test_sums_without_a_meaning_are_refused():
    with pytest.raises(RefusedError, match="opposite sign diverge"):
        _ = (Plates(1.0, 0.03) - Plates(1.0, 0.02)).total
    with pytest.raises(RefusedError, match="different places"):
        _ = (Uniform(1.0) + Uniform(1.0).shifted(1.0)).effective_length
    with pytest.raises(RefusedError, match="vanishes at the centre"):
        _ = (Loop(0.1, 0.0)).effective_length


@pytest.mark.parametrize(
    ("make", "where"),
    [
        (lambda: Loop(0.0, 1.0), "Loop.radius"),
        (lambda: Loop(0.1, math.nan), "Loop.current"),
        (lambda: Loop(0.1, 1.0, offset=-0.1), "Loop.offset"),
        (lambda: Solenoid(0.1, -0.4, 1, 1), "Solenoid.length"),
        (lambda: Solenoid(0.1, 0.4, "many", 1), "Solenoid.turns"),
        (lambda: Block(1.0, 0.1, 0.1, 0.1, y=0.05), "Block.y"),
        (lambda: Block(1.0, 0.1, math.inf, 0.1, y=0.2), "Block.height"),
        (lambda: Slot(1.0, 0.1, 0.1, 0.1, gap=0.0), "Slot.gap"),
        (lambda: TanhMagnet(0.5, 0.4, 0.0), "TanhMagnet.lam"),
        (lambda: TwoTermEnge(0.5, 0.03, 0.4, -2.0), "TwoTermEnge.c1"),
        (lambda: Plates(0.5, 0.0), "Plates.gap"),
        (lambda: Uniform(None), "Uniform.B0"),
        (lambda: Uniform(1.0).shifted("far"), "Shifted.by"),
        (lambda: math.inf * Uniform(1.0), "Scaled.factor"),
        (lambda: EngeMagnet(0.5, 0.4, 0.03, ()), "EngeMagnet.coefficients_in"),
        (lambda: EngeMagnet(0.5, 0.4, 0.03, (0.0, 0.0)), "EngeMagnet.coefficients_in"),
        (lambda: EngeMagnet(0.5, 0.4, 0.03, (0.0, "two")), "EngeMagnet.coefficients_in"),
        (lambda: EngeMagnet(0.5, 0.4, 0.03, (0.0, 2.0), ((1.0,),)), "EngeMagnet.coefficients_out"),
        (lambda: EngeMagnet(0.5, 0.4, 0.03, (0.0, 2.0), (0, 2, 1)), "EngeMagnet.coefficients_out"),
        (lambda: EngeMagnet(0.5, 0.4, 0.03, (0.0, -2.0)), "EngeMagnet.coefficients_in"),
    ],
)
def test_impossible_parameters_are_named(make, where):
    with pytest.raises(InputError) as caught:
        make()
    assert caught.value.where == where
    assert "\n" not in str(caught.value)


def test_loop_field_is_free_of_curl_away_from_the_wire():
    rho, z = np.meshgrid([0.02, 0.07, 0.14, 0.4], [-0.2, -0.03, 0.05, 0.3])
    step = 1e-5
    twist = (loop_field(0.1, 1e3, rho, z + step)[0] - loop_field(0.1, 1e3, rho, z - step)[0]) - (
        loop_field(0.1, 1e3, rho + step, z)[1] - loop_field(0.1, 1e3, rho - step, z)[1]
    )
    slope = np.abs(loop_field(0.1, 1e3, rho, z + step)[1] - loop_field(0.1, 1e3, rho, z - step)[1])
    assert np.max(np.abs(twist) / slope.max()) < 1e-7


def test_loop_field_near_the_wire_is_that_of_a_straight_wire():
    distance = 1e-7
    _, inside = loop_field(0.1, 1000.0, 0.1 - distance, 0.0)
    radial, _ = loop_field(0.1, 1000.0, 0.1, distance)
    straight = 2e-7 * 1000.0 / distance
    assert float(inside) == pytest.approx(straight, rel=1e-5)
    assert float(radial) == pytest.approx(straight, rel=1e-5)


@pytest.mark.parametrize("z", [3.0, 1e2, -1e4])
def test_solenoid_tail_is_that_of_its_turns_to_all_digits(z):
    solenoid = SYMMETRIC["solenoid"]
    nodes, weights = np.polynomial.legendre.leggauss(24)
    turns = Loop(solenoid.radius, solenoid.turns * solenoid.current)
    expected = float(turns.field(z + solenoid.length / 2 * nodes) @ weights / 2)
    assert float(solenoid.field(z)) == pytest.approx(expected, rel=1e-14, abs=0)


@pytest.mark.parametrize(("z", "digits"), [(1.0, 1e-12), (-10.0, 1e-11), (100.0, 1e-9)])
def test_block_tail_is_that_of_its_dipoles(z, digits):
    block = replace(SYMMETRIC["block"], x=0.013)
    nodes, weights = np.polynomial.legendre.leggauss(24)
    X = block.x - block.width / 2 * nodes[:, None, None]
    Y = block.y - block.height / 2 * nodes[:, None]
    Z = z - block.length / 2 * nodes
    r2 = X**2 + Y**2 + Z**2
    dipoles = (3 * Y**2 - r2) / r2**2.5
    mean = np.einsum("i,j,k,ijk", weights, weights, weights, dipoles) / 8
    moment = block.polarisation * block.width * block.height * block.length
    expected = moment / (4 * math.pi) * mean
    assert float(block.field(z)) == pytest.approx(expected, rel=digits, abs=0)


def test_tanh_tail_keeps_its_digits():
    magnet = TanhMagnet(0.5, 0.4, 0.02)
    tail = 0.5 * math.exp(-2 * (3.0 - 0.2) / 0.02)
    assert tail == pytest.approx(1e-122, rel=100)
    assert float(magnet.field(3.0)) == pytest.approx(tail, rel=1e-12)
    assert float(TanhMagnet(0.5, 0.4, 1e-9).field(0.1)) == 0.5


def test_enge_tail_keeps_its_digits():
    magnet = EngeMagnet(0.5, 0.4, 0.03, DIPOLE_SET)
    x = 4.0
    exponent = math.fsum(c * x**i for i, c in enumerate(DIPOLE_SET))
    assert exponent > 100
    field = float(magnet.field(0.2 + 0.03 * x))
    assert field == pytest.approx(0.5 * math.exp(-exponent), rel=1e-11)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert magnet.field([-1e300, 1e300]).tolist() == [0.0, 0.0]


@pytest.mark.parametrize("length", [0.003, 0.05, 3.0])
def test_two_term_enge_magnet_is_a_tanh_magnet(length):
    c1, gap = 2.5, 0.03
    enge = EngeMagnet(0.5, length, gap, (0.0, c1))
    lam = 2 * gap / c1
    tanh = TanhMagnet(0.5 / -math.expm1(-2 * length / lam), length, lam)
    s = np.linspace(-2.0, 2.0, 1001)
    np.testing.assert_allclose(enge.field(s), tanh.field(s), rtol=1e-12, atol=1e-300)
    rise = tanh.integral(s) + tanh.total / 2
    np.testing.assert_allclose(enge.integral(s), rise, rtol=0, atol=1e-14 * tanh.total)
    assert enge.total == pytest.approx(tanh.total, rel=1e-14)


def test_steep_enge_terms_are_resolved():
    enge = EngeMagnet(0.5, 0.4, 0.03, (0.0, 2000.0))
    assert enge.total == pytest.approx(0.2, rel=1e-13)
    assert enge.between(0.2 - 1e-4, 0.2 + 1e-4) == pytest.approx(0.5e-4, rel=1e-10)


def test_two_enge_ends_can_be_swapped():
    magnet = LOPSIDED["two enge sets"]
    swapped = EngeMagnet(0.5, 0.2, 0.03, (0.1, 3.0), DIPOLE_SET)
    s = np.linspace(-0.5, 0.5, 301)
    np.testing.assert_allclose(swapped.field(-s), magnet.field(s), rtol=1e-14, atol=1e-300)
    assert swapped.total == pytest.approx(magnet.total, rel=1e-14)
    assert float(np.max(np.abs(magnet.field(s) - magnet.field(-s)))) > 0.01


def test_long_two_term_edge_is_the_end_of_a_long_magnet():
    edge = TwoTermEnge(0.5, 0.03, 0.4, 2.0)
    magnet = EngeMagnet(0.5, 2.0, 0.03, (0.4, 2.0)).shifted(-1.0)
    s = np.linspace(-0.3, 0.3, 101)
    np.testing.assert_allclose(edge.field(s), magnet.field(s), rtol=1e-12)


def test_slot_is_two_blocks_and_sharp_as_a_millimetre():
    slot = SYMMETRIC["slot"]
    upper = Block(1.2, 0.01, 0.02, 0.008, y=-0.0106)
    lower = Block(1.2, 0.01, 0.02, 0.008, y=0.0106)
    s = np.linspace(-0.02, 0.02, 101)
    np.testing.assert_allclose(slot.field(s), (upper + lower).field(s), rtol=1e-13)
    inside, outside = slot.field([0.0034, 0.0046])
    assert inside > 0.7 * float(slot.field(0.0))
    assert outside < 0.3 * float(slot.field(0.0))


def test_plates_field_and_integral_on_either_side_of_every_switch():
    plates = Plates(1.0, 2 * math.pi)  # a = s - 1
    s = np.array([-800.0, -40.0, 0.0, 2.0 - 1e-9, 2.0, 2.0 + 1e-9, 60.0, 1e5])
    W = 1.0 / plates.field(s) - 1.0
    # W is defined by W e^W = e^a; in logarithms where that can be formed
    formed = W > 1e-3
    np.testing.assert_allclose(
        (W + np.log(np.where(formed, W, 1.0)))[formed], (s - 1)[formed], rtol=1e-9
    )
    assert float(plates.field(-800.0)) == 1.0
    np.testing.assert_allclose(plates.integral(s), s - 1 - W, rtol=1e-9, atol=1e-9)
    far = s > 50  # where a - W would lose its digits
    np.testing.assert_allclose(plates.integral(s)[far], np.log(W[far]), rtol=1e-14)


def test_running_quadrature_finds_a_narrow_peak():
    width = 1e-5
    running = RunningQuadrature(
        lambda s: width / math.pi / (s**2 + width**2), np.linspace(-1.0, 2.0, 40)
    )
    s = np.array([-5.0, -0.5, -1e-6, 0.0, 1e-5, 1.0, 7.0])
    angle = np.arctan(np.clip(s, -1.0, 2.0) / width) - math.atan(-1.0 / width)
    np.testing.assert_allclose(running(s), angle / math.pi, rtol=0, atol=1e-14)
    assert running.total == running(np.array(7.0))


def test_everything_named_is_there():
    assert all(hasattr(sources, name) for name in sources.__all__)
