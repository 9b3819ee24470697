"""Locks on folders: they end with the process that holds them, so that none can be left behind.

Where the system or the disk knows no such locks (Windows; a few network disks), all goes on
without: each file stays whole, but two runs at the same instant are not kept apart. A network
disk keeps apart the runs of one machine only.
"""

from __future__ import annotations

import contextlib
import os
import platform
import time
import zlib
from typing import TYPE_CHECKING, Any, Final

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

__all__ = ["HOST", "Busy", "held", "is_abandoned", "locked"]

HOST: Final = f"{zlib.crc32(platform.node().encode()):08x}"  # another machine's locks do not show
WAIT: Final = 10.0  # s
AGAIN: Final = 0.02  # s
LONG: Final = 86_400.0  # s; no run writes for so long


def _locks_of_the_system() -> Any:
    """The module with the locks; None on Windows."""
    try:
        import fcntl
    except ImportError:
        return None
    return fcntl


fcntl = _locks_of_the_system()


class Busy(Exception):  # noqa: N818 - no error, but a state that the caller puts into words
    """Another run holds the folder."""


@contextlib.contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold a folder, after waiting for others who do.

    Raises
    ------
    Busy
        Somebody else has held it all the time.
    """
    with _opened(folder) as handle:
        end = time.monotonic() + WAIT
        while _lock(handle) is False:
            if time.monotonic() > end:
                raise Busy
            time.sleep(AGAIN)
        yield


@contextlib.contextmanager
def held(folder: Path) -> Iterator[None]:
    """Hold a folder of one's own as a sign of life."""
    with _opened(folder) as handle:
        _lock(handle)
        yield


def is_abandoned(folder: Path) -> bool:
    """Whether the run that held a folder as a sign of life is gone.

    Where locks do not tell, it is taken to be gone after a day.
    """
    with _opened(folder) as handle:
        free = _lock(handle)
    if free is None or f"-{HOST}-" not in folder.name:
        return time.time() - folder.stat().st_mtime > LONG
    return free


@contextlib.contextmanager
def _opened(folder: Path) -> Iterator[int | None]:
    """A handle of a folder; None where there is no way to lock one."""
    if fcntl is None:
        yield None
        return
    try:
        handle = os.open(folder, os.O_RDONLY)
    except PermissionError:  # a folder that may be written but not listed
        yield None
        return
    try:
        yield handle
    finally:
        os.close(handle)


def _lock(handle: int | None) -> bool | None:
    """Try to lock; None where there are no locks."""
    if handle is None:
        return None
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    except OSError:
        return None
    return True
