"""Numbers as decimal text in a given unit, short and without loss."""

from __future__ import annotations

import math
from decimal import Decimal
from typing import Final

__all__ = ["quantity_text", "shifted_text"]

_PLAIN: Final = 25  # decimal places beyond which an exponent is easier to read


def shifted_text(value: float, places: int) -> str:
    """Write ``value * 10**places`` with the digits that `value` itself needs.

    Parameters
    ----------
    value : float
        A finite number.
    places : int
        How far the decimal point moves to the right.

    Returns
    -------
    str
        Decimal text, without an exponent where that is no longer than a line.

    Examples
    --------
    >>> shifted_text(0.0011, 3), shifted_text(1e-05, 6), shifted_text(-0.5, 0)
    ('1.1', '10', '-0.5')
    """
    number = Decimal(repr(float(value) + 0.0))  # no negative zero
    sign, digits, exponent = number.as_tuple()
    moved = Decimal((sign, digits, int(exponent) + places))
    if abs(int(exponent) + places) > _PLAIN:
        return str(moved.normalize())
    text = format(moved, "f")
    return text.rstrip("0").rstrip(".") if "." in text else text


def quantity_text(value: float, unit: str, places: int, plain_unit: str) -> str:
    """Write a quantity with its unit so that reading it gives the same number.

    Parameters
    ----------
    value : float
        In the coherent unit.
    unit : str
        The unit to write, a power of ten below the coherent one.
    places : int
        That power.
    plain_unit : str
        The coherent unit, written where the other would cost the last digit.

    Returns
    -------
    str

    Examples
    --------
    >>> quantity_text(0.03, "mm", 3, "m"), quantity_text(12.0, "mm", 3, "m")
    ('30 mm', '12000 mm')
    """
    if not math.isfinite(value):
        raise ValueError(f"{value!r} is no finite number")
    text = shifted_text(value, places)
    if float(text) / 10.0**places == value:
        return f"{text} {unit}"
    return f"{float(value)!r} {plain_unit}"
