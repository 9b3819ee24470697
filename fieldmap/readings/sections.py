"""Every key of a campaign file, one line each.

A new key is a new line here and a new field of the record it fills; a new kind of probe or
reference is a new entry of ``PROBES`` or ``REFERENCES``.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import InputError
from fieldmap.readings.corrections import Correction
from fieldmap.readings.passes import FlipReference, PointReference, ZeroReference
from fieldmap.readings.probe import Coil, Wire
from fieldmap.readings.records import SAMPLES
from fieldmap.readings.schema import (
    Key,
    Reader,
    as_list,
    as_table,
    choice,
    number,
    quantity,
    shown,
    span,
    text,
    whole,
)

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

__all__ = [
    "AXIS",
    "CORRECTION_KINDS",
    "FORMAT",
    "INTEGRATOR",
    "KIND",
    "MAGNET",
    "MEASURED",
    "PLANNED",
    "PROBES",
    "REFERENCES",
    "RESULT_UNITS",
    "STAGE",
    "TOP",
    "Kind",
    "limit_keys",
]

FORMAT: Final = "fieldmap-campaign/1"
KIND: Final = "kind"

RESULT_UNITS: Final[Mapping[str, str]] = MappingProxyType(
    {
        "integrated_field": "T m",
        "integrated_field_total": "T m",
        "central_field": "T",
        "magnetic_length": "m",
        "boundary_in": "m",
        "boundary_out": "m",
        "magnetic_centre": "m",
        "peak_field": "T",
        "peak_position": "m",
        "homogeneity": "1",
        "tail_in": "T m",
        "tail_out": "T m",
        "fringe_integral_in": "1",
        "fringe_integral_out": "1",
    }
)
"""Results that a limit may be set for, and their units."""


@dataclass(frozen=True)
class Kind:
    """One kind of probe or reference: the keys of its section and what they build."""

    keys: tuple[Key, ...]
    build: Callable[..., Any]


def _raw(check: Callable[[object, str], Any]) -> Reader:
    """Keep a part of the file for a later reader once its outer shape is right."""

    def read(raw: object, place: str) -> Any:
        check(raw, place)
        return raw

    return read


def _uncertainty(name: str, unit: str) -> Key:
    """Make the key of a standard uncertainty: zero or above."""
    return Key(name, quantity(unit, "not negative"))


_POLARITY: Final = Key("polarity", whole(allowed=(1, -1)))
_LINE: Final = (Key("x", quantity("m")), Key("y", quantity("m")))
_MOUNT: Final = (
    _POLARITY,
    _uncertainty("u_tilt", "rad"),
    Key("temperature_coefficient", quantity("1/K")),
    Key("reference_temperature", quantity("degC")),
    _uncertainty("u_temperature", "K"),
)
_TURNED: Final = "give its size, and set polarity = -1 if the probe turns the sign"

TOP: Final = (
    Key("format", text(), required=True),
    Key("name", text(), required=True),
    Key("magnet", _raw(as_table), required=True),
    Key("axis", _raw(as_table), required=True),
    Key("probes", _raw(as_table), required=True),
    Key("integrators", _raw(as_table)),
    Key("stage", _raw(as_table)),
    Key("table", _raw(as_table)),
    Key("passes", _raw(as_list), required=True),
    Key("references", _raw(as_list)),
    Key("limits", _raw(as_list)),
    Key("corrections", _raw(as_list)),
)

MAGNET: Final = (
    Key("kind", choice("dipole", "quadrupole", "solenoid", "other"), required=True),
    Key("component", text(), required=True),
    Key("gap", quantity("m", "positive"), required=True),
    Key("iron_length", quantity("m", "positive")),
    Key("current", quantity("A")),
)

AXIS: Final = (
    Key("travel", choice("x", "y", "z", "s"), required=True),
    Key("integrate", span("m"), required=True),
    Key("flat", span("m"), required=True),
    Key("tail_in", quantity("T m")),
    _uncertainty("u_tail_in", "T m"),
    Key("tail_out", quantity("T m")),
    _uncertainty("u_tail_out", "T m"),
)

_WIRE: Final = (
    Key("turns", number("positive"), required=True),
    Key("active_length", quantity("m", "positive", _TURNED), required=True),
    _uncertainty("u_active_length", "m"),
    Key("width", quantity("m", "not negative")),
    *_MOUNT,
)

_COIL: Final = (
    Key("shape", choice("rectangular", "round"), required=True),
    Key("effective_area", quantity("m^2", "positive", _TURNED), required=True),
    _uncertainty("u_effective_area", "m^2"),
    Key("window", quantity("m", "positive"), required=True),
    _uncertainty("u_window", "m"),
    *_MOUNT,
)

PROBES: Final[Mapping[str, Kind]] = MappingProxyType(
    {"wire": Kind(_WIRE, Wire), "coil": Kind(_COIL, Coil)}
)

INTEGRATOR: Final = (
    Key("kind", choice("digital", "analog")),
    Key("read_noise", quantity("V s", "not negative")),
    Key("walk_noise", quantity("V s s^-0.5", "not negative")),
    Key("drift", quantity("V s/s")),
    _uncertainty("u_drift", "V s/s"),
    Key("resolution", quantity("V s", "not negative")),
    Key("full_scale", quantity("V s", "positive")),
    Key("leak_time", quantity("s", "positive")),
    Key("max_voltage", quantity("V", "positive")),
)

STAGE: Final = (
    _uncertainty("u_scale", "1"),
    _uncertainty("u_position", "m"),
    _uncertainty("u_offset", "m"),
    _uncertainty("u_lag", "s"),
    _uncertainty("u_backlash", "m"),
)

_ANY_PASS: Final = (
    Key("probe", text(), required=True),
    Key("integrator", text()),
    Key("record", choice(*SAMPLES)),
    *_LINE,
)

MEASURED: Final = (
    Key("file", text(1000), required=True),
    *_ANY_PASS,
    Key("table", _raw(as_table)),
)

PLANNED: Final = (
    Key("from", quantity("m"), required=True, field="start"),
    Key("to", quantity("m"), required=True, field="stop"),
    Key("speed", quantity("m/s", "positive"), required=True),
    Key("rate", quantity("Hz", "positive"), required=True),
    Key("dwell", quantity("s", "not negative")),
    *_ANY_PASS,
)

_POINT: Final = (
    Key("at", quantity("m"), required=True),
    Key("field", quantity("T"), required=True),
    Key("u", quantity("T", "positive"), required=True),
    *_LINE,
)

_ZERO: Final = (
    Key("from", quantity("m"), required=True, field="start"),
    Key("to", quantity("m"), required=True, field="stop"),
    Key("u", quantity("T", "positive"), required=True),
    *_LINE,
)

_FLIP: Final = (
    Key("probe", text(), required=True),
    Key("at", quantity("m"), required=True),
    Key("flux_change", quantity("V s"), required=True),
    Key("u_flux_change", quantity("V s", "positive"), required=True),
    *_LINE,
)

REFERENCES: Final[Mapping[str, Kind]] = MappingProxyType(
    {
        "point": Kind(_POINT, PointReference),
        "zero": Kind(_ZERO, ZeroReference),
        "flip": Kind(_FLIP, FlipReference),
    }
)


def _any_name(raw: object, place: str) -> str:
    """Read the name of a pass, which need not come from a file: that it is one is seen later."""
    if not isinstance(raw, str):
        raise InputError(place, shown(raw), "the name of a pass", "write it in quotes")
    return raw


_OF_PASS: Final = Key("pass", _any_name, required=True, field="where")


def _found(name: str, unit: str) -> tuple[Key, ...]:
    """Keys of a correction by a quantity, and of its standard uncertainty."""
    uncertain = Key(f"u_{name}", quantity(unit, "not negative"), field="u")
    return _OF_PASS, Key(name, quantity(unit), required=True, field="value"), uncertain


CORRECTION_KINDS: Final[Mapping[str, Kind]] = MappingProxyType(
    {
        "polarity": Kind((_OF_PASS,), partial(Correction, "polarity")),
        "factor": Kind(
            (
                _OF_PASS,
                Key(
                    "factor",
                    number("not zero", "leave the pass out instead"),
                    required=True,
                    field="value",
                ),
                Key("u_factor", number("not negative"), field="u"),
            ),
            partial(Correction, "factor"),
        ),
        "lag": Kind(_found("lag", "s"), partial(Correction, "lag")),
        "shift": Kind(_found("shift", "m"), partial(Correction, "shift")),
        "step": Kind(
            (_OF_PASS, Key("at", quantity("s"), required=True, field="start")),
            partial(Correction, "step"),
        ),
        "spikes": Kind(
            (
                _OF_PASS,
                Key("from", quantity("s"), required=True, field="start"),
                Key("to", quantity("s"), required=True, field="stop"),
            ),
            partial(Correction, "spikes"),
        ),
    }
)


def limit_keys(unit: str) -> tuple[Key, ...]:
    """Give the keys of a limit for a result of the unit given."""
    return (
        Key("result", text(), required=True),
        Key("nominal", quantity(unit)),
        Key("tolerance", quantity(unit, "positive")),
        Key("lower", quantity(unit)),
        Key("upper", quantity(unit)),
        Key("k", number("positive")),
        Key("guard", number("not negative")),
    )
