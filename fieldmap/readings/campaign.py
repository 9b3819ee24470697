"""A campaign file and its pass tables to a Campaign."""

from __future__ import annotations

import hashlib
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path, PureWindowsPath
from typing import TYPE_CHECKING, Any, Final, NamedTuple

from fieldmap.atomic import is_folder, settle
from fieldmap.errors import InputError
from fieldmap.progress import Tell, silent
from fieldmap.readings import sections
from fieldmap.readings.checks import FEWEST_READINGS
from fieldmap.readings.entries import (
    of_kind,
    read_corrections,
    read_limits,
    read_references,
)
from fieldmap.readings.layout import TableLayout, read_layout
from fieldmap.readings.passes import (
    Axis,
    Campaign,
    Magnet,
    Pass,
    PlannedPass,
)
from fieldmap.readings.probe import Integrator, Probe, Stage
from fieldmap.readings.records import SAMPLES, cumulative_flux
from fieldmap.readings.schema import (
    as_table,
    key_place,
    listed,
    one_of,
    read_section,
    shown,
)
from fieldmap.readings.tables import read_bytes, read_table
from fieldmap.readings.toml_text import parse_toml
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence


__all__ = ["PartCampaign", "Take", "load", "load_part"]

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
    return load_part(path, _at_once, tell=tell).campaign


class PartCampaign(NamedTuple):
    """A campaign with the passes that could be had, and the files of those that could not."""

    campaign: Campaign
    awaited: tuple[str, ...]


Take = Callable[[Path, Callable[[], Pass]], Pass | None]
"""Called with the file of a pass and what reads it; gives the pass, or None to go without it."""


def load_part(
    path: str | Path,
    take: Take,
    *,
    extra: Sequence[Mapping[str, object]] = (),
    tell: Tell = silent,
) -> PartCampaign:
    """Read a campaign file while its passes are still being measured.

    Parameters
    ----------
    path : str or Path
        As for `load`.
    take : callable
        Decides on each pass; see `Take`.
    extra : sequence of mapping, optional
        More entries of [[passes]], behind those of the file.
    tell : callable, optional
        As for `load`.

    Returns
    -------
    PartCampaign

    Raises
    ------
    InputError
        As for `load`.

    Examples
    --------
    >>> from fieldmap.shipped import demo_folder
    >>> slot = demo_folder() / "slot"
    >>> part = load_part(slot, lambda file, read: read() if "1" in file.name else None)
    >>> len(part.campaign.passes) + len(part.awaited) == len(load(slot).passes)
    True
    """
    path = Path(path)
    if is_folder(path):
        path = path / _FILE_NAME
    settle(path.parent)
    data = read_bytes(path, path.name, _LARGEST_FILE)
    raw = _parse_toml(data, path.name)
    _check_format(raw, path.name)
    top = read_section(raw, sections.TOP, path.name)
    rig = _rig(top, path, take)
    passes, planned, awaited = _passes([*top["passes"], *extra], rig, tell)
    campaign = Campaign(
        name=top["name"],
        magnet=Magnet(**read_section(top["magnet"], sections.MAGNET, f"{path.name}, [magnet]")),
        axis=_axis(top["axis"], f"{path.name}, [axis]"),
        stage=Stage(**read_section(top.get("stage", {}), sections.STAGE, f"{path.name}, [stage]")),
        passes=passes,
        planned=planned,
        references=read_references(top.get("references", []), rig.probes, path.name),
        limits=read_limits(top.get("limits", []), path.name),
        path=path,
        sha256=hashlib.sha256(data).hexdigest(),
        corrections=read_corrections(top.get("corrections", []), passes, awaited, path.name),
    )
    return PartCampaign(campaign, awaited)


def _at_once(path: Path, read: Callable[[], Pass]) -> Pass:
    """Read every pass that is named."""
    del path
    return read()


@dataclass(frozen=True)
class _Rig:
    """What passes and references are read with: the folder and the things they name."""

    file: str
    folder: Path
    probes: Mapping[str, Probe]
    integrators: Mapping[str, Integrator]
    layout: TableLayout
    take: Take


def _parse_toml(data: bytes, file: str) -> dict[str, Any]:
    """Parse TOML; errors name the line."""
    try:
        return parse_toml(data.removeprefix(b"\xef\xbb\xbf").decode())
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


def _rig(top: Mapping[str, Any], path: Path, take: Take) -> _Rig:
    """Read probes, integrators and the layout that holds for all passes."""
    file = path.name
    probes = {
        name: of_kind(raw, sections.PROBES, f"{file}, [probes.{name}]", name=name)
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
    return _Rig(file, path.parent, probes, integrators, layout, take)


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
) -> tuple[tuple[Pass, ...], tuple[PlannedPass, ...], tuple[str, ...]]:
    """Read the passes in their order: those measured, those planned, names of those awaited."""
    if not raw:
        expected = "at least one entry under [[passes]]"
        raise InputError(f"{rig.file}, [[passes]]", "no pass", expected, "add the passes")
    measured: list[Pass] = []
    planned: list[PlannedPass] = []
    awaited: list[str] = []
    places: dict[Path, str] = {}
    for index, entry in enumerate(raw, 1):
        place = f"{rig.file}, [[passes]] {index}"
        if _is_planned(as_table(entry, place), place):
            planned.append(_planned_pass(entry, rig, f"planned pass {index}", place))
        else:
            tell(f"reading pass {index} of {len(raw)}")
            one = _measured_pass(entry, rig, place, places)
            if isinstance(one, Pass):
                measured.append(one)
            else:
                awaited.append(one)
    return tuple(measured), tuple(planned), tuple(awaited)


def _is_planned(entry: Mapping[str, Any], place: str) -> bool:
    """Tell a pass not measured yet; it has a travel in place of a file."""
    travel = sorted({"from", "to", "speed", "rate", "dwell"} & set(entry))
    if "file" in entry and travel:
        found = f"'file' beside {listed(travel)}"
        expected = "'file' for a measured pass, or 'from', 'to', 'speed', 'rate' for a planned one"
        raise InputError(place, found, expected, "delete one or the other")
    return bool(travel)


def _measured_pass(entry: object, rig: _Rig, place: str, places: dict[Path, str]) -> Pass | str:
    """Take one pass and its table; its name if it is to be gone without."""
    values = read_section(entry, sections.MEASURED, place)
    name = values.pop("file")
    path = _inside(name, rig.folder, key_place(place, "file"))
    if path in places:
        found = f"{quoted(name)}, named already in {places[path]}"
        raise InputError(key_place(place, "file"), found, "each file once", "delete one entry")
    places[path] = f"[[passes]] {place.rpartition(' ')[2]}"
    layout = read_layout(values.pop("table", {}), f"{place}, [table]", rig.layout)
    values.update(_instruments(values, rig, place))
    return rig.take(path, lambda: _read_pass(path, name, layout, values)) or str(name)


def _read_pass(path: Path, name: str, layout: TableLayout, values: dict[str, Any]) -> Pass:
    """Read the table of a pass."""
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
