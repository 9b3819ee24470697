"""The linear model of one pass and of one reference, linearised at a state.

A pass reads, up to a constant and noise,

    Φ = (1 + gain) * (X + shift * S) b + drift * t + steps

with X the flux rows, S the slope rows dΦ/ds and b the coefficients of B, both in the recorded
frame, so that ``shift = lag * (v - v̄) + backlash * (sense - mean sense) / 2`` is what tells
this pass from the others, besides a lag or a shift that it has for itself. In that frame a wire
cuts ``1 + scale`` times the true field. Gain and shift meet b in a product, so each solve
linearises at the state before it (Gauss-Newton).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.estimate.bins import Bins, bin_pass, mean_rows
from fieldmap.estimate.corrected import integrator_scale, step_times
from fieldmap.estimate.frame import Frame
from fieldmap.estimate.noise import Tridiagonal, read_part, walk_part
from fieldmap.estimate.parameters import GAINS
from fieldmap.estimate.response import response
from fieldmap.readings.passes import FlipReference, PointReference
from fieldmap.readings.probe import Coil

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.parameters import Kind, Nuisance
    from fieldmap.estimate.spline import UniformSpline
    from fieldmap.readings.passes import Pass, Reference
    from fieldmap.readings.probe import Probe

__all__ = [
    "Information",
    "PassModel",
    "Rows",
    "State",
    "dense_columns",
    "pass_information",
    "reference_information",
    "reference_rows",
]

Floats = npt.NDArray[np.float64]

WIDER = 1e-3  # of a window, for the difference quotient: its error is a millionth
NEGLIGIBLE = 1e-14  # of the largest entry: what rounding leaves in a row outside its support


@dataclass(frozen=True, eq=False)
class State:
    """Where the model is linearised: coefficients of B and values of the nuisances.

    Parameters
    ----------
    b : (size,) array
        T.
    eta : (m,) array
        SI, in the order of `unknowns`.
    unknowns : list of Nuisance
        What each entry of eta is.
    """

    b: Floats
    eta: Floats
    unknowns: list[Nuisance]

    def value(self, kind: Kind, where: str = "") -> float:
        """Value of one nuisance; zero where it is no unknown."""
        index = self.index(kind, where)
        return 0.0 if index is None else float(self.eta[index])

    def gain(self, probe: str) -> float:
        """Gain of a probe less its stated value, relative, everything that changes it included."""
        return sum(self.value(kind, probe) for kind in GAINS)

    def index(self, kind: Kind, where: str = "") -> int | None:
        """Place of one nuisance in eta; None where it is no unknown."""
        for i, unknown in enumerate(self.unknowns):
            if unknown.kind == kind and unknown.where == where:
                return i
        return None


@dataclass(frozen=True, eq=False)
class Information:
    """Normal equations of some readings: matrix and right side.

    Parameters
    ----------
    matrix : (p, p) array
        AᵀC⁻¹A over the coefficients of B and the nuisances.
    right : (p,) array
        AᵀC⁻¹y.
    """

    matrix: Floats
    right: Floats

    def __add__(self, other: Information) -> Information:
        return Information(self.matrix + other.matrix, self.right + other.right)


@dataclass(frozen=True, eq=False)
class Rows:
    """Some readings linearised: target = design @ (b, eta) + noise."""

    design: sparse.csr_array
    target: Floats


@dataclass(eq=False)
class PassModel:
    """One pass, binned, with its design rows.

    Parameters
    ----------
    one : Pass
        The pass.
    spline : UniformSpline
        The knots.
    nominal_current : float, optional
        A.
    shift : (n,) array, optional
        Position correction of every reading already applied, m.
    widened : float
        How much longer the window is taken than stated, relative: where it is linearised.
    """

    one: Pass
    spline: UniformSpline
    nominal_current: float | None = None
    shift: Floats | None = None
    widened: float = 0.0
    bins: Bins = field(init=False)
    flux_steps: sparse.csr_array = field(init=False)
    slope: sparse.csr_array = field(init=False)
    window_steps: sparse.csr_array = field(init=False)
    applied: Floats = field(init=False)
    walk: Tridiagonal = field(init=False)
    scale: float = field(init=False)
    steps: dict[str, Floats] = field(init=False)

    def __post_init__(self) -> None:
        self.bins = bin_pass(self.one, self.spline.spacing / 2, self.nominal_current)
        self.flux_steps, self.slope = self._steps(self.widened)
        self.window_steps = sparse.csr_array(self.flux_steps.shape)
        if isinstance(self.one.probe, Coil) and self.one.probe.u_window > 0:
            self.window_steps = self.widening()
        self.scale = abs(integrator_scale(self.one))
        self.walk = self.scale**2 * walk_part(self.bins)
        starts, count = self.bins.starts, self.bins.count
        self.steps = {
            where: np.diff(np.add.reduceat((self.one.time >= at).astype(float), starts) / count)
            for where, at in step_times(self.one).items()
        }
        self.applied = (
            np.zeros(len(starts))
            if self.shift is None
            else np.add.reduceat(self.shift, starts) / count
        )

    def widening(self) -> sparse.csr_array:
        """Change of the increments' rows with the relative length of the window."""
        wider, narrower = (self._steps(self.widened + by)[0] for by in (WIDER, -WIDER))
        return sparse.csr_array((wider - narrower) / (2 * WIDER))

    def _steps(self, widened: float) -> tuple[sparse.csr_array, sparse.csr_array]:
        """Rows of the increments, and of dΦ/ds, for a window that is longer than stated."""
        position = self.one.position if self.shift is None else self.one.position + self.shift
        nodes = response(self.one.probe, self.spline.spacing, widened)
        running, direct, slope = mean_rows(self.bins, position, nodes, self.spline)
        if self.bins.strength is not None:
            scale = sparse.diags_array(self.bins.strength)
            running, direct, slope = scale @ running, scale @ direct, scale @ slope
        steps = self.spline.from_running((running[1:] - running[:-1]).toarray())
        steps[np.abs(steps) < NEGLIGIBLE * np.abs(steps).max(initial=0.0)] = 0.0
        return sparse.csr_array(steps) + (direct[1:] - direct[:-1]), slope.tocsr()

    def own_effects(self, state: State, frame: Frame) -> dict[int, Floats]:
        """Shift of each bin against the recorded frame for one unit of each nuisance, m.

        By the index of the nuisance; those that shift nothing here are left out.
        """
        bins, nowhere = self.bins, np.zeros(1)
        own: dict[Kind, Floats | float] = {"lag": bins.speed, "backlash": bins.sense / 2}
        of_pass: dict[Kind, Floats | float] = {"pass lag": bins.speed, "pass shift": 1.0}
        effects = {}
        for index, unknown in enumerate(state.unknowns):
            if unknown.kind in own or unknown.kind in of_pass:
                mine = own | (of_pass if unknown.where == self.one.name else {})
                common = float(frame.effect(unknown, nowhere)[0])
                effects[index] = mine.get(unknown.kind, 0.0) - np.full(len(bins.speed), common)
        return effects

    def shift_at(self, state: State, frame: Frame) -> Floats:
        """Shift of each bin against the recorded frame at a state, m."""
        shift = np.zeros(len(self.bins.speed))
        for index, effect in self.own_effects(state, frame).items():
            shift += state.eta[index] * effect
        return shift

    def reading_shift(self, state: State, frame: Frame) -> Floats:
        """Shift of every reading against the recorded frame at a state, m."""
        one = self.one
        lag = state.value("lag") + state.value("pass lag", one.name)
        late = np.interp(one.time + lag, one.time, one.position)
        bin_of = np.repeat(np.arange(len(self.bins.starts)), self.bins.count.astype(int))
        # the lag takes each reading along its own way; the rest shifts whole bins
        rest = self.shift_at(state, frame) - lag * self.bins.speed
        return np.asarray(late - one.position + rest[bin_of])

    def gain(self, state: State) -> float:
        """Gain over its stated value; in the recorded frame a wire's contains the scale."""
        stretched = state.value("scale") if self.one.probe.senses_level else 0.0
        own = state.value("pass factor", self.one.name)
        return 1 + state.gain(self.one.probe.name) + own + stretched

    def noise(
        self, state: State, walk: float, read: float, jitter: float
    ) -> dict[str, Tridiagonal]:
        """Covariance of the increments by its cause, for noise levels in V s/√s, V s and m."""
        swing = self.slope @ state.b * self.gain(state)
        even = np.full(len(swing), (self.scale * read) ** 2)
        return {
            "walk": walk**2 * self.walk,
            "read": read_part(self.bins, even),
            "jitter": read_part(self.bins, (swing * jitter) ** 2),
        }

    def rows(self, state: State, frame: Frame) -> Rows:
        """Linearise at a state."""
        bins, gain = self.bins, self.gain(state)
        extra = sparse.diags_array(self.shift_at(state, frame) - self.applied) @ self.slope
        field_steps = self.flux_steps + (extra[1:] - extra[:-1])
        swing = gain * (self.slope @ state.b)
        columns = np.zeros((len(bins.time) - 1, len(state.eta)))
        if (index := state.index("window", self.one.probe.name)) is not None:
            columns[:, index] = gain * (self.window_steps @ state.b)
            field_steps = field_steps + (state.eta[index] - self.widened) * self.window_steps
        for index, effect in self.own_effects(state, frame).items():
            columns[:, index] = np.diff(swing * effect)
        gains = [(kind, self.one.probe.name) for kind in GAINS]
        gains.append(("pass factor", self.one.name))
        if self.one.probe.senses_level:
            gains.append(("scale", ""))
        for kind, where in gains:
            if (index := state.index(kind, where)) is not None:
                columns[:, index] = field_steps @ state.b
        target = np.diff(bins.flux) + columns @ state.eta
        if (index := state.index("drift", self.one.name)) is not None:
            columns[:, index] = np.diff(bins.time)
        else:
            drift = self.one.integrator.drift * integrator_scale(self.one)
            target -= drift * np.diff(bins.time)
        for where, share in self.steps.items():
            if (index := state.index("step", where)) is not None:
                columns[:, index] = share
        design = sparse.hstack([gain * field_steps, sparse.csr_array(columns)], format="csr")
        return Rows(design, target)


def dense_columns(design: sparse.csr_array) -> tuple[npt.NDArray[np.intp], Floats]:
    """The columns that a pass touches, and their content: a stretch of the knots, most often."""
    used = np.flatnonzero(np.diff(design.tocsc().indptr))
    return used, np.asarray(design[:, used].todense())


def pass_information(rows: Rows, covariance: Tridiagonal) -> Information:
    """Normal equations of one pass."""
    used, dense = dense_columns(rows.design)
    solved = covariance.solve(np.column_stack([dense, rows.target]))
    product = rows.design[:, used].T @ solved
    size = rows.design.shape[1]
    matrix, right = np.zeros((size, size)), np.zeros(size)
    block = product[:, :-1]
    matrix[np.ix_(used, used)] = 0.5 * (block + block.T)
    right[used] = product[:, -1]
    return Information(matrix, right)


def reference_rows(
    references: Sequence[Reference], spline: UniformSpline, state: State, frame: Frame
) -> Rows:
    """Rows and values of the absolute references, divided by their standard uncertainties.

    Parameters
    ----------
    references : sequence
        Point, zero and flip references of the line.
    spline : UniformSpline
        The knots, in the recorded frame.
    state : State
        Where to linearise.
    frame : Frame
        How recorded and true positions differ.

    Returns
    -------
    Rows
    """
    size = spline.size + len(state.eta)
    design = np.zeros((len(references), size))
    target, sd = np.zeros(len(references)), np.ones(len(references))
    for i, reference in enumerate(references):
        row, target[i], sd[i] = _reference_row(reference, spline, state, frame)
        design[i] = row
        target[i] += float(row[spline.size :] @ state.eta)
    return Rows(sparse.csr_array(design / sd[:, None]), target / sd)


def reference_information(rows: Rows) -> Information:
    """Normal equations of references."""
    white = rows.design.toarray()
    return Information(white.T @ white, white.T @ rows.target)


def _reference_row(
    reference: Reference, spline: UniformSpline, state: State, frame: Frame
) -> tuple[Floats, float, float]:
    """Row over (b, eta) at the state, value and standard uncertainty of one reference."""
    if isinstance(reference, FlipReference):
        return _flip_row(reference, spline, state, frame)
    row = np.zeros(spline.size + len(state.eta))
    if isinstance(reference, PointReference):
        # the field at a true position is the recorded profile at that position less the shift
        at = reference.at - _shift(state, frame, reference.at)
        row[: spline.size] = spline.field_rows(np.array([at]))[0]
        slope = float(spline.field_rows(np.array([at]), 1)[0] @ state.b)
        for index, unknown in enumerate(state.unknowns):
            effect = frame.effect(unknown, np.array([reference.at]))
            row[spline.size + index] = -slope * float(effect[0])
        return row, reference.field, reference.u
    # a field that vanishes on a stretch has no slope worth a shift
    width = reference.stop - reference.start
    row[: spline.size] = spline.integral_row(reference.start, reference.stop) / width
    return row, 0.0, reference.u


def _shift(state: State, frame: Frame, at: float) -> float:
    """True less recorded position, m."""
    place = np.array([at])
    pairs = zip(state.unknowns, state.eta.tolist(), strict=True)
    return float(sum(value * frame.effect(unknown, place)[0] for unknown, value in pairs))


def _flip_row(
    flip: FlipReference, spline: UniformSpline, state: State, frame: Frame
) -> tuple[Floats, float, float]:
    """A coil turned over sees twice what it links; it stands, so it has no lag."""
    row = np.zeros(spline.size + len(state.eta))
    standing = Frame(0.0, 0.0)
    at = flip.at + _shift(state, standing, flip.at) - _shift(state, frame, flip.at)
    links, slope = _links(flip.probe, at, spline)
    wider, narrower = (_links(flip.probe, at, spline, by)[0] for by in (WIDER, -WIDER))
    window = (wider - narrower) / (2 * WIDER)
    gain = 1 + state.gain(flip.probe.name)
    links = links + state.value("window", flip.probe.name) * window
    row[: spline.size] = 2 * gain * links
    swing = float(2 * gain * slope @ state.b)
    steps: list[tuple[Kind, str, float]] = [
        *((kind, flip.probe.name, float(2 * links @ state.b)) for kind in GAINS),
        ("window", flip.probe.name, float(2 * gain * window @ state.b)),
    ]
    place = np.array([flip.at])
    for index, unknown in enumerate(state.unknowns):
        share = frame.effect(unknown, place) - standing.effect(unknown, place)
        row[spline.size + index] = -swing * float(share[0])
    for kind, where, step in steps:
        if (at_index := state.index(kind, where)) is not None:
            row[spline.size + at_index] = step
    return row, flip.flux_change, flip.u_flux_change


def _links(
    probe: Probe, at: float, spline: UniformSpline, widened: float = 0.0
) -> tuple[Floats, Floats]:
    """Rows of the flux through a standing coil, and of its change with the position."""
    nodes = response(probe, spline.spacing, widened)
    places = at + nodes.offsets
    if nodes.of_integral:
        flux, slope = spline.running_rows(places), spline.field_rows(places)
    else:
        flux, slope = spline.field_rows(places), spline.field_rows(places, 1)
    return nodes.weights @ flux, nodes.weights @ slope
