"""Numbers as a person reads them: handy units, digits that the uncertainty supports."""

from __future__ import annotations

import decimal
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from collections.abc import Iterable

__all__ = ["Scale", "last_place", "like", "plain", "rounded", "scale_for", "to_place"]

EXACT: Final = 1e-14  # an uncertainty below this share of the value has no digits to show
DIGITS: Final = 2  # significant digits of an uncertainty
NOT_KNOWN: Final = "not known"

_PREFIXES: Final = ((0.1, "", 1.0), (1e-4, "m", 1e3), (1e-7, "µ", 1e6), (0.0, "n", 1e9))
_PREFIXED: Final = {
    "T": "T",
    "T m": "T·m",
    "V": "V",
    "V s": "V·s",
    "V s s^-0.5": "V·s/√s",
    "V s/s": "V·s/s",
}
_FIXED: Final = {"m": ("mm", 1e3), "s": ("s", 1.0)}
_LARGE_RATIO: Final = 0.01  # from here on a ratio is shown as it is


@dataclass(frozen=True)
class Scale:
    """A unit to show numbers in.

    Parameters
    ----------
    unit : str
        As printed.
    factor : float
        What an SI number is multiplied by.
    """

    unit: str
    factor: float


def scale_for(unit: str, values: Iterable[float]) -> Scale:
    """The unit in which numbers of this size read well.

    Parameters
    ----------
    unit : str
        SI unit, as in results.json.
    values : iterable of float
        SI numbers that share the unit; the largest decides.

    Returns
    -------
    Scale
        Lengths are always in mm, so that they compare at a glance; small ratios are in 1e-4,
        others have no unit.

    Examples
    --------
    >>> scale_for("T m", [0.02, -0.03])
    Scale(unit='mT·m', factor=1000.0)
    """
    if unit in _FIXED:
        return Scale(*_FIXED[unit])
    finite = [abs(value) for value in values if math.isfinite(value)]
    largest = max(finite, default=0.0)
    if unit == "1":
        return Scale("", 1.0) if largest >= _LARGE_RATIO else Scale("1e-4", 1e4)
    if unit not in _PREFIXED:
        return Scale(unit, 1.0)
    if largest == 0:
        return Scale(_PREFIXED[unit], 1.0)
    prefix, factor = next((p, f) for least, p, f in _PREFIXES if largest >= least)
    return Scale(f"{prefix}{_PREFIXED[unit]}", factor)


def rounded(value: float, half_width: float) -> tuple[str, str]:
    """Value and half width of its interval, rounded by the latter.

    Parameters
    ----------
    value : float
        The estimate, in the unit shown.
    half_width : float
        Its expanded uncertainty, same unit, not negative.

    Returns
    -------
    tuple of str
        The half width with two significant digits, the value to the same decimal.

    Examples
    --------
    >>> rounded(400.00499, 0.01688)
    ('400.005', '0.017')
    >>> rounded(-5.43, 151.4)
    ('-10', '150')
    """
    if not (math.isfinite(value) and math.isfinite(half_width)):
        return (plain(value) if math.isfinite(value) else NOT_KNOWN), NOT_KNOWN
    if half_width <= EXACT * abs(value):
        return plain(value), "0"
    place = last_place(half_width)
    return to_place(value, place), to_place(half_width, place)


def like(value: float, example: str) -> str:
    """A value with as many decimals as an example, for a column beside it."""
    if not math.isfinite(value):
        return NOT_KNOWN
    return f"{value:.{len(example.partition('.')[2])}f}"


def plain(value: float, digits: int = 9) -> str:
    """A number without an uncertainty: up to so many digits, no exponent where none is needed.

    Examples
    --------
    >>> plain(380.5)
    '380.5'
    """
    return f"{value:.{digits}g}"


def last_place(half_width: float) -> int:
    """Power of ten of the last digit to keep; 9.96 becomes 10, not 10.0."""
    place = math.floor(math.log10(half_width)) - DIGITS + 1
    in_places = decimal.Decimal(repr(float(half_width))).scaleb(-place)
    return place + 1 if round(in_places) >= 10**DIGITS else place


def to_place(value: float, place: int) -> str:
    """A number rounded to the digit of a power of ten, written out.

    Examples
    --------
    >>> to_place(8.4376, -2), to_place(151.4, 1)
    ('8.44', '150')
    """
    with decimal.localcontext(prec=400):
        quantum = decimal.Decimal(1).scaleb(place)
        number = decimal.Decimal(repr(float(value))).quantize(quantum)
    return f"{number.copy_abs() if number.is_zero() else number:f}"
