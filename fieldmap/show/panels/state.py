"""What the panels work on: an open campaign, what of it is in use, limits, map and results.

It knows no widget. Panels ask it for changes and listen to what became of them. A new map is
solved only when the passes or references in use have changed, results are evaluated again only
when the map, the limits or the window have. In a notebook maps are solved in the background: a
newer request ends an older one, and what is shown meanwhile is marked as out of date.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from fieldmap.atomic import is_folder
from fieldmap.errors import FieldmapError
from fieldmap.estimate.map import map_lines, with_axis
from fieldmap.estimate.stitch import stitch
from fieldmap.magnet.evaluate import evaluate
from fieldmap.readings.campaign import load
from fieldmap.readings.passes import Campaign
from fieldmap.show.panels.choices import NOTHING, Choice, KeptMaps, changed, remember_choices
from fieldmap.show.panels.departures import check_order
from fieldmap.show.panels.desk import Desk, Listener, Topic
from fieldmap.show.panels.offers import Offers
from fieldmap.show.panels.settings import Settings
from fieldmap.show.panels.shown import Shown

if TYPE_CHECKING:
    import os
    from collections.abc import Callable, Mapping

    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.estimate.findings import Finding
    from fieldmap.magnet.results import LineResults, Results
    from fieldmap.progress import Tell
    from fieldmap.readings.passes import Axis, Pass

__all__ = ["Listener", "Reduction", "Topic"]

CAMPAIGN_FILE: Final = "campaign.toml"


class Reduction(Desk):
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
    offers : Offers
        Corrections that findings offer, and those switched on by hand.
    axis : Axis or None
        Limits of integration and flat window in use.
    fmap : xarray.Dataset or None
        The map of the passes in use, unless it is `stale`; None while there is an error in it.
    profiles : list of FieldLine
        The lines of that map.
    results : Results or None
        Its evaluation with the limits in use; None while there is an error in it.
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
        super().__init__(background=background)
        self.keeps = keeps
        self.source: Path | None = None
        self.settings = Settings()
        self._restoring = False
        self._forget()
        remember_choices(self)

    def _forget(self) -> None:
        """Begin with nothing."""
        self.campaign: Campaign | None = None
        self.active: tuple[bool, ...] = ()
        self.trusted: tuple[bool, ...] = ()
        self.offers = Offers()
        self.axis: Axis | None = None
        self.fmap: xr.Dataset | None = None
        self.profiles: list[FieldLine] = []
        self.results: Results | None = None
        self.saved: tuple[Path, ...] = ()
        self.notice = ""
        self.added: tuple[str, ...] = ()
        self._mapped = NOTHING
        self._maps = KeptMaps()
        self._errors.clear()

    @property
    def stale(self) -> bool:
        """Whether the map is of another choice of passes and references than the one in use."""
        return self.fmap is not None and self._mapped != self._choice

    @property
    def _choice(self) -> Choice:
        return Choice(self.campaign, self.active, self.trusted, self.offers.ticked)

    @property
    def passes(self) -> tuple[Pass, ...]:
        """The passes in use."""
        return tuple(self.campaign.passes[i] for i in self.marks) if self.campaign else ()

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

    def remember(self, name: str, get: Callable[[], Any], put: Callable[[Any], None]) -> None:
        """Name a value that is kept with the campaign, as `Settings.remember`; see `keep`."""
        self.settings.remember(name, get, put)

    def keep(self) -> None:
        """Keep what is set by hand, if this state keeps anything; call it after every change."""
        with self.lock:
            path = self.campaign.path if self.campaign else None
            if not self.keeps or path is None or self._restoring:
                return
            told = self.settings.keep(path)
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
            self._do(lambda tell: self._open(source, tell), "reading the campaign")
            if self.background:
                self._tell("campaign")  # nothing old stays while it is read

    def use(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        """Use a pass, or leave it out, and solve again.

        Parameters
        ----------
        index, used
            Index of the pass in the campaign, and whether it is used.
        """
        with self.lock:
            if 0 <= index < len(self.active) and self.active[index] != used:
                self.active = changed(self.active, index, to=used)
                self._solve_and_keep()

    def trust(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        """Use a reference, or leave it out, and solve again; as for `use`."""
        with self.lock:
            if 0 <= index < len(self.trusted) and self.trusted[index] != used:
                self.trusted = changed(self.trusted, index, to=used)
                self._solve_and_keep()

    def correct(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        """Switch an offered correction on, or off again, and solve; as for `use`."""
        with self.lock:
            if self.offers.tick(index, to=used):
                self._solve_and_keep()

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
            if self.axis is None or self.campaign is None:
                return
            # from the file's axis on: a tail that it states comes back with its limit
            ends = integrate or self.axis.integrate, flat or self.axis.flat
            moved = self.campaign.axis.moved(*ends)
            if moved == self.axis:
                return
            self.axis = moved
            self._evaluate()
            self.keep()

    def renew(self, campaign: Campaign, added: tuple[str, ...] = ()) -> None:
        """Take a campaign that has grown or lost a pass; what was chosen by hand stays, by name.

        Parameters
        ----------
        campaign : Campaign
            Read again.
        added : tuple of str, optional
            Passes of it that the campaign file does not name.
        """
        with self.lock:
            if self.campaign is None:
                self._forget()
                self._take(campaign)
                self._tell("campaign")
            else:
                kept = self.settings.changed()
                self._take(campaign)
                self._restore(kept)
                self._tell("passes")
            self.added = added
            self._errors.clear()
            self._solve_and_keep()

    def reset(self) -> None:
        """Everything as in the file, and nothing kept."""
        with self.lock:
            if self.campaign is None:
                return
            before = self._choice
            self.axis = self.campaign.axis
            self._restore(self.settings.usual())
            if self._choice != before:
                self.solve()
            else:
                self._evaluate()
            self.keep()

    def _solve_and_keep(self) -> None:
        self.solve()
        self.keep()

    def solve(self) -> None:
        """Make the map of what is in use, and evaluate it."""
        with self.lock:
            if self.campaign is None:
                return
            self._do(self._solve, "solving")
            if self.background:
                self._tell("stale")

    def save(self, folder: str | os.PathLike[str]) -> None:
        """Write map.nc, results.json and report.html with the passes and limits in use.

        Parameters
        ----------
        folder : path
            Made if it is not there; never inside the demo campaigns that came with the kit.
        """
        with self.lock:
            self.saved = ()
            shown = Shown(self.campaign, self.axis, self.fmap, self.results, self.stale, self.notes)
            self._do(lambda _: self._save(folder, shown), "writing", lasting=True)

    @property
    def notes(self) -> tuple[Finding, ...]:
        """Every departure from the campaign file that what is shown rests on."""
        return () if self.axis is None else self._mapped.notes(self.axis, self.added)

    def _open(self, source: str | os.PathLike[str] | Campaign, tell: Tell) -> None:
        if self._try("reading the campaign", lambda: self._read(source, tell)):
            self._solve(tell)

    def _read(self, source: str | os.PathLike[str] | Campaign, tell: Tell) -> None:
        """Read a campaign; what was kept for it is taken up even where it cannot be read."""
        try:
            if isinstance(source, Campaign):
                self.source, campaign = source.path, source
            else:
                path = Path(source).expanduser()
                self.source = path / CAMPAIGN_FILE if is_folder(path) else path
                campaign = load(path, tell=tell)
            self._go_on()
            with self.lock:
                self._take(campaign)
        except FieldmapError:
            with self.lock:
                self._restore_kept()
            raise
        finally:
            with self.lock:
                self._tell("campaign")

    def _take(self, campaign: Campaign) -> None:
        """Begin with all of a campaign, and with what was kept for it."""
        first = self.campaign is None
        self.campaign, self.axis = campaign, campaign.axis if first else self._axis_of(campaign)
        self.active = (True,) * len(campaign.passes)
        self.trusted = (True,) * len(campaign.references)
        self.offers = Offers()
        self.source = campaign.path
        self._maps = KeptMaps()
        if first:
            self._restore_kept()

    def _axis_of(self, campaign: Campaign) -> Axis:
        """Its axis, unless another was set by hand."""
        assert self.campaign is not None
        assert self.axis is not None
        return campaign.axis if self.axis == self.campaign.axis else self.axis

    def _restore_kept(self) -> None:
        """Take up what was kept for the campaign file, if this state keeps anything."""
        if self.keeps and self.source is not None:
            values, told = self.settings.read(self.source)
            self.notice = " ".join(filter(None, [told, *self._restore(values)]))

    def _restore(self, values: Mapping[str, Any]) -> list[str]:
        """Set what was kept without keeping it anew at every step."""
        self._restoring = True
        try:
            return self.settings.restore(values)
        finally:
            self._restoring = False

    def _save(self, folder: str | os.PathLike[str], shown: Shown) -> None:
        written: list[Path] = []
        self._try("writing", lambda: written.extend(shown.write(folder)))
        with self.lock:
            self.saved = tuple(written)
            self._tell("saved")

    def _solve(self, tell: Tell) -> None:
        with self.lock:
            self._go_on()  # the campaign may be gone
            wanted = self._choice
            self._errors.clear()
            if not self.background:
                self.fmap = self.results = None
        found: list[xr.Dataset] = []

        def solved(campaign: Campaign, spacing: float | None) -> xr.Dataset:
            return stitch(campaign, knot_spacing=spacing, tell=tell)

        self._try("solving", lambda: found.append(self._maps.of(wanted, solved)))
        with self.lock:
            self._go_on()  # under the lock: nobody asks for another one now
            self.fmap = found[0] if found else None
            self.profiles = map_lines(found[0]) if found else []
            self._mapped = wanted if found else NOTHING
            if found and wanted.campaign is not None:
                self.offers.see(found[0], wanted.campaign)
            self._tell("map")
            self._evaluate()

    def _evaluate(self) -> None:
        self.results = None
        if self.fmap is not None:
            self._errors.clear()
            self.attempt("evaluating", self._take_results)
        self._tell("results")

    def _take_results(self) -> None:
        assert self.fmap is not None
        assert self.axis is not None
        check_order(self.axis)
        marked = with_axis(self.fmap, self.axis, self.notes)
        self.results = evaluate(
            marked, self.campaign, axis=self.axis, fringe=False, profiles=self.profiles
        )
