"""Two passes against each other: what each says of the field where both were.

A wire tells the field itself, a coil only how it varies under its window, each up to the drift
of its integrator, its gain and its position errors. So they are compared by what they say of one
field: one reads B, the other B + δ, with δ a coarse spline over the stretch that both travelled.
B may everywhere be as rough as the map found it at its roughest, and is otherwise left to the two
passes; references and other passes have no say. B is what the pass reads that tells more, so that
the prior, which has its weight where readings tell little, does not bear on δ. If the passes
agree, δ is zero within its covariance.

* The *test* is χ² = δᵀ cov(δ)⁻¹ δ with everything free at once, so that a drift, a gain or a lag
  within its prior is no disagreement.
* The *curve* is δ with those nuisances set to what explains both passes best with δ = 0, but not
  more than four prior uncertainties off: what the best offset and drift leave over, with the band
  of the noise.
* Where one of the two is a coil the level of δ is told by no reading; it is then taken such that
  the mean of δ is zero, and the curve shows its shape.

Comparing residuals of the joint map instead would hide what the two share with the rest; comparing
two separate maps would compare their smoothness priors, too.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, NamedTuple

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.estimate.map import map_lines, map_passes
from fieldmap.estimate.noise import Tridiagonal, total
from fieldmap.estimate.normal import NormalSystem
from fieldmap.estimate.provenance import map_evidence, map_joint, map_probes, map_unknowns
from fieldmap.estimate.spline import UniformSpline

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.evidence import Evidence
    from fieldmap.estimate.parameters import Nuisance

__all__ = ["Agreement", "pass_agreement"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]

MOST_PIECES: Final = 40  # of δ over the overlap
FEWEST_PIECES: Final = 4
KNOTS: Final = 4.0  # δ is no finer than this many knots of the map
WINDOWS: Final = 2.0  # … or this many windows of the longer probe
POINTS: Final = 401
FARTHEST: Final = 4.0  # prior uncertainties that a nuisance may explain a difference by
SAFE: Final = 0.01  # probability below which chance is no explanation


@dataclass(frozen=True, eq=False)
class Agreement:
    """How two passes agree.

    Parameters
    ----------
    first, second : str
        Names of the passes.
    position : (n,) array
        Over the stretch that both travelled less half a resolution at its ends, m.
    difference : (n,) array
        What the first says of the field less what the second says, T.
    u : (n,) array
        Its standard uncertainty, T: noise of the two passes.
    level_known : bool
        Whether the mean of the difference is told; if not it is zero by choice.
    resolution : float
        Distance of the knots of the difference, m: what is shorter is averaged over.
    chi_square, freedom : float
        Of the test, everything that is uncertain included.
    removed : tuple of (Nuisance, float)
        Nuisances that were set before the curve was drawn, with their values, SI.
    """

    first: str
    second: str
    position: Floats
    difference: Floats
    u: Floats
    level_known: bool
    resolution: float
    chi_square: float
    freedom: float
    removed: tuple[tuple[Nuisance, float], ...]

    @property
    def probability(self) -> float:
        """Probability of a larger χ² if the passes differ by chance alone."""
        from scipy.special import gammaincc

        return float(gammaincc(self.freedom / 2, self.chi_square / 2))

    @property
    def agree(self) -> bool:
        """Whether chance explains the difference: probability of 1 % or more."""
        return self.probability >= SAFE


class _Pair(NamedTuple):
    """Two passes of one line of a map."""

    line: int
    own: tuple[Ints, Ints]  # increments of each, in the evidence of the line
    names: tuple[str, str]
    probes: tuple[str, str]
    low: float
    high: float


def pass_agreement(
    fmap: xr.Dataset, first: int, second: int, *, resolution: float | None = None
) -> Agreement:
    """Compare two passes of a map.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`; both passes are among those of the map.
    first, second : int
        Indices in `map_passes`.
    resolution : float, optional
        Distance of the knots of the difference, m; if not given two windows of the longer probe,
        four knots of the map or a fortieth of the overlap, whichever is longest.

    Returns
    -------
    Agreement

    Raises
    ------
    InputError
        No such pass, the same pass twice, passes on different lines or without an overlap.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "foreign_tables"))
    >>> found = pass_agreement(fmap, 0, 2)
    >>> found.agree, found.level_known
    (True, True)

    Notes
    -----
    The problem is linearised where the map was solved, as in the map itself.
    """
    pair = _pair(fmap, first, second)
    line, evidence = map_lines(fmap)[pair.line], map_evidence(fmap, pair.line)
    probes = {probe.name: probe for probe in map_probes(fmap)}
    two = [probes[name] for name in pair.probes]
    finest = max(*(WINDOWS * probe.extent for probe in two), KNOTS * line.spline.spacing)
    coarse = _coarse(pair, finest if resolution is None else resolution)
    level_known = all(probe.senses_level for probe in two)
    shapes = _shapes(coarse, line.spline, level_known=level_known)
    about = evidence.recorded(map_joint(fmap, pair.line).values)
    system = _system(evidence, pair, shapes, about)
    delta, spread, freedom = system.test()
    found = about[line.spline.size :]
    nuisances = _within(found + system.nuisances_alone(), evidence.prior) - found
    curve, curve_spread = system.given(nuisances)
    s = np.linspace(pair.low + 0.5 * coarse.spacing, pair.high - 0.5 * coarse.spacing, POINTS)
    rows = line.spline.field_rows(s) @ shapes
    if not level_known:
        rows = rows - rows.mean(axis=0)
    return Agreement(
        first=pair.names[0],
        second=pair.names[1],
        position=s,
        difference=rows @ curve,
        u=np.sqrt(np.einsum("ij,jk,ik->i", rows, curve_spread, rows)),
        level_known=level_known,
        resolution=coarse.spacing,
        chi_square=float(delta @ np.linalg.solve(spread, delta)),
        freedom=freedom,
        removed=_removed(fmap, pair, found + nuisances),
    )


def _pair(fmap: xr.Dataset, first: int, second: int) -> _Pair:
    """Find the two passes, or say what is wrong with the choice."""
    facts = map_passes(fmap)
    for index in (first, second):
        if not 0 <= index < len(facts):
            found = f"pass number {index + 1}"
            raise InputError("pair of passes", found, f"one of the {len(facts)} of the map")
    names = facts[first]["name"], facts[second]["name"]
    if first == second:
        raise InputError(names[0], "the same pass twice", "two passes", "choose another one")
    places = [(facts[i]["y"], facts[i]["x"]) for i in (first, second)]
    where = f"{names[0]} and {names[1]}"
    if places[0] != places[1]:
        raise InputError(where, "different lines", "passes of one line", "choose another one")
    lines = [(one.y, one.x) for one in map_lines(fmap)]
    line = lines.index(places[0])
    before = sum((one["y"], one["x"]) != places[0] for one in facts[:first])
    owner = map_evidence(fmap, line).owner
    own = tuple(np.flatnonzero(owner == i - before) for i in (first, second))
    owners, position = fmap["residual_pass"].values, fmap["residual_position"].values
    ends = [(position[owners == i].min(), position[owners == i].max()) for i in (first, second)]
    low, high = max(end[0] for end in ends), min(end[1] for end in ends)
    if high - low < FEWEST_PIECES * map_lines(fmap)[line].spline.spacing:
        raise InputError(
            where,
            "no stretch that both travelled",
            "passes that overlap",
            "choose another pair; passes are compared where both were",
        )
    probes = facts[first]["probe"], facts[second]["probe"]
    return _Pair(line, (own[0], own[1]), names, probes, float(low), float(high))


def _coarse(pair: _Pair, wanted: float) -> UniformSpline:
    """Knots of the difference."""
    reach = pair.high - pair.low
    if not 0 < wanted < math.inf:
        raise InputError("resolution", f"{wanted:g} m", "a length above zero")
    spacing = min(max(wanted, reach / MOST_PIECES), reach / FEWEST_PIECES)
    return UniformSpline.covering(pair.low, pair.high, spacing)


def _shapes(coarse: UniformSpline, fine: UniformSpline, *, level_known: bool) -> Floats:
    """Coefficients on the map's knots for each shape of the difference: (size, k) array.

    Beyond the overlap a shape goes on as it ends, which readings there cannot tell from B.
    """
    inside = np.clip(fine.middles(), coarse.start, coarse.stop)
    # the outermost functions have little of themselves inside: they go with their neighbours
    ends = np.eye(coarse.size)[:, 1:-1]
    ends[0, 0] = ends[-1, -1] = 1.0
    shapes = coarse.field_rows(inside) @ ends
    count = shapes.shape[1]
    if level_known:
        return np.asarray(shapes)
    # all coefficients alike are a level: what is orthogonal to it has none
    basis = np.linalg.qr(np.column_stack([np.ones(count), np.eye(count)[:, 1:]]))[0]
    return np.asarray(shapes @ basis[:, 1:])


@dataclass(frozen=True, eq=False)
class _System:
    """Normal equations on changes of the field (n), nuisances (m) and the difference (k)."""

    matrix: Floats
    right: Floats
    size: int
    others: int
    loose: float  # information that keeps the difference finite where nothing tells it

    @property
    def _delta(self) -> slice:
        return slice(self.size + self.others, None)

    def test(self) -> tuple[Floats, Floats, float]:
        """The difference with everything free: value, covariance, degrees of freedom."""
        system = NormalSystem(self.matrix)
        spread = system.inverse()[self._delta, self._delta]
        told = len(spread) - self.loose * float(np.trace(spread))
        return system.solve(self.right)[self._delta], spread, max(told, 1.0)

    def nuisances_alone(self) -> Floats:
        """Nuisances that explain both passes best without any difference."""
        n = self.size + self.others
        joint: Floats = NormalSystem(self.matrix[:n, :n]).solve(self.right[:n])
        return joint[self.size :]

    def given(self, nuisances: Floats) -> tuple[Floats, Floats]:
        """The difference and its covariance with the nuisances set."""
        fixed = np.arange(self.size, self.size + self.others)
        free = np.setdiff1d(np.arange(len(self.right)), fixed)
        right = self.right[free] - self.matrix[np.ix_(free, fixed)] @ nuisances
        system = NormalSystem(self.matrix[np.ix_(free, free)])
        return system.solve(right)[self.size :], system.inverse()[self.size :, self.size :]


def _system(evidence: Evidence, pair: _Pair, shapes: Floats, about: Floats) -> _System:
    """What the two passes, the smoothness and the priors say, counted from the map's solution."""
    n, m, k = evidence.size, len(evidence.prior), shapes.shape[1]
    told = [_told(evidence, own, about) for own in pair.own]
    first_knows = _on(shapes, told[0]) > _on(shapes, told[1])
    matrix, right = np.zeros((n + m + k, n + m + k)), np.zeros(n + m + k)
    # the first less the second: where the first defines B, the second reads B - δ
    for one, sees in zip(told, (0.0, -1.0) if first_knows else (1.0, 0.0), strict=True):
        spread = np.eye(n + m, n + m + k)
        spread[:n, n + m :] = sees * shapes
        matrix += spread.T @ one.matrix @ spread
        right += spread.T @ one.right
    smooth = evidence.smoothness(recorded=True)
    ease = np.sqrt(evidence.roughness / evidence.roughness.max())
    rows = ease[:, None] * smooth.rows
    matrix[: n + m, : n + m] += rows.T @ rows
    right[: n + m] += rows.T @ (ease * smooth.target - rows @ about)
    right[n : n + m] += evidence.prior - about[n:]
    loose = float(np.abs(about[:n]).max() or 1.0) ** -2
    each = np.arange(n + m + k)
    matrix[each, each] += np.where((each >= n) & (each < n + m), 1.0, loose)
    return _System(0.5 * (matrix + matrix.T), right, n, m, loose)


class _Told(NamedTuple):
    """What one pass tells of field and nuisances, counted from the map's solution."""

    matrix: Floats
    right: Floats


def _told(evidence: Evidence, own: Ints, about: Floats) -> _Told:
    noise = total(evidence.noise)
    design = np.asarray(evidence.design[own].todense())
    part = Tridiagonal(noise.diagonal[own], noise.off[own[:-1]])
    solved = part.solve(np.column_stack([design, evidence.target[own] - design @ about]))
    return _Told(design.T @ solved[:, :-1], design.T @ solved[:, -1])


def _on(shapes: Floats, told: _Told) -> float:
    """How much a pass tells of the shapes of the difference, summed over them."""
    n = len(shapes)
    return float(np.einsum("ik,ij,jk->", shapes, told.matrix[:n, :n], shapes, optimize=True))


def _within(nuisances: Floats, prior: Floats) -> Floats:
    """Nuisances, in units of their prior uncertainties, not further off than some of these."""
    return np.asarray(np.clip(nuisances, prior - FARTHEST, prior + FARTHEST))


def _removed(fmap: xr.Dataset, pair: _Pair, values: Floats) -> tuple[tuple[Nuisance, float], ...]:
    """Nuisances that bear on one of the two passes, SI."""
    ours = {"", *pair.names, *pair.probes}
    steps = tuple(f"{name} at " for name in pair.names)
    unknowns = map_unknowns(fmap, pair.line)
    return tuple(
        (unknown, float(value * unknown.sd))
        for unknown, value in zip(unknowns, values, strict=True)
        if unknown.where in ours or (unknown.kind == "step" and unknown.where.startswith(steps))
    )
