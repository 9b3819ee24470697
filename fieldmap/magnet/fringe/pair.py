"""Are the two ends of a magnet alike? Their fringes compared with what correlates them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError
from fieldmap.magnet.fringe.joint import refit
from fieldmap.magnet.fringe.orders import probability
from fieldmap.magnet.quantity import Quantity

if TYPE_CHECKING:
    from fieldmap.magnet.fringe.fitted import Fringe
    from fieldmap.magnet.fringe.joint import JointFit

__all__ = ["EndsCompared", "compare_ends"]

Floats = npt.NDArray[np.float64]

UNLIKELY = 0.05  # chance below which the ends count as different


@dataclass(frozen=True, eq=False)
class EndsCompared:
    """Entrance less exit.

    Parameters
    ----------
    order : int
        Of both curves.
    difference : (order + 1,) array
        Of the coefficients about the boundaries: c_0, c_1, …
    covariance : (order + 1, order + 1) array
        Its covariance; what both ends share, gains and drifts, has largely dropped out.
    integral : Quantity
        Difference of the fringe integrals.
    level : Quantity
        Difference of B0, T.
    chi_square : float
        Of equality of the shapes, by c_1, c_2, …; c_0 follows from them.
    freedom : int
        Its degrees of freedom: the order.
    """

    order: int
    difference: Floats
    covariance: Floats
    integral: Quantity
    level: Quantity
    chi_square: float
    freedom: int

    @property
    def u(self) -> Floats:
        """Standard uncertainties of the differences."""
        return np.sqrt(np.maximum(np.diagonal(self.covariance), 0.0))

    @property
    def probability(self) -> float:
        """Chance of so large a chi-square if both ends are alike."""
        return probability(self.chi_square, self.freedom)

    @property
    def text(self) -> str:
        """One sentence."""
        alike = self.probability >= UNLIKELY
        verdict = "agree within" if alike else "differ by more than"
        return (
            f"the fringes at the two ends {verdict} their uncertainties: chi-square "
            f"{self.chi_square:.3g} for {self.freedom} coefficients (chance "
            f"{self.probability:.2g}), fringe integrals {self.integral.value:+.2g} apart with u = "
            f"{self.integral.u:.2g}."
        )

    def as_dict(self) -> dict[str, Any]:
        """Plain numbers, SI."""
        return {
            "order": self.order,
            "value": self.difference.tolist(),
            "u": self.u.tolist(),
            "unit": "1",
            "fringe_integral": self.integral.as_dict(),
            "level": self.level.as_dict(),
            "chi_square": self.chi_square,
            "freedom": self.freedom,
            "probability": self.probability,
            "text": self.text,
        }


def compare_ends(fringe_in: Fringe, fringe_out: Fringe) -> EndsCompared:
    """Compare the fringes at the two ends of one line.

    Parameters
    ----------
    fringe_in, fringe_out : Fringe
        Of one line and one call. If their orders differ, both are fitted again with the higher
        one, or with the lower one where the higher leads to no fringe.

    Returns
    -------
    EndsCompared

    Raises
    ------
    InputError
        Fringes that were not fitted together.
    RefusedError
        ``fringe-not-falling``: no order in common.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.magnet.fringe.fitted import fringes
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "foreign_tables" / "campaign.toml"))
    >>> found, _ = fringes(fmap)
    >>> compare_ends(found["in"], found["out"]).freedom
    1
    """
    joint = fringe_in.joint
    if (fringe_in.end, fringe_out.end) != ("in", "out") or fringe_out.joint is not joint:
        raise InputError(
            "compare_ends",
            f"fringes '{fringe_in.end}' and '{fringe_out.end}' that were not fitted together",
            "both ends of one line, from one call of `fringes`",
            "fit both ends at once",
        )
    return _compared(_same_order(joint, fringe_in.order, fringe_out.order))


def _same_order(joint: JointFit, one: int, other: int) -> JointFit:
    if one == other:
        return joint
    try:
        return refit(joint, max(one, other))
    except RefusedError:
        return refit(joint, min(one, other))


def _compared(joint: JointFit) -> EndsCompared:
    found = joint.canonicals()
    half = len(found.values) // 2
    apart = np.hstack([np.eye(half), -np.eye(half)])
    values, covariance = apart @ found.values, apart @ found.covariance @ apart.T
    k = half - 3
    shape = slice(1, k)
    scale = np.sqrt(np.diagonal(covariance)[shape])
    whitened = values[shape] / scale
    correlation = covariance[shape, shape] / np.outer(scale, scale)

    def told(index: int, unit: str) -> Quantity:
        u = float(np.sqrt(max(covariance[index, index], 0.0)))
        return Quantity(float(values[index]), u, unit)

    return EndsCompared(
        order=k - 1,
        difference=values[:k],
        covariance=covariance[:k, :k],
        integral=told(k + 2, "1"),
        level=told(k, "T"),
        chi_square=float(whitened @ np.linalg.solve(correlation, whitened)),
        freedom=k - 1,
    )
