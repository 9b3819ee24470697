"""A campaign file and its pass tables to a Campaign."""

from __future__ import annotations

import hashlib
import re
import tomllib
from dataclasses import dataclass, replace
from pathlib import Path, PureWindowsPath
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import InputError
from fieldmap.progress import Tell, silent
from fieldmap.readings import sections
from fieldmap.readings.checks import FEWEST_READINGS
from fieldmap.readings.layout import TableLayout, read_layout
from fieldmap.readings.passes import (
    Axis,
    Campaign,
    FlipReference,
    Limit,
    Magnet,
    Pass,
    PlannedPass,
    Reference,
    ZeroReference,
)
from fieldmap.readings.probe import Coil, Integrator, Probe, Stage
from fieldmap.readings.records import SAMPLES, cumulative_flux
from fieldmap.readings.schema import (
    Key,
    as_table,
    choice,
    key_place,
    listed,
    one_of,
    read_section,
    shown,
)
from fieldmap.readings.tables import read_bytes, read_table
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.readings.sections import Kind

__all__ = ["load"]

_FILE_NAME: Final = "campaign.toml"
_LARGEST_FILE: Final = 4_000_000  # bytes of a campaign file
_MOST_READINGS: Final = 1e8  # of a planned pass
_TOML_PLACE: Final = re.compile(r"(?P<reason>.*?) ?\(at (?P<place>line \d+, column \d+)\)")


def load(path: str | Path, *, tell: Tell = silent) -> Campaign:
    """Read a campaign file and every pass table it names.

    Parameters
    ----------
    path : str or Path
        The campaign file, or a folder that holds a ``campaign.toml``.
    tell : callable, optional
        Told in a few words what is read next.

    Returns
    -------
    Campaign
        Everything in SI, checked; measured passes with their readings.

    Raises
    ------
    InputError
        If a file, key, value or row cannot be used as it is; the text says which, what was
        found, what is expected and what to do.

    Examples
    --------
    >>> try:
    ...     load("no_such_folder/campaign.toml")
    ... except InputError as error:
    ...     print(error.found)
    no such file
    """
    path = Path(path)
    if path.is_dir():
        path = path / _FILE_NAME
    data = read_bytes(path, path.name, _LARGEST_FILE)
    raw = _parse_toml(data, path.name)
    _check_format(raw, path.name)
    top = read_section(raw, sections.TOP, path.name)
    rig = _rig(top, path)
    passes, planned = _passes(top["passes"], rig, tell)
    return Campaign(
        name=top["name"],
        magnet=Magnet(**read_section(top["magnet"], sections.MAGNET, f"{path.name}, [magnet]")),
        axis=_axis(top["axis"], f"{path.name}, [axis]"),
        stage=Stage(**read_section(top.get("stage", {}), sections.STAGE, f"{path.name}, [stage]")),
        passes=passes,
        planned=planned,
        references=_references(top.get("references", []), rig),
        limits=_limits(top.get("limits", []), path.name),
        path=path,
        sha256=hashlib.sha256(data).hexdigest(),
    )


@dataclass(frozen=True)
class _Rig:
    """What passes and references are read with: the folder and the things they name."""

    file: str
    folder: Path
    probes: Mapping[str, Probe]
    integrators: Mapping[str, Integrator]
    layout: TableLayout


def _parse_toml(data: bytes, file: str) -> dict[str, Any]:
    """Parse TOML; errors name the line."""
    try:
        return tomllib.loads(data.removeprefix(b"\xef\xbb\xbf").decode())
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        found = f"the byte 0x{data[error.start]:02x}, which is not UTF-8"
        remedy = "save it in UTF-8"
        raise InputError(f"{file}, line {line}", found, "text in UTF-8", remedy) from None
    except (ValueError, RecursionError) as error:
        match = _TOML_PLACE.fullmatch(str(error))
        where = f"{file}, {match['place']}" if match else file
        reason = match["reason"] if match else "a value too deep or too long"
        found = f"text that is not TOML ({reason})"
        raise InputError(where, found, "a campaign file in TOML", "mend the line") from None


def _check_format(raw: Mapping[str, Any], file: str) -> None:
    """Refuse a file of another format before its keys are judged."""
    found = raw.get("format")
    if found == sections.FORMAT:
        return
    place = key_place(file, "format")
    remedy = f'write format = "{sections.FORMAT}" in the first line'
    if isinstance(found, str) and found.startswith("fieldmap-campaign/"):
        remedy = "use a version of the kit that reads this format"
    stands = "no such key" if found is None else shown(found)
    raise InputError(place, stands, f"'{sections.FORMAT}'", remedy)


def _rig(top: Mapping[str, Any], path: Path) -> _Rig:
    """Read probes, integrators and the layout that holds for all passes."""
    file = path.name
    probes = {
        name: _of_kind(raw, sections.PROBES, f"{file}, [probes.{name}]", name=name)
        for name, raw in top["probes"].items()
    }
    if not probes:
        expected = "at least one section such as [probes.wire]"
        raise InputError(f"{file}, [probes]", "no probe", expected, "describe the probe")
    raw_integrators = top.get("integrators") or {"main": {}}
    integrators = {
        name: Integrator(
            name, **read_section(raw, sections.INTEGRATOR, f"{file}, [integrators.{name}]")
        )
        for name, raw in raw_integrators.items()
    }
    layout = read_layout(top.get("table", {}), f"{file}, [table]")
    return _Rig(file, path.parent, probes, integrators, layout)


def _of_kind(raw: object, kinds: Mapping[str, Kind], place: str, **extra: object) -> Any:
    """Build a record of one of several kinds from its section."""
    named = as_table(raw, place).get(sections.KIND)
    kind_key = Key(sections.KIND, choice(*kinds), required=True)
    kind = kind_key.read(named, key_place(place, sections.KIND)) if named is not None else ""
    keys = kinds[kind].keys if kind else ()
    if not kind:
        expected = f"kind = one of {listed(kinds)}"
        raise InputError(place, f"no key {sections.KIND!r}", expected, "add it")
    values = read_section(raw, (kind_key, *keys), place)
    del values[sections.KIND]
    return kinds[kind].build(**values, **extra)


def _axis(raw: object, place: str) -> Axis:
    """Read the axis; the flat window lies inside the limits of the integral."""
    axis = Axis(**read_section(raw, sections.AXIS, place))
    (start, stop), (left, right) = axis.integrate, axis.flat
    if not start <= left < right <= stop:
        found = f"from {left:g} m to {right:g} m"
        expected = f"a window inside integrate, {start:g} m to {stop:g} m"
        raise InputError(key_place(place, "flat"), found, expected, "mend one of the two")
    for key in ("tail_in", "tail_out"):
        _check_pair(axis, key, place)
    return axis


def _check_pair(axis: Axis, key: str, place: str) -> None:
    """A tail known otherwise comes with its uncertainty."""
    named = [name for name in (key, f"u_{key}") if getattr(axis, name) is not None]
    if len(named) == 1:
        found = f"{named[0]!r} alone"
        raise InputError(place, found, f"'{key}' and 'u_{key}' together", "add the other one")


def _passes(
    raw: list[Any], rig: _Rig, tell: Tell
) -> tuple[tuple[Pass, ...], tuple[PlannedPass, ...]]:
    """Read the passes in their order: those measured and those planned."""
    if not raw:
        expected = "at least one entry under [[passes]]"
        raise InputError(f"{rig.file}, [[passes]]", "no pass", expected, "add the passes")
    measured: list[Pass] = []
    planned: list[PlannedPass] = []
    places: dict[Path, str] = {}
    for index, entry in enumerate(raw, 1):
        place = f"{rig.file}, [[passes]] {index}"
        if _is_planned(as_table(entry, place), place):
            planned.append(_planned_pass(entry, rig, f"planned pass {index}", place))
        else:
            tell(f"reading pass {index} of {len(raw)}")
            measured.append(_measured_pass(entry, rig, place, places))
    return tuple(measured), tuple(planned)


def _is_planned(entry: Mapping[str, Any], place: str) -> bool:
    """Tell a pass not measured yet; it has a travel in place of a file."""
    travel = sorted({"from", "to", "speed", "rate", "dwell"} & set(entry))
    if "file" in entry and travel:
        found = f"'file' beside {listed(travel)}"
        expected = "'file' for a measured pass, or 'from', 'to', 'speed', 'rate' for a planned one"
        raise InputError(place, found, expected, "delete one or the other")
    return bool(travel)


def _measured_pass(entry: object, rig: _Rig, place: str, places: dict[Path, str]) -> Pass:
    """Read one pass and its table."""
    values = read_section(entry, sections.MEASURED, place)
    name = values.pop("file")
    path = _inside(name, rig.folder, key_place(place, "file"))
    if path in places:
        found = f"{quoted(name)}, named already in {places[path]}"
        raise InputError(key_place(place, "file"), found, "each file once", "delete one entry")
    places[path] = f"[[passes]] {place.rpartition(' ')[2]}"
    layout = read_layout(values.pop("table", {}), f"{place}, [table]", rig.layout)
    values.update(_instruments(values, rig, place))
    record = values.setdefault("record", "cumulative")
    table = read_table(path, layout, samples=SAMPLES[record][0], name=name)
    flux = cumulative_flux(table.samples, table.time, record, values["integrator"], table.place)
    return Pass(
        name=name,
        time=table.time,
        position=table.position,
        flux=flux,
        temperature=table.temperature,
        current=table.current,
        source=path,
        sha256=table.sha256,
        **values,
    )


def _planned_pass(entry: object, rig: _Rig, name: str, place: str) -> PlannedPass:
    """Read one pass that is not measured yet."""
    values = read_section(entry, sections.PLANNED, place)
    values.update(_instruments(values, rig, place))
    planned = PlannedPass(name=name, **values)
    travel = abs(planned.stop - planned.start)
    if not travel:
        expected = "two different positions"
        raise InputError(place, "'from' equal to 'to'", expected, "mend one of the two")
    count = (travel / planned.speed + 2.0 * planned.dwell) * planned.rate
    if not FEWEST_READINGS <= count <= _MOST_READINGS:
        expected = f"{FEWEST_READINGS} to {_MOST_READINGS:.0e}"
        found = f"a travel that takes {count:.3g} readings"
        raise InputError(place, found, expected, "mend 'speed', 'rate' or 'dwell'")
    return planned


def _instruments(values: Mapping[str, Any], rig: _Rig, place: str) -> dict[str, Any]:
    """Probe and integrator of a pass; the integrator may be left out where there is one."""
    where = key_place(place, "probe")
    probe = rig.probes[one_of(values["probe"], list(rig.probes), where, "a probe among")]
    known, named = list(rig.integrators), values.get("integrator")
    where = key_place(place, "integrator")
    if named is None:
        if len(known) > 1:
            raise InputError(where, "no such key", f"an integrator among {listed(known)}", "add it")
        named = known[0]
    integrator = rig.integrators[one_of(named, known, where, "an integrator among")]
    return {"probe": probe, "integrator": integrator}


def _inside(text: str, folder: Path, place: str) -> Path:
    """Path of a pass file, which must lie in the campaign's folder."""
    # Read as a Windows path, a name shows drives, roots and backslashes on any system.
    pure = PureWindowsPath(text)
    expected = "a path within the folder of the campaign file"
    remedy = "put the file there and name it relative to that folder"
    if pure.drive or pure.root or ".." in pure.parts:
        raise InputError(place, quoted(text), expected, remedy)
    try:
        root = folder.resolve()
        path = (root / pure.as_posix()).resolve()
    except (OSError, RuntimeError, ValueError):  # a loop of links, a zero byte
        raise InputError(place, quoted(text), expected, remedy) from None
    if not path.is_relative_to(root):
        raise InputError(place, f"{quoted(text)}, a link that leads out of it", expected, remedy)
    return path


def _references(raw: list[Any], rig: _Rig) -> tuple[Reference, ...]:
    """Read the absolute references."""
    references: list[Reference] = []
    for index, entry in enumerate(raw, 1):
        place = f"{rig.file}, [[references]] {index}"
        reference = _of_kind(entry, sections.REFERENCES, place)
        if isinstance(reference, FlipReference):
            reference = replace(reference, probe=_coil(str(reference.probe), rig, place))
        if isinstance(reference, ZeroReference) and not reference.start < reference.stop:
            found = f"'from' {reference.start:g} m and 'to' {reference.stop:g} m"
            raise InputError(place, found, "'from' below 'to'", "exchange or mend the two")
        references.append(reference)
    return tuple(references)


def _coil(name: str, rig: _Rig, place: str) -> Coil:
    """Find the coil that a flip names."""
    where = key_place(place, "probe")
    probe = rig.probes[one_of(name, list(rig.probes), where, "a probe among")]
    if not isinstance(probe, Coil):
        raise InputError(where, f"{quoted(name)}, which is no coil", "a coil", "name a coil")
    return probe


def _limits(raw: list[Any], file: str) -> tuple[Limit, ...]:
    """Read the limits; one result has one entry."""
    limits: list[Limit] = []
    for index, entry in enumerate(raw, 1):
        place = f"{file}, [[limits]] {index}"
        limit = _limit(as_table(entry, place), place)
        if limit.result in {other.result for other in limits}:
            where = key_place(place, "result")
            raise InputError(where, f"{limit.result!r} again", "each result once", "join the two")
        limits.append(limit)
    return tuple(limits)


def _limit(entry: Mapping[str, Any], place: str) -> Limit:
    """Read one limit: nominal and tolerance, or lower and upper or one of them."""
    where = key_place(place, "result")
    result = entry.get("result")
    known = list(sections.RESULT_UNITS)
    if not isinstance(result, str):
        stands = "no such key" if result is None else shown(result)
        raise InputError(where, stands, f"a result among {listed(known)}", "name the result")
    unit = sections.RESULT_UNITS[one_of(result, known, where, "a result among")]
    values = read_section(entry, sections.limit_keys(unit), place)
    rule = {key: values[key] for key in ("k", "guard") if key in values}
    given = set(values) - {"result"} - set(rule)
    if given == {"nominal", "tolerance"}:
        lower = values["nominal"] - values["tolerance"]
        return Limit(result, lower, values["nominal"] + values["tolerance"], **rule)
    if not given or given - {"lower", "upper"}:
        found = f"the keys {listed(sorted(given))}" if given else "no limit"
        expected = "'nominal' and 'tolerance', or 'lower' or 'upper' or both"
        raise InputError(place, found, expected, "write one of these")
    lower, upper = values.get("lower"), values.get("upper")
    if lower is not None and upper is not None and not lower < upper:
        found = f"'lower' {lower:g} and 'upper' {upper:g}"
        raise InputError(place, found, "'lower' below 'upper'", "exchange or mend the two")
    return Limit(result, lower, upper, **rule)
