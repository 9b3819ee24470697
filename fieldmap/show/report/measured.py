"""First part of a report: the magnet, the instruments as stated, references, passes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from fieldmap.estimate.map import map_axis, map_lines, map_magnet, map_passes
from fieldmap.estimate.provenance import (
    map_integrators,
    map_probes,
    map_references,
    map_stage,
)
from fieldmap.readings.probe import Wire
from fieldmap.show.corrections import HEAD, correction_rows
from fieldmap.show.numbers import plain, scale_for
from fieldmap.show.report.parts import Column, Section, paragraph, safe, table
from fieldmap.show.stated import in_handy_unit, stated_rows, written_out

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import xarray as xr

    from fieldmap.readings.passes import Axis
    from fieldmap.readings.probe import Probe

__all__ = ["corrections_sections", "measured_section", "passes_section"]

_INSTRUMENTS: Final = (
    Column("Instrument"),
    Column("Quantity"),
    Column("Value", "number"),
    Column("u", "number"),
    Column("Unit"),
)
_REFERENCES: Final = (
    Column("Reference"),
    Column("Where"),
    Column("Value", "number"),
    Column("u", "number"),
    Column("Unit"),
)


def measured_section(fmap: xr.Dataset, axis: Axis) -> Section:
    """What was measured, and with what.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    axis : Axis
        Limits and flat window that the results are taken with.

    Returns
    -------
    Section
    """
    parts = [_magnet(fmap, axis)]
    if axis != map_axis(fmap):
        kept = map_axis(fmap)
        parts.append(
            paragraph(
                "Limits and flat window were chosen for this report; the map keeps "
                f"{_span(*kept.integrate)} and {_span(*kept.flat)}."
            )
        )
    parts += [_instruments(fmap), _references(fmap)]
    return Section("What was measured", "".join(parts))


def _magnet(fmap: xr.Dataset, axis: Axis) -> str:
    magnet = map_magnet(fmap)
    facts = [("Magnet", magnet.kind), ("Field component", magnet.component)]
    facts.append(("Full gap, or bore", _mm(magnet.gap)))
    if magnet.iron_length is not None:
        facts.append(("Iron length", _mm(magnet.iron_length)))
    if magnet.current is not None:
        facts.append(("Current", f"{plain(magnet.current)} A"))
    lines = map_lines(fmap)
    low, high = min(line.low for line in lines), max(line.high for line in lines)
    facts += [
        ("Travel along", axis.travel),
        ("Mapped range", _span(low, high)),
        ("Limits of the integral", _span(*axis.integrate)),
        ("Flat window", _span(*axis.flat)),
    ]
    items = "".join(
        f"<div><dt>{safe(name)}</dt><dd>{safe(text)}</dd></div>" for name, text in facts
    )
    return f'<dl class="facts">{items}</dl>'


def _instruments(fmap: xr.Dataset) -> str:
    """Probes, integrators and stage, each quantity in a row."""
    named: list[tuple[str, Any]] = [(_probe_title(probe), probe) for probe in map_probes(fmap)]
    named += [(f"Integrator {one.name}, {one.kind}", one) for one in map_integrators(fmap)]
    named.append(("Stage", map_stage(fmap)))
    rows = []
    for title, instrument in named:
        stated = stated_rows(instrument) or [("nothing stated", "", "", "")]
        rows += [(title if i == 0 else "", *row) for i, row in enumerate(stated)]
    return table(
        "Instruments as the campaign states them; u is a standard uncertainty",
        _INSTRUMENTS,
        rows,
        css="grouped",
    )


def _probe_title(probe: Probe) -> str:
    kind = "moving wire" if isinstance(probe, Wire) else f"{probe.shape} coil"
    return f"Probe {probe.name}, {kind}"


def _references(fmap: xr.Dataset) -> str:
    facts = map_references(fmap)
    if not facts:
        return paragraph("No absolute references: the level of the field comes from the wires.")
    rows = [_reference(i, one) for i, one in enumerate(facts, start=1)]
    return table("Absolute references", _REFERENCES, rows)


def _reference(number: int, facts: Mapping[str, Any]) -> tuple[str, str, str, str, str]:
    kind = facts["kind"]
    where = "" if facts.get("x") is None else f", x = {_mm(facts['x'])}"
    where += "" if facts.get("y") is None else f", y = {_mm(facts['y'])}"
    if kind == "zero":
        place = _span(facts["start"], facts["stop"])
        value, u, unit = 0.0, facts["u"], "T"
    elif kind == "flip":
        place = f"{_mm(facts['at'])}, {facts['probe']} turned over"
        value, u, unit = facts["flux_change"], facts["u_flux_change"], "V s"
    else:
        place, value, u, unit = _mm(facts["at"]), facts["field"], facts["u"], "T"
    scale = in_handy_unit(unit, value or u)
    numbers = written_out(value * scale.factor), written_out(u * scale.factor)
    return f"{number} {kind}", place + where, *numbers, scale.unit


def passes_section(fmap: xr.Dataset) -> Section:
    """The passes and how well they are explained.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    Section
    """
    passes = map_passes(fmap)
    read, walk = (_level_scale(passes, name) for name in ("read_noise", "walk_noise"))
    several = len(map_lines(fmap)) > 1
    columns = [
        Column("Pass"),
        *([Column("Line x, y (mm)")] if several else []),
        Column("Probe"),
        Column("From (mm)", "number"),
        Column("To (mm)", "number"),
        Column("Readings", "number"),
        Column("Time (s)", "number"),
        Column(f"Read noise ({read[0]})", "number"),
        Column(f"Walk ({walk[0]})", "number"),
        Column("Levels"),
        Column("χ²/ν", "number"),
        Column("ν", "number"),
    ]
    rows = [_pass(one, read[1], walk[1], several=several) for one in passes]
    note = (
        "Levels of the noise are stated by the campaign, or were found from the readings. χ²/ν is "
        "the sum of squared normalised residuals over its degrees of freedom: near 1 where the "
        "readings scatter as their noise levels say."
    )
    return Section(
        "Passes",
        table("Passes of the probes", columns, rows, css="passes") + paragraph(note, "remark"),
    )


def corrections_sections(fmap: xr.Dataset) -> list[Section]:
    """The corrections that the user switched on, if there are any.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    list of Section
    """
    rows = correction_rows(fmap)
    if not rows:
        return []
    words, numbers = HEAD[:2], HEAD[2:4]
    columns = [
        *(Column(head) for head in words),
        *(Column(head, "number") for head in numbers),
        Column(HEAD[4]),
    ]
    note = (
        "Each undoes a fault of one pass. What is found of it comes from all passes together, and "
        "its standard uncertainty u is part of every result."
    )
    body = table("Faults of single passes that were corrected", columns, rows)
    return [Section("Corrections switched on", body + paragraph(note, "remark"))]


def _pass(one: Mapping[str, Any], read: float, walk: float, *, several: bool) -> tuple[str, ...]:
    freedom = one["freedom"]
    return (
        one["name"],
        *([f"{plain(one['x'] * 1e3)}, {plain(one['y'] * 1e3)}"] if several else []),
        one["probe"],
        plain(one["from"] * 1e3, 6),
        plain(one["to"] * 1e3, 6),
        str(one["readings"]),
        f"{one['duration']:.1f}",
        plain(one["read_noise"] * read, 3),
        plain(one["walk_noise"] * walk, 3),
        _origin(one["read_stated"], one["walk_stated"]),
        f"{one['chi_square'] / freedom:.2f}" if freedom > 0 else "–",
        f"{freedom:.0f}",
    )


def _origin(read: bool, walk: bool) -> str:  # noqa: FBT001 - private, named at its only call
    """Where the two noise levels come from."""
    if read == walk:
        return "stated" if read else "found"
    return "walk found" if read else "read found"


def _level_scale(passes: Sequence[Mapping[str, Any]], name: str) -> tuple[str, float]:
    """Unit of a column of noise levels, and what they are multiplied by."""
    unit = "V s" if name == "read_noise" else "V s s^-0.5"
    scale = scale_for(unit, [one[name] for one in passes])
    return scale.unit, scale.factor


def _mm(value: float) -> str:
    return f"{plain(value * 1e3)} mm"


def _span(low: float, high: float) -> str:
    return f"{plain(low * 1e3)} to {_mm(high)}"
