"""A page that shows a live figure, as far as the figure can tell: it answers and sends events."""

from __future__ import annotations

import json

MM = 1e3


class LivePage:
    """Stands for the browser at the other end of the canvas of a `FigureView`."""

    def __init__(self, view):
        self.view, self.canvas = view, view.canvas
        self.images = []
        self.canvas.send = self._receive
        self._answers = []

    def _receive(self, content, buffers=None):
        kind = json.loads(content["data"])["type"]
        if kind == "binary":
            self.images.append(bytes(buffers[0]))
        elif kind in {"draw", "resize"}:  # the page asks for the drawing it has been told of
            self._answers.append({"draw": "draw", "resize": "refresh"}[kind])

    def say(self, kind, **more):
        self.canvas._handle_custom_msg({"type": kind, **more}, [])
        self.settle()

    def settle(self):
        """Answer until there is nothing more to answer."""
        while self._answers:
            self.canvas._handle_custom_msg({"type": self._answers.pop(0)}, [])

    def answer(self):
        """The page has made the canvas."""
        for kind in ("refresh", "send_image_mode", "initialized"):
            self.say(kind)

    def where(self, mm, share=0.5, axes=0):
        """Pixels from the upper left corner of a position (mm) in one of the axes."""
        ax = self.view.figure.axes[axes]
        x = ax.transData.transform((mm, 1.0))[0]
        y = ax.bbox.y0 + share * ax.bbox.height
        return x, self.view.figure.bbox.height - y

    def mouse(self, kind, x, y, *, down=False):
        more = {"button": 0, "buttons": int(down), "modifiers": [], "guiEvent": {}}
        self.say(kind, x=x, y=y, **more)

    def move(self, mm, *, down=False, off=0.0, **where):
        x, y = self.where(mm, **where)
        self.mouse("motion_notify", x + off, y, down=down)

    def press(self, mm, *, off=0.0, **where):
        x, y = self.where(mm, **where)
        self.mouse("button_press", x + off, y, down=True)

    def release(self, mm, **where):
        self.mouse("button_release", *self.where(mm, **where))

    def drag(self, *stops, release=True):
        """Press at the first position, move over the others, let go at the last."""
        places = [self.where(mm) for mm in stops]  # before anything moves
        self.mouse("button_press", *places[0], down=True)
        for place in places[1:]:
            self.mouse("motion_notify", *place, down=True)
        if release:
            self.mouse("button_release", *places[-1])

    def key(self, name):
        self.say("key_press", key=f"k{name}", guiEvent={})
