"""Whether a file that another program writes is whole: it has stood still, and its end is one."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, NamedTuple

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

__all__ = ["Settling", "Stamp", "stamp_of"]

TEXT: Final = frozenset({".csv", ".txt"})
BREAKS: Final = (b"\n", b"\r")
CAREFUL: Final = 2.0  # a pause is taken for the end only after so many times the longest one seen


class Stamp(NamedTuple):
    """What changes when a file is written: size in bytes, time in ns, and which file it is."""

    size: int
    modified: int
    identity: int


def stamp_of(path: Path) -> Stamp | None:
    """The stamp of a regular file; None where there is none."""
    try:
        found = path.stat()
        regular = path.is_file()
    except (OSError, ValueError):
        return None
    return Stamp(found.st_size, found.st_mtime_ns, found.st_ino) if regular else None


@dataclass(frozen=True)
class _Sight:
    """A file as it was seen, and since when it has been so, s."""

    stamp: Stamp
    since: float


class Settling:
    r"""Looks at files again and again.

    Parameters
    ----------
    still : float
        How long a file has to stand still, s; longer for one that has gone on after a pause.
    clock : callable
        A clock that never goes back, s.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "pass_01.csv"
    >>> _ = path.write_text("time [s],position [mm],flux [uV s]\n0,0,0\n")
    >>> now = iter([0.0, 1.5])
    >>> settling = Settling(clock=lambda: next(now))
    >>> settling.why_not(path)
    'it has to stand still for a while'
    >>> settling.why_not(path)
    ''
    """

    def __init__(self, still: float = 1.0, clock: Callable[[], float] = time.monotonic) -> None:
        self.still, self.clock = still, clock
        self._seen: dict[Path, _Sight] = {}
        self._longest = 0.0  # pause after which any file went on, s

    def why_not(self, path: Path) -> str:
        """Why a file is not taken as whole yet; empty if it is.

        Parameters
        ----------
        path : Path
            The file.

        Returns
        -------
        str
            Words to go behind its name.
        """
        now, stamp = self.clock(), stamp_of(path)
        if stamp is None:
            self._seen.pop(path, None)
            return "it is not there"
        sight = self._seen.get(path)
        if sight is None or sight.stamp != stamp:
            self._note(path, sight, stamp, now)
            return "it is being written" if sight else "it has to stand still for a while"
        if stamp.size == 0:
            return "it is empty"
        if now - sight.since < max(self.still, CAREFUL * self._longest):
            return "it has to stand still for a while"
        return _unended(path)

    def _note(self, path: Path, sight: _Sight | None, stamp: Stamp, now: float) -> None:
        grown = sight is not None and stamp.identity == sight.stamp.identity
        if sight is not None and grown and 0 < sight.stamp.size < stamp.size:
            self._longest = max(self._longest, now - sight.since)
        self._seen[path] = _Sight(stamp, now)


def _unended(path: Path) -> str:
    """Why the end of a text file is none."""
    if path.suffix.lower() not in TEXT:
        return ""
    try:
        with path.open("rb") as file:
            file.seek(-1, 2)
            last = file.read(1)
    except OSError as error:
        return f"it cannot be read ({error.strerror or error})"
    if last in BREAKS:
        return ""
    return (
        "its last line has no end: it is being written, or the bench ended without a line break; "
        "if so, add one, or stop following and read the campaign again"
    )
