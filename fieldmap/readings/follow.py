"""Follow a folder while the bench writes passes into it; a file is never read half."""

from __future__ import annotations

import posixpath
import time
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final, NamedTuple

from fieldmap.errors import InputError
from fieldmap.readings.campaign import load_part
from fieldmap.readings.layout import TableLayout, read_layout
from fieldmap.readings.records import SAMPLES
from fieldmap.readings.settled import Settling, Stamp, stamp_of
from fieldmap.readings.tables import read_table
from fieldmap.readings.toml_text import parse_toml

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from fieldmap.readings.passes import Campaign, Pass, Record

__all__ = ["Follower", "News", "Offer", "Waiting"]

TABLES: Final = frozenset({".csv", ".txt", ".nc"})
GONE: Final = Stamp(-1, 0, 0)
CHANGED: Final = "it was written to while it was read"


@dataclass(frozen=True)
class Waiting:
    """A file that is not taken yet, and why."""

    name: str
    why: str


@dataclass(frozen=True)
class Offer:
    """A table in the folder that the campaign does not name, and what it records."""

    name: str
    record: Record


@dataclass(frozen=True)
class News:
    """What one look at the folder gave.

    Parameters
    ----------
    campaign : Campaign or None
        With the passes that are whole; None where nothing has changed since the last look.
    waiting : tuple of Waiting
        Passes that are not taken yet.
    offers : tuple of Offer
        Whole tables that the campaign does not name.
    error : str
        Why the campaign cannot be read, in words; empty if it can.
    added : tuple of str
        Passes of the campaign that its file does not name.
    probes : tuple of str
        Names of the probes that an offered table may have been recorded with.
    """

    campaign: Campaign | None
    waiting: tuple[Waiting, ...] = ()
    offers: tuple[Offer, ...] = ()
    error: str = ""
    added: tuple[str, ...] = ()
    probes: tuple[str, ...] = ()


class _Taken(NamedTuple):
    """A pass with the stamp of its file, or why that file is of no use as it stands."""

    stamp: Stamp
    one: Pass | None
    why: str = ""


class Follower:
    """Reads a campaign again and again while it grows.

    Parameters
    ----------
    path : path
        The campaign file.
    still : float
        How long a file has to stand still before it is read, s.
    clock : callable
        A clock that never goes back, s.

    Notes
    -----
    A file is read once it has stood still (size, time, identity) for `still` seconds over two
    looks, longer if a file of this folder was seen to go on after a longer pause; the last line
    of a text has to end. A file that changes while it is read, or later, is left out again until
    it stands still.

    Examples
    --------
    >>> from fieldmap.shipped import demo_folder
    >>> now = iter(range(1000))
    >>> follower = Follower(demo_folder() / "slot" / "campaign.toml", clock=lambda: next(now))
    >>> follower.look().campaign is None
    True
    >>> follower.look().campaign.passes[0].name
    'pass_01.csv'
    >>> follower.look().campaign is None
    True
    """

    def __init__(
        self,
        path: str | Path,
        *,
        still: float = 1.0,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.path = Path(path)
        self._clock = clock
        self._begun: float | None = None
        self._settling = Settling(still, clock)
        self._passes: dict[Path, _Taken] = {}
        self._records: dict[Path, tuple[Stamp, Record | None]] = {}
        self._adopted: dict[str, dict[str, Any]] = {}
        self._stamp: Stamp | None = None
        self._given: tuple[str, tuple[tuple[str, str], ...]] | None = None
        self._why: dict[str, str] = {}

    @property
    def adopted(self) -> dict[str, str]:
        """Probe of each file that was taken in without being named in the campaign file."""
        return {name: entry["probe"] for name, entry in self._adopted.items()}

    def adopt(self, name: str, probe: str, record: Record | None = None) -> None:
        """Take a file in as a pass from the next look on.

        Parameters
        ----------
        name : str
            Of the file, in the folder of the campaign.
        probe : str
            The probe it was recorded with; for the rest it is like the last pass in the campaign
            file with that probe.
        record : {"cumulative", "increments", "voltage"}, optional
            Found out from its columns if not given.

        Raises
        ------
        InputError
            A name that leads elsewhere.
        """
        if Path(name).name != name or not name.strip("."):
            raise InputError("file", repr(name), "a file in the folder of the campaign")
        entry = {"probe": probe, **({"record": record} if record else {})}
        self._adopted = {**self._adopted, name: entry}  # a look may be going through the old one
        self.again()

    def again(self) -> None:
        """Give the campaign at the next look even if nothing has changed."""
        self._given = None

    def look(self) -> News:
        """Look at the folder.

        Returns
        -------
        News
            In the first `still` seconds without a campaign: nothing can have stood still yet.
        """
        now = self._clock()
        if self._begun is None:
            self._begun, self._stamp = now, stamp_of(self.path)
        if not self._campaign_file_is_still():
            return News(None, (Waiting(self.path.name, "it is being written"),))
        self._why = {}
        try:
            raw = self._raw()
            part = load_part(self.path, self._take, extra=self._extra(raw))
        except InputError as error:
            self._given = None
            return News(None, error=str(error))
        waiting = tuple(Waiting(n, self._why.get(n, "it is not there")) for n in part.awaited)
        offers, probes = self._offers(raw, part.awaited), tuple(raw["probes"])
        passes = part.campaign.passes
        state = part.campaign.sha256, tuple((one.name, one.sha256) for one in passes)
        if state == self._given or now - self._begun < self._settling.still:
            return News(None, waiting, offers, probes=probes)
        self._given = state
        added = tuple(one.name for one in passes if one.name in self._adopted)
        return News(part.campaign, waiting, offers, added=added, probes=probes)

    def _campaign_file_is_still(self) -> bool:
        """Whether the campaign file is as at the last look; if not, forget what was read by it."""
        before, self._stamp = self._stamp, stamp_of(self.path)
        if self._stamp == before:
            return True
        self._passes.clear()
        self.again()
        return False

    def _take(self, path: Path, read: Callable[[], Pass]) -> Pass | None:
        """The pass of a file that is whole; None, with a reason, for one that is not."""
        why = self._settling.why_not(path)
        if why:
            self._passes.pop(path, None)
        else:
            taken = self._passes.get(path)
            if taken is None or taken.stamp != stamp_of(path):
                taken = self._passes[path] = _read_still(path, read)
            if taken.one is not None:
                return taken.one
            why = taken.why
        self._why[self._name(path)] = why
        return None

    def _name(self, path: Path) -> str:
        return path.relative_to(self.path.parent.resolve()).as_posix()

    def _raw(self) -> dict[str, Any]:
        """The campaign file as TOML; what is wrong with it `load_part` says better."""
        try:
            return parse_toml(self.path.read_bytes().decode("utf-8-sig"))
        except (OSError, ValueError, RecursionError):
            return {}

    def _extra(self, raw: Mapping[str, Any]) -> list[dict[str, Any]]:
        """Entries of [[passes]] for the files that were taken in; one named meanwhile is not."""
        named, probes = _named(raw), raw.get("probes", {})
        return [
            self._entry(name, entry, raw)
            for name, entry in self._adopted.items()
            if name not in named and entry["probe"] in probes and self._beside(name).is_file()
        ]

    def _entry(self, name: str, entry: Mapping[str, Any], raw: Mapping[str, Any]) -> dict[str, Any]:
        """An entry of [[passes]]: for the rest like the last one with the same probe."""
        alike = [one for one in _entries(raw) if one.get("probe") == entry["probe"]]
        like: dict[str, Any] = next((one for one in reversed(alike) if "file" in one), {})
        record = entry.get("record") or self._record_of(self._beside(name), raw)
        return {**like, "record": record or "cumulative", **entry, "file": name}

    def _beside(self, name: str) -> Path:
        return self.path.parent / name

    def _offers(self, raw: Mapping[str, Any], awaited: tuple[str, ...]) -> tuple[Offer, ...]:
        """Whole tables beside the campaign file that nobody names."""
        taken = _named(raw) | set(self._adopted) | set(awaited)
        try:
            files = sorted(self.path.parent.iterdir())
        except OSError:
            return ()
        found = []
        for file in files:
            plain = file.suffix.lower() in TABLES and not file.name.startswith(".")
            if plain and file.name not in taken and not self._settling.why_not(file):
                record = self._record_of(file, raw)
                if record is not None:
                    found.append(Offer(file.name, record))
        return tuple(found)

    def _record_of(self, file: Path, raw: Mapping[str, Any]) -> Record | None:
        """What a table records, by trying; found out once for every state of the file."""
        stamp = stamp_of(file)
        if stamp is None:
            return None
        known = self._records.get(file)
        if known is None or known[0] != stamp:
            known = self._records[file] = (stamp, _readable_as(file, _layout(raw)))
        return known[1]


def _read_still(path: Path, read: Callable[[], Pass]) -> _Taken:
    """Read a pass if its file is the same before and after."""
    before = stamp_of(path) or GONE
    try:
        one = read()
    except InputError as error:
        return _Taken(before, None, str(error).rstrip("."))
    if stamp_of(path) != before:
        return _Taken(before, None, CHANGED)
    return _Taken(before, one)


def _entries(raw: Mapping[str, Any]) -> list[dict[str, Any]]:
    passes = raw.get("passes", [])
    return [one for one in passes if isinstance(one, dict)] if isinstance(passes, list) else []


def _named(raw: Mapping[str, Any]) -> set[str]:
    """Files that the campaign file names, without detours."""
    names = (str(one["file"]).replace("\\", "/") for one in _entries(raw) if "file" in one)
    return {posixpath.normpath(name) for name in names}


def _layout(raw: Mapping[str, Any]) -> TableLayout:
    return read_layout(raw.get("table", {}), "[table]")


def _readable_as(file: Path, layout: TableLayout) -> Record | None:
    """The first kind of record that a table can be read as."""
    for record, (samples, _) in SAMPLES.items():
        try:
            read_table(file, layout, samples=samples)
        except InputError:
            continue
        return record
    return None
