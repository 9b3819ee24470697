"""What an HDF5 file must not do: lead to other files, or claim far more than it holds."""

from __future__ import annotations

import io
import math
from typing import TYPE_CHECKING, Any, Final, cast

from fieldmap.errors import InputError
from fieldmap.units import quoted

if TYPE_CHECKING:
    import h5py

__all__ = ["BASE", "EXPANSION", "check_hdf5", "most_bytes"]

# A small file may declare any number of values that it does not hold. A record of a measurement
# packs a few times; a short one of even steps packs better, so a fixed base comes on top.
EXPANSION: Final = 4
BASE: Final = 100_000_000  # bytes


def most_bytes(size: int) -> int:
    """Most bytes that the values of a file of that size may take in memory."""
    return EXPANSION * size + BASE


def check_hdf5(data: bytes, file: str, *, whole: bool = False) -> None:
    """Refuse HDF5 that would read other files, or fill the memory.

    Parameters
    ----------
    data : bytes
        The whole file.
    file : str
        Its name, for errors.
    whole : bool
        Whether all variables are going to be read: then they must fit together.

    Raises
    ------
    InputError
        External links, raw or virtual data in other files, and values that the file cannot hold.
    Exception
        Whatever a damaged file makes the library raise.
    """
    import h5py

    with h5py.File(io.BytesIO(data), "r") as root:
        _refuse_links(root, file)
        attributes, values = _attribute_bytes(root), 0
        for name in root:
            item = cast("object", root.get(name))
            if not isinstance(item, h5py.Dataset):
                continue
            where = f"{file}, variable {quoted(str(name))}"
            if item.external or item.is_virtual:
                raise _outside(where)
            _check_bytes(_chunk_bytes(item), len(data), where)
            attributes += _attribute_bytes(item)
            values += (item.size or 0) * max(item.dtype.itemsize, 8) if whole else 0
            _check_bytes(attributes + values, len(data), where)
        _check_bytes(attributes, len(data), file)


def _refuse_links(root: h5py.File, file: str) -> None:
    """Refuse links to other files, in any group: a link within the file may lead to one."""
    from h5py import h5l

    def look(name: bytes, info: Any) -> bytes | None:
        # the walk ends with what is not None; an error raised here would be lost
        return None if info.type in {h5l.TYPE_HARD, h5l.TYPE_SOFT} else name

    name: bytes | None = root.id.links.visit(look, info=True)
    if name is not None:
        raise _outside(f"{file}, variable {quoted(name.decode(errors='replace'))}")


def _chunk_bytes(item: h5py.Dataset) -> int:
    """Memory that one chunk takes when it is unpacked."""
    size: int = math.prod(item.chunks or (0,)) * item.dtype.itemsize
    return size


def _attribute_bytes(item: h5py.Dataset | h5py.File) -> int:
    """Memory that the attributes take."""
    each = (item.attrs.get_id(name) for name in item.attrs)
    return sum(math.prod(one.shape or (1,)) * int(one.dtype.itemsize) for one in each)


def _check_bytes(total: int, size: int, where: str) -> None:
    if total > most_bytes(size):
        found = f"values of {total:.3g} bytes declared in a file of {size} bytes"
        raise InputError(where, found, "values that the file holds", "write the file again")


def _outside(where: str) -> InputError:
    remedy = "store the values in the file itself"
    return InputError(where, "data kept in another file", "values", remedy)
