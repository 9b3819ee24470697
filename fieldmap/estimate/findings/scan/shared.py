"""What would be wrong in several passes alike: directions of travel, a probe's size or window."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.estimate.findings.scan.signatures import field_steps, slope, while_moving
from fieldmap.readings.probe import Coil

if TYPE_CHECKING:
    from collections.abc import Iterator

    from fieldmap.estimate.solved import Solved

__all__ = ["Shared", "shared_signatures"]

Floats = npt.NDArray[np.float64]
SharedKind = Literal["lag", "backlash", "window", "gain"]
Shared = tuple[SharedKind, dict[int, Floats]]


def shared_signatures(solved: Solved) -> Iterator[Shared]:
    """Signatures of what the campaign states to be certain: where it is not, it is an unknown.

    Parameters
    ----------
    solved : Solved
        The line.

    Yields
    ------
    kind : str
        "lag" (s), "backlash" (m), "window" or "gain" (relative).
    columns : dict of int to (n, 1) array
        Increments for one unit of it, by pass, V s.
    """
    yield from _of_stage(solved)
    probes = {model.one.probe.name for model in solved.models}
    for name in sorted(probes):
        own = [i for i, model in enumerate(solved.models) if model.one.probe.name == name]
        if solved.state.index("gain", name) is None:
            yield "gain", {n: field_steps(solved, n, solved.state.b)[:, None] for n in own}
        coil = isinstance(solved.models[own[0]].one.probe, Coil)
        # alone, a coil of another window has been in another field, which only seems rougher
        compared = coil and len(probes) > 1
        if compared and solved.state.index("window", name) is None:
            yield "window", {n: _widening(solved, n) for n in own}


def _of_stage(solved: Solved) -> Iterator[Shared]:
    """A lag and a backlash, as far as they tell one pass from another."""
    moved = {
        n: (slope(solved, n, solved.state.b), while_moving(model), model.bins)
        for n, model in enumerate(solved.models)
    }
    speed, sense = solved.frame.speed, solved.frame.sense
    if solved.state.index("lag") is not None:
        return  # it takes a backlash in as well, but for the ramps, which tell next to nothing
    late = {n: m * np.diff(s * (bins.speed - speed)) for n, (s, m, bins) in moved.items()}
    yield "lag", {n: column[:, None] for n, column in late.items()}
    if solved.state.index("backlash") is None:
        play = {n: m * np.diff(s * (bins.sense - sense) / 2) for n, (s, m, bins) in moved.items()}
        yield "backlash", {n: column[:, None] for n, column in play.items()}


def _widening(solved: Solved, number: int) -> Floats:
    """Increments if the window is longer by its own length."""
    model = solved.models[number]
    change = model.gain(solved.state) * (model.widening() @ solved.state.b)
    return np.asarray(while_moving(model) * change)[:, None]
