"""What can be dragged on a figure, and where it may go."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Literal

from fieldmap.show.look import MM
from fieldmap.show.panels.limits import plain_step

if TYPE_CHECKING:
    from fieldmap.readings.passes import Axis

__all__ = ["Grip", "dragged", "grip_near"]

REACH: Final = 8.0  # pixels of the page from a line to the pointer
Key = Literal["integrate", "flat"]


@dataclass(frozen=True)
class Grip:
    """One end of the limits of integration or of the flat window.

    Parameters
    ----------
    key : {"integrate", "flat"}
        Which of the two.
    end : {0, 1}
        Lower or upper.
    """

    key: Key
    end: Literal[0, 1]

    def at(self, axis: Axis) -> float:
        """Where it stands, m."""
        return float(getattr(axis, self.key)[self.end])

    @property
    def name(self) -> str:
        """What it is, in words."""
        what = "limit of integration" if self.key == "integrate" else "end of the flat window"
        return f"{'upper' if self.end else 'lower'} {what}"


GRIPS: Final = tuple(Grip(key, end) for key in ("integrate", "flat") for end in (0, 1))


def grip_near(axis: Axis, at: float, length: float) -> Grip | None:
    """The end that is nearest to the pointer, if it is within reach.

    Parameters
    ----------
    axis : Axis
        Limits and window.
    at : float
        Position of the pointer, m.
    length : float
        What one pixel of the page is along the line, m.

    Returns
    -------
    Grip or None

    Examples
    --------
    >>> from fieldmap.readings import Axis
    >>> axis = Axis("z", (-0.4, 0.4), (-0.05, 0.05))
    >>> grip_near(axis, 0.393, 1e-3), grip_near(axis, 0.39, 1e-3)
    (Grip(key='integrate', end=1), None)
    """
    near = min(GRIPS, key=lambda grip: abs(grip.at(axis) - at))
    return near if abs(near.at(axis) - at) <= REACH * length else None


def dragged(axis: Axis, grip: Grip, at: float, within: tuple[float, float]) -> Axis:
    """The limits once an end has been dragged to a position.

    Parameters
    ----------
    axis : Axis
        Limits and window before.
    grip : Grip
        The end.
    at : float
        Where it was dragged to, m.
    within : tuple of float
        Mapped range, m: no end leaves it.

    Returns
    -------
    Axis
        At a step of the bar, and at least one step from the other end, which stays.

    Examples
    --------
    >>> from fieldmap.readings import Axis
    >>> axis = Axis("z", (-0.4, 0.4), (-0.05, 0.05))
    >>> moved = dragged(axis, Grip("flat", 1), 0.02043, (-0.45, 0.45)).flat
    >>> moved[0], round(moved[1], 9)
    (-0.05, 0.0204)
    >>> round(dragged(axis, Grip("flat", 1), -0.3, (-0.45, 0.45)).flat[1], 9)
    -0.0498
    """
    step = plain_step((within[1] - within[0]) * MM)
    low, high = (end * MM for end in within)
    ends = [end * MM for end in getattr(axis, grip.key)]
    if grip.end == 0:
        high = min(high, ends[1] - step)
    else:
        low = max(low, ends[0] + step)
    snapped = round(at * MM / step) * step
    ends[grip.end] = min(max(snapped, low), high)
    moved = list(getattr(axis, grip.key))
    moved[grip.end] = round(ends[grip.end], 6) / MM
    pair = (moved[0], moved[1])
    return axis.moved(pair, None) if grip.key == "integrate" else axis.moved(None, pair)
