"""What the panels work on: an open campaign, the passes in use, limits, map and results.

It knows no widget. Panels ask it for changes and listen to what became of them. A new map is
solved only when the passes in use have changed, results are evaluated again only when the
map, the limits or the window have.
"""

from __future__ import annotations

import json
import logging
import math
import threading
from collections.abc import Callable
from dataclasses import asdict, replace
from pathlib import Path
from typing import TYPE_CHECKING, Final, Literal

from fieldmap.errors import FieldmapError, InputError
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.evaluate import evaluate
from fieldmap.readings.campaign import load
from fieldmap.readings.passes import Campaign
from fieldmap.shipped import PACKAGE, demo_folder
from fieldmap.show.handover import save_reduction

if TYPE_CHECKING:
    import os

    import xarray as xr

    from fieldmap.magnet.results import LineResults, Results
    from fieldmap.readings.passes import Axis, Pass

__all__ = ["Listener", "Reduction", "Topic"]

Topic = Literal["busy", "campaign", "map", "results", "saved"]
Listener = Callable[[Topic], None]

MAPS_KEPT: Final = 8
LOG: Final = logging.getLogger("fieldmap")


class Reduction:
    """A campaign on its way to results.

    Attributes
    ----------
    campaign : Campaign or None
        What is open.
    active : tuple of bool
        Which of its passes are in use.
    axis : Axis or None
        Limits of integration and flat window in use.
    fmap : xarray.Dataset or None
        The map of the passes in use; None while there is an error in it.
    results : Results or None
        Its evaluation with the limits in use; None while there is an error in it.
    busy : str
        What is being done; empty if nothing is.
    saved : tuple of Path
        The files written last.

    Examples
    --------
    >>> state = Reduction()
    >>> state.open(demo_folder() / "slot" / "campaign.toml")
    >>> state.error, state.results is not None
    ('', True)
    """

    def __init__(self) -> None:
        self.campaign: Campaign | None = None
        self.active: tuple[bool, ...] = ()
        self.axis: Axis | None = None
        self.fmap: xr.Dataset | None = None
        self.results: Results | None = None
        self.busy = ""
        self.saved: tuple[Path, ...] = ()
        # handlers of widgets run in threads of their own
        self.lock = threading.RLock()
        self._listeners: list[Listener] = []
        self._errors: dict[str, str] = {}
        self._maps: dict[tuple[bool, ...], xr.Dataset] = {}
        self._spacing: float | None = None

    @property
    def error(self) -> str:
        """What is wrong, in words; empty if nothing is."""
        return " ".join(self._errors.values())

    @property
    def passes(self) -> tuple[Pass, ...]:
        """The passes in use."""
        if self.campaign is None:
            return ()
        return tuple(self.campaign.passes[i] for i in self.marks)

    @property
    def marks(self) -> tuple[int, ...]:
        """Index in the campaign of each pass in use: it decides the style it is drawn in."""
        return tuple(i for i, used in enumerate(self.active) if used)

    @property
    def map_marks(self) -> tuple[int, ...]:
        """The same in the order in which the map keeps its passes: by line."""
        if self.campaign is None:
            return ()
        passes = self.campaign.passes
        return tuple(sorted(self.marks, key=lambda i: (passes[i].y, passes[i].x)))

    @property
    def lines(self) -> tuple[LineResults, ...]:
        """Results line by line; empty where there are none."""
        return self.results.lines if self.results else ()

    def listen(self, listener: Listener) -> None:
        """Call a listener after every change, with what has changed."""
        self._listeners.append(listener)

    def open(self, source: str | os.PathLike[str] | Campaign) -> None:
        """Open a campaign with all its passes, and solve it.

        Parameters
        ----------
        source : path or Campaign
            A campaign.toml, its folder, or a campaign that is loaded already.
        """
        with self.lock:
            self.campaign, self.axis, self.active = None, None, ()
            self.fmap = self.results = self._spacing = None
            self.saved = ()
            self._maps.clear()
            self._errors.clear()
            opened = self.attempt("reading the campaign", lambda: self._read(source))
            self._tell("campaign")
            if opened:
                self._solve()

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
            if not 0 <= index < len(self.active) or self.active[index] == used:
                return
            self.active = (*self.active[:index], used, *self.active[index + 1 :])
            self._solve()

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

    def save(self, folder: str | os.PathLike[str]) -> None:
        """Write map.nc, results.json and report.html with the passes and limits in use.

        Parameters
        ----------
        folder : path
            Made if it is not there; never inside the demo campaigns that came with the kit.
        """
        with self.lock:
            self.saved = ()
            self.attempt("writing", lambda: self._write(folder))
            self._tell("saved")

    def attempt(self, what: str, work: Callable[[], None]) -> bool:
        """Say what is being done, do it, and keep what goes wrong as words.

        Parameters
        ----------
        what : str
            What is being done, in a few words; an earlier error of the same is forgotten.
        work : callable
            Does it.

        Returns
        -------
        bool
            Whether nothing went wrong.
        """
        with self.lock:
            self._errors.pop(what, None)
            self._work(what)
            try:
                work()
            except FieldmapError as error:
                self._errors[what] = str(error)
            except Exception as error:  # noqa: BLE001 see _failed
                self._failed(what, error)
            finally:
                self._work("")
            return what not in self._errors

    def _read(self, source: str | os.PathLike[str] | Campaign) -> None:
        if isinstance(source, Campaign):
            self.campaign = source
        else:
            self.campaign = load(Path(source).expanduser(), tell=self._work)
        self.axis = self.campaign.axis
        self.active = (True,) * len(self.campaign.passes)

    def _write(self, folder: str | os.PathLike[str]) -> None:
        place = _writable(folder)
        if self.fmap is None or self.results is None:
            raise InputError("save", "no results", "a map with results", "mend the campaign first")
        marked = self._marked(self.fmap)
        # what the panels show goes without the fringes, which take their time
        results = evaluate(marked, self.campaign, axis=self.axis)
        self.saved = save_reduction(marked, results, place)

    def _solve(self) -> None:
        self.fmap = self.results = None
        self._errors.clear()
        self.attempt("solving", self._take_map)
        self._tell("map")
        self._evaluate()

    def _take_map(self) -> None:
        """Make the map of the passes in use, or take it from those made before."""
        if self.active not in self._maps:
            self._maps[self.active] = self._stitched()
            if len(self._maps) > MAPS_KEPT:
                del self._maps[next(iter(self._maps))]
        self.fmap = self._maps[self.active]

    def _stitched(self) -> xr.Dataset:
        """Solve; once a knot spacing has been found good, passes left out do not change it."""
        assert self.campaign is not None
        chosen = replace(self.campaign, passes=self.passes)
        spacing = None if all(self.active) else self._spacing
        fmap = stitch(chosen, knot_spacing=spacing, tell=self._work)
        if spacing is None:
            self._spacing = float(fmap["knots"].values[..., 1].min())
        return fmap

    def _evaluate(self) -> None:
        self.results = None
        if self.fmap is not None:
            self._errors.clear()
            self.attempt("evaluating", self._take_results)
        self._tell("results")

    def _take_results(self) -> None:
        assert self.fmap is not None
        assert self.axis is not None
        _check_order(self.axis)
        marked = self._marked(self.fmap)
        self.results = evaluate(marked, self.campaign, axis=self.axis, fringe=False)

    def _marked(self, fmap: xr.Dataset) -> xr.Dataset:
        """The map with the limits in use and a note of every departure from the campaign file."""
        assert self.campaign is not None
        assert self.axis is not None
        facts = json.loads(fmap.attrs["campaign"]) | {"axis": asdict(self.axis)}
        notes = [note.as_dict() for note in _departures(self.campaign, self.active, self.axis)]
        findings = json.loads(fmap.attrs["findings"]) + notes
        return fmap.assign_attrs(campaign=json.dumps(facts), findings=json.dumps(findings))

    def _failed(self, what: str, error: Exception) -> None:
        """Say it in the panel: an exception in a handler reaches no user by itself."""
        LOG.error("%s failed", what, exc_info=error)
        kind = type(error).__name__
        self._errors[what] = f"{what}: found a failure of the kit's own ({kind}: {error})."

    def _work(self, what: str) -> None:
        self.busy = what
        self._tell("busy")

    def _tell(self, topic: Topic) -> None:
        for listener in self._listeners:
            try:
                listener(topic)
            except Exception as error:  # noqa: BLE001 see _failed
                self._failed("showing", error)


def _check_order(axis: Axis) -> None:
    for key, (low, high) in (("integrate", axis.integrate), ("flat", axis.flat)):
        if not low < high:
            raise InputError(
                f"[axis] {key}",
                f"from {low * 1e3:.6g} to {high * 1e3:.6g} mm",
                "a first limit below the second",
                "move one of them",
            )


def _departures(campaign: Campaign, active: tuple[bool, ...], axis: Axis) -> list[Finding]:
    """What was chosen by hand against the campaign file."""
    notes = []
    left_out = [one.name for one, used in zip(campaign.passes, active, strict=True) if not used]
    if left_out:
        text = (
            f"{len(left_out)} of {len(active)} passes left out by hand; results rest on the rest."
        )
        notes.append(Finding("passes-left-out", "note", ", ".join(left_out), text))
    if not _same(axis, campaign.axis):
        text = (
            f"limits were moved by hand to {_span(axis.integrate)}, flat window "
            f"{_span(axis.flat)}; the campaign file says {_span(campaign.axis.integrate)} and "
            f"{_span(campaign.axis.flat)}."
        )
        notes.append(Finding("limits-moved", "note", "[axis]", text))
    return notes


def _same(one: Axis, other: Axis) -> bool:
    """Whether limits and window agree to a nanometre: fields in mm round off more than that."""
    ends = zip((*one.integrate, *one.flat), (*other.integrate, *other.flat), strict=True)
    return all(math.isclose(a, b, rel_tol=0, abs_tol=1e-9) for a, b in ends)


def _span(ends: tuple[float, float]) -> str:
    return f"{ends[0] * 1e3:.6g} to {ends[1] * 1e3:.6g} mm"


def _writable(folder: str | os.PathLike[str]) -> Path:
    """Refuse an empty name, and the folders that came with the kit."""
    text = str(folder).strip()
    if not text:
        raise InputError("folder for the files", "nothing", "the name of a folder", "name one")
    place = Path(text).expanduser()
    whole = place.resolve()
    for own in (demo_folder().resolve(), PACKAGE):
        if whole.is_relative_to(own):
            raise InputError(
                str(place),
                "a folder that came with the kit",
                "a folder of your own",
                "name another one, so that the demo stays as it came",
            )
    return place
