"""Whether the equations leave digits to the results, and what they leave undetermined."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.errors import RefusedError
from fieldmap.estimate.findings import Finding

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.fit import LineFit
    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.estimate.spline import UniformSpline

__all__ = ["NONE", "check_digits", "lost", "undetermined", "weakest_unknown"]

Floats = npt.NDArray[np.float64]

# Rounding was found by solving 30 simulated campaigns scaled and in another order. Values moved by
# 0.2 to 25 times what `NormalSystem.rounding` says of them, the most where the variance's bound is
# larger still; variances by at most 0.9 of that bound, mostly a tenth. The condition number
# overstated both a thousandfold.
SLACK = 10.0  # of the bound of the variance
FEW = 0.02  # of u: beyond that, results begin to depend on the order of the readings
NONE = 0.5
DOMINANT = 0.5  # of the squares of a direction: one nuisance is meant
BROAD = 0.2  # of the line: what is wider is its level, not the field at a place


def lost(fit: LineFit, rows: Floats) -> float:
    """What rounding may have done to the worst of some results, in units of its own u.

    Parameters
    ----------
    fit : LineFit
        The fit.
    rows : (k, size) array
        Results as weights on the coefficients of B, one a row.

    Returns
    -------
    float
        Zero where the solved system was not kept.
    """
    if fit.solved is None:
        return 0.0
    whole = np.zeros((len(rows), len(fit.values)))
    whole[:, : fit.spline.size] = rows
    values, variances = fit.solved.system.rounding(whole, fit.solved.right)
    return float(max(values.max(), variances.max() / SLACK))


def check_digits(fit: LineFit, rows: Floats) -> list[Finding]:
    """Refuse results without digits, and warn of few.

    Parameters
    ----------
    fit : LineFit
        The fit.
    rows : (k, size) array
        Results as weights on the coefficients of B, one a row.

    Returns
    -------
    list of Finding

    Raises
    ------
    RefusedError
        ``ill-conditioned``.
    """
    share = lost(fit, rows)
    if share < FEW or fit.solved is None:
        return []
    what = weakest_unknown(fit.solved.system.weakest(), fit.spline, fit.unknowns)
    where = ", ".join(one.one.name for one in fit.passes)
    if share >= NONE:
        raise undetermined(where, what)
    text = (
        f"rounding may move results by {share:.1g} u, since the readings are far quieter than "
        f"{what} is known; {_remedy(what)}, or state the integrator's true noise."
    )
    return [Finding("ill-conditioned", "warn", where, text)]


def undetermined(where: str, what: str) -> RefusedError:
    """The refusal of equations that leave something without a digit.

    Parameters
    ----------
    where : str
        Names of the passes.
    what : str
        From `weakest_unknown`.

    Returns
    -------
    RefusedError
    """
    return RefusedError(
        "not-determined",
        where,
        f"found readings that leave {what} without a single digit, expected readings and "
        f"references that fix it and are not quieter than they can be; {_remedy(what)}, and check "
        "that columns, units and stated noise are the right ones.",
    )


def weakest_unknown(direction: Floats, spline: UniformSpline, unknowns: Sequence[Nuisance]) -> str:
    """Name in words what a direction of the unknowns stands for.

    Parameters
    ----------
    direction : (size + m,) array
        From `NormalSystem.weakest`.
    spline : UniformSpline
        The knots.
    unknowns : sequence of Nuisance
        m of them.

    Returns
    -------
    str
    """
    share = direction**2 / np.sum(direction**2)
    of_field, of_others = share[: spline.size], share[spline.size :]
    if len(of_others) and of_others.max() > DOMINANT:
        return f"the {unknowns[int(of_others.argmax())].name}"
    weight = of_field / max(float(of_field.sum()), np.finfo(float).tiny)
    middle = float(weight @ spline.middles())
    width = float(np.sqrt(weight @ (spline.middles() - middle) ** 2))
    if width > BROAD * (spline.stop - spline.start):
        return "the level of the field along the line"
    return f"the field near {middle * 1e3:.6g} mm"


def _remedy(what: str) -> str:
    """Which reading, or which statement, would determine it."""
    if what.startswith("the drift"):
        return "record a dwell at each end, or state u_drift of the integrator"
    if what.startswith("the level"):
        return "add a point or flip reference of smaller uncertainty, or a wire pass"
    if what.startswith("the field"):
        return "scan that stretch more finely, or add a reference there"
    return "state a smaller uncertainty of it, or add a reference that tells it"
