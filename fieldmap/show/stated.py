"""What a campaign states of its instruments, field by field, in handy units."""

from __future__ import annotations

from dataclasses import fields
from decimal import Decimal
from typing import TYPE_CHECKING, Any, Final

from fieldmap.show.numbers import Scale, plain, scale_for

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

__all__ = ["in_handy_unit", "stated_rows", "written_out"]

UNITS: Final[Mapping[str, str]] = {
    "active_length": "m",
    "backlash": "m",
    "drift": "V s/s",
    "effective_area": "m^2",
    "full_scale": "V s",
    "lag": "s",
    "leak_time": "s",
    "max_voltage": "V",
    "offset": "m",
    "polarity": "1",
    "position": "m",
    "read_noise": "V s",
    "reference_temperature": "degC",
    "resolution": "V s",
    "scale": "relative",
    "temperature": "K",
    "temperature_coefficient": "1/K",
    "tilt": "rad",
    "turns": "1",
    "walk_noise": "V s s^-0.5",
    "width": "m",
    "window": "m",
}
_OTHER: Final = {
    "m^2": Scale("m²", 1.0),
    "relative": Scale("1e-6", 1e6),
    "1/K": Scale("1e-6/K", 1e6),
    "degC": Scale("°C", 1.0),
    "1": Scale("", 1.0),
}
_LEVELS: Final = ("read_noise", "walk_noise")  # estimated from the readings where not stated
_SMALL: Final = {"m": (1e-4, Scale("µm", 1e6)), "s": (0.1, Scale("ms", 1e3)),
                 "rad": (0.1, Scale("mrad", 1e3))}  # fmt: skip


def in_handy_unit(unit: str, size: float) -> Scale:
    """The unit in which a stated quantity of this size reads well.

    Examples
    --------
    >>> in_handy_unit("m", 5e-6), in_handy_unit("V s", 5e-8).unit
    (Scale(unit='µm', factor=1000000.0), 'nV·s')
    """
    if unit in _OTHER:
        return _OTHER[unit]
    limit, small = _SMALL.get(unit, (0.0, Scale(unit, 1.0)))
    return small if 0 < abs(size) < limit else scale_for(unit, [size])


def stated_rows(instrument: Any, leave_out: Iterable[str] = ("name", "kind", "shape")) -> list[
    tuple[str, str, str, str]
]:  # fmt: skip
    """What is stated of a probe, an integrator or a stage.

    Parameters
    ----------
    instrument : Wire, Coil, Integrator or Stage
        As in the campaign.
    leave_out : iterable of str
        Fields that stand in the title already.

    Returns
    -------
    list of tuple of str
        Quantity, value, standard uncertainty, unit; what is zero, or not stated, is passed over.

    Examples
    --------
    >>> from fieldmap.readings import Stage
    >>> stated_rows(Stage(u_scale=20e-6))
    [('scale', '', '20', '1e-6')]
    """
    facts = {one.name: getattr(instrument, one.name) for one in fields(instrument)}
    names = [name for name in facts if name not in leave_out]
    quantities = dict.fromkeys(name.removeprefix("u_") for name in names)
    return [_row(name, facts) for name in quantities if not _trivial(name, facts)]


def written_out(value: float) -> str:
    """A stated number without an exponent, unless it would be mostly zeros.

    Examples
    --------
    >>> written_out(6e-05), written_out(3e-12)
    ('0.00006', '3e-12')
    """
    text = plain(value)
    return f"{Decimal(text):f}" if 1e-7 <= abs(value) < 1e9 else text


def _row(name: str, facts: Mapping[str, Any]) -> tuple[str, str, str, str]:
    words, unit = name.replace("_", " "), UNITS.get(name, "")
    value, u = facts.get(name), facts.get(f"u_{name}")
    if value is None and u is None and name in _LEVELS:
        return words, "not stated: estimated from the readings", "", ""
    scale = in_handy_unit(unit, value or u or 0.0)
    return (
        words,
        "" if value is None else written_out(value * scale.factor),
        "" if not u else written_out(u * scale.factor),
        scale.unit,
    )


def _trivial(name: str, facts: Mapping[str, Any]) -> bool:
    """Whether there is nothing to tell: an effect that is not there, or nothing known of it."""
    if name in _LEVELS:
        return False
    if name == "polarity":
        return bool(facts[name] == 1)
    if name == "reference_temperature":
        return not facts.get("temperature_coefficient")
    return not facts.get(name) and not facts.get(f"u_{name}")
