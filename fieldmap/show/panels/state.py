"""What the panels work on: an open campaign, what of it is in use, limits, map and results.

It knows no widget. Panels ask it for changes and listen to what became of them. A new map is
solved only when the passes or references in use have changed, results are evaluated again only
when the map, the limits or the window have. In a notebook maps are solved in the background: a
newer request ends an older one, and what is shown meanwhile is marked as out of date.
"""

from __future__ import annotations

import functools
import logging
import threading
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final, Literal, NamedTuple

from fieldmap.errors import FieldmapError, InputError
from fieldmap.estimate.map import map_lines, with_axis
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.evaluate import evaluate
from fieldmap.readings.campaign import load
from fieldmap.readings.passes import Campaign
from fieldmap.show.handover import save_reduction
from fieldmap.show.panels.choices import remember_choices
from fieldmap.show.panels.departures import check_order, departures
from fieldmap.show.panels.places import writable_folder
from fieldmap.show.panels.settings import Settings
from fieldmap.show.panels.worker import Stopped, Worker

if TYPE_CHECKING:
    import os

    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.magnet.results import LineResults, Results
    from fieldmap.progress import Tell
    from fieldmap.readings.passes import Axis, Pass

__all__ = ["Listener", "Reduction", "Topic"]

Topic = Literal["busy", "campaign", "passes", "stale", "map", "results", "saved"]
Listener = Callable[[Topic], None]

MAPS_KEPT: Final = 8
LOG: Final = logging.getLogger("fieldmap")


class Choice(NamedTuple):
    """What a map is made from: the campaign, and which of its passes and references."""

    campaign: Campaign | None
    active: tuple[bool, ...]
    trusted: tuple[bool, ...]

    @property
    def marks(self) -> tuple[int, ...]:
        """Index of each pass in use."""
        return tuple(i for i, used in enumerate(self.active) if used)

    @property
    def whole(self) -> bool:
        """Whether nothing is left out."""
        return all(self.active) and all(self.trusted)


NOTHING: Final = Choice(None, (), ())


class Reduction:
    """A campaign on its way to results.

    Parameters
    ----------
    background : bool
        Whether campaigns are read and maps solved on a thread of their own; `wait` for them.
    keeps : bool
        Whether what is set by hand is kept beside the campaign, and taken up again.

    Attributes
    ----------
    campaign : Campaign or None
        What is open.
    active, trusted : tuple of bool
        Which of its passes and which of its references are in use.
    axis : Axis or None
        Limits of integration and flat window in use.
    fmap : xarray.Dataset or None
        The map of the passes in use, unless it is `stale`; None while there is an error in it.
    profiles : list of FieldLine
        The lines of that map.
    results : Results or None
        Its evaluation with the limits in use; None while there is an error in it.
    busy : str
        What is being done; empty if nothing is.
    notice : str
        What else there is to say of what was opened.
    source : Path or None
        The file that was to be opened last, whether it could be or not.
    saved : tuple of Path
        The files written last.

    Examples
    --------
    >>> from fieldmap.shipped import demo_folder
    >>> state = Reduction()
    >>> state.open(demo_folder() / "slot" / "campaign.toml")
    >>> state.error, state.results is not None
    ('', True)
    """

    def __init__(self, *, background: bool = False, keeps: bool = False) -> None:
        self.background, self.keeps = background, keeps
        # handlers of widgets run in threads of their own; never held while a map is solved in
        # the background, nor while waiting for that
        self.lock = threading.RLock()
        self._worker = Worker()
        self._listeners: list[Listener] = []
        self._errors: dict[str, str] = {}
        self._quick = self._long = ""
        self._since = 0.0
        self._forget()
        self.source: Path | None = None
        self.settings = Settings()
        remember_choices(self)

    def _forget(self) -> None:
        """Begin with nothing."""
        self.campaign: Campaign | None = None
        self.active: tuple[bool, ...] = ()
        self.trusted: tuple[bool, ...] = ()
        self.axis: Axis | None = None
        self.fmap: xr.Dataset | None = None
        self.profiles: list[FieldLine] = []
        self.results: Results | None = None
        self.saved: tuple[Path, ...] = ()
        self.notice = ""
        self._mapped = NOTHING
        self._maps: dict[Choice, xr.Dataset] = {}
        self._spacing: float | None = None
        self._errors.clear()

    @property
    def error(self) -> str:
        """What is wrong, in words; empty if nothing is."""
        return " ".join(tuple(self._errors.values()))

    @property
    def busy(self) -> str:
        """What is being done; empty if nothing is."""
        return self._quick or self._long

    @property
    def solving(self) -> bool:
        """Whether something is done or waits to be done in the background."""
        return not self._worker.idle

    @property
    def elapsed(self) -> float:
        """How long the work in the background has taken until now, s."""
        return time.monotonic() - self._since if self._long else 0.0

    @property
    def stale(self) -> bool:
        """Whether the map is of another choice of passes and references than the one in use."""
        return self.fmap is not None and self._mapped != self._choice

    @property
    def _choice(self) -> Choice:
        return Choice(self.campaign, self.active, self.trusted)

    @property
    def passes(self) -> tuple[Pass, ...]:
        """The passes in use."""
        if self.campaign is None:
            return ()
        return tuple(self.campaign.passes[i] for i in self.marks)

    @property
    def marks(self) -> tuple[int, ...]:
        """Index in the campaign of each pass in use: it decides the style it is drawn in."""
        return self._choice.marks

    @property
    def map_marks(self) -> tuple[int, ...]:
        """The same of the passes of the map, in the order in which it keeps them: by line."""
        campaign, marks = self._mapped.campaign, self._mapped.marks
        if campaign is None:
            return ()
        return tuple(sorted(marks, key=lambda i: (campaign.passes[i].y, campaign.passes[i].x)))

    @property
    def lines(self) -> tuple[LineResults, ...]:
        """Results line by line; empty where there are none."""
        return self.results.lines if self.results else ()

    def listen(self, listener: Listener) -> None:
        """Call a listener after every change, with what has changed; it may hold no thread up."""
        self._listeners.append(listener)

    def remember(self, name: str, get: Callable[[], Any], put: Callable[[Any], None]) -> None:
        """Name a value that is kept with the campaign; call `keep` when it has changed.

        Parameters
        ----------
        name, get, put
            As for `Settings.remember`.
        """
        self.settings.remember(name, get, put)

    def keep(self) -> None:
        """Keep what is set by hand beside the campaign, if this state keeps anything."""
        with self.lock:
            path = self.campaign.path if self.campaign else None
            if not self.keeps or path is None or self._restoring:
                return
            told = self.settings.write(path, self.settings.changed())
            if told and told != self.notice:
                self.notice = told
                self._tell("busy")

    def open(self, source: str | os.PathLike[str] | Campaign) -> None:
        """Open a campaign with all its passes, or those chosen when it was last open; solve it.

        Parameters
        ----------
        source : path or Campaign
            A campaign.toml, its folder, or a campaign that is loaded already.
        """
        with self.lock:
            self._forget()
            self._do(lambda tell: self._open(source, tell))

    def use(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        """Use a pass, or leave it out, and solve again.

        Parameters
        ----------
        index : int
            Index of the pass in the campaign.
        used : bool
            Whether it is used.
        """
        with self.lock:
            if 0 <= index < len(self.active) and self.active[index] != used:
                self.active = _with(self.active, index, used)
                self.solve()
                self.keep()

    def trust(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        """Use a reference, or leave it out, and solve again; as for `use`."""
        with self.lock:
            if 0 <= index < len(self.trusted) and self.trusted[index] != used:
                self.trusted = _with(self.trusted, index, used)
                self.solve()
                self.keep()

    def move(
        self,
        *,
        integrate: tuple[float, float] | None = None,
        flat: tuple[float, float] | None = None,
    ) -> None:
        """Set the limits of integration or the flat window, m, and evaluate again.

        Parameters
        ----------
        integrate, flat : tuple of float, optional
            New limits; those in use stay if not given.
        """
        with self.lock:
            if self.axis is None:
                return
            moved = self.axis.moved(integrate, flat)
            if moved == self.axis:
                return
            self.axis = moved
            self._evaluate()
            self.keep()

    def renew(self, campaign: Campaign) -> None:
        """Take a campaign that has grown or lost a pass; what was chosen by hand stays, by name.

        Parameters
        ----------
        campaign : Campaign
            Read again.
        """
        with self.lock:
            first = self.campaign is None
            kept = self.settings.changed()
            if first:
                self._forget()
            self._take(campaign)
            self._restored(self._kept(campaign) if first else kept)
            self._maps.clear()
            self._spacing = None
            self._errors.clear()
            self._tell("campaign" if first else "passes")
            self.solve()

    def reset(self) -> None:
        """Everything as in the file, and nothing kept."""
        with self.lock:
            if self.campaign is None:
                return
            before = self._choice
            self.axis = self.campaign.axis
            self._restored({})
            self.notice = ""
            if self._choice != before:
                self.solve()
            else:
                self._evaluate()
            self.keep()

    def solve(self) -> None:
        """Make the map of what is in use, and evaluate it."""
        with self.lock:
            if self.campaign is None:
                return
            self._do(self._solve)
            if self.background:
                self._tell("stale")

    def stop(self) -> None:
        """Give up what is solved in the background; the last good map stays."""
        self._worker.stop()

    def wait(self, timeout: float | None = None) -> bool:
        """Wait until nothing is done in the background; never with the lock held.

        Parameters
        ----------
        timeout : float, optional
            s.

        Returns
        -------
        bool
            Whether that is so.
        """
        return self._worker.wait(timeout)

    def save(self, folder: str | os.PathLike[str]) -> None:
        """Write map.nc, results.json and report.html with the passes and limits in use.

        Parameters
        ----------
        folder : path
            Made if it is not there; never inside the demo campaigns that came with the kit.
        """
        with self.lock:
            self.saved = ()
            if self.stale or (self.fmap is None and self.solving):
                self._errors["writing"] = str(_out_of_date())
                self._tell("saved")
                return
            work = functools.partial(self._save, folder, self.fmap, self.results, self.axis)
            self._do(work, lasting=True)
