"""What the mouse does on a figure: drags limits, sets the cursor, shows another part.

All of it can be done by the fields beside the figure as well.
"""

from __future__ import annotations

import time
from typing import TYPE_CHECKING, Any, Final, Literal, Protocol

from fieldmap.show.look import INK, MM, PAPER, SKY
from fieldmap.show.numbers import plain
from fieldmap.show.panels.grips import Grip, dragged, grip_near
from fieldmap.show.panels.limits import plain_step

if TYPE_CHECKING:
    from collections.abc import Callable

    from matplotlib.axes import Axes

    from fieldmap.readings.passes import Axis
    from fieldmap.show.panels.canvas import FigureView

__all__ = ["Mode", "Mouse", "Target"]

Mode = Literal["point", "zoom", "pan"]
LEFT: Final = 1  # button
PAUSE: Final = 0.06  # s between results while a limit is dragged; longer where they take longer
SHARE: Final = 3.0  # so that at most a third of the time goes into them
LEAST: Final = 4.0  # pixels: a shorter stretch is a slip of the hand, no zoom


class Target(Protocol):
    """What the mouse acts on. Positions are in m."""

    @property
    def axis(self) -> Axis | None:
        """Limits and window in use."""

    @property
    def mapped(self) -> tuple[float, float] | None:
        """Ends of the line that is shown; None where no line is."""

    @property
    def shown(self) -> tuple[float, float]:
        """Ends of what is shown of it."""

    @property
    def grips_shown(self) -> bool:
        """Whether the figure shows limits and window."""

    def preview(self, axis: Axis) -> None:
        """Move the marks of limits and window on the figure alone."""

    def set_axis(self, axis: Axis) -> None:
        """Evaluate with other limits."""

    def set_cursor(self, at: float) -> None:
        """Mark a position."""

    def set_span(self, span: tuple[float, float] | None) -> None:
        """Show a part of the line; None for all of it."""

    def settled(self) -> None:
        """Take note that what was moved has come to rest."""


class Mouse:
    """Turns the events of a figure into changes of what it shows.

    Parameters
    ----------
    view : FigureView
        Where the events come from.
    target : Target
        What is changed.
    guard : callable
        Runs a function and tells the user what goes wrong in it: no error of a handler reaches
        anybody by itself.

    Attributes
    ----------
    mode : {"point", "zoom", "pan"}
        What pressing the button beside a limit does.
    drag : Grip, "cursor", "zoom", "pan" or None
        What is going on.
    """

    def __init__(
        self, view: FigureView, target: Target, guard: Callable[[Callable[[], None]], None]
    ) -> None:
        self.view, self.target = view, target
        self.mode: Mode = "point"
        self.drag: Grip | Mode | None = None
        self._pointer = ""
        self._ax: Any = None  # axes that the drag began in
        self._from = 0.0  # position where it began, m
        self._off = 0.0  # of an end from the pointer that has taken it, m
        self._origin: tuple[float, float] = (0.0, 0.0)  # pixel where it began, m in a pixel
        self._axis: Axis | None = None  # limits when it began
        self._now: Axis | None = None  # limits where the mouse is
        self._span = (0.0, 0.0)
        self._next = 0.0  # time of the next results
        for name, handler in (
            ("button_press_event", self._press),
            ("motion_notify_event", self._move),
            ("button_release_event", self._release),
            ("key_press_event", self._key),
        ):
            view.connect(name, _guarded(guard, handler))

    def _press(self, event: Any) -> None:
        if event.button != LEFT or event.inaxes is None or self.target.mapped is None:
            return
        if event.dblclick:
            self.drag = None
            self.target.set_span(None)
            return
        self._ax, self._from = event.inaxes, event.xdata / MM
        self._span, self._next = self.target.shown, 0.0
        low, high = self._ax.get_xlim()
        self._origin = (event.x, (high - low) / MM / float(self._ax.bbox.width))
        grip = self._grip(event) if self.mode == "point" else None
        if grip is not None:
            self._axis = self._now = self.target.axis
            assert self._axis is not None
            self._off = grip.at(self._axis) - self._from
            self.drag = grip
            self._tell(grip)
        else:
            self.drag = self.mode
            if self.mode == "point":
                self.target.set_cursor(self._inside(self._from))

    def _move(self, event: Any) -> None:
        if self.drag is None:
            self._hover(event)
            return
        if getattr(event, "buttons", None) is not None and LEFT not in event.buttons:
            self._release(event)  # it was let go outside the figure
            return
        at = self._position(event)
        if isinstance(self.drag, Grip):
            self._move_grip(self.drag, at)
        elif self.drag == "point":
            self._paced(lambda: self.target.set_cursor(self._inside(at)))
        elif self.drag == "zoom":
            self._mark(at)
        else:
            self._paced(lambda: self._pan(event))

    def _release(self, event: Any) -> None:
        drag, at = self.drag, self._position(event) if self.drag is not None else 0.0
        self._end()
        if isinstance(drag, Grip):
            now = self._moved(drag, at)
            if now is not None:
                self.target.set_axis(now)
        elif drag == "point":
            self.target.set_cursor(self._inside(at))
        elif drag == "zoom":
            if abs(at - self._from) > LEAST * self._length(self._ax):
                length = abs(at - self._from)
                ends = sorted(_rounded(end, length) for end in (self._from, at))
                self.target.set_span((ends[0], ends[1]))
            else:
                self.view.sketch()
        elif drag == "pan":
            self._pan(event)
        if drag is not None:
            self.target.settled()

    def _key(self, event: Any) -> None:
        """Escape gives a drag up: all is as before."""
        if event.key not in {"escape", "Escape"} or self.drag is None:
            return
        drag = self.drag
        self._end()
        if isinstance(drag, Grip) and self._axis is not None:
            self.target.set_axis(self._axis)
        elif drag == "pan":
            self.target.set_span(self._span)
        self.view.sketch()

    def _end(self) -> None:
        self.drag = None
        with self.view.lock:
            self.view.extra.clear()

    def _hover(self, event: Any) -> None:
        """Show by the shape of the pointer what pressing the button would do."""
        pointer = ""
        if event.inaxes is not None:
            if self.mode == "point":
                pointer = "limit" if self._grip(event) is not None else ""
            else:
                pointer = "zoom" if self.mode == "zoom" else "hand"
        if pointer != self._pointer:
            self._pointer = pointer
            self.view.point(pointer)

    def _grip(self, event: Any) -> Grip | None:
        axis = self.target.axis
        if axis is None or not self.target.grips_shown:
            return None
        return grip_near(axis, event.xdata / MM, self._length(event.inaxes))

    def _move_grip(self, grip: Grip, at: float) -> None:
        self._now = self._moved(grip, at)
        if self._now is None:
            return
        self.target.preview(self._now)
        self._tell(grip)
        now = self._now
        self._paced(lambda: self.target.set_axis(now))

    def _pan(self, event: Any) -> None:
        """Shift what is shown as far as the mouse has moved; positions move along with it."""
        begun, length = self._origin
        shift = _rounded((begun - event.x) * length, self._span[1] - self._span[0])
        self.target.set_span((self._span[0] + shift, self._span[1] + shift))

    def _moved(self, grip: Grip, at: float) -> Axis | None:
        if self._axis is None or self.target.mapped is None:
            return None
        return dragged(self._axis, grip, at + self._off, self.target.mapped)

    def _paced(self, work: Callable[[], None]) -> None:
        """Do what takes longer only now and then; what is left out is made good at the end."""
        begun = time.monotonic()
        if begun < self._next:
            self.view.sketch()
            return
        work()
        ended = time.monotonic()
        self._next = ended + max(PAUSE, (SHARE - 1) * (ended - begun))

    def _tell(self, grip: Grip) -> None:
        """Write the position beside the line that is dragged."""
        assert self._now is not None
        at = grip.at(self._now) * MM
        low, high = self._ax.get_xlim()
        left = at > 0.5 * (low + high)
        text = self._ax.annotate(
            f"{plain(at, 8)} mm",
            (at, 0.5),
            xycoords=self._ax.get_xaxis_transform(),
            xytext=(-6 if left else 6, 0),
            textcoords="offset points",
            ha="right" if left else "left",
            va="center",
            fontsize=10,
            color=INK,
            bbox={"facecolor": PAPER, "edgecolor": INK, "linewidth": 0.6, "pad": 2.5},
        )
        text.remove()  # drawn on top of all, not with the axes
        self._put(text)

    def _mark(self, at: float) -> None:
        """Shade the stretch that is going to be shown."""
        shade = self._ax.axvspan(self._from * MM, at * MM, color=SKY, alpha=0.3, linewidth=0)
        shade.remove()
        self._put(shade)
        self.view.sketch()

    def _put(self, artist: Any) -> None:
        with self.view.lock:
            artist.set_figure(self.view.figure)
            self.view.extra[:] = [artist]

    def _inside(self, at: float) -> float:
        low, high = self.target.mapped or (at, at)
        shown = self.target.shown
        return min(max(_rounded(at, shown[1] - shown[0]), low), high)

    def _position(self, event: Any) -> float:
        """Position along the line, m; beside the axes, too."""
        if event.inaxes is not None:  # all axes share their positions; not cut to whole pixels
            return float(event.xdata) / MM
        return float(self._ax.transData.inverted().transform((event.x, event.y))[0]) / MM

    def _length(self, ax: Axes) -> float:
        """What one pixel of the page is along the line, m."""
        low, high = ax.get_xlim()
        across = float(ax.bbox.width) / float(getattr(self.view.canvas, "device_pixel_ratio", 1))
        return (high - low) / MM / across


def _rounded(at: float, length: float) -> float:
    """A plain position, as fine as a figure of such a length can show (m)."""
    step = plain_step(length * MM)
    return round(round(at * MM / step) * step, 6) / MM


def _guarded(
    guard: Callable[[Callable[[], None]], None], handler: Callable[[Any], None]
) -> Callable[[Any], None]:
    return lambda event: guard(lambda: handler(event))
