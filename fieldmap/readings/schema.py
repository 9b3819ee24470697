"""Keys of a campaign file: a section is a tuple of keys, a key is a name and a reader.

A reader takes the raw TOML value and the place it stands at and gives the checked value in SI.
New kinds of values are new readers here; new keys are one line each in ``sections``.
"""

from __future__ import annotations

import difflib
import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Final, Literal

from fieldmap.errors import InputError
from fieldmap.readings.checks import LARGEST
from fieldmap.units import quoted, si

__all__ = [
    "Bound",
    "Key",
    "Reader",
    "as_list",
    "as_table",
    "choice",
    "flag",
    "key_place",
    "listed",
    "nearest",
    "number",
    "one_of",
    "quantity",
    "read_section",
    "shown",
    "span",
    "text",
    "whole",
]

Reader = Callable[[object, str], Any]
Bound = Literal["any", "positive", "not negative", "not zero"]

_BOUNDS: Final[dict[Bound, tuple[Callable[[float], bool], str]]] = {
    "any": (math.isfinite, "a finite value"),
    "positive": (lambda value: value > 0.0, "a value above zero"),
    "not negative": (lambda value: value >= 0.0, "zero or a value above it"),
    "not zero": (lambda value: value != 0.0, "a value other than zero"),
}
_LONGEST_TEXT: Final = 200
SMALLEST: Final = 1e-30  # nothing on a bench is smaller, and its square is still a number


@dataclass(frozen=True)
class Key:
    """One key of a section.

    Parameters
    ----------
    name : str
        As written in the file.
    read : callable
        Turns the raw value and its place into the checked value.
    required : bool
        Whether the key must be there.
    field : str
        Name of the argument it fills; the key's own name if empty.
    """

    name: str
    read: Reader
    required: bool = False
    field: str = ""

    @property
    def target(self) -> str:
        """Name of the argument that the key fills."""
        return self.field or self.name


def read_section(raw: object, keys: Sequence[Key], place: str) -> dict[str, Any]:
    """Check one table of a campaign file against its keys.

    Parameters
    ----------
    raw : object
        The value that the TOML reader gave.
    keys : sequence of Key
        What may stand there.
    place : str
        Such as ``"campaign.toml, [magnet]"``.

    Returns
    -------
    dict
        The checked values of the keys that are present, by target name.

    Raises
    ------
    InputError
        If `raw` is not a table, a key is unknown or missing, or a value does not fit.

    Examples
    --------
    >>> read_section({"gap": "30 mm"}, [Key("gap", quantity("m"))], "campaign.toml, [magnet]")
    {'gap': 0.03}
    """
    table = as_table(raw, place)
    known = {key.name: key for key in keys}
    for name in table:
        if name not in known:
            raise _unknown_key(name, known, place)
    values: dict[str, Any] = {}
    for key in keys:
        if key.name in table:
            values[key.target] = key.read(table[key.name], key_place(place, key.name))
        elif key.required:
            needed = listed(other.name for other in keys if other.required)
            raise InputError(place, f"no key {key.name!r}", f"the keys {needed}", "add it")
    return values


def key_place(place: str, name: str) -> str:
    """Name the place of a key."""
    return f"{place}, key {quoted(name)}"


def as_table(raw: object, place: str) -> dict[str, Any]:
    """Give `raw` if it is a TOML table, or raise."""
    if isinstance(raw, dict):
        return raw
    raise InputError(place, shown(raw), "a table of keys", "write it as a [section] of its own")


def as_list(raw: object, place: str) -> list[Any]:
    """Give `raw` if it is a list, or raise."""
    if isinstance(raw, list):
        return raw
    raise InputError(place, shown(raw), "a list", "write each entry under double square brackets")


def shown(raw: object) -> str:
    """Show a TOML value in an error's sentence."""
    if isinstance(raw, str):
        return quoted(raw)
    if isinstance(raw, bool):
        return str(raw).lower()
    if isinstance(raw, int | float):
        return repr(raw) if abs(raw) < 10**15 or isinstance(raw, float) else "a huge number"
    names: dict[type, str] = {dict: "a table", list: "a list"}
    return names.get(type(raw), f"the {type(raw).__name__} {raw}")


def nearest(name: str, known: Iterable[str]) -> str:
    """Say which known word is nearest, as a remedy; empty if none is near."""
    folded = {word.casefold(): word for word in known}
    close = difflib.get_close_matches(name[:80].casefold(), folded, n=1, cutoff=0.55)
    return f"write {folded[close[0]]!r} if that is meant" if close else ""


def listed(words: Iterable[str]) -> str:
    """List words for an error's sentence."""
    quotes = [quoted(word) for word in words]
    return ", ".join(quotes) if quotes else "none"


def one_of(value: str, known: Sequence[str], place: str, noun: str = "one of") -> str:
    """Give `value` if it is known, or raise naming the known and the nearest."""
    if value in known:
        return value
    raise InputError(place, quoted(value), f"{noun} {listed(known)}", nearest(value, known))


def quantity(unit: str, bound: Bound = "any", remedy: str = "") -> Reader:
    """Read a quantity with its unit, such as ``"30 mm"``."""

    def read(raw: object, place: str) -> float:
        return _bounded(si(raw, unit, place), bound, shown(raw), place, remedy)

    return read


def number(bound: Bound = "any", remedy: str = "") -> Reader:
    """Read a bare number, such as the turns of a coil."""

    def read(raw: object, place: str) -> float:
        if isinstance(raw, bool) or not isinstance(raw, int | float):
            raise InputError(place, shown(raw), "a number", "write it without quotes and unit")
        return _bounded(si(raw, "1", place), bound, shown(raw), place, remedy)

    return read


def whole(allowed: Sequence[int] = (), least: int | None = None) -> Reader:
    """Read a whole number, one of `allowed` or not below `least`."""

    def read(raw: object, place: str) -> int:
        expected = f"one of {', '.join(map(str, allowed))}" if allowed else "a whole number"
        expected += f" from {least} up" if least is not None else ""
        fits = isinstance(raw, int) and not isinstance(raw, bool) and abs(raw) < 2**53
        if not fits or (allowed and raw not in allowed):
            raise InputError(place, shown(raw), expected)
        if least is not None and raw < least:  # type: ignore[operator]  # checked above
            raise InputError(place, shown(raw), expected)
        return raw  # type: ignore[return-value]  # checked above

    return read


def text(longest: int = _LONGEST_TEXT) -> Reader:
    """Read a text that is not empty and has no control characters."""

    def read(raw: object, place: str) -> str:
        if not isinstance(raw, str):
            raise InputError(place, shown(raw), "a text", "write it in quotes")
        if not raw.strip() or len(raw) > longest or not raw.isprintable():
            expected = f"a text of 1 to {longest} printable characters"
            raise InputError(place, quoted(raw), expected)
        return raw

    return read


def choice(*known: str) -> Reader:
    """Read one of a few words."""
    read_text = text()

    def read(raw: object, place: str) -> str:
        return one_of(str(read_text(raw, place)), known, place)

    return read


def flag() -> Reader:
    """Read true or false."""

    def read(raw: object, place: str) -> bool:
        if not isinstance(raw, bool):
            raise InputError(place, shown(raw), "true or false", "write it without quotes")
        return raw

    return read


def span(unit: str) -> Reader:
    """Read a list of two quantities that increase."""

    def read(raw: object, place: str) -> tuple[float, float]:
        expected = f'a list of two quantities in {unit}, such as ["-50 mm", "50 mm"]'
        if not isinstance(raw, list) or len(raw) != 2:
            found = f"a list of {len(raw)}" if isinstance(raw, list) else shown(raw)
            raise InputError(place, found, expected)
        lower, upper = (quantity(unit)(one, place) for one in raw)
        if not lower < upper:
            found = f"[{shown(raw[0])}, {shown(raw[1])}]"
            raise InputError(place, found, "the smaller value first", "exchange or mend the two")
        return lower, upper

    return read


def _bounded(value: float, bound: Bound, found: str, place: str, remedy: str = "") -> float:
    """Give `value` if it keeps within the bound, or raise."""
    inside, expected = _BOUNDS[bound]
    if value and not SMALLEST <= abs(value) <= LARGEST:
        expected = f"zero or a size from {SMALLEST:g} to {LARGEST:g} in SI units"
        raise InputError(place, found, expected, remedy or "mend the number or its unit")
    if not inside(value):
        raise InputError(place, found, expected, remedy)
    return value


def _unknown_key(name: str, known: Iterable[str], place: str) -> InputError:
    """Build the error for a key that nothing would read."""
    names = list(known)
    remedy = nearest(name, names) or "mend or delete it"
    found = f"the unknown key {quoted(name)}"
    return InputError(place, found, f"one of {listed(names)}", remedy)
