"""Pass tables in text: comma-separated and whatever else a bench writes.

The whole file is read once; header and comment lines are found here, the rows behind them
are parsed in ``text_blocks``.
"""

from __future__ import annotations

import codecs
import csv
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from fieldmap.errors import InputError
from fieldmap.readings.columns import Heading, parse_heading
from fieldmap.readings.last_line import check_last_line
from fieldmap.readings.text_blocks import parse_rows
from fieldmap.readings.text_lines import (
    LONGEST_LINE,
    Body,
    line_end,
    line_number,
    place_of_row,
    split_cells,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    from fieldmap.readings.layout import TableLayout
    from fieldmap.readings.passes import Floats

__all__ = ["TextTable", "open_text", "plain_text"]

_MOST_COLUMNS: Final = 10_000
_PIECE: Final = 1_000_000  # bytes
# Comment lines and blank lines; what it has matched it does not look at again.
_REMARKS: Final = re.compile(rb"(?:[ \t]*+(?:#[^\n]*+)?+(?:\n|\Z))*+")


@dataclass(frozen=True, eq=False)
class TextTable:
    """An opened text table."""

    headings: Sequence[Heading]
    body: Body

    @property
    def file(self) -> str:
        """Name of the file, for errors."""
        return self.body.file

    def place(self, row: int) -> str:
        """Name the place of a reading."""
        return place_of_row(self.body, row)

    def unit_remedy(self, name: str, unit: str) -> str:
        """Say how such a file states the unit of a column."""
        return f"write '{name} [{unit}]' in the header, or give the unit in [table]"

    def read(self, indices: Sequence[int]) -> dict[int, Floats]:
        """Read columns by index; any cell that is not a number is an error with its line."""
        labels = {i: self.headings[i].name or f"{i + 1}" for i in indices}
        columns = parse_rows(self.body, labels)
        check_last_line(self.body, labels)
        return columns


def open_text(data: bytes, file: str, layout: TableLayout) -> TextTable:
    """Open the bytes of a text table.

    Parameters
    ----------
    data : bytes
        The whole file.
    file : str
        Its name, for errors.
    layout : TableLayout
        How it is written.

    Returns
    -------
    TextTable
        Nothing but the headings has been read yet.

    Raises
    ------
    InputError
        If the file is not UTF-8 text, or has no header or no rows.
    """
    data = plain_text(data, file)
    start = _skip_remarks(data, _skip(data, layout.skip_lines))
    header: list[str] | None = None
    if layout.header:
        header = _cells(data, start, file, layout.delimiter, header=True)
        start = _skip_remarks(data, line_end(data, start))
    if start >= len(data):
        raise InputError(file, "no rows of readings", "a header row and rows", _skip_hint(layout))
    first = _cells(data, start, file, layout.delimiter)
    headings = _headings(header, first, f"{file}, line {line_number(data, start)}")
    body = Body(file, data, start, len(headings), layout.delimiter, layout.decimal)
    return TextTable(headings, body)


def plain_text(data: bytes, file: str) -> bytes:
    """Give the text without byte-order mark and with plain newlines, or refuse it.

    Parameters
    ----------
    data : bytes
        The whole file.
    file : str
        Its name, for errors.

    Returns
    -------
    bytes
        UTF-8 in which every line ends with one newline character.

    Raises
    ------
    InputError
        If the bytes are not UTF-8 text.
    """
    remedy = "save it as CSV in UTF-8"
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError(file, "text in UTF-16", "text in UTF-8", remedy)
    null = data.find(b"\0")
    if null >= 0:
        found = f"binary data (a zero byte at offset {null})"
        raise InputError(file, found, "a table in text or NetCDF", remedy)
    data = data.removeprefix(b"\xef\xbb\xbf")
    if not (data.isascii() or _is_utf8(data)):
        try:
            data.decode()
        except UnicodeDecodeError as error:
            line = data.count(b"\n", 0, error.start) + 1
            found = f"the byte 0x{data[error.start]:02x}, which is not UTF-8"
            raise InputError(f"{file}, line {line}", found, "text in UTF-8", remedy) from None
    if b"\r" in data:
        data = data.replace(b"\r\n", b"\n").replace(b"\r", b"\n")
    return data


def _is_utf8(data: bytes) -> bool:
    """Tell UTF-8 piece by piece: the text of a whole file can take four times its bytes."""
    decoder = codecs.getincrementaldecoder("utf-8")()
    try:
        for start in range(0, len(data), _PIECE):
            decoder.decode(data[start : start + _PIECE])
        decoder.decode(b"", final=True)
    except UnicodeDecodeError:
        return False
    return True


def _skip(data: bytes, count: int) -> int:
    """Skip `count` lines from the top."""
    start = 0
    for _ in range(count):
        if start >= len(data):
            break
        start = line_end(data, start)
    return start


def _skip_remarks(data: bytes, start: int) -> int:
    """Skip comment lines and blank lines."""
    match = _REMARKS.match(data, start)
    return match.end() if match else start


def _cells(
    data: bytes, start: int, file: str, delimiter: str, *, header: bool = False
) -> list[str]:
    """Cells of the header or the first row."""
    end = line_end(data, start)
    place = f"{file}, line {line_number(data, start)}"
    if end - start > LONGEST_LINE:
        found = f"{end - start} characters without a line end"
        raise InputError(place, found, "a table row", "choose another file")
    try:
        cells = split_cells(data[start:end].decode(), delimiter, header=header)
    except csv.Error as error:
        found = f"a quoted cell that cannot be read ({error})"
        raise InputError(place, found, "closed quotes", "mend the line") from None
    if len(cells) > _MOST_COLUMNS:
        found, expected = f"{len(cells)} columns", f"at most {_MOST_COLUMNS}"
        raise InputError(place, found, expected, "choose another file")
    return cells


def _headings(header: list[str] | None, first: list[str], place: str) -> Sequence[Heading]:
    """One heading per cell of the first row; a delimiter at the end of each row is tolerated."""
    if header is None:
        return [Heading("", "") for _ in first]
    if len(first) == len(header) + 1 and not first[-1].strip():
        header = [*header, ""]
    if len(first) != len(header):
        found = f"{len(first)} cell{'' if len(first) == 1 else 's'}"
        expected = f"{len(header)} as in the header"
        raise InputError(place, found, expected, "mend the row or the header")
    return [parse_heading(cell) for cell in header]


def _skip_hint(layout: TableLayout) -> str:
    """Point at what may have swallowed the rows."""
    if layout.skip_lines:
        return f"lower skip_lines = {layout.skip_lines} in [table] if it is too large"
    return "record the pass again, or set header = false in [table] if there is no header"
