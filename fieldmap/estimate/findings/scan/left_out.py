"""The field as the other passes have it: what a pass is compared with where it is badly wrong."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.model import pass_information
from fieldmap.estimate.normal import NormalSystem

if TYPE_CHECKING:
    from fieldmap.estimate.solved import Solved

__all__ = ["field_without"]

Floats = npt.NDArray[np.float64]


def field_without(solved: Solved, number: int) -> Floats:
    """Coefficients of B that the other passes and the references give, with the same smoothness.

    Parameters
    ----------
    solved : Solved
        The line.
    number : int
        The pass to leave out.

    Returns
    -------
    (size,) array
        T, recorded frame; those of all passes where the others do not determine the field.
    """
    if len(solved.models) < 2:
        return solved.state.b
    own = pass_information(solved.linearised.passes[number], solved.covariance(number))
    right = solved.right - own.right
    try:
        values = NormalSystem(solved.system.matrix - own.matrix).solve(right)
    except np.linalg.LinAlgError:
        return solved.state.b
    return np.asarray(values[: len(solved.state.b)])
