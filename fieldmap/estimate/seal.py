"""A seal on a map: the hash of all that it holds, so that a changed number cannot pass unseen."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING, Any, Final

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Mapping

    import xarray as xr

__all__ = ["SEAL", "content_digest"]

SEAL: Final = "content_sha256"
"""Attribute of a written map that holds its digest."""


def content_digest(fmap: xr.Dataset) -> str:
    """Hash of every variable and attribute of a map but the seal itself.

    Parameters
    ----------
    fmap : xarray.Dataset
        In memory, as it is going to be written or as it was read.

    Returns
    -------
    str
        SHA-256, 64 hexadecimal digits. It depends on names, dimensions, types, shapes, values to
        the last bit and attributes, not on their order, on compression or on the byte order.

    Examples
    --------
    >>> import xarray as xr
    >>> one, other = (xr.Dataset({"B": ("z", [b])}) for b in (0.5, 0.5000000000000001))
    >>> content_digest(one) == content_digest(one.copy())
    True
    >>> content_digest(one) == content_digest(other)
    False
    """
    sha = hashlib.sha256()
    for name in sorted(fmap.variables, key=str):
        variable = fmap.variables[name]
        values = _plain_bytes(variable.values)
        told = (str(name), name in fmap.coords, variable.dims, variable.shape, variable.dtype.kind)
        _add(sha, repr((told, variable.dtype.itemsize, _plain(variable.attrs))).encode(**_ANY))
        _add(sha, values)
    attributes = {key: value for key, value in fmap.attrs.items() if key != SEAL}
    _add(sha, repr(_plain(attributes)).encode(**_ANY))
    return sha.hexdigest()


_ANY: Final = {"encoding": "utf-8", "errors": "surrogatepass"}


def _add(sha: Any, part: bytes) -> None:
    """Add a part with its length, so that parts cannot run into one another."""
    sha.update(len(part).to_bytes(8, "little"))
    sha.update(part)


def _plain_bytes(values: np.ndarray[Any, Any]) -> bytes:
    """Bytes of an array in one byte order, every not-a-number alike."""
    if values.dtype.kind not in "biuf":
        return repr(values.tolist()).encode(**_ANY)
    if values.dtype.kind == "f":
        values = np.where(np.isnan(values), np.nan, values)
    return np.ascontiguousarray(values, dtype=values.dtype.newbyteorder("<")).tobytes()


def _plain(attributes: Mapping[Any, Any]) -> list[tuple[str, str, Any]]:
    """Attributes in the order of their names, with plain Python values."""
    return sorted(
        (str(key), type(value).__name__, value.tolist() if hasattr(value, "tolist") else value)
        for key, value in attributes.items()
    )
