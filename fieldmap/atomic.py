"""Files written whole or not at all: write aside, then rename."""

from __future__ import annotations

import contextlib
import os
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING

from fieldmap.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["output_folder", "replacing"]


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
        A new name in the same folder.

    Raises
    ------
    InputError
        The folder cannot be written, or the disk is full.
    """
    try:
        handle, name = tempfile.mkstemp(prefix=f".{path.name}.", suffix=".part", dir=path.parent)
        os.close(handle)
    except OSError as error:
        raise _cannot_write(path, error) from error
    aside = Path(name)
    try:
        yield aside
        with aside.open("rb") as written:
            os.fsync(written.fileno())
        aside.chmod(0o666 & ~_umask())
        aside.replace(path)
    except OSError as error:
        raise _cannot_write(path, error) from error
    finally:
        aside.unlink(missing_ok=True)


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
        raise InputError(str(folder), "a file", "a folder", "name another folder") from error
    except OSError as error:
        raise _cannot_write(folder, error) from error
    return folder


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _cannot_write(path: Path, error: OSError) -> InputError:
    return InputError(
        str(path),
        f"that it cannot be written ({error.strerror or error})",
        "a folder with room that you may write to",
        "name another folder or make room; nothing was replaced",
    )
