"""Whether a file that another program writes is whole: it has stood still, and its end is one."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, NamedTuple

from fieldmap.readings.netcdf_table import is_netcdf

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

__all__ = ["Settling", "Stamp", "stamp_of"]

BINARY: Final = ".nc"
HEAD: Final = 8  # bytes at the beginning of a file that tell NetCDF from text
BREAKS: Final = (b"\n", b"\r")
TAIL: Final = 64  # bytes at the end of a file by which it is known again
WAIT: Final = "it has to stand still for a while"
LONGEST: Final = 30.0  # s; what goes on later is a file that somebody has taken up again
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


@dataclass
class _Sight:
    """A file as it was seen, since when it has been so, s, and its last bytes."""

    stamp: Stamp
    since: float
    tail: bytes
    whole: bool = False


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
            return "it is being written" if sight else WAIT
        if sight.whole:
            return ""
        if now - sight.since < max(self.still, CAREFUL * self._longest):
            return WAIT
        why = _why_unended(path, stamp, sight.tail)
        sight.whole = not why
        return why

    def _note(self, path: Path, sight: _Sight | None, stamp: Stamp, now: float) -> None:
        """Keep a new sight; a file that went on after it looked whole teaches patience."""
        if sight is not None and _went_on(path, sight, stamp):
            pause = now - sight.since
            if pause <= LONGEST:
                self._longest = max(self._longest, pause)
        self._seen[path] = _Sight(stamp, now, _bytes_before(path, stamp.size))


def _went_on(path: Path, sight: _Sight, stamp: Stamp) -> bool:
    """Whether more stands behind what was a whole file to all appearances."""
    before = sight.stamp
    return (
        before.identity == stamp.identity
        and 0 < before.size < stamp.size
        and not _why_unended(path, before, sight.tail)
        and _bytes_before(path, before.size) == sight.tail
    )


def _bytes_before(path: Path, end: int) -> bytes:
    """The bytes before a place of a file; fewer where it cannot be read."""
    start = max(end - TAIL, 0)
    try:
        with path.open("rb") as file:
            file.seek(start)
            return file.read(end - start)
    except OSError:
        return b""


def _why_unended(path: Path, stamp: Stamp, tail: bytes) -> str:
    """Why the end of a file is none."""
    if stamp.size == 0:
        return "it is empty"
    if tail.endswith(BREAKS) or path.suffix.lower() == BINARY:
        return ""
    if is_netcdf(_bytes_before(path, HEAD)):
        return ""
    return (
        "its last line has no end: it is being written, or the bench ended without a line break; "
        "if so, add one, or stop following and read the campaign again"
    )
