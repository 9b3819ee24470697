"""A campaign as the text of a campaign file, units written out."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from typing import TYPE_CHECKING, Any, Final, NamedTuple

from fieldmap.bench.decimals import quantity_text, shifted_text
from fieldmap.errors import InputError
from fieldmap.readings.corrections import entries_text
from fieldmap.readings.layout import TableLayout
from fieldmap.readings.passes import FlipReference, PointReference, ZeroReference
from fieldmap.readings.probe import Integrator, Probe, Wire
from fieldmap.readings.sections import FORMAT, RESULT_UNITS
from fieldmap.readings.table_section import section_text

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from fieldmap.readings.passes import Campaign, Limit, Pass, PlannedPass, Reference

__all__ = ["campaign_text"]


class _Unit(NamedTuple):
    """A unit as written, the power of ten that it is below the coherent unit, and the latter."""

    text: str
    places: int
    coherent: str


class _Entry(NamedTuple):
    """A key of the file, the field it shows, and its unit."""

    key: str
    field: str
    unit: _Unit


_MM: Final = _Unit("mm", 3, "m")
_UM: Final = _Unit("um", 6, "m")
_MM_S: Final = _Unit("mm/s", 3, "m/s")
_M2: Final = _Unit("m^2", 0, "m^2")
_S: Final = _Unit("s", 0, "s")
_MS: Final = _Unit("ms", 3, "s")
_HZ: Final = _Unit("Hz", 0, "Hz")
_A: Final = _Unit("A", 0, "A")
_V: Final = _Unit("V", 0, "V")
_VS: Final = _Unit("V s", 0, "V s")
_NVS: Final = _Unit("nV s", 9, "V s")
_WALK: Final = _Unit("nV s s^-0.5", 9, "V s s^-0.5")
_DRIFT: Final = _Unit("uV s/s", 6, "V s/s")
_T: Final = _Unit("T", 0, "T")
_TM: Final = _Unit("T m", 0, "T m")
_UT: Final = _Unit("uT", 6, "T")
_MRAD: Final = _Unit("mrad", 3, "rad")
_PER_K: Final = _Unit("1/K", 0, "1/K")
_DEG_C: Final = _Unit("degC", 0, "degC")
_K: Final = _Unit("K", 0, "K")

_MOUNT: Final = (
    _Entry("u_tilt", "u_tilt", _MRAD),
    _Entry("temperature_coefficient", "temperature_coefficient", _PER_K),
    _Entry("u_temperature", "u_temperature", _K),
)
_WARM: Final = (_Entry("reference_temperature", "reference_temperature", _DEG_C),)
_WIRE: Final = (
    _Entry("active_length", "active_length", _MM),
    _Entry("u_active_length", "u_active_length", _MM),
    _Entry("width", "width", _MM),
    *_MOUNT,
)
_COIL: Final = (
    _Entry("effective_area", "effective_area", _M2),
    _Entry("u_effective_area", "u_effective_area", _M2),
    _Entry("window", "window", _MM),
    _Entry("u_window", "u_window", _MM),
    *_MOUNT,
)
_INTEGRATOR: Final = (
    _Entry("read_noise", "read_noise", _NVS),
    _Entry("walk_noise", "walk_noise", _WALK),
    _Entry("drift", "drift", _DRIFT),
    _Entry("u_drift", "u_drift", _DRIFT),
    _Entry("resolution", "resolution", _NVS),
    _Entry("full_scale", "full_scale", _VS),
    _Entry("leak_time", "leak_time", _S),
    _Entry("max_voltage", "max_voltage", _V),
)
_STAGE: Final = (
    _Entry("u_position", "u_position", _UM),
    _Entry("u_offset", "u_offset", _MM),
    _Entry("u_lag", "u_lag", _MS),
    _Entry("u_backlash", "u_backlash", _UM),
)
_AXIS: Final = (
    _Entry("tail_in", "tail_in", _TM),
    _Entry("u_tail_in", "u_tail_in", _TM),
    _Entry("tail_out", "tail_out", _TM),
    _Entry("u_tail_out", "u_tail_out", _TM),
)
_LINE: Final = (_Entry("x", "x", _MM), _Entry("y", "y", _MM))
_PLANNED: Final = (
    _Entry("from", "start", _MM),
    _Entry("to", "stop", _MM),
    _Entry("speed", "speed", _MM_S),
    _Entry("rate", "rate", _HZ),
    _Entry("dwell", "dwell", _S),
)
_POINT: Final = (_Entry("at", "at", _MM), _Entry("field", "field", _T), _Entry("u", "u", _UT))
_ZERO: Final = (_Entry("from", "start", _MM), _Entry("to", "stop", _MM), _Entry("u", "u", _UT))
_FLIP: Final = (
    _Entry("at", "at", _MM),
    _Entry("flux_change", "flux_change", _VS),
    _Entry("u_flux_change", "u_flux_change", _NVS),
)
_LIMIT_UNITS: Final = {
    "T m": _TM,
    "T": _T,
    "m": _MM,
    "1": _Unit("", 0, ""),
}
_LIMIT_DIGITS: Final = 12  # decimals of a nominal value
_BARE_KEY: Final = re.compile("[A-Za-z0-9_-]+")


def campaign_text(
    campaign: Campaign, files: Sequence[str], layout: TableLayout | None = None
) -> str:
    """Write a campaign as TOML.

    Parameters
    ----------
    campaign : Campaign
        What to write; values that are zero or unknown by default are left out.
    files : sequence of str
        File of each measured pass.
    layout : TableLayout, optional
        How the pass tables are laid out, if not as the kit's own.

    Returns
    -------
    str
        A campaign file that reads back to the same numbers.

    Raises
    ------
    InputError
        If two different probes or integrators share a name.

    Examples
    --------
    >>> from fieldmap.readings.passes import Axis, Campaign, Magnet
    >>> axis = Axis("z", (-0.3, 0.3), (-0.05, 0.05))
    >>> text = campaign_text(Campaign("trial", Magnet("dipole", "By", gap=0.03), axis), [])
    >>> [line for line in text.splitlines() if line.startswith("gap")]
    ['gap = "30 mm"']
    """
    things: list[Pass | PlannedPass] = [*campaign.passes, *campaign.planned]
    flips = [ref for ref in campaign.references if isinstance(ref, FlipReference)]
    probes = _by_name([*(one.probe for one in things), *(flip.probe for flip in flips)])
    integrators = _by_name([one.integrator for one in things])
    lines = [f'format = "{FORMAT}"', f"name = {_string(campaign.name)}"]
    lines += _magnet(campaign) + _axis(campaign)
    for probe in probes:
        lines += _probe(probe)
    for integrator in integrators:
        lines += _integrator(integrator)
    lines += _stage(campaign)
    lines += _table(layout) if layout is not None else []
    several = len(integrators) > 1
    for one, file in zip(campaign.passes, files, strict=True):
        lines += ["", "[[passes]]", f"file = {_string(file)}", *_pass(one, several)]
    for planned in campaign.planned:
        lines += ["", "[[passes]]", *_given(planned, _PLANNED), *_pass(planned, several)]
    for reference in campaign.references:
        lines += _reference(reference)
    for limit in campaign.limits:
        lines += ["", "[[limits]]", f'result = "{limit.result}"', *_limit(limit), *_rule(limit)]
    if campaign.corrections:
        renamed = {one.name: file for one, file in zip(campaign.passes, files, strict=True)}
        kept = [replace(one, where=renamed[one.where]) for one in campaign.corrections]
        lines += ["", entries_text(kept)]
    return "\n".join(lines) + "\n"


def _string(text: str) -> str:
    """Write a TOML basic string."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _key(name: str) -> str:
    """Write a key, in quotes where it needs them."""
    return name if _BARE_KEY.fullmatch(name) else _string(name)


def _quantity(value: float, unit: _Unit) -> str:
    """Write a quantity as a TOML value; a number without unit stands without quotes."""
    if not unit.text:
        return repr(float(value))
    return _string(quantity_text(value, unit.text, unit.places, unit.coherent))


def _given(item: object, entries: Iterable[_Entry]) -> list[str]:
    """Lines for the fields that are known and not zero, or that must be there."""
    lines = []
    for entry in entries:
        value = getattr(item, entry.field)
        if value is not None and (value or entry.key in _ALWAYS):
            lines.append(f"{entry.key} = {_quantity(value, entry.unit)}")
    return lines


_ALWAYS: Final = {
    *("from", "to", "at", "field", "flux_change", "read_noise", "walk_noise", "u_drift"),
    "reference_temperature",
    *(entry.key for entry in _AXIS),
}
"""Keys for which zero is not the same as leaving them out."""


def _by_name(items: Iterable[Any]) -> list[Any]:
    """Each probe or integrator once, in the order of first use."""
    found: dict[str, Any] = {}
    for item in items:
        if found.setdefault(item.name, item) != item:
            noun = "integrators" if isinstance(item, Integrator) else "probes"
            expected = "a name for each"
            raise InputError(f"the name {item.name!r}", f"two different {noun}", expected)
    return list(found.values())


def _magnet(campaign: Campaign) -> list[str]:
    magnet = campaign.magnet
    entries = (_Entry("gap", "gap", _MM), _Entry("iron_length", "iron_length", _MM))
    return [
        *("", "[magnet]", f'kind = "{magnet.kind}"', f"component = {_string(magnet.component)}"),
        *_given(magnet, (*entries, _Entry("current", "current", _A))),
    ]


def _axis(campaign: Campaign) -> list[str]:
    axis = campaign.axis
    spans = {"integrate": axis.integrate, "flat": axis.flat}
    lines = ["", "[axis]", f"travel = {_string(axis.travel)}"]
    for key, (start, stop) in spans.items():
        lines.append(f"{key} = [{_quantity(start, _MM)}, {_quantity(stop, _MM)}]")
    return lines + _given(axis, _AXIS)


def _probe(probe: Probe) -> list[str]:
    lines = ["", f"[probes.{_key(probe.name)}]"]
    if isinstance(probe, Wire):
        turns = shifted_text(probe.turns, 0)
        lines += ['kind = "wire"', f"turns = {turns}", *_given(probe, _WIRE)]
    else:
        lines += ['kind = "coil"', f'shape = "{probe.shape}"', *_given(probe, _COIL)]
    if probe.temperature_coefficient:
        lines += _given(probe, _WARM)
    return lines if probe.polarity == 1 else [*lines, f"polarity = {probe.polarity}"]


def _integrator(integrator: Integrator) -> list[str]:
    head = ["", f"[integrators.{_key(integrator.name)}]", f'kind = "{integrator.kind}"']
    return head + _given(integrator, _INTEGRATOR)


def _stage(campaign: Campaign) -> list[str]:
    lines = _given(campaign.stage, _STAGE)
    if campaign.stage.u_scale:
        lines.insert(0, f'u_scale = "{campaign.stage.u_scale!r}"')
    return ["", "[stage]", *lines] if lines else []


def _table(layout: TableLayout) -> list[str]:
    default = TableLayout()
    raw: dict[str, object] = {
        key: getattr(layout, key)
        for key in ("delimiter", "decimal", "skip_lines", "header")
        if getattr(layout, key) != getattr(default, key)
    }
    for key, value, unit in (("rate", layout.rate, _HZ), ("per_count", layout.per_count, _UM)):
        if value is not None:
            raw[key] = quantity_text(value, unit.text, unit.places, unit.coherent)
    for name, spec in layout.columns.items():
        unit_of = {} if spec.unit is None else {"unit": spec.unit}
        raw[name] = {"column": spec.column, **unit_of}
    return ["", *section_text(raw).splitlines()] if raw else []


def _pass(one: Pass | PlannedPass, several: bool) -> list[str]:  # noqa: FBT001 - of integrators
    lines = [f"probe = {_string(one.probe.name)}"]
    if several:
        lines.append(f"integrator = {_string(one.integrator.name)}")
    if one.record != "cumulative":
        lines.append(f'record = "{one.record}"')
    return lines + _given(one, _LINE)


def _reference(reference: Reference) -> list[str]:
    head = ["", "[[references]]"]
    if isinstance(reference, PointReference):
        lines = ['kind = "point"', *_given(reference, _POINT)]
    elif isinstance(reference, ZeroReference):
        lines = ['kind = "zero"', *_given(reference, _ZERO)]
    else:
        probe = _string(reference.probe.name)
        lines = ['kind = "flip"', f"probe = {probe}", *_given(reference, _FLIP)]
    for key, value in (("x", reference.x), ("y", reference.y)):
        if value is not None:
            lines.append(f"{key} = {_quantity(value, _MM)}")
    return head + lines


def _limit(limit: Limit) -> list[str]:
    """Write nominal and tolerance where they give the limits back, else the limits."""
    unit = _LIMIT_UNITS[RESULT_UNITS[limit.result]]
    if limit.lower is not None and limit.upper is not None:
        nominal = round((limit.lower + limit.upper) / 2, _LIMIT_DIGITS)
        tolerance = round((limit.upper - limit.lower) / 2, _LIMIT_DIGITS)
        if (nominal - tolerance, nominal + tolerance) == (limit.lower, limit.upper):
            values = {"nominal": nominal, "tolerance": tolerance}
            return [f"{key} = {_quantity(value, unit)}" for key, value in values.items()]
    ends = {"lower": limit.lower, "upper": limit.upper}
    return [f"{key} = {_quantity(v, unit)}" for key, v in ends.items() if v is not None]


def _rule(limit: Limit) -> list[str]:
    """Coverage factor and guard band where they are not the usual ones."""
    lines = [] if limit.k is None else [f"k = {float(limit.k)!r}"]
    return lines if limit.guard == 1 else [*lines, f"guard = {float(limit.guard)!r}"]
