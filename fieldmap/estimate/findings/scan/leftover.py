"""What no single fault explains: residuals too large, not white, or of a shape of their own."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.scan.scores import Scores
from fieldmap.estimate.findings.scan.signatures import field_shapes
from fieldmap.estimate.findings.thresholds import rarity
from fieldmap.estimate.model import dense_columns

if TYPE_CHECKING:
    from fieldmap.estimate.line_fit import LineFit

__all__ = ["Leftover", "colour", "excess", "leftovers", "whiteness"]

Floats = npt.NDArray[np.float64]


class Leftover(NamedTuple):
    """Three tests of the residuals of one pass, each a unit normal by chance.

    Parameters
    ----------
    size : float
        Sum of squares against what is expected of it.
    factor : float
        Root mean square of the residuals over what is expected, 1.
    correlation : float
        Product of neighbouring residuals against what the fit leaves of it.
    shape : float
        Difference between the field of this pass and that of the others, in pieces of a gap.
    """

    size: float
    factor: float
    correlation: float
    shape: float


def colour(fit: LineFit) -> float:
    """How strongly residuals hang together, as they do where the knots are too coarse.

    Parameters
    ----------
    fit : LineFit
        The line.

    Returns
    -------
    float
        Of the worst pass, in standard uncertainties.
    """
    if fit.solved is None:
        return 0.0
    scores = Scores(fit.solved)
    each = [whiteness(scores, i, one.residual) for i, one in enumerate(fit.passes)]
    return max(map(abs, each))


def leftovers(fit: LineFit, scores: Scores, gap: float) -> list[Leftover]:
    """Tests of each pass of a line, faults that were accepted left out.

    Parameters
    ----------
    fit : LineFit
        The line.
    scores : Scores
        Its score tests, after single faults were looked for.
    gap : float
        Full gap or bore, m.

    Returns
    -------
    list of Leftover
    """
    return [_leftover(fit, scores, number, gap) for number in range(len(fit.passes))]


def _leftover(fit: LineFit, scores: Scores, number: int, gap: float) -> Leftover:
    covariance = scores.covariances[number]
    residual = covariance.whiten(covariance @ scores.weighed[number])
    square, freedom = float(residual @ residual), max(fit.passes[number].freedom, 1.0)
    shapes = field_shapes(scores.solved, number, gap)
    return Leftover(
        size=excess(square, freedom),
        factor=float(np.sqrt(square / freedom)),
        correlation=whiteness(scores, number, residual),
        shape=rarity(*scores.joint(number, shapes)),
    )


def excess(square: float, freedom: float) -> float:
    """A χ² as a unit normal: its cube root is close to one (Wilson & Hilferty 1931)."""
    spread = 2 / (9 * freedom)
    return float((np.cbrt(square / freedom) - 1 + spread) / np.sqrt(spread))


def whiteness(scores: Scores, number: int, residual: Floats) -> float:
    """Correlation of neighbouring residuals, as a unit normal.

    The fit follows the readings a little, which leaves residuals of covariance I - H with
    H = W·A·V·Aᵀ·Wᵀ; what that alone makes of the products of neighbours is taken off.

    Parameters
    ----------
    scores : Scores
        Of the line.
    number : int
        The pass.
    residual : (n,) array
        Its whitened residuals.

    Returns
    -------
    float
    """
    solved = scores.solved
    used, dense = dense_columns(solved.design(number))
    white = scores.covariances[number].whiten(dense)
    gradient = np.zeros((len(solved.values), len(white)))
    gradient[used] = white.T
    half = solved.half_spread(gradient)
    followed = float(np.sum(half[:, 1:] * half[:, :-1]))
    left = 1 - np.square(half).sum(axis=0)
    spread = float(np.sum(left[1:] * left[:-1]))
    product = float(residual[1:] @ residual[:-1]) + followed
    return product / float(np.sqrt(max(spread, 1.0)))
