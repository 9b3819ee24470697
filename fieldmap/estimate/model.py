"""The linear model of one pass and of one reference, linearised at a state.

A pass reads, up to a constant and noise,

    Φ = (1 + gain) * (X + shift * S) b + drift * t

with X the flux rows, S the slope rows dΦ/ds, b the coefficients of B, and
``shift = offset + scale * s + lag * v + backlash * sign(v) / 2`` the position error. Gain and
shift meet b in a product, so each solve linearises at the state before it (Gauss-Newton).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.estimate.bins import Bins, bin_pass, mean_rows
from fieldmap.estimate.noise import Tridiagonal, read_part, walk_part
from fieldmap.estimate.response import response
from fieldmap.readings.passes import FlipReference, PointReference, ZeroReference

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.parameters import Kind, Nuisance
    from fieldmap.estimate.spline import UniformSpline
    from fieldmap.readings.passes import Pass, Reference

__all__ = ["Information", "PassModel", "State", "reference_information"]

Floats = npt.NDArray[np.float64]

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

    def index(self, kind: Kind, where: str = "") -> int | None:
        """Place of one nuisance in eta; None where it is no unknown."""
        for i, unknown in enumerate(self.unknowns):
            if unknown.kind == kind and unknown.where == where:
                return i
        return None


@dataclass(frozen=True, eq=False)
class Information:
    """Normal equations of some readings: matrix, right side, and the readings' own square.

    Parameters
    ----------
    matrix : (p, p) array
        AᵀC⁻¹A over the coefficients of B and the nuisances.
    right : (p,) array
        AᵀC⁻¹y.
    square : float
        yᵀC⁻¹y.
    log_noise : float
        log det C.
    count : int
        Number of readings (increments).
    """

    matrix: Floats
    right: Floats
    square: float
    log_noise: float
    count: int

    def __add__(self, other: Information) -> Information:
        return Information(
            self.matrix + other.matrix,
            self.right + other.right,
            self.square + other.square,
            self.log_noise + other.log_noise,
            self.count + other.count,
        )


@dataclass(frozen=True, eq=False)
class Rows:
    """One pass linearised: increments y = design @ (b, eta) + noise, ready for a solve."""

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
    """

    one: Pass
    spline: UniformSpline
    nominal_current: float | None = None
    shift: Floats | None = None
    bins: Bins = field(init=False)
    flux_steps: sparse.csr_array = field(init=False)
    slope: sparse.csr_array = field(init=False)
    applied: Floats = field(init=False)
    walk: Tridiagonal = field(init=False)

    def __post_init__(self) -> None:
        self.bins = bin_pass(self.one, self.spline.spacing / 2, self.nominal_current)
        position = self.one.position if self.shift is None else self.one.position + self.shift
        nodes = response(self.one.probe, self.spline.spacing)
        running, direct, slope = mean_rows(self.bins, position, nodes, self.spline)
        factor = self.bins.current
        if factor is not None:
            scale = sparse.diags_array(factor)
            running, direct, slope = scale @ running, scale @ direct, scale @ slope
        steps = self.spline.from_running((running[1:] - running[:-1]).toarray())
        steps[np.abs(steps) < NEGLIGIBLE * np.abs(steps).max(initial=0.0)] = 0.0
        self.flux_steps = sparse.csr_array(steps) + (direct[1:] - direct[:-1])
        self.slope = slope.tocsr()
        self.walk = walk_part(self.bins)
        starts, count = self.bins.starts, self.bins.count
        self.applied = (
            np.zeros(len(starts))
            if self.shift is None
            else np.add.reduceat(self.shift, starts) / count
        )

    def shift_at(self, state: State) -> Floats:
        """Position error of each bin at a state, m."""
        bins = self.bins
        return np.asarray(
            state.value("offset")
            + state.value("scale") * bins.position
            + state.value("lag") * bins.speed
            + state.value("backlash") * np.sign(bins.speed) / 2
        )

    def reading_shift(self, state: State) -> Floats:
        """Position error of every reading at a state, m."""
        one = self.one
        late = np.interp(one.time + state.value("lag"), one.time, one.position)
        bin_of = np.repeat(np.arange(len(self.bins.starts)), self.bins.count.astype(int))
        half = state.value("backlash") * np.sign(self.bins.speed) / 2
        scale = state.value("scale") * one.position
        return np.asarray(late - one.position + scale + state.value("offset") + half[bin_of])

    def covariance(self, state: State, walk: float, read: float, jitter: float) -> Tridiagonal:
        """Covariance of the increments for given noise levels (V s/√s, V s, m)."""
        swing = self.slope @ state.b * (1 + state.value("gain", self.one.probe.name))
        return walk**2 * self.walk + read_part(self.bins, read**2 + (swing * jitter) ** 2)

    def rows(self, state: State) -> Rows:
        """Linearise at a state."""
        bins, gain = self.bins, 1 + state.value("gain", self.one.probe.name)
        extra = sparse.diags_array(self.shift_at(state) - self.applied) @ self.slope
        field_steps = self.flux_steps + (extra[1:] - extra[:-1])
        swing = gain * (self.slope @ state.b)
        columns = np.zeros((len(bins.time) - 1, len(state.eta)))
        slopes: list[tuple[Kind, Floats]] = [
            ("offset", swing),
            ("scale", swing * bins.position),
            ("lag", swing * bins.speed),
            ("backlash", swing * np.sign(bins.speed) / 2),
        ]
        for kind, column in slopes:
            if (index := state.index(kind)) is not None:
                columns[:, index] = np.diff(column)
        if (index := state.index("gain", self.one.probe.name)) is not None:
            columns[:, index] = field_steps @ state.b
        target = np.diff(bins.flux) + columns @ state.eta
        if (index := state.index("drift", self.one.name)) is not None:
            columns[:, index] = np.diff(bins.time)
        else:
            target -= self.one.integrator.drift * np.diff(bins.time)
        design = sparse.hstack([gain * field_steps, sparse.csr_array(columns)], format="csr")
        return Rows(design, target)


def pass_information(rows: Rows, covariance: Tridiagonal) -> Information:
    """Normal equations of one pass."""
    used = np.flatnonzero(np.diff(rows.design.tocsc().indptr))
    dense = np.asarray(rows.design[:, used].todense())
    solved = covariance.solve(np.column_stack([dense, rows.target]))
    product = rows.design[:, used].T @ solved
    size = rows.design.shape[1]
    matrix, right = np.zeros((size, size)), np.zeros(size)
    block = product[:, :-1]
    matrix[np.ix_(used, used)] = 0.5 * (block + block.T)
    right[used] = product[:, -1]
    return Information(
        matrix,
        right,
        float(rows.target @ solved[:, -1]),
        covariance.log_determinant(),
        len(rows.target),
    )


def reference_information(
    references: Sequence[Reference], spline: UniformSpline, state: State
) -> Information:
    """Normal equations of the absolute references.

    Parameters
    ----------
    references : sequence
        Point, zero and flip references of the line.
    spline : UniformSpline
        The knots.
    state : State
        Where to linearise.

    Returns
    -------
    Information
    """
    size = spline.size + len(state.eta)
    design = np.zeros((len(references), size))
    target, sd = np.zeros(len(references)), np.ones(len(references))
    for i, reference in enumerate(references):
        design[i], target[i], sd[i] = _reference_row(reference, spline, state)
    white, goal = design / sd[:, None], target / sd
    return Information(
        white.T @ white,
        white.T @ goal,
        float(goal @ goal),
        float(2 * np.log(sd).sum()),
        len(references),
    )


def _reference_row(
    reference: Reference, spline: UniformSpline, state: State
) -> tuple[Floats, float, float]:
    """Row over (b, eta), value and standard uncertainty of one reference."""
    row = np.zeros(spline.size + len(state.eta))
    if isinstance(reference, PointReference):
        row[: spline.size] = spline.field_rows(np.array([reference.at]))[0]
        return row, reference.field, reference.u
    if isinstance(reference, ZeroReference):
        width = reference.stop - reference.start
        row[: spline.size] = spline.integral_row(reference.start, reference.stop) / width
        return row, 0.0, reference.u
    return _flip_row(row, reference, spline, state)


def _flip_row(
    row: Floats, flip: FlipReference, spline: UniformSpline, state: State
) -> tuple[Floats, float, float]:
    """A coil turned over sees twice what it links, at its recorded place."""
    nodes = response(flip.probe, spline.spacing)
    at = flip.at + state.value("offset") + state.value("scale") * flip.at
    places = at + nodes.offsets
    if nodes.of_integral:
        links = nodes.weights @ spline.running_rows(places)
        slope = nodes.weights @ spline.field_rows(places)
    else:
        links = nodes.weights @ spline.field_rows(places)
        slope = nodes.weights @ spline.field_rows(places, 1)
    gain = 1 + state.value("gain", flip.probe.name)
    row[: spline.size] = 2 * gain * links
    steps: list[tuple[Kind, str, float]] = [
        ("gain", flip.probe.name, float(2 * links @ state.b)),
        ("offset", "", float(2 * gain * slope @ state.b)),
        ("scale", "", float(2 * gain * slope @ state.b) * flip.at),
    ]
    target = flip.flux_change
    for kind, where, step in steps:
        if (index := state.index(kind, where)) is not None:
            row[spline.size + index] = step
            target += step * state.eta[index]
    return row, target, flip.u_flux_change
