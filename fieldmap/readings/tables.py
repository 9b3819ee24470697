"""Pass tables to arrays in SI: one entrance for text and NetCDF."""

from __future__ import annotations

import csv
import hashlib
import itertools
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final, Literal

import numpy as np

from fieldmap.errors import InputError
from fieldmap.readings.checks import RowPlace, check_count, check_finite, check_time
from fieldmap.readings.columns import Picked, Source, pick, to_si
from fieldmap.readings.layout import TableLayout
from fieldmap.readings.netcdf_table import is_netcdf, open_netcdf
from fieldmap.readings.text_lines import split_cells
from fieldmap.readings.text_table import open_text, plain_text

if TYPE_CHECKING:
    from fieldmap.readings.passes import Floats

__all__ = [
    "Samples",
    "Table",
    "TablePreview",
    "preview_table",
    "read_bytes",
    "read_table",
    "table_columns",
]

Samples = Literal["flux", "dflux", "voltage"]

_PREVIEW_BYTES: Final = 65_536


@dataclass(frozen=True, eq=False)
class Table:
    """The columns of one pass table, in SI.

    Parameters
    ----------
    time : (n,) array
        s, never decreasing.
    position : (n,) array
        m.
    samples : (n,) array
        What was recorded: V s, or V for a voltage.
    temperature : (n,) array, optional
        degC.
    current : (n,) array, optional
        A.
    sha256 : str
        Hash of the file.
    place : callable
        Names the line of a reading that is counted from 0.
    """

    time: Floats
    position: Floats
    samples: Floats
    temperature: Floats | None
    current: Floats | None
    sha256: str
    place: RowPlace


@dataclass(frozen=True)
class TablePreview:
    """Column names and first rows of a table, as text."""

    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def read_table(
    path: str | Path,
    layout: TableLayout | None = None,
    *,
    samples: Samples = "flux",
    name: str = "",
) -> Table:
    r"""Read a pass table: CSV as the layout says, or NetCDF.

    Parameters
    ----------
    path : str or Path
        The file; it is read once, and nothing in it is ever executed.
    layout : TableLayout, optional
        How it is written; the kit's own layout if left out.
    samples : {"flux", "dflux", "voltage"}
        The column that holds what was recorded.
    name : str
        How errors name the file; its own name if empty.

    Returns
    -------
    Table
        Its columns in SI.

    Raises
    ------
    InputError
        If the file cannot be read, a column is missing, or a row does not hold what it should;
        the text names the file and the line.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "pass_01.csv"
    >>> _ = path.write_text("time [s],position [mm],flux [uV s]\n0,0,0\n1,5,2\n2,9,3\n")
    >>> read_table(path).position
    array([0.   , 0.005, 0.009])
    """
    path, layout = Path(path), layout or TableLayout()
    name = name or path.name
    data = read_bytes(path, name)
    with ThreadPoolExecutor(1) as pool:  # the hash takes as long as a tenth of the reading
        digest = pool.submit(hashlib.sha256, data)
        source: Source
        source = open_netcdf(data, name) if is_netcdf(data) else open_text(data, name, layout)
        columns = table_columns(source, layout, samples)
    return Table(
        time=columns["time"],
        position=columns["position"],
        samples=columns[samples],
        temperature=columns.get("temperature"),
        current=columns.get("current"),
        sha256=digest.result().hexdigest(),
        place=source.place,
    )


def table_columns(source: Source, layout: TableLayout, samples: Samples) -> dict[str, Floats]:
    """Columns of an opened table in SI, checked.

    Parameters
    ----------
    source : Source
        From `open_text` or `open_netcdf`.
    layout : TableLayout
        How it is written.
    samples : {"flux", "dflux", "voltage"}
        The column that holds what was recorded.

    Returns
    -------
    dict of str to (n,) array
        By the names of `QUANTITIES`: time, position and samples, and what else is there.

    Raises
    ------
    InputError
        As for `read_table`.
    """
    columns = _columns(source, layout, samples)
    if layout.rate is not None and "time" not in columns:
        columns["time"] = np.arange(columns["position"].size) / layout.rate
    _check(columns, source)
    return columns


def read_bytes(path: Path, name: str, most: int | None = None) -> bytes:
    """Read a whole regular file, or raise an error that names it.

    Parameters
    ----------
    path : Path
        The file.
    name : str
        How errors name it.
    most : int, optional
        Largest size allowed, bytes.

    Returns
    -------
    bytes
        Its contents, at least one byte.

    Raises
    ------
    InputError
        If it is missing, no regular file, unreadable, empty or too large.
    """
    try:
        if not path.exists():
            raise InputError(name, "no such file", f"a file at {str(path)!r}", "mend the name")
        # A pipe or a device would let the reader wait for ever.
        if not path.is_file():
            raise InputError(name, "a folder or a device", "a file", "name the file itself")
        size = path.stat().st_size
        if most is not None and size > most:
            raise InputError(name, f"{size} bytes", f"at most {most}", "choose another file")
        data = path.read_bytes()
    except MemoryError:
        raise InputError(name, "more bytes than the memory holds", "a smaller file") from None
    except (OSError, ValueError) as error:  # ValueError: a zero byte in the name
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(
            name, f"a file that cannot be read ({reason})", "a readable file"
        ) from None
    if not data:
        raise InputError(name, "an empty file", "a table of readings", "record the pass again")
    return data


def preview_table(
    path: str | Path, layout: TableLayout | None = None, rows: int = 8
) -> TablePreview:
    r"""Show the column names and the first rows of a foreign table, without judging them.

    Parameters
    ----------
    path : str or Path
        The file; of a text file only the first 64 kB are looked at.
    layout : TableLayout, optional
        How it is supposed to be written.
    rows : int
        Rows wanted.

    Returns
    -------
    TablePreview
        Texts as they stand in the file; with ``header = false`` columns are named by number.

    Raises
    ------
    InputError
        If the file is missing, empty or neither text nor NetCDF.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "bench.txt"
    >>> _ = path.write_text("T;Pos;Int\n0,1;5;2\n0,2;9;3\n")
    >>> preview_table(path, TableLayout(delimiter=";", decimal=","), rows=1)
    TablePreview(columns=('T', 'Pos', 'Int'), rows=(('0,1', '5', '2'),))
    """
    path, layout = Path(path), layout or TableLayout()
    data = read_bytes(path, path.name)
    if is_netcdf(data):
        return _preview_netcdf(data, path.name, rows)
    cut = data.rfind(b"\n", 0, _PREVIEW_BYTES) if len(data) > _PREVIEW_BYTES else len(data)
    lines = plain_text(data[: cut if cut > 0 else _PREVIEW_BYTES], path.name).decode().split("\n")
    kept = (line for line in lines[layout.skip_lines :] if line.strip())
    table = (line for line in kept if not line.lstrip().startswith("#"))
    names = _preview_cells(next(table, ""), layout, header=True) if layout.header else ()
    shown = tuple(_preview_cells(line, layout) for line in itertools.islice(table, rows))
    if not layout.header:
        names = tuple(str(i + 1) for i in range(max(map(len, shown), default=0)))
    return TablePreview(names, shown)


def _columns(source: Source, layout: TableLayout, samples: Samples) -> dict[str, Floats]:
    """Choose, read and convert the columns of one pass."""
    picked: list[Picked] = []
    for quantity in ("time", "position", samples, "temperature", "current"):
        if quantity == "time" and layout.rate is not None:
            continue
        needed = quantity in {"time", "position", samples}
        choice = pick(quantity, source, layout, needed=needed)
        if choice is not None:
            picked.append(choice)
    _refuse_shared(picked, source)
    raw = source.read([choice.index for choice in picked])
    return {choice.quantity: to_si(choice, raw.pop(choice.index), source.file) for choice in picked}


def _refuse_shared(picked: list[Picked], source: Source) -> None:
    """Refuse one column used for two quantities."""
    taken: dict[int, str] = {}
    for choice in picked:
        if choice.index in taken:
            found = f"the column {choice.label!r} for {taken[choice.index]!r}"
            found += f" and for {choice.quantity!r}"
            raise InputError(source.file, found, "a column for each", "mend [table]")
        taken[choice.index] = choice.quantity


def _check(columns: dict[str, Floats], source: Source) -> None:
    """Check the readings of a table as a whole."""
    check_count(columns["position"].size, source.file)
    for quantity, values in columns.items():
        check_finite(values, quantity, source.place)
    check_time(columns["time"], source.place)


def _preview_cells(line: str, layout: TableLayout, *, header: bool = False) -> tuple[str, ...]:
    """Cells of a line; a line with broken quotes is one cell."""
    try:
        return tuple(split_cells(line, layout.delimiter, header=header))
    except csv.Error:
        return (line,)


def _preview_netcdf(data: bytes, name: str, rows: int) -> TablePreview:
    """Names and first values of the variables of a NetCDF file."""
    source = open_netcdf(data, name)
    names = [heading.text for heading in source.headings]
    values = [source.first(text, rows) for text in names]
    cells = itertools.zip_longest(*([str(value) for value in column] for column in values))
    shown = tuple(tuple(cell or "" for cell in row) for row in cells)
    labels = [f"{h.name} [{h.unit}]" if h.unit else h.name for h in source.headings]
    return TablePreview(tuple(labels), shown)
