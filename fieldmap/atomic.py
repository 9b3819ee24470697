"""Files written whole or not at all, alone or as a set that belongs together.

New files are written into a folder of their own beside the old ones and brought to the disk. A
single file then takes the place of the old one in one step. A set cannot, so its folder gets the
name `DONE` in one step: from there on the new set counts. Its files are moved to their places;
where that was broken off, whoever writes or reads there next finishes it (`settle`).

A lock on the folder (`folder_lock`) keeps two runs apart while they put their files in place.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import shutil
import stat
from pathlib import Path
from typing import TYPE_CHECKING, Final

from fieldmap.errors import InputError
from fieldmap.folder_lock import HOST, Busy, held, is_abandoned, locked

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

__all__ = [
    "DONE",
    "holds_files",
    "is_folder",
    "new_folder",
    "output_folder",
    "replacing",
    "replacing_set",
    "settle",
]

DONE: Final = ".fieldmap.done"  # a whole set on the way to its places
PREFIX: Final = ".fieldmap-"
SUFFIX: Final = ".part"


@contextlib.contextmanager
def replacing(path: Path) -> Iterator[Path]:
    """Give a path to write to; it takes the place of `path` only when all went well.

    Parameters
    ----------
    path : Path
        The file to make or replace.

    Yields
    ------
    Path
        The same name in a new folder beside it.

    Raises
    ------
    InputError
        The folder cannot be written, the disk is full, or no plain file stands there.
    """
    with replacing_set(path.parent, [path.name]) as (aside,):
        yield aside


@contextlib.contextmanager
def replacing_set(folder: Path, names: Sequence[str]) -> Iterator[tuple[Path, ...]]:
    """Give paths to write to; the files take their places together, or none does.

    Parameters
    ----------
    folder : Path
        Where the files belong; it is there already.
    names : sequence of str
        Their names.

    Yields
    ------
    tuple of Path
        The same names in a new folder within `folder`.

    Raises
    ------
    InputError
        The folder cannot be written, the disk is full, no plain file stands in the place of one,
        or another run holds the folder.
    """
    target = folder / names[0] if len(names) == 1 else folder
    try:
        for name in names:
            _check_place(folder / name)
        with _part(folder) as part:
            asides = tuple(part / name for name in names)
            yield asides
            for aside in asides:
                _sync(aside)
            _sync_folder(part)
            with locked(folder):
                _put_in_place(part, asides, folder)
    except Busy as error:
        raise _busy(folder) from error
    except OSError as error:
        if _is_own_folder(folder / DONE):
            raise _broken_off(folder, error) from error
        raise _cannot_write(target, error) from error


def settle(folder: Path) -> None:
    """Finish what was broken off while the files of a set were moved to their places.

    Parameters
    ----------
    folder : Path
        Where the files are; nothing is done where nothing was broken off.

    Raises
    ------
    InputError
        It cannot be finished, so that the files there do not belong together.
    """
    if not _is_own_folder(folder / DONE):
        return
    try:
        with locked(folder):
            _finish(folder)
    except Busy as error:
        raise _busy(folder) from error
    except OSError as error:
        raise _broken_off(folder, error) from error


def output_folder(path: str | os.PathLike[str]) -> Path:
    """Give the folder, made if it is not there.

    Raises
    ------
    InputError
        A file stands in its place, or it cannot be made.
    """
    folder = Path(path)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except FileExistsError as error:
        found = "a link that leads nowhere" if folder.is_symlink() else "a file"
        raise InputError(str(folder), found, "a folder", "name another folder") from error
    except OSError as error:
        raise _cannot_write(folder, error) from error
    except ValueError as error:  # a zero byte
        found = "a name that no folder can have"
        raise InputError(repr(str(folder)), found, "a folder", "name another folder") from error
    return folder


@contextlib.contextmanager
def new_folder(path: str | os.PathLike[str]) -> Iterator[Path]:
    """Give the folder, made if it is not there; what was made goes again where writing fails.

    Parameters
    ----------
    path : path
        The folder.

    Yields
    ------
    Path

    Raises
    ------
    InputError
        As for `output_folder`.
    """
    missing = []
    for place in (Path(path), *Path(path).parents):
        if os.path.lexists(place):
            break
        missing.append(place)
    try:
        yield output_folder(path)
    except BaseException:
        for place in missing:
            with contextlib.suppress(OSError):  # another run may have written there meanwhile
                place.rmdir()
        raise


def is_folder(path: str | os.PathLike[str]) -> bool:
    """Whether a folder stands there; a name that the system does not take is that of none."""
    return os.path.isdir(path)  # noqa: PTH112 - Path.is_dir raises where a name is too long


def holds_files(folder: Path) -> bool:
    """Whether there is anything in a folder but what a run left behind that was killed."""
    return any(not one.name.startswith(PREFIX) for one in folder.iterdir())


@contextlib.contextmanager
def _part(folder: Path) -> Iterator[Path]:
    """A folder for new files that is held as long as this process lives; removed at the end."""
    part = folder / f"{PREFIX}{HOST}-{secrets.token_hex(8)}{SUFFIX}"
    with contextlib.ExitStack() as stack:
        with locked(folder):
            _finish(folder)
            _remove_strays(folder)
            part.mkdir()
            stack.callback(shutil.rmtree, part, ignore_errors=True)
            stack.enter_context(held(part))
        yield part


def _put_in_place(part: Path, asides: Sequence[Path], folder: Path) -> None:
    """Let the new files count, from one instant on."""
    _finish(folder)
    for aside in asides:
        _check_place(folder / aside.name)
    if len(asides) == 1:
        asides[0].replace(folder / asides[0].name)
        _sync_folder(folder)
        return
    part.rename(folder / DONE)
    _sync_folder(folder)
    try:
        _finish(folder)
    except KeyboardInterrupt:  # too late to stop: all or none
        _finish(folder)
        raise


def _finish(folder: Path) -> None:
    """Move the files of a whole set to their places."""
    done = folder / DONE
    if not _is_own_folder(done):
        return
    for file in sorted(done.iterdir()):
        file.replace(folder / file.name)
    _sync_folder(folder)  # only now may the name go that tells of the set
    done.rmdir()


def _remove_strays(folder: Path) -> None:
    """Remove what runs left behind that were killed."""
    with contextlib.suppress(OSError):  # a folder that cannot be listed can be written all the same
        for stray in list(folder.iterdir()):
            own = stray.name.startswith(PREFIX) and stray.name.endswith(SUFFIX)
            if own and _is_own_folder(stray) and is_abandoned(stray):
                shutil.rmtree(stray, ignore_errors=True)


def _is_own_folder(path: Path) -> bool:
    """Whether a folder stands there, and no link to one."""
    try:
        return stat.S_ISDIR(path.lstat().st_mode)
    except OSError:
        return False


def _check_place(path: Path) -> None:
    """Refuse to replace what is no plain file."""
    try:
        mode = path.lstat().st_mode
    except FileNotFoundError:
        return
    if stat.S_ISREG(mode):
        return
    kind = "a link" if stat.S_ISLNK(mode) else "a folder" if stat.S_ISDIR(mode) else "a device"
    remedy = "name another file, or move what stands there away; nothing was replaced"
    raise InputError(str(path), kind, "a file or nothing", remedy)


def _sync(path: Path) -> None:
    """Bring a file to the disk."""
    with path.open("r+b") as written:  # Windows syncs what is open for writing only
        os.fsync(written.fileno())


def _sync_folder(folder: Path) -> None:
    """Bring the names in a folder to the disk, where the system can."""
    with contextlib.suppress(PermissionError):  # no system but POSIX opens folders
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def _cannot_write(path: Path, error: OSError) -> InputError:
    return InputError(
        str(path),
        f"that it cannot be written ({error.strerror or error})",
        "a folder with room that you may write to",
        "name another folder or make room; nothing was replaced",
    )


def _broken_off(folder: Path, error: OSError) -> InputError:
    why = error.strerror or error
    return InputError(
        str(folder),
        f"new files on the way to their places, which cannot be finished ({why})",
        "a folder that you may write to",
        f"make that possible and run this again, or move the files in {DONE} by hand",
    )


def _busy(folder: Path) -> InputError:
    return InputError(
        str(folder),
        "that another run has been putting files there for a while",
        "one run at a time",
        "wait for it and run this again, or name another folder; nothing was replaced",
    )
