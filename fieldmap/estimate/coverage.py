"""What the passes reach, and whether a level can be told there."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from fieldmap.errors import RefusedError
from fieldmap.readings.passes import Pass, PlannedPass, Reference, ZeroReference

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["Stretch", "check_density", "check_levels", "stretches"]

AnyPass = Pass | PlannedPass

# Readings up to a gap apart err by about u (tanh magnet, wire and coil, random phase); at 1.5 gaps
# the integral of a coil was off by 6 u, and the profile of a wire by 2.5.
MOST_UNSEEN = 0.5  # of the line, in holes longer than a gap


@dataclass(frozen=True)
class Stretch:
    """A stretch of the line without holes, and the passes that cover it (m)."""

    low: float
    high: float
    passes: tuple[AnyPass, ...]

    def meets(self, low: float, high: float) -> bool:
        """Whether [low, high] touches the stretch."""
        return low <= self.high and high >= self.low


def reach(one: AnyPass) -> tuple[float, float]:
    """Lowest and highest recorded position of a pass, m."""
    if isinstance(one, Pass):
        return float(one.position.min()), float(one.position.max())
    return min(one.start, one.stop), max(one.start, one.stop)


def stretches(passes: Sequence[AnyPass], slack: float) -> list[Stretch]:
    """Group passes that overlap, or meet within `slack`, into stretches.

    Parameters
    ----------
    passes : sequence of Pass or PlannedPass
        Passes of one line.
    slack : float
        Gap between two passes that the field's smoothness bridges, m.

    Returns
    -------
    list of Stretch
        From left to right.

    Examples
    --------
    >>> import numpy as np
    >>> from fieldmap.readings.probe import Integrator, Wire
    >>> def scan(name, *ends):
    ...     s = np.linspace(*ends, 5)
    ...     return Pass(name, Wire("w", 1, 0.1), Integrator("i"), np.arange(5.0), s, 0 * s)
    >>> [(s.low, s.high) for s in stretches([scan("b", 0.5, 1), scan("a", 0, 0.6)], 0.0)]
    [(0.0, 1.0)]
    """
    found: list[Stretch] = []
    for one in sorted(passes, key=reach):
        low, high = reach(one)
        if found and low <= found[-1].high + slack:
            last = found.pop()
            found.append(Stretch(last.low, max(last.high, high), (*last.passes, one)))
        else:
            found.append(Stretch(low, high, (one,)))
    return found


def check_levels(found: Sequence[Stretch], references: Sequence[Reference]) -> None:
    """Refuse what can give no absolute level, or leaves a hole in the line.

    Parameters
    ----------
    found : sequence of Stretch
        From `stretches`.
    references : sequence
        References of the line.

    Raises
    ------
    RefusedError
        ``no-absolute-level`` or ``passes-do-not-meet``.
    """
    for stretch in found:
        wires = any(one.probe.senses_level for one in stretch.passes)
        if not wires and not any(_bears_on(r, stretch) for r in references):
            names = ", ".join(one.name for one in stretch.passes)
            raise RefusedError(
                "no-absolute-level",
                names,
                f"found only coil passes between {_mm(stretch.low)} and {_mm(stretch.high)}, which "
                "tell differences of the field; expected an absolute level there; add a "
                "[[references]] entry (point, zero or flip) inside that stretch, or a wire pass.",
            )
    for left, right in itertools.pairwise(found):
        raise RefusedError(
            "passes-do-not-meet",
            f"{left.passes[-1].name} and {right.passes[0].name}",
            f"found no reading between {_mm(left.high)} and {_mm(right.low)}, expected passes "
            "that overlap; measure that stretch, or put the two parts into campaigns of their own.",
        )


def check_density(passes: Sequence[Pass], gap: float) -> None:
    """Refuse readings so far apart that most of the line would be guessed.

    Parameters
    ----------
    passes : sequence of Pass
        Passes of one line.
    gap : float
        Full gap or bore diameter, m.

    Raises
    ------
    RefusedError
        ``readings-too-sparse``.
    """
    position = np.sort(np.concatenate([one.position for one in passes]))
    apart = np.diff(position)
    unseen = float(apart[apart > gap * (1 + 1e-9)].sum())
    if unseen <= MOST_UNSEEN * float(position[-1] - position[0]):
        return
    raise RefusedError(
        "readings-too-sparse",
        ", ".join(one.name for one in passes),
        f"found readings up to {_mm(float(apart.max()))} apart along most of the line, expected "
        f"them within the gap of {_mm(gap)}, since a fringe fits between them unseen; scan more "
        "finely, or mend the gap in [magnet].",
    )


def _bears_on(reference: Reference, stretch: Stretch) -> bool:
    if isinstance(reference, ZeroReference):
        return stretch.meets(reference.start, reference.stop)
    return stretch.meets(reference.at, reference.at)


def _mm(value: float) -> str:
    return f"{value * 1e3:.6g} mm"
