"""How a pass table is laid out: the ``[table]`` section of a campaign file."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import InputError
from fieldmap.readings.schema import (
    Key,
    Reader,
    choice,
    flag,
    quantity,
    read_section,
    shown,
    text,
    whole,
)
from fieldmap.units import line_to_si

if TYPE_CHECKING:
    from collections.abc import Mapping

__all__ = ["QUANTITIES", "ColumnSpec", "TableLayout", "read_layout"]

# The quantities a table may hold, by the name of their column, and the unit they are turned into.
QUANTITIES: Final[Mapping[str, str]] = MappingProxyType(
    {
        "time": "s",
        "position": "m",
        "flux": "V s",
        "dflux": "V s",
        "voltage": "V",
        "temperature": "degC",
        "current": "A",
    }
)


@dataclass(frozen=True)
class ColumnSpec:
    """Where a quantity stands: a column by name or number (the first is 1), and its unit."""

    column: str | int
    unit: str | None = None


@dataclass(frozen=True)
class TableLayout:
    """How a table is written; the defaults are the kit's own tables.

    Parameters
    ----------
    delimiter : str
        One character between cells; a blank stands for any run of blanks and tabs.
    decimal : str
        Decimal mark, ``"."`` or ``","``.
    skip_lines : int
        Lines before the header row.
    header : bool
        Whether there is a row of column names.
    rate : float, optional
        Readings per second where no time is recorded, Hz.
    per_count : float, optional
        Travel per count where the position is an encoder's count, m.
    columns : mapping of str to ColumnSpec
        Where each quantity stands, if not under its own name.
    """

    delimiter: str = ","
    decimal: str = "."
    skip_lines: int = 0
    header: bool = True
    rate: float | None = None
    per_count: float | None = None
    columns: Mapping[str, ColumnSpec] = field(default_factory=dict)


def read_layout(raw: object, place: str, base: TableLayout | None = None) -> TableLayout:
    """Check a ``[table]`` section; its keys take the place of those of `base`.

    Parameters
    ----------
    raw : object
        The section as the TOML reader gave it.
    place : str
        Such as ``"campaign.toml, [table]"``.
    base : TableLayout, optional
        The layout that holds for what the section does not say.

    Returns
    -------
    TableLayout
        The layout, checked as a whole.

    Raises
    ------
    InputError
        If a key is unknown, a value does not fit or two keys contradict each other.

    Examples
    --------
    >>> read_layout({"delimiter": ";", "decimal": ","}, "campaign.toml, [table]").decimal
    ','
    """
    values = read_section(raw, _KEYS, place)
    _refuse_two_clocks(values, place)
    columns = {name: values.pop(name) for name in QUANTITIES if name in values}
    position = columns.get("position")
    if isinstance(position, _Counted):
        if "per_count" in values:
            raise InputError(place, "'per_count' twice", "it once", "keep one of the two")
        columns["position"] = position.spec
        values["per_count"] = position.per_count
    layout = _merged(base or TableLayout(), values, columns)
    _check_whole(layout, place)
    return layout


@dataclass(frozen=True)
class _Counted:
    """A position column of encoder counts with the travel per count, m."""

    spec: ColumnSpec
    per_count: float


def _column(name: str, unit: str) -> Reader:
    """Read ``{column = …, unit = …}``."""
    keys = [Key("column", _column_name), Key("unit", text(120))]
    if name == "position":
        keys.append(_PER_COUNT)

    def read(raw: object, place: str) -> ColumnSpec | _Counted:
        if not isinstance(raw, dict):
            expected = f'a table such as {{column = 2, unit = "{_EXAMPLES.get(name, unit)}"}}'
            raise InputError(place, shown(raw), expected)
        values = read_section(raw, keys, place)
        given = values.get("unit")
        spec = ColumnSpec(values.get("column", name), given)
        if "per_count" in values:
            if given is not None:
                raise InputError(place, "'unit' and 'per_count'", "one of the two", "delete one")
            return _Counted(spec, values["per_count"])
        if given is not None:
            line_to_si(given, unit, place)
        return spec

    return read


def _column_name(raw: object, place: str) -> str | int:
    """Read the name or the number of a column."""
    if isinstance(raw, str):
        return str(text()(raw, place))
    if isinstance(raw, bool) or not isinstance(raw, int) or not 1 <= raw <= 100_000:
        expected = "a column's name, or its number from 1 up"
        raise InputError(place, shown(raw), expected, "count the columns from 1")
    return raw


def _delimiter(raw: object, place: str) -> str:
    """Read the character between cells."""
    named = {"tab": "\t", "\\t": "\t", "blank": " ", "whitespace": " "}
    value = named.get(raw, raw) if isinstance(raw, str) else raw
    allowed = isinstance(value, str) and len(value) == 1 and value.isascii()
    if not allowed or str(value).isalnum() or str(value) in "+-.#\"\n\r_'[]":
        expected = 'one character such as ",", ";", "|", "\\t", or " " for any run of blanks'
        raise InputError(place, shown(raw), expected)
    return str(value)


_PER_COUNT: Final = Key("per_count", quantity("m", "not zero"))
_EXAMPLES: Final = {"position": "mm", "flux": "uV s", "dflux": "uV s", "voltage": "mV"}
_KEYS: Final = (
    Key("delimiter", _delimiter),
    Key("decimal", choice(".", ",")),
    Key("skip_lines", whole(least=0)),
    Key("header", flag()),
    Key("rate", quantity("Hz", "positive")),
    _PER_COUNT,
    *(Key(name, _column(name, unit)) for name, unit in QUANTITIES.items()),
)


def _refuse_two_clocks(values: Mapping[str, Any], place: str) -> None:
    """Refuse a section that gives both a time column and a rate."""
    if "rate" in values and "time" in values:
        raise InputError(place, "'time' and 'rate'", "one of the two", "delete one of them")


def _merged(
    base: TableLayout, values: dict[str, Any], columns: dict[str, ColumnSpec]
) -> TableLayout:
    """Lay a section over a base; what contradicts it in the base goes."""
    kept = dict(base.columns)
    if "rate" in values:
        kept.pop("time", None)
    if "time" in columns:
        values.setdefault("rate", None)
    position = columns.get("position")
    if position is not None and position.unit is not None:
        values.setdefault("per_count", None)
    if "per_count" in values and values["per_count"] is not None and "position" not in columns:
        old = kept.get("position", ColumnSpec("position"))
        kept["position"] = ColumnSpec(old.column)
    return replace(base, **values, columns=MappingProxyType({**kept, **columns}))


def _check_whole(layout: TableLayout, place: str) -> None:
    """Refuse settings that contradict each other."""
    if layout.delimiter == layout.decimal:
        found = f"{layout.delimiter!r} both between cells and as decimal mark"
        raise InputError(place, found, "two different characters", 'set delimiter, such as ";"')
    position = layout.columns.get("position")
    if layout.per_count is not None and position is not None and position.unit is not None:
        found = f"'per_count' beside the unit {position.unit!r} of the position"
        raise InputError(place, found, "one of the two", "delete one of them")
    for name, spec in layout.columns.items():
        if isinstance(spec.column, str) and not layout.header:
            found = f"the name {spec.column!r} for {name!r} where the table has no header"
            raise InputError(place, found, "a column number", "count the columns from 1")
