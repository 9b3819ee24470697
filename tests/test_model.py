"""Design columns of a pass and of references against finite differences of the readings."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from fieldmap.estimate.fit import fit_line
from fieldmap.estimate.frame import Frame
from fieldmap.estimate.model import (
    PassModel,
    State,
    pass_information,
    reference_information,
    reference_rows,
)
from fieldmap.estimate.noise import total
from fieldmap.estimate.parameters import Nuisance
from fieldmap.estimate.response import response
from fieldmap.estimate.spline import UniformSpline
from fieldmap.readings import (
    Coil,
    FlipReference,
    Integrator,
    Pass,
    PointReference,
    Stage,
    Wire,
    ZeroReference,
)

WIRE = Wire("wire", turns=20, active_length=0.05, u_active_length=2e-5, width=0.4e-3)
RECT = Coil("rect", "rectangular", effective_area=0.3, u_effective_area=6e-5, window=0.01)
ROUND = Coil("round", "round", effective_area=0.3, u_effective_area=6e-5, window=0.01)
PROBES = [WIRE, RECT, ROUND]
SPLINE = UniformSpline.covering(-0.13, 0.13, 0.004)
MIDDLES = SPLINE.start + SPLINE.spacing * (np.arange(SPLINE.size) - 1)
B = 0.5 / np.cosh(MIDDLES / 0.03)
TIME = np.arange(2000) / 100.0
MOTION = 0.1 * np.sin(np.linspace(-np.pi / 2, np.pi / 2, 2000))
KINDS = ["offset", "scale", "lag", "backlash"]
UNKNOWNS = [
    Nuisance("drift", "p", 0.0, 1e-6),
    Nuisance("gain", "wire", 0.0, 1e-3),
    Nuisance("gain", "rect", 0.0, 1e-3),
    Nuisance("gain", "round", 0.0, 1e-3),
    *(Nuisance(kind, "", 0.0, 1e-3) for kind in KINDS),
]
ZERO = State(B, np.zeros(len(UNKNOWNS)), UNKNOWNS)
FRAME = Frame(speed=0.002, sense=0.25)  # as of some more passes
every_probe = pytest.mark.parametrize("probe", PROBES, ids=lambda p: p.name)


def at(b=B, **values):
    """A state with some nuisances away from zero, e.g. ``gain_wire=1e-3``."""
    eta = np.zeros(len(UNKNOWNS))
    for key, value in values.items():
        kind, _, where = key.partition("_")
        eta[State(b, eta, UNKNOWNS).index(kind, where)] = value
    return State(b, eta, UNKNOWNS)


def linked(probe, state, position):
    """Flux of an ideal probe in the spline field, one reading at a time."""
    nodes = response(probe, SPLINE.spacing)
    rows = SPLINE.running_rows if nodes.of_integral else SPLINE.field_rows
    return sum(
        w * rows(position + o) @ state.b for o, w in zip(nodes.offsets, nodes.weights, strict=True)
    )


def readings(probe, state, motion=MOTION, time=TIME):
    """What the equation in the module's docstring says, one reading at a time: recorded frame."""
    value = state.value
    speed = np.gradient(motion, time)
    shift = value("lag") * (speed - FRAME.speed)
    shift = shift + value("backlash") * (np.sign(speed) - FRAME.sense) / 2
    gain = 1 + value("gain", probe.name) + (value("scale") if probe.senses_level else 0.0)
    return gain * linked(probe, state, motion + shift) + state.value("drift", "p") * time


def scan(probe, state=ZERO, integrator=Integrator("i"), motion=MOTION, **more):  # noqa: B008 - frozen
    return Pass("p", probe, integrator, TIME, motion, readings(probe, state, motion), **more)


def steps(model, values):
    """Increments of the bin means of any values, one a reading."""
    bins = model.bins
    return np.diff(np.add.reduceat(values, bins.starts) / bins.count)


@every_probe
def test_columns_of_the_coefficients(probe):
    model = PassModel(scan(probe), SPLINE)
    design = model.rows(ZERO, FRAME).design.toarray()
    for k in (0, 12, 33, SPLINE.size - 1):
        unit = np.eye(SPLINE.size)[k]
        expected = steps(model, linked(probe, State(unit, ZERO.eta, UNKNOWNS), MOTION))
        np.testing.assert_allclose(design[:, k], expected, rtol=0, atol=1e-12 * abs(probe.gain))


@every_probe
@pytest.mark.parametrize(
    ("name", "step", "tolerance"),
    [
        ("drift_p", 1e-6, 1e-6),
        ("gain", 1e-6, 1e-6),
        ("offset", 1e-6, 1e-6),  # no pass tells an offset
        ("scale", 1e-6, 1e-6),  # a wire's gain, and nothing to a coil
        ("lag", 1e-5, 2e-2),  # speed and slope are averaged apart
        ("backlash", 1e-6, 1e-2),
    ],
)
def test_columns_of_the_nuisances(probe, name, step, tolerance):
    key = f"gain_{probe.name}" if name == "gain" else name
    model = PassModel(scan(probe), SPLINE)
    up, down = readings(probe, at(**{key: step})), readings(probe, at(**{key: -step}))
    expected = steps(model, (up - down) / (2 * step))
    state = at(**{key: 1.0})
    column = model.rows(ZERO, FRAME).design.toarray()[:, SPLINE.size + int(np.argmax(state.eta))]
    np.testing.assert_allclose(column, expected, rtol=0, atol=tolerance * np.abs(expected).max())
    told = name != "offset" and (name != "scale" or probe is WIRE)
    assert bool(column.any()) == told


@every_probe
@pytest.mark.parametrize("kind", ["tilt", "temperature"])
def test_tilt_and_temperature_are_gains(probe, kind):
    unknowns = [Nuisance("gain", probe.name, 0.0, 1e-3), Nuisance(kind, probe.name, 0.0, 1e-4)]
    state = State(B, np.array([1e-3, 2e-4]), unknowns)
    design = PassModel(scan(probe), SPLINE).rows(state, FRAME).design.toarray()
    assert design[:, SPLINE.size].any()
    np.testing.assert_array_equal(design[:, SPLINE.size], design[:, SPLINE.size + 1])
    plain = PassModel(scan(probe), SPLINE).rows(ZERO, FRAME).design.toarray()
    np.testing.assert_allclose(design[:, 30], 1.0012 * plain[:, 30], rtol=1e-12)


@pytest.mark.parametrize("probe", [RECT, ROUND], ids=lambda p: p.name)
def test_the_column_of_a_window_is_that_of_a_longer_coil(probe):
    loose = replace(probe, u_window=1e-4)
    unknowns = [Nuisance("window", probe.name, 0.0, 0.01)]
    state = State(B, np.array([0.0]), unknowns)
    model = PassModel(scan(loose), SPLINE)
    column = model.rows(state, FRAME).design.toarray()[:, SPLINE.size]
    longer, shorter = (replace(probe, window=probe.window * (1 + by)) for by in (1e-4, -1e-4))
    expected = steps(model, linked(longer, ZERO, MOTION) - linked(shorter, ZERO, MOTION)) / 2e-4
    np.testing.assert_allclose(column, expected, rtol=0, atol=2e-5 * np.abs(expected).max())
    flip = FlipReference(loose, 0.02, 0.3, 2e-6)
    row, _ = one_row(flip, state)
    place = np.array([0.02])
    moved = linked(longer, ZERO, place) - linked(shorter, ZERO, place)
    assert row[SPLINE.size] == pytest.approx(2 * float(moved[0]) / 2e-4, rel=1e-4)


@every_probe
def test_other_probes_gains_have_no_column(probe):
    design = PassModel(scan(probe), SPLINE).rows(ZERO, FRAME).design.toarray()
    for other in PROBES:
        column = design[:, SPLINE.size + ZERO.index("gain", other.name)]
        assert column.any() == (other is probe)


@every_probe
def test_linearised_away_from_zero_the_readings_are_met_to_second_order(probe):
    near = at(scale=2e-5, lag=1e-3, drift_p=1e-6, **{f"gain_{probe.name}": 2e-4})
    there = at(scale=3e-5, lag=1.5e-3, drift_p=3e-6, **{f"gain_{probe.name}": 5e-4})
    model = PassModel(scan(probe, there), SPLINE)
    rows = model.rows(near, FRAME)
    rest = rows.target - rows.design @ np.concatenate([B, there.eta])
    linear = PassModel(scan(probe, there), SPLINE).rows(ZERO, FRAME)
    first_order = linear.target - linear.design @ np.concatenate([B, ZERO.eta])
    assert np.abs(rest).max() < 2e-2 * np.abs(first_order).max()


@every_probe
def test_readings_moved_to_where_they_were_taken_are_met_better_still(probe):
    there = at(backlash=8e-4)
    plain = PassModel(scan(probe, there), SPLINE)
    moved = PassModel(scan(probe, there), SPLINE, shift=plain.reading_shift(there, FRAME))

    def misfit(model):
        rows = model.rows(there, FRAME)
        return np.abs(rows.target - rows.design @ np.concatenate([B, there.eta])).max()

    assert misfit(moved) < 0.1 * misfit(plain)


def test_shift_of_every_reading():
    state = at(offset=1e-3, scale=1e-2, backlash=4e-3, lag=0.05)  # the first two shift the frame
    motion = np.linspace(-0.1, 0.1, len(TIME))
    shift = PassModel(scan(WIRE, motion=motion), SPLINE).reading_shift(state, FRAME)
    speed = 0.2 / TIME[-1]
    expected = 2e-3 * (1 - FRAME.sense) + 0.05 * (speed - FRAME.speed)
    np.testing.assert_allclose(shift[:-10], expected, rtol=0, atol=1e-9)


def test_expected_drift_is_taken_off_where_it_is_certain():
    certain = Integrator("i", drift=3e-6, u_drift=0.0)
    without = State(B, ZERO.eta[1:], UNKNOWNS[1:])
    one = scan(WIRE, at(drift_p=3e-6), certain)
    rows = PassModel(one, SPLINE).rows(without, FRAME)
    rest = rows.target - rows.design @ np.concatenate([B, without.eta])
    assert np.abs(rest).max() < 1e-12


@every_probe
def test_current_scales_what_was_read(probe):
    current = 85 * (1 + 0.1 * np.sin(TIME))
    model = PassModel(scan(probe, current=current), SPLINE, nominal_current=85.0)
    starts, count = model.bins.starts, model.bins.count
    factor = np.add.reduceat(current / 85, starts) / count
    means = np.add.reduceat(linked(probe, ZERO, MOTION), starts) / count
    got = model.rows(ZERO, FRAME).design[:, : SPLINE.size] @ B
    np.testing.assert_allclose(got, np.diff(factor * means), rtol=0, atol=1e-12)


def test_jitter_is_seen_through_the_slope():
    model = PassModel(scan(WIRE), SPLINE)
    quiet = total(model.noise(ZERO, 2e-7, 5e-8, 0.0))
    loud = total(model.noise(ZERO, 2e-7, 5e-8, 1e-5))
    swing = WIRE.gain * SPLINE.field_rows(model.bins.position) @ B  # dΦ/ds of a wire
    extra = (swing * 1e-5) ** 2 / model.bins.count
    np.testing.assert_allclose(loud.diagonal - quiet.diagonal, extra[1:] + extra[:-1], rtol=2e-3)
    np.testing.assert_allclose(loud.off - quiet.off, -extra[1:-1], rtol=2e-3)


def test_information_of_a_pass_is_that_of_dense_least_squares():
    model = PassModel(scan(WIRE), SPLINE)
    rows, noise = model.rows(ZERO, FRAME), total(model.noise(ZERO, 2e-7, 5e-8, 5e-6))
    found = pass_information(rows, noise)
    C = np.diag(noise.diagonal) + np.diag(noise.off, 1) + np.diag(noise.off, -1)
    A, weight = rows.design.toarray(), np.linalg.inv(C)
    scale = np.abs(A.T @ weight @ A).max()
    np.testing.assert_allclose(found.matrix, A.T @ weight @ A, rtol=0, atol=1e-9 * scale)
    right = A.T @ weight @ rows.target
    np.testing.assert_allclose(found.right, right, rtol=0, atol=1e-9 * np.abs(right).max())


def test_information_adds_up():
    model = PassModel(scan(WIRE), SPLINE)
    one = pass_information(model.rows(ZERO, FRAME), total(model.noise(ZERO, 2e-7, 5e-8, 0.0)))
    both = one + one
    np.testing.assert_array_equal(both.matrix, 2 * one.matrix)
    np.testing.assert_array_equal(both.right, 2 * one.right)


def one_row(reference, state=ZERO):
    """Row and target of one reference, from its information."""
    found = reference_information(reference_rows([reference], SPLINE, state, FRAME))
    u = reference.u if isinstance(reference, PointReference) else reference.u_flux_change
    middle = int(np.argmax(np.diagonal(found.matrix)[: SPLINE.size]))  # its entry is positive
    row = found.matrix[:, middle] * u / np.sqrt(found.matrix[middle, middle])
    return row, found.right[middle] * u**2 / row[middle]


def test_row_of_a_point_reference():
    row, target = one_row(PointReference(0.013, 0.25, 1e-5))
    assert target == pytest.approx(0.25)
    place = np.array([0.013])
    np.testing.assert_allclose(row[: SPLINE.size], SPLINE.field_rows(place)[0], rtol=0, atol=1e-12)
    slope = float(SPLINE.field_rows(place, 1)[0] @ B)
    shifts = {"offset": 1.0, "scale": 0.013, "lag": FRAME.speed, "backlash": FRAME.sense / 2}
    for kind, shift in shifts.items():
        assert row[SPLINE.size + ZERO.index(kind, "")] == pytest.approx(-slope * shift, rel=1e-9)


def test_row_of_a_zero_reference_is_the_mean_over_its_stretch():
    found = reference_information(
        reference_rows([ZeroReference(0.09, 0.12, 5e-6)], SPLINE, ZERO, FRAME)
    )
    row = np.zeros(len(found.right))
    row[: SPLINE.size] = SPLINE.integral_row(0.09, 0.12) / 0.03
    np.testing.assert_allclose(found.matrix, np.outer(row, row) / 5e-6**2, rtol=1e-9, atol=1e-3)
    assert not found.right.any()


@pytest.mark.parametrize("probe", [RECT, ROUND], ids=lambda p: p.name)
def test_row_of_a_flip_reference(probe):
    def change(state):
        moving = state.value("lag") * FRAME.speed + state.value("backlash") * FRAME.sense / 2
        place = np.array([0.02 - moving])  # the coil stands: what shifts the frame, not the coil
        return 2 * (1 + state.value("gain", probe.name)) * float(linked(probe, state, place)[0])

    state = at(lag=1e-2, **{f"gain_{probe.name}": 1e-3})
    row, _ = one_row(FlipReference(probe, 0.02, 0.3, 2e-6), state)
    for kind in ("offset", "scale", "lag", "backlash", f"gain_{probe.name}"):
        index = int(np.argmax(at(**{kind: 1.0}).eta))
        step = np.eye(len(UNKNOWNS))[index] * 1e-6
        up, down = (change(State(B, state.eta + s, UNKNOWNS)) for s in (step, -step))
        assert row[SPLINE.size + index] == pytest.approx((up - down) / 2e-6, rel=1e-5, abs=1e-9)
    assert row[: SPLINE.size] @ B == pytest.approx(change(state), rel=1e-12)


@pytest.mark.parametrize("probe", [RECT, ROUND], ids=lambda p: p.name)
def test_a_flip_sees_twice_what_the_coil_links(probe):
    row, _ = one_row(FlipReference(probe, 0.0, 0.3, 2e-6))
    assert row[: SPLINE.size] @ np.ones(SPLINE.size) == pytest.approx(2 * probe.gain, rel=1e-12)


def test_value_of_what_is_no_unknown_is_zero():
    assert ZERO.value("gain", "nobody") == 0.0
    assert ZERO.index("drift", "another pass") is None


def test_the_sign_of_a_turned_probe_comes_back():
    turned = replace(RECT, polarity=-1)
    noise = Integrator("i", read_noise=1e-8, walk_noise=1e-8, u_drift=1e-6)
    point = PointReference(0.0, 0.5, 1e-6)
    fits = [
        fit_line([scan(probe, integrator=noise)], [point], Stage(), SPLINE, 0.03)
        for probe in (RECT, turned)
    ]
    np.testing.assert_allclose(
        fits[0].values[: SPLINE.size], fits[1].values[: SPLINE.size], atol=1e-9
    )
