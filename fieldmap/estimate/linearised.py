"""All readings of a line at one state of the solve, and the evidence they leave behind."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.estimate.evidence import NOISES, Evidence
from fieldmap.estimate.noise import stacked

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.estimate.frame import Frame
    from fieldmap.estimate.model import Rows
    from fieldmap.estimate.noise import Tridiagonal
    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.estimate.smoothing import Smoother

__all__ = ["Linearised"]

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Linearised:
    """Rows and noise of every pass, and the rows of the references."""

    references: Rows
    passes: list[Rows]
    noise: list[dict[str, Tridiagonal]]

    def evidence(
        self, unknowns: Sequence[Nuisance], frame: Frame, moves: Floats, smoother: Smoother
    ) -> Evidence:
        """What these readings say, with each nuisance in units of its prior uncertainty.

        Parameters
        ----------
        unknowns : sequence of Nuisance
            m of them.
        frame : Frame
            The frame that the profile was recorded in.
        moves : (size, m) array
            From `Frame.to_true`, T per SI unit of the nuisance.
        smoother : Smoother
            The smoothness that the last solve used.

        Returns
        -------
        Evidence
        """
        sd = np.array([unknown.sd for unknown in unknowns])
        mean = np.array([unknown.mean for unknown in unknowns])
        to_units = sparse.diags_array(np.concatenate([np.ones(len(moves)), sd]))
        counts = [len(rows.target) for rows in self.passes]
        judged = smoother.rows[:, len(moves) :].toarray()
        return Evidence(
            design=sparse.csr_array(
                sparse.vstack([rows.design for rows in self.passes], format="csr") @ to_units
            ),
            target=np.concatenate([rows.target for rows in self.passes]),
            owner=np.repeat(np.arange(len(counts)), counts),
            noise={cause: stacked([parts[cause] for parts in self.noise]) for cause in NOISES},
            references=(self.references.design @ to_units).toarray(),
            reference_target=self.references.target,
            prior=mean / sd,
            frame=moves * sd,
            shift=np.array([_shift(one, frame) for one in unknowns]).reshape(-1, 2).T * sd,
            roughness=smoother.variance,
            smooth_effect=(judged - smoother.roughness @ moves) * sd,
            smooth_origin=smoother.origin,
        )


def _shift(unknown: Nuisance, frame: Frame) -> Floats:
    """Shift from recorded to true position at s = 0, and its growth with s, per SI unit."""
    start, end = frame.effect(unknown, np.array([0.0, 1.0]))
    return np.array([start, end - start])
