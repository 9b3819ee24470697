"""Score tests: whether one more unknown, of a given signature, explains the readings better.

With y the increments of all passes, S their covariance with the field, nuisances and smoothness
integrated out, and h what one unit of a fault would add to them, the fault's estimate is
``hᵀS⁻¹y / hᵀS⁻¹h`` with standard uncertainty ``1/√(hᵀS⁻¹h)``. Their ratio is a unit normal where
there is no such fault. What the field itself could explain has next to no ``hᵀS⁻¹h`` left: no
reading can tell it, and the test keeps silent.

Source: C. R. Rao, Proc. Camb. Phil. Soc. 44, 50 (1948); several faults in turn as in S. G. Mallat &
Z. Zhang, IEEE Trans. Signal Process. 41, 3397 (1993), here with everything else refitted.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.model import dense_columns

if TYPE_CHECKING:
    from fieldmap.estimate.solved import Solved

__all__ = ["Push", "Score", "Scores"]

Floats = npt.NDArray[np.float64]

LEAST_LEFT = 1e-6  # of a signature's own information: less is rounding


@dataclass(frozen=True, eq=False)
class Score:
    """How much of each signature the readings hold.

    Parameters
    ----------
    pushed : (k,) array
        hᵀS⁻¹y.
    information : (k,) array
        hᵀS⁻¹h; zero where no reading can tell.
    """

    pushed: Floats
    information: Floats

    @property
    def normal(self) -> Floats:
        """Estimate over its standard uncertainty: a unit normal where there is no fault."""
        told = self.information > 0
        root = np.sqrt(np.where(told, self.information, 1.0))
        return np.where(told, self.pushed / root, 0.0)

    @property
    def amount(self) -> Floats:
        """Estimate, in units of the signature."""
        told = self.information > 0
        return np.where(told, self.pushed / np.where(told, self.information, 1.0), 0.0)

    @property
    def u(self) -> Floats:
        """Its standard uncertainty."""
        told = self.information > 0
        return np.where(told, 1 / np.sqrt(np.where(told, self.information, 1.0)), np.inf)


@dataclass(frozen=True, eq=False)
class Push:
    """S⁻¹h of one signature, by pass, and the half of its spread through the system."""

    by_pass: list[Floats]


class Scores:
    """Score tests of the passes of one solved line.

    Faults that were found are taken in as further unknowns by `accept`; the tests that follow
    then ask what is left.

    Parameters
    ----------
    solved : Solved
        The line.
    """

    def __init__(self, solved: Solved) -> None:
        self.solved = solved
        count = len(solved.models)
        self.covariances = [solved.covariance(number) for number in range(count)]
        self.weighed = [
            covariance.solve(solved.residual(number))
            for number, covariance in enumerate(self.covariances)
        ]
        self.accepted: list[tuple[Push, float]] = []

    def test(self, number: int, columns: Floats) -> Score:
        """Test signatures of one pass.

        Parameters
        ----------
        number : int
            The pass.
        columns : (n, k) array
            What one unit of each adds to the n increments, V s.
        """
        return self.test_all({number: columns})

    def test_all(self, columns: dict[int, Floats]) -> Score:
        """Test one or more signatures that run through several passes; as `test`."""
        solved = {n: self.covariances[n].solve(part) for n, part in columns.items()}
        gradient = sum(self.solved.design(n).T @ part for n, part in solved.items())
        own = sum(np.einsum("ij,ij->j", columns[n], part) for n, part in solved.items())
        pushed = sum(part.T @ self.weighed[n] for n, part in columns.items())
        return self._score(np.asarray(pushed), np.asarray(own), np.asarray(gradient), columns)

    def test_steps(self, number: int) -> Score:
        """Test a step of the flux between any two neighbouring bins of a pass."""
        covariance, design = self.covariances[number], self.solved.design(number)
        own = covariance.inverse_bands()[0]
        used, dense = dense_columns(design)
        gradient = np.zeros((design.shape[1], len(own)))
        gradient[used] = covariance.solve(dense).T
        spread = np.square(self.solved.half_spread(gradient)).sum(axis=0)
        shared = [push.by_pass[number] for push, _ in self.accepted]
        return self._told(self.weighed[number].copy(), own, own - spread, shared)

    def joint(self, number: int, columns: Floats) -> tuple[float, int]:
        """χ² of several signatures of one pass at once, and its degrees of freedom."""
        solved = self.covariances[number].solve(columns)
        half = self.solved.half_spread(np.asarray(self.solved.design(number).T @ solved))
        matrix = columns.T @ solved - half.T @ half
        pushed = columns.T @ self.weighed[number]
        for push, information in self.accepted:
            shared = columns.T @ push.by_pass[number]
            matrix = matrix - np.outer(shared, shared) / information
        own = np.sqrt(np.maximum(np.einsum("ij,ij->j", columns, solved), np.finfo(float).tiny))
        roots, vectors = np.linalg.eigh(matrix / np.outer(own, own))
        told = roots > LEAST_LEFT
        parts = vectors[:, told].T @ (pushed / own)
        return float(np.sum(parts**2 / roots[told])), int(told.sum())

    def accept(self, columns: dict[int, Floats]) -> None:
        """Take one signature in as an unknown of its own.

        Parameters
        ----------
        columns : dict of int to (n, 1) array
            Its columns, by pass.
        """
        score = self.test_all(columns)
        push = self._push(columns)
        information = float(score.information[0])
        amount = float(score.amount[0])
        self.weighed = [
            weighed - amount * part
            for weighed, part in zip(self.weighed, push.by_pass, strict=True)
        ]
        self.accepted.append((push, information))

    def _push(self, columns: dict[int, Floats]) -> Push:
        """S⁻¹h, with the faults accepted before as unknowns."""
        system, count = self.solved.system, len(self.weighed)
        first = {n: self.covariances[n].solve(part[:, 0]) for n, part in columns.items()}
        gradient = sum(self.solved.design(n).T @ part for n, part in first.items())
        moved = system.solve(np.asarray(gradient))
        by_pass = []
        for n in range(count):
            own = first.get(n, 0.0)
            by_pass.append(own - self.covariances[n].solve(self.solved.design(n) @ moved))
        for push, information in self.accepted:
            shared = sum(float(columns[n][:, 0] @ push.by_pass[n]) for n in columns)
            by_pass = [
                own - shared / information * other
                for own, other in zip(by_pass, push.by_pass, strict=True)
            ]
        return Push(by_pass)

    def _score(
        self, pushed: Floats, own: Floats, gradient: Floats, columns: dict[int, Floats]
    ) -> Score:
        left = own - np.square(self.solved.half_spread(gradient)).sum(axis=0)
        shared = [
            np.asarray(sum(part.T @ push.by_pass[n] for n, part in columns.items()))
            for push, _ in self.accepted
        ]
        return self._told(pushed, own, left, shared)

    def _told(self, pushed: Floats, own: Floats, left: Floats, shared: list[Floats]) -> Score:
        """Take out what accepted faults explain, and silence what no reading tells."""
        for part, (_, information) in zip(shared, self.accepted, strict=True):
            left = left - part**2 / information
        told = left > LEAST_LEFT * own
        return Score(np.where(told, pushed, 0.0), np.where(told, left, 0.0))
