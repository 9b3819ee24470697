"""The fringe at each end of a mapped line as an Enge curve, fitted to the readings themselves.

The readings are explained once more with the curve in place of the free profile: no
differentiated or smoothed profile is fitted. Both ends are fitted at once where both are mapped,
so that what they share (gains, drifts, the zero of the stage) correlates them as it does.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Final, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.map import map_axis, map_magnet
from fieldmap.estimate.provenance import map_evidence, map_joint
from fieldmap.magnet.fringe.ends import End, locate
from fieldmap.magnet.fringe.enge import EngeCurve
from fieldmap.magnet.fringe.joint import JointFit, fit_ends
from fieldmap.magnet.fringe.orders import HIGHEST, probability
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.sampling import chosen_line

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr

    from fieldmap.magnet.fringe.orders import Trial
    from fieldmap.readings.passes import Axis

__all__ = ["REACH", "Fringe", "fringe", "fringes"]

Floats = npt.NDArray[np.float64]

REACH: Final = (2.0, 4.0)  # gaps inside and outside the edge
ENDS: Final[tuple[End, End]] = ("in", "out")


@dataclass(frozen=True, eq=False)
class Fringe:
    """The fringe at one end of a line.

    ``B = B0 / (1 + exp Σ c_i ξ^i)``, ξ being the distance outwards from `boundary` in units of
    `gap`.

    Parameters
    ----------
    end : {"in", "out"}
        Which end: "in" is where the travel begins.
    model : {"enge", "tanh"}
        "tanh" is the curve of order 1, ``B0/2·(1 - tanh(ξ·gap/length))``.
    coefficients : (k,) array
        c_0, c_1, … about the boundary.
    covariance : (k, k) array
        Their covariance; as the boundary is the origin, one direction has none.
    level : Quantity
        B0, T: the field well inside as this end sees it. The central field need not be the
        same, for a plateau is not quite flat.
    boundary : Quantity
        Where a sharp edge of height B0 with the same integral would stand, m.
    integral : Quantity
        ``∫ B (B0 - B) ds / (gap·B0²)``.
    gap : float
        Full gap or bore, m.
    stretch : tuple of float
        From where to where the curve stands for the profile, m.
    chi_square : float
        Misfit of the readings on the stretch in excess of what the free profile leaves.
    freedom : int
        Expected excess if the curve is true: coefficients of the profile that the readings
        resolve on the stretch, less parameters of the curve.
    departure : float
        Largest distance of curve and free profile on the stretch, as a share of B0.
    excess : float
        Rms distance of the true field from the curve that the readings ask for beyond their
        noise, as a share of B0; 0 where the curve explains them. All uncertainties allow for it,
        taking the departures as random along the fringe.
    trials : tuple of Trial
        The orders tried, with their evidence.
    joint : JointFit
        The fit of both ends that this one is taken from.
    """

    end: End
    model: Literal["enge", "tanh"]
    coefficients: Floats
    covariance: Floats
    level: Quantity
    boundary: Quantity
    integral: Quantity
    gap: float
    stretch: tuple[float, float]
    chi_square: float
    freedom: int
    departure: float
    excess: float
    trials: tuple[Trial, ...] = field(repr=False)
    joint: JointFit = field(repr=False)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, Fringe) and self.as_dict() == other.as_dict()

    def __hash__(self) -> int:
        return hash((self.end, self.chi_square, self.boundary.value))

    @property
    def u(self) -> Floats:
        """Standard uncertainties of the coefficients."""
        return np.sqrt(np.maximum(np.diagonal(self.covariance), 0.0))

    @property
    def order(self) -> int:
        """Highest power of ξ."""
        return len(self.coefficients) - 1

    @property
    def length(self) -> Quantity:
        """λ of a tanh edge, ``2·gap/c_1``, m; for other curves the one with the same c_1."""
        value = 2 * self.gap / float(self.coefficients[1])
        return Quantity(value, value * float(self.u[1] / self.coefficients[1]), "m")

    @property
    def probability(self) -> float:
        """Chance that so large a chi-square comes about if the curve is true."""
        return probability(self.chi_square, self.freedom)

    def field(self, s: Floats) -> Floats:
        """B0 times the curve at positions s (m), T: this end alone, as if there were no other."""
        outward = 1 if self.end == "out" else -1
        xi = outward * (np.asarray(s, dtype=float) - self.boundary.value) / self.gap
        return self.level.value * EngeCurve(self.coefficients).value(xi)

    def as_dict(self) -> dict[str, Any]:
        """The form used in results.json."""
        found: dict[str, Any] = {
            "value": self.coefficients.tolist(),
            "u": self.u.tolist(),
            "unit": "1",
            "covariance": self.covariance.tolist(),
            "model": self.model,
            "boundary": self.boundary.as_dict(),
            "level": self.level.as_dict(),
            "fringe_integral": self.integral.as_dict(),
            "gap": {"value": self.gap, "unit": "m"},
            "stretch": {"value": list(self.stretch), "unit": "m"},
            "chi_square": self.chi_square,
            "freedom": self.freedom,
            "departure": self.departure,
            "excess": self.excess,
            "orders": [trial.as_dict() for trial in self.trials],
        }
        if self.model == "tanh":
            found["length"] = self.length.as_dict()
        return found


def fringe(
    fmap: xr.Dataset,
    end: End,
    *,
    axis: Axis | None = None,
    line: int = 0,
    order: int | None = None,
    reach: tuple[float, float] = REACH,
) -> Fringe:
    """Fit an Enge curve to the fringe at one end of a line.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    end : {"in", "out"}
        "in" is where the travel begins.
    axis : Axis, optional
        Flat window; that kept in the map if not given.
    line : int
        Index of the line.
    order : int, optional
        Highest power of the polynomial, 1 to 7; the one of largest evidence if not given. At 1
        the curve is a tanh edge.
    reach : tuple of float
        How far the curve stands for the profile inside and outside the edge, in gaps.

    Returns
    -------
    Fringe

    Raises
    ------
    RefusedError
        ``no-central-field``; ``no-fringe-end``: the field at the end of the map is not below a
        third of the central one, or does not fall; ``fringe-cut-off``: too little of the fringe
        is mapped; ``fringe-not-falling``: the readings lead to no curve that falls;
        ``fringe-not-determined``: they do not resolve it.
    InputError
        An argument out of range, or a map that keeps no readings.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "gap_dipole" / "campaign.toml"))
    >>> found = fringe(fmap, "out", order=5)
    >>> found.model, len(found.coefficients)
    ('enge', 6)
    """
    if end not in ENDS:
        raise InputError("end", repr(end), "'in' or 'out'")
    orders: dict[End, int] = {} if order is None else {end: order}
    found, refused = fringes(fmap, axis=axis, line=line, orders=orders, reach=reach)
    if end in refused:
        raise refused[end]
    return found[end]


def fringes(
    fmap: xr.Dataset,
    *,
    axis: Axis | None = None,
    line: int = 0,
    orders: dict[End, int] | None = None,
    reach: tuple[float, float] = REACH,
) -> tuple[dict[End, Fringe], dict[End, RefusedError]]:
    """Fit both ends of a line at once.

    Parameters
    ----------
    fmap, axis, line, reach
        As for `fringe`.
    orders : dict, optional
        Orders by the end; by the evidence where none is given.

    Returns
    -------
    fringes : dict of str to Fringe
        By the end: "in", "out".
    refused : dict of str to RefusedError
        The ends that have none, and why.

    Raises
    ------
    InputError
        An argument out of range, or a map that keeps no readings.
    """
    orders = orders or {}
    _check(orders, reach)
    one, evidence = chosen_line(fmap, line), map_evidence(fmap, line)
    gap, axis = map_magnet(fmap).gap, axis or map_axis(fmap)
    stretches, refused = {}, {}
    for end in ENDS:
        try:
            stretches[end] = locate(one, axis, gap, end, reach)
        except RefusedError as error:
            refused[end] = error
    free = evidence.recorded(map_joint(fmap, line).values)
    joint, failed = fit_ends(evidence, free, stretches, orders)
    if joint is None:
        return {}, refused | failed
    return {end: _fringe(free, joint, end) for end in joint.ends}, refused | failed


def _fringe(free: Floats, joint: JointFit, end: End) -> Fringe:
    """What is told of one end; `free` holds the coefficients of the free profile as recorded."""
    stretch, canonical = joint.stretch(end), joint.canonical(end)
    values, covariance = canonical.values, canonical.covariance
    u = np.sqrt(np.maximum(np.diagonal(covariance), 0.0)).tolist()
    k = len(values) - 3
    apart = np.abs(joint.coefficients(end) - free[stretch.indices]).max()
    return Fringe(
        end=end,
        model="tanh" if k == 2 else "enge",
        coefficients=values[:k],
        covariance=covariance[:k, :k],
        level=Quantity(float(values[k]), u[k], "T"),
        boundary=Quantity(float(values[k + 1]), u[k + 1], "m"),
        integral=Quantity(float(values[k + 2]), u[k + 2], "1"),
        gap=stretch.gap,
        stretch=stretch.ends(),
        chi_square=joint.chi_square(end),
        freedom=joint.freedom(end),
        departure=float(apart / abs(values[k])),
        excess=joint.departure(end) / abs(float(values[k])),
        trials=joint.trials[end],
        joint=joint,
    )


def _check(orders: Mapping[End, object], reach: Sequence[float]) -> None:
    for order in orders.values():
        if isinstance(order, bool) or not isinstance(order, int) or not 1 <= order <= HIGHEST:
            raise InputError("order", repr(order), f"a whole number from 1 to {HIGHEST}")
    if len(reach) != 2 or not all(np.isfinite(one) and one > 0 for one in reach):
        raise InputError("reach", repr(reach), "two numbers above 0, in gaps")
