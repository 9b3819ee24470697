"""Which column of a table holds which quantity, and in which unit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Protocol

from fieldmap.errors import InputError
from fieldmap.readings.layout import QUANTITIES, ColumnSpec, TableLayout
from fieldmap.readings.schema import listed, nearest
from fieldmap.units import column_to_si, quoted, scale_to_si

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.checks import RowPlace
    from fieldmap.readings.passes import Floats

__all__ = ["Heading", "Picked", "Source", "parse_heading", "pick", "to_si"]

_COUNTS: Final = frozenset({"1", "count", "counts", "pulse", "pulses", "step", "steps"})
_MOST_LISTED: Final = 12


@dataclass(frozen=True)
class Heading:
    """What a table says of one column: its whole text, its name and its unit, if any."""

    text: str
    name: str
    unit: str | None = None


class Source(Protocol):
    """An opened table: its headings, its columns as they stand, the place of its rows."""

    @property
    def file(self) -> str:
        """Name of the file, for errors."""

    @property
    def headings(self) -> Sequence[Heading]:
        """One heading per column."""

    def read(self, indices: Sequence[int]) -> dict[int, Floats]:
        """Read columns by their index from 0, without conversion."""

    @property
    def place(self) -> RowPlace:
        """Names the place of a row."""

    def unit_remedy(self, name: str, unit: str) -> str:
        """Say how such a file states the unit of a column."""


@dataclass(frozen=True)
class Picked:
    """A column chosen for a quantity."""

    quantity: str
    index: int
    label: str
    unit: str | None
    per_count: float | None = None


def parse_heading(text: str) -> Heading:
    """Split ``"position [mm]"`` into name and unit.

    Parameters
    ----------
    text : str
        A cell of the header row.

    Returns
    -------
    Heading
        Its parts; the unit is None where there are no square brackets.

    Examples
    --------
    >>> parse_heading("flux [uV s]")
    Heading(text='flux [uV s]', name='flux', unit='uV s')
    """
    text = text.strip()
    name, bracket, unit = text.removesuffix("]").rpartition("[")
    if not bracket or not text.endswith("]"):
        return Heading(text, text)
    return Heading(text, name.rstrip(), unit.strip())


def pick(quantity: str, source: Source, layout: TableLayout, *, needed: bool) -> Picked | None:
    """Choose the column of a quantity.

    Parameters
    ----------
    quantity : str
        A key of `QUANTITIES`.
    source : Source
        The opened table.
    layout : TableLayout
        What the campaign says of its columns.
    needed : bool
        Whether it is an error if the table has no such column.

    Returns
    -------
    Picked or None
        None where the column is not needed and neither named nor found.

    Raises
    ------
    InputError
        If the column is missing, stands twice or has no or the wrong unit.
    """
    spec = layout.columns.get(quantity)
    index = _find(quantity, spec, source, layout, needed=needed or spec is not None)
    if index is None:
        return None
    heading = source.headings[index]
    label = heading.name or f"number {index + 1}"
    where = f"{source.file}, column {label!r}"
    per_count = layout.per_count if quantity == "position" else None
    if per_count is not None:
        _check_counts(heading, where)
        return Picked(quantity, index, label, None, per_count)
    return Picked(quantity, index, label, _unit(quantity, spec, heading, source))


def to_si(picked: Picked, values: Floats, file: str) -> Floats:
    """Convert the numbers of a column: counts to m, any unit to SI, kelvin to degC."""
    if picked.per_count is not None:
        return values * picked.per_count
    assert picked.unit is not None
    where = f"{file}, column {picked.label!r}"
    return column_to_si(values, picked.unit, QUANTITIES[picked.quantity], where)


def _find(
    quantity: str, spec: ColumnSpec | None, source: Source, layout: TableLayout, *, needed: bool
) -> int | None:
    """Index of a column by number or by name."""
    column = quantity if spec is None else spec.column
    if isinstance(column, int):
        return _by_number(column, quantity, source)
    if not layout.header:
        if needed:
            expected = "a column number in [table], since it says header = false"
            raise InputError(
                source.file, f"no column for {quantity!r}", expected, _example(quantity)
            )
        return None
    headings = source.headings
    hits = [i for i, heading in enumerate(headings) if column in {heading.text, heading.name}]
    if len(hits) > 1:
        numbers = " and ".join(str(i + 1) for i in hits)
        found = f"the column {quoted(column)} more than once (numbers {numbers})"
        raise InputError(source.file, found, "it once", "rename one, or give its number in [table]")
    if not hits and needed:
        raise _missing(quantity, column, source, layout)
    return hits[0] if hits else None


def _by_number(column: int, quantity: str, source: Source) -> int:
    """Index of a column given by its number."""
    count = len(source.headings)
    if column > count:
        where = f"{source.file}, column {column} for {quantity!r}"
        raise InputError(where, f"{count} columns", f"at least {column}", "mend [table]")
    return column - 1


def _missing(quantity: str, column: str, source: Source, layout: TableLayout) -> InputError:
    """Build the error for a column that is not there: what is, and what may help."""
    names = [heading.text for heading in source.headings]
    found = f"no column {quoted(column)} among {listed(names[:_MOST_LISTED])}"
    if len(names) > _MOST_LISTED:
        found += f" and {len(names) - _MOST_LISTED} more"
    expected = f"a column {quoted(column)} for {quantity}"
    remedy = _other_delimiter(names, layout) or _other_record(quantity, source)
    remedy = remedy or nearest(column, [heading.name for heading in source.headings])
    return InputError(source.file, found, expected, remedy or _example(quantity))


def _other_delimiter(names: Sequence[str], layout: TableLayout) -> str:
    """Suspect a wrong delimiter where the whole header is one cell."""
    if len(names) != 1:
        return ""
    for delimiter in (";", "\t", "|", ",", " "):
        if delimiter != layout.delimiter and delimiter in names[0]:
            return f"set delimiter = {quoted(delimiter)[1:-1]!r} in [table]"
    return ""


def _other_record(quantity: str, source: Source) -> str:
    """Suggest the record that fits the column which is there."""
    records = {"flux": "cumulative", "dflux": "increments", "voltage": "voltage"}
    present = {heading.name for heading in source.headings}
    for other, record in records.items():
        if quantity in records and other in present:
            return f"set record = {record!r} for this pass to use {other!r}"
    if quantity == "time":
        return "add it, or give the readings per second as rate in [table]"
    return ""


def _example(quantity: str) -> str:
    """Show how a ``[table]`` section names a column."""
    unit = QUANTITIES[quantity]
    return f'name it in [table], as in {quantity} = {{column = 2, unit = "{unit}"}}'


def _unit(quantity: str, spec: ColumnSpec | None, heading: Heading, source: Source) -> str:
    """Give the unit of a column from the layout or the heading; both must agree."""
    where = f"{source.file}, column {heading.name or quantity!r}"
    wanted = QUANTITIES[quantity]
    stated, written = (spec.unit if spec else None), heading.unit
    if stated is None and written is None:
        found = "no unit"
        remedy = source.unit_remedy(heading.name or quantity, wanted)
        raise InputError(where, found, f"a unit such as {wanted!r}", remedy)
    if wanted == "degC":
        return stated or str(written)
    scales = [scale_to_si(unit, wanted, where) for unit in (stated, written) if unit is not None]
    if len(scales) == 2 and scales[0] != scales[1]:
        found = f"the unit [{written}] in the heading and {stated!r} in [table]"
        raise InputError(where, found, "the same unit", "mend the one that is wrong")
    return stated or str(written)


def _check_counts(heading: Heading, where: str) -> None:
    """Refuse encoder counts whose heading gives another unit."""
    if heading.unit is not None and heading.unit.strip() not in _COUNTS:
        found = f"the unit [{heading.unit}] in the heading beside per_count in [table]"
        raise InputError(where, found, "counts", "delete per_count, or mend the heading")
