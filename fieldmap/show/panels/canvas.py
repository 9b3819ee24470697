"""A figure in a panel: live where there is a page that can show it so, a picture where not.

The figure is drawn in two layers. Grids, ticks, labels and legends are the ground; they are
drawn again only when one of them changes. Curves, bands and marks lie on top: with these alone
a new frame takes a few milliseconds, so that limits and cursor follow the mouse.
"""

from __future__ import annotations

import contextlib
import functools
import importlib
import io
import os
import threading
from html import escape
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from fieldmap.show.look import PAPER
from fieldmap.show.panels.parts import column, hooked
from fieldmap.show.picture import DPI, SIZE, Picture

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from matplotlib.artist import Artist
    from matplotlib.backend_bases import Event
    from matplotlib.figure import Figure

__all__ = ["STATIC_VARIABLE", "FigureView"]

STATIC_VARIABLE: Final = "FIELDMAP_STATIC_FIGURES"
LIVE_DPI: Final = 97  # 718 pixels: the column beside the numbers on a screen of 1366
POINTERS: Final = {"limit": "RESIZE_HORIZONTAL", "hand": "HAND", "zoom": "SELECT_REGION"}


class FigureView:
    """A figure and its text alternative.

    A live canvas is made where a kernel runs. It is shown once the page has answered that it
    can show it; until then, and where it cannot, the figure is a picture.

    Parameters
    ----------
    static : bool, optional
        Whether it stays a picture. If not given: where no kernel runs, and where the variable
        FIELDMAP_STATIC_FIGURES is set in the environment.

    Attributes
    ----------
    figure : matplotlib.figure.Figure
        To draw on, while `lock` is held.
    canvas : matplotlib canvas
        What its events come from.
    picture : ipywidgets.HTML
        The picture, whose text alternative is the caption; below a live canvas the caption alone.
    live : bool
        Whether a page shows the live canvas.
    lock : threading.RLock
        Drawing and events come from several threads.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, *, static: bool | None = None) -> None:
        import ipywidgets
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        self.lock = threading.RLock()
        self.live = False
        self.extra: list[Artist] = []  # drawn on top of all others
        self._words = ""
        self._ground: Any = None
        self._frame: tuple[Any, ...] | None = None
        self._on_live: list[Callable[[], None]] = []
        made = None if (_is_static() if static is None else static) else _canvas_class()
        self.figure = Figure(figsize=SIZE, dpi=LIVE_DPI if made else DPI, facecolor=PAPER)
        self.canvas: Any = FigureCanvasAgg(self.figure) if made is None else made(self.figure, self)
        self.picture = hooked(ipywidgets.HTML(), "fm-picture-box")
        self.widget = column((self.picture,), "fm-canvas-box")
        self.canvas.mpl_connect("draw_event", self._on_draw)
        self.canvas.mpl_connect("resize_event", self._on_resize)
        if hasattr(self.canvas, "on_msg"):
            self.canvas.on_msg(self._on_message)
            self.point("")

    def refresh(self, words: str) -> None:
        """Show what was drawn on the figure.

        Parameters
        ----------
        words : str
            Its text alternative.
        """
        with self.lock:
            self._words = words
            if not self.live:
                self._sketch()
                self.picture.value = Picture(self._png(), words).html
                return
            self._caption()
            self.canvas.layout.display = ""
            if self._frame is not None and self._frame == self._frame_now():
                self._sketch()
                self.canvas.blit(self.figure.bbox)
            else:
                self._ground = self._frame = None
                self.canvas.draw_idle()

    def sketch(self) -> None:
        """Show what was moved on the figure, with the words as they are; nothing if not live."""
        with self.lock:
            if self.live and self._ground is not None:
                self._sketch()
                self.canvas.blit(self.figure.bbox)

    def blank(self, html: str) -> None:
        """Show a remark in place of the figure."""
        with self.lock:
            self._words = ""
            if self.live:
                self.canvas.layout.display = "none"
            self.picture.value = html

    def when_live(self, call: Callable[[], None]) -> None:
        """Call something once the page shows the live canvas."""
        self._on_live.append(call)

    def connect(self, event: str, handler: Callable[[Any], None]) -> None:
        """Call a handler at every event of the canvas of that name."""
        self.canvas.mpl_connect(event, handler)

    def point(self, pointer: str) -> None:
        """Choose the shape of the mouse's pointer: "limit", "hand", "zoom"; "" for the arrow."""
        from matplotlib.backend_tools import Cursors

        self.canvas.set_cursor(Cursors[POINTERS.get(pointer, "POINTER")])

    def close(self) -> None:
        """Close the widgets."""
        self.widget.close()
        if hasattr(self.canvas, "on_msg"):
            self.canvas.close()

    def draw_layers(self, draw: Callable[[], None]) -> None:
        """Draw the ground with a function that draws the whole figure; then the rest on it."""
        with self.lock:
            top = list(self._top())
            for artist in top:
                artist.set_animated(True)  # left out of the ground
            try:
                draw()
            finally:
                for artist in top:
                    artist.set_animated(False)

    def _on_draw(self, event: Any) -> None:
        """Keep the ground that has just been drawn, and draw the rest."""
        if event.canvas is self.canvas:
            self._ground = self.canvas.copy_from_bbox(self.figure.bbox)
            self._frame = self._frame_now()
            self._draw_top()

    def _sketch(self) -> None:
        """Draw on the canvas, the ground only if it has changed."""
        from matplotlib.backends.backend_agg import FigureCanvasAgg

        if self._frame is None or self._frame != self._frame_now():
            self.draw_layers(lambda: FigureCanvasAgg.draw(self.canvas))  # type: ignore[no-untyped-call]
            return
        self.canvas.restore_region(self._ground)
        self._draw_top()

    def _draw_top(self) -> None:
        renderer = self.canvas.get_renderer()
        for artist in self._top():
            artist.draw(renderer)

    def _top(self) -> Iterator[Artist]:
        """Curves, areas, marks, texts, and the frame that lies over them; from below to above."""
        for ax in self.figure.axes:
            there = (*ax.collections, *ax.patches, *ax.lines, *ax.texts, *ax.spines.values())
            yield from sorted(there, key=lambda artist: artist.get_zorder())
        yield from self.extra

    def _frame_now(self) -> tuple[Any, ...] | None:
        """All that the ground shows; None where there is nothing."""
        axes = self.figure.axes
        if not axes:
            return None
        return (
            tuple(self.figure.get_size_inches()),
            self.figure.dpi,
            *(
                (ax, ax.get_xlim(), ax.get_ylim(), ax.get_yscale(), ax.get_xlabel(),
                 ax.get_ylabel(), ax.get_legend())
                for ax in axes
            ),
        )  # fmt: skip

    def _png(self) -> bytes:
        from PIL import Image

        stream = io.BytesIO()
        shown = np.asarray(self.canvas.buffer_rgba())
        Image.fromarray(shown).save(stream, format="png", compress_level=3)
        return stream.getvalue()

    def _caption(self) -> None:
        words = f'<p class="fm-words">{escape(self._words)}</p>' if self._words else ""
        if self.picture.value != words:
            self.picture.value = words

    def _on_message(self, _: Any, content: dict[str, Any], __: Any) -> None:
        """Once a page says that it has made the canvas, show it in place of the picture."""
        if content.get("type") != "initialized" or self.live:
            return
        with self.lock:
            self.live = True
            if self._words:
                self._caption()
            else:
                self.canvas.layout.display = "none"
            self.widget.children = (self.canvas, self.picture)
            self._frame = None
        for call in self._on_live:
            call()

    def _on_resize(self, _: Event) -> None:
        self._ground = self._frame = None


def _is_static() -> bool:
    """Whether figures are to be pictures: wanted so, or no kernel is there to answer a page."""
    if os.environ.get(STATIC_VARIABLE, "") not in {"", "0"}:
        return True
    try:
        from IPython.core.getipython import get_ipython
    except ImportError:
        return True
    shell = get_ipython()
    return getattr(shell, "kernel", None) is None


@functools.cache
def _canvas_class() -> Callable[[Figure, FigureView], Any] | None:
    """Makes a live canvas; None where that cannot be."""
    try:
        backend = _imported()
    except Exception:  # noqa: BLE001 a picture is always there, whatever is wrong with the other
        return None

    class LiveCanvas(backend.Canvas):  # type: ignore[misc, name-defined]
        """A canvas that is drawn in layers, one thread at a time."""

        def draw(self) -> None:
            view = getattr(self, "view", None)
            if view is None:
                super().draw()
            else:
                view.draw_layers(super().draw)

        def get_diff_image(self) -> bytes | None:
            """Always the whole image: a page loses those that come too fast, and their changes."""
            self._force_full = True
            image: bytes | None = super().get_diff_image()
            return image

    def make(figure: Figure, view: FigureView) -> Any:
        canvas = LiveCanvas(figure)
        canvas.view = view
        manager = backend.FigureManager(canvas, 0)
        _disarm(canvas, manager)
        canvas.header_visible = canvas.footer_visible = canvas.toolbar_visible = False
        return hooked(canvas, "fm-live")

    return make


def _imported() -> Any:
    """The module of the live canvas; importing it must not change the backend of the session."""
    import matplotlib as mpl

    use = mpl.use
    mpl.use = lambda *_, **__: None
    try:
        return importlib.import_module("ipympl.backend_nbagg")
    finally:
        mpl.use = use


def _disarm(canvas: Any, manager: Any) -> None:
    """Turn off the manager's own answers to keys and mouse: the panel has its own."""
    toolbar = manager.toolbar
    for owner, name in (
        (manager, "key_press_handler_id"),
        (manager, "button_press_handler_id"),
        (toolbar, "_id_press"),
        (toolbar, "_id_release"),
        (toolbar, "_id_drag"),
    ):
        number = getattr(owner, name, None)
        if number is not None:
            canvas.mpl_disconnect(number)
    # no hourglass while drawing: it would take the pointer's shape away
    toolbar._wait_cursor_for_draw_cm = contextlib.nullcontext  # noqa: SLF001 no public switch
