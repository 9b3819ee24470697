"""Quantities as text to SI numbers: ``"30 mm"`` is 0.03 (m).

The text is checked against a small grammar before any unit is looked up, so that nothing
from a file ever reaches an evaluator: a number, then unit words joined by blanks, ``*``,
``·`` or ``/``, each with an optional exponent (``m^2``, ``m**2``, ``s^-0.5``, ``m²``).
"""

from __future__ import annotations

import functools
import math
import re
import threading
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, TypeVar

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError

if TYPE_CHECKING:
    import pint

__all__ = ["UnitError", "column_to_si", "line_to_si", "quoted", "scale_to_si", "si"]

_Numbers = npt.NDArray[np.float64]
_Value = TypeVar("_Value", float, _Numbers)

_NUMBER: Final = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,4})?"
_QUANTITY: Final = re.compile(rf"({_NUMBER})\s*(.*)", re.DOTALL)
_FACTOR: Final = re.compile(
    r"\s*(?P<joint>[*·⋅/]?)\s*(?P<word>[A-Za-zµμΩ°%]+|1(?![0-9.]))"
    r"(?:\s*(?:\^|\*\*)\s*(?P<power>[+-]?[0-9](?:\.[0-9]{1,3})?))?"
)
_LONGEST: Final = 120
_SUPERSCRIPTS: Final = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")
_RAISED: Final = re.compile("[⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+")
# On a bench a gauss is a fixed part of a tesla; the registry's own belongs to electromagnetic CGS.
_GAUSS: Final = re.compile("([uµμmkM]?)(?:G|gauss)")
_ABSOLUTE_ZERO: Final = -273.15  # degC

# Examples shown beside the expected unit; any other unit is its own example.
_EXAMPLES: Final = {
    "m": "30 mm",
    "m^2": "0.3000 m^2",
    "m/s": "20 mm/s",
    "s": "2 ms",
    "Hz": "100 Hz",
    "V": "5 V",
    "V s": "50 nV s",
    "V s/s": "1e-6 V s/s",
    "V s s^-0.5": "200 nV s s^-0.5",
    "T": "0.5 T",
    "T m": "0.2 T m",
    "A": "85 A",
    "rad": "2 mrad",
    "degC": "22 degC",
    "1/K": "17e-6 1/K",
    "1": "20e-6",
}


class UnitError(ValueError):
    """A text is not a unit, or not of the dimension asked for (internal: no place is known)."""


@dataclass(frozen=True)
class _Factor:
    """One unit word with its signed exponent."""

    word: str
    power: float


def si(value: object, unit: str, where: str) -> float:
    """Turn a quantity written as text into a number of the SI unit asked for.

    Parameters
    ----------
    value : str or float
        Such as ``"30 mm"``; a bare number is accepted only where `unit` is ``"1"``.
    unit : str
        The coherent unit of the result, such as ``"m"`` or ``"V s"``; ``"1"`` for a ratio.
    where : str
        The place, for the error's text.

    Returns
    -------
    float
        The value in `unit`, finite.

    Raises
    ------
    InputError
        If the text is no quantity, has no unit, is not finite or has another dimension.

    Examples
    --------
    >>> si("30 mm", "m", "campaign.toml, [magnet], key 'gap'")
    0.03
    >>> si("20e-6", "1", "campaign.toml, [stage], key 'u_scale'")
    2e-05
    """
    if isinstance(value, int | float) and not isinstance(value, bool):
        return _bare_number(value, unit, where)
    if not isinstance(value, str):
        raise InputError(where, _kind_of(value), _expected(unit))
    match = _QUANTITY.fullmatch(_plain(value)) if len(value) <= _LONGEST else None
    if match is None:
        raise InputError(where, quoted(value), _expected(unit), _hint(value))
    number, unit_text = float(match[1]), match[2]
    if not unit_text and unit != "1":
        raise InputError(where, f"{quoted(value)} without a unit", _expected(unit), "add the unit")
    if unit == "degC":
        scale, offset = _temperature(unit_text, where)
        return scale * number + offset
    try:
        result = _scaled(number, _scale(unit_text or "1", unit))
    except UnitError as error:
        raise InputError(
            where, f"{quoted(value)}, {error}", _expected(unit), _hint(value)
        ) from None
    if not math.isfinite(result):
        raise InputError(where, quoted(value), f"a finite number: {_expected(unit)}")
    return result


def scale_to_si(unit_text: str, unit: str, where: str) -> float:
    """Give the factor that turns numbers in `unit_text` into numbers in `unit`.

    Parameters
    ----------
    unit_text : str
        The unit of a column, such as ``"uV s"``.
    unit : str
        The coherent unit wanted, such as ``"V s"``.
    where : str
        The place, for the error's text.

    Returns
    -------
    float
        The factor.

    Raises
    ------
    InputError
        If `unit_text` is not a unit or has another dimension.

    Examples
    --------
    >>> scale_to_si("mm", "m", "pass_01.csv, column 'position'")
    0.001
    """
    return line_to_si(unit_text, unit, where)[0]


def line_to_si(unit_text: str, unit: str, where: str) -> tuple[float, float]:
    """Give scale and offset that turn numbers in `unit_text` into numbers in `unit`.

    The offset differs from zero for temperatures only, where `unit` is ``"degC"``.

    Parameters
    ----------
    unit_text : str
        The unit of a column; ``"degC"`` or ``"K"`` for a temperature.
    unit : str
        The unit wanted.
    where : str
        The place, for the error's text.

    Returns
    -------
    scale, offset : float
        ``value_in_unit = scale * value + offset``.

    Raises
    ------
    InputError
        If `unit_text` is not a unit or has another dimension.

    Examples
    --------
    >>> line_to_si("K", "degC", "pass_01.csv, column 'temperature'")
    (1.0, -273.15)
    """
    if unit == "degC":
        return _temperature(unit_text, where)
    try:
        return _scale(_plain(unit_text), unit), 0.0
    except UnitError as error:
        message = f"the unit {quoted(unit_text)}, {error}"
        raise InputError(where, message, f"a unit such as {unit!r}") from None


def column_to_si(values: _Numbers, unit_text: str, unit: str, where: str) -> _Numbers:
    """Turn an array of numbers in `unit_text` into numbers in `unit`.

    Parameters
    ----------
    values : (n,) array
        The numbers of a column.
    unit_text : str
        Their unit.
    unit : str
        The unit wanted.
    where : str
        The place, for the error's text.

    Returns
    -------
    (n,) array
        A new array; the same decimals written in SI give the same numbers to the last digit.

    Raises
    ------
    InputError
        If `unit_text` is not a unit or has another dimension.

    Examples
    --------
    >>> column_to_si(np.array([1.1, 2.3]), "mm", "m", "pass_01.csv, column 'position'")
    array([0.0011, 0.0023])
    """
    scale, offset = line_to_si(unit_text, unit, where)
    return _scaled(values, scale) + offset if offset else _scaled(values, scale)


def quoted(text: str, longest: int = 60) -> str:
    """Quote a text from a file for an error's sentence: shortened, control characters escaped."""
    shown = text if len(text) <= longest else text[: longest - 1] + "…"
    return repr(shown)


def _temperature(unit_text: str, where: str) -> tuple[float, float]:
    """Scale and offset to degrees Celsius."""
    known = {"degC": 0.0, "°C": 0.0, "K": _ABSOLUTE_ZERO, "kelvin": _ABSOLUTE_ZERO}
    offset = known.get(unit_text.strip())
    if offset is None:
        raise InputError(where, f"the unit {quoted(unit_text)}", "'degC' or 'K'")
    return 1.0, offset


def _bare_number(value: float, unit: str, where: str) -> float:
    """Accept a number without a unit for ratios only."""
    if unit != "1":
        found = f"the number {quoted(repr(value))[1:-1]} without a unit"
        raise InputError(where, found, _expected(unit), "write the unit, in quotes")
    try:
        number = float(value)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise InputError(where, repr(number), "a finite number")
    return number


def _expected(unit: str) -> str:
    """Say what should stand where a quantity in `unit` is wanted."""
    example = _EXAMPLES.get(unit, f"1 {unit}")
    if unit == "1":
        return f"a number without a unit, such as {example}"
    return f'a quantity in {unit} written as text, such as "{example}"'


def _hint(text: str) -> str:
    """Guess why a text is no quantity."""
    if re.search(r"[0-9],[0-9]", text):
        return "write the decimal mark as a point"
    if text.rstrip().endswith(("Tm", "Vm", "As")):
        return 'put a blank between the units of a product, as in "T m"'
    if re.search(r"[A-Za-z][0-9]", text) and "^" not in text:
        return 'write exponents with ^, as in "m^2"'
    return ""


def _kind_of(value: object) -> str:
    """Name the type of a value in the words of TOML."""
    names = {bool: "true or false", list: "a list", dict: "a table"}
    return names.get(type(value), f"a {type(value).__name__}")


def _plain(text: str) -> str:
    """Write minus signs and raised digits in ASCII."""
    text = text.strip().replace("\u2212", "-")
    return _RAISED.sub(lambda raised: "^" + raised[0].translate(_SUPERSCRIPTS), text)


def _factors(unit_text: str) -> list[_Factor]:
    """Split a unit into its words by the grammar, or raise UnitError."""
    factors: list[_Factor] = []
    place, text = 0, unit_text.strip()
    if not text or len(text) > _LONGEST:
        raise UnitError("which is not a unit")
    while place < len(text):
        match = _FACTOR.match(text, place)
        first = place == 0
        if match is None or (first and match["joint"]):
            raise UnitError(f"where {quoted(text[place:])} is not a unit")
        if not first and not match["joint"] and not text[place].isspace():
            raise UnitError(f"where {quoted(text[place:])} follows without a blank")
        sign = -1.0 if match["joint"] == "/" else 1.0
        factors.append(_Factor(match["word"], sign * float(match["power"] or 1)))
        place = match.end()
    return factors


def _scaled(value: _Value, scale: float) -> _Value:
    """Multiply by a scale; divide where its inverse is whole, which rounds decimals correctly."""
    inverse = round(1.0 / scale) if 0.0 < scale < 1.0 else 0
    if inverse and math.isclose(inverse * scale, 1.0, rel_tol=1e-14):
        return value / inverse
    return value * scale


@functools.lru_cache(maxsize=256)
def _scale(unit_text: str, unit: str) -> float:
    """Factor from `unit_text` to `unit`, or raise UnitError."""
    with _REGISTRY_LOCK:
        given, wanted = _product(unit_text), _product(unit)
        angles = _has_angle(given), _has_angle(wanted)
        if given.dimensionality != wanted.dimensionality or angles[0] != angles[1]:
            raise UnitError(f"which is not a unit of the dimension of {unit!r}")
        return float(given.to(wanted.units).magnitude)


def _product(unit_text: str) -> pint.Quantity[float]:
    """One of a unit, as a product of words looked up one by one."""
    result: pint.Quantity[float] = _registry().Quantity(1.0)
    for factor in _factors(unit_text):
        if factor.word != "1":
            result = result * _word(factor.word) ** factor.power
    return result


def _word(word: str) -> pint.Quantity[float]:
    """One of the unit that a single word names; units with an offset or a logarithm are refused."""
    gauss = _GAUSS.fullmatch(word)
    if gauss:
        return _registry().Quantity(1e-4, gauss[1] + "T")
    try:
        unit = _registry().Unit("percent" if word == "%" else word)
        zero = _registry().Quantity(0.0, unit).to_root_units()
    except Exception:  # noqa: BLE001 - the registry raises many kinds for words it does not know
        raise UnitError(f"where {quoted(word)} is not a known unit") from None
    if zero.magnitude != 0.0:
        raise UnitError(f"where {quoted(word)} has an offset or is a logarithm")
    return _registry().Quantity(1.0, unit)


def _has_angle(quantity: pint.Quantity[float]) -> bool:
    """Tell turns and radians, which a registry counts as pure numbers."""
    return "radian" in dict(quantity.to_root_units().unit_items())


# Handlers of panels run in threads; the registry fills its caches while it looks up.
_REGISTRY_LOCK: Final = threading.RLock()


@functools.cache
def _registry() -> pint.UnitRegistry[float]:
    """Build the registry on first use: it takes a fifth of a second."""
    import pint

    registry: pint.UnitRegistry[float] = pint.UnitRegistry()
    # benches write uVs for uV s
    registry.define("voltsecond = volt * second = Vs")
    return registry
