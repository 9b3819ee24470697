"""Keep what was made of a map lately, so that a figure that is drawn again need not make it."""

from __future__ import annotations

import weakref
from typing import TYPE_CHECKING, Any, Final, Generic, TypeVar

if TYPE_CHECKING:
    from collections.abc import Callable

    import xarray as xr

__all__ = ["KeptByMap"]

MOST: Final = 8
T = TypeVar("T")


class KeptByMap(Generic[T]):
    """A function of a map that remembers its last answers.

    A map is known by its identity: it must not be changed in place. It is not kept alive.

    Parameters
    ----------
    make : callable
        Takes a map and hashable arguments.

    Examples
    --------
    >>> import xarray as xr
    >>> fmap, asked = xr.Dataset(), []
    >>> count = KeptByMap(lambda fmap, key: asked.append(key) or len(asked))
    >>> count(fmap, "a"), count(fmap, "b"), count(fmap, "a")
    (1, 2, 1)
    """

    def __init__(self, make: Callable[..., T]) -> None:
        self._make = make
        self._kept: list[tuple[weakref.ref[xr.Dataset], tuple[Any, ...], T]] = []

    def __call__(self, fmap: xr.Dataset, *key: Any) -> T:
        """What the function gives, made once for each map and arguments."""
        for known, arguments, made in self._kept:
            if known() is fmap and arguments == key:
                return made
        made = self._make(fmap, *key)
        self._kept.insert(0, (weakref.ref(fmap), key, made))
        del self._kept[MOST:]
        return made
