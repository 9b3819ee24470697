"""The rows of a text table line by line: slow, exact, and able to name the line at fault."""

from __future__ import annotations

import csv
import io
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from fieldmap.errors import InputError
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

__all__ = [
    "LONGEST_LINE",
    "Body",
    "check_cells",
    "line_end",
    "line_number",
    "place_of_row",
    "split_cells",
]

LONGEST_LINE: Final = 100_000  # bytes: no row of a table is longer

_NUMBERS: Final = {
    mark: re.compile(rf"[+-]?(?:[0-9]+{dot}?[0-9]*|{dot}[0-9]+)(?:[eE][+-]?[0-9]+)?")
    for mark, dot in ((".", r"\."), (",", ","))
}


@dataclass(frozen=True, eq=False)
class Body:
    """The rows of a text table behind its header.

    Parameters
    ----------
    file : str
        Name of the file, for errors.
    data : bytes
        The whole file in UTF-8; lines end with a newline.
    start : int
        Where the rows begin in `data`.
    width : int
        Cells per row.
    delimiter, decimal : str
        How it is written.
    """

    file: str
    data: bytes
    start: int
    width: int
    delimiter: str
    decimal: str

    @property
    def blanks(self) -> bytes:
        """Characters that a line may have nothing but and still count as no row."""
        return b" \n" if self.delimiter == "\t" else b" \t\n"


def line_end(data: bytes, start: int) -> int:
    """Give the offset behind the newline that ends the line at `start`."""
    end = data.find(b"\n", start)
    return len(data) if end < 0 else end + 1


def line_number(data: bytes, start: int) -> int:
    """Give the number of the line at `start`, counted from 1."""
    return data.count(b"\n", 0, start) + 1


def split_cells(line: str, delimiter: str, *, header: bool = False) -> list[str]:
    """Split one line into its cells.

    Parameters
    ----------
    line : str
        The line.
    delimiter : str
        What parts the cells; a blank stands for any run of blanks and tabs.
    header : bool
        Whether blanks within square brackets belong to a unit.

    Returns
    -------
    list of str
        The cells, without the blanks around them.

    Raises
    ------
    csv.Error
        If a quote is not closed.

    Examples
    --------
    >>> split_cells("time [s] flux [uV s]", " ", header=True)
    ['time [s]', 'flux [uV s]']
    """
    line = line.strip("\n" if delimiter == "\t" else " \t\n")
    if delimiter == " ":
        return _names(line) if header else line.split()
    if '"' not in line:
        return [cell.strip() for cell in line.split(delimiter)]
    row = next(csv.reader([line], delimiter=delimiter, strict=True, skipinitialspace=True))
    return [cell.strip() for cell in row]


def _names(line: str) -> list[str]:
    """Split a header at its blanks, but for those at and within the brackets of a unit."""
    names: list[str] = []
    within = False
    for word in line.split():
        if names and (within or word.startswith("[")):
            names[-1] += f" {word}"
        else:
            names.append(word)
        if "[" in word or "]" in word:
            within = word.rfind("[") > word.rfind("]")
    return names


def place_of_row(body: Body, row: int) -> str:
    """Name the line of a row that is counted from 0."""
    for index, (line, _) in enumerate(_rows(body, body.start, len(body.data))):
        if index == row:
            return f"{body.file}, line {line}"
    return body.file


def check_cells(body: Body, labels: Mapping[int, str], start: int, stop: int) -> None:
    """Raise for the first row that is ragged or has a cell that is not a number.

    Parameters
    ----------
    body : Body
        The rows.
    labels : mapping of int to str
        The columns that must hold numbers: their index from 0 and their name.
    start, stop : int
        The stretch of `body.data` to look at; it begins with a line.

    Raises
    ------
    InputError
        With the line, the column, what stands there and what to do.
    """
    number = _NUMBERS[body.decimal]
    for line, raw in _rows(body, start, stop):
        cells = _cells(raw, body, line)
        for index, label in labels.items():
            cell = cells[index]
            if not number.fullmatch(cell):
                raise _no_number(cell, body, f"{body.file}, line {line}, column {label!r}")


def _rows(body: Body, start: int, stop: int) -> Iterator[tuple[int, bytes]]:
    """Line number and bytes of every row in a stretch."""
    blanks, lines = body.blanks, io.BytesIO(body.data)
    lines.seek(start)
    for number, raw in enumerate(lines, line_number(body.data, start)):
        text = raw.strip(blanks)
        if text and not text.startswith(b"#"):
            yield number, raw
        start += len(raw)
        if start >= stop:
            return


def _cells(raw: bytes, body: Body, line: int) -> list[str]:
    """Cells of a row, which must have the right number of them."""
    place, remedy = f"{body.file}, line {line}", "mend or delete the row"
    if len(raw) > LONGEST_LINE:
        raise InputError(place, f"{len(raw)} characters in one line", "a row of a table", remedy)
    try:
        cells = split_cells(raw.decode(), body.delimiter)
    except csv.Error as error:
        found = f"a quoted cell that cannot be read ({error})"
        raise InputError(place, found, "closed quotes", remedy) from None
    if len(cells) != body.width:
        found = f"{len(cells)} cell{'' if len(cells) == 1 else 's'}"
        raise InputError(place, found, f"{body.width} as in the rows above", remedy)
    return cells


def _no_number(cell: str, body: Body, place: str) -> InputError:
    """Build the error for a cell that is no number."""
    remedy = "mend or delete the row"
    if not cell:
        return InputError(place, "a blank cell", "a number", remedy)
    other = "," if body.decimal == "." else "."
    if _NUMBERS[other].fullmatch(cell):
        remedy = f"set decimal = {other!r} in [table] if that is the decimal mark"
    return InputError(place, quoted(cell), "a number", remedy)
