"""The head of a foreign table, as it stands and as a layout reads it."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

from fieldmap.readings.guess import read_head
from fieldmap.readings.netcdf_table import is_netcdf, open_netcdf
from fieldmap.readings.tables import table_columns
from fieldmap.readings.text_table import open_text, plain_text

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.readings.columns import Heading, Source
    from fieldmap.readings.layout import TableLayout
    from fieldmap.readings.passes import Floats
    from fieldmap.readings.tables import Samples

__all__ = ["OpenedHead", "open_head", "raw_lines"]

LONGEST_LINE: Final = 160  # characters that are shown of a line


@dataclass(frozen=True, eq=False)
class OpenedHead:
    """The head of a table, opened with a layout.

    Parameters
    ----------
    headings : tuple of Heading
        Its columns.
    whole : bool
        Whether the head is all of the file.
    source : Source
        What reads it.
    layout : TableLayout
        How it is taken to be written.
    """

    headings: tuple[Heading, ...]
    whole: bool
    source: Source
    layout: TableLayout

    def columns(self, samples: Samples) -> Mapping[str, Floats]:
        """Readings of the head in SI, with all checks and errors of the whole table."""
        return table_columns(self.source, self.layout, samples)


def open_head(path: str | Path, layout: TableLayout) -> OpenedHead:
    r"""Open the head of a table.

    Parameters
    ----------
    path : str or Path
        The file; of a text its first 64 kB are read.
    layout : TableLayout
        How it may be written.

    Returns
    -------
    OpenedHead

    Raises
    ------
    InputError
        The file cannot be opened so.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> from fieldmap.readings.layout import TableLayout
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "bench.csv"
    >>> _ = path.write_text("time [s],position [mm],flux [uV s]\n0,0,0\n1,5,2\n2,9,3\n")
    >>> open_head(path, TableLayout()).columns("flux")["position"]
    array([0.   , 0.005, 0.009])
    """
    path = Path(path)
    data, whole = read_head(path)
    source: Source
    source = open_netcdf(data, path.name) if is_netcdf(data) else open_text(data, path.name, layout)
    return OpenedHead(tuple(source.headings), whole, source, layout)


def raw_lines(path: str | Path, most: int = 12) -> tuple[str, ...]:
    r"""The first lines of a text table as they stand; for NetCDF, its variables.

    Parameters
    ----------
    path : str or Path
        The file.
    most : int
        Lines at most.

    Returns
    -------
    tuple of str
        Cut where they are long; what is not printable is shown as a dot, a tab as an arrow.

    Raises
    ------
    InputError
        The file is missing, empty, or neither text nor NetCDF.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "bench.txt"
    >>> _ = path.write_text("T\tPos\n0\t1\n")
    >>> raw_lines(path)
    ('T→Pos', '0→1')
    """
    path = Path(path)
    data, _ = read_head(path)
    if is_netcdf(data):
        headings = open_netcdf(data, path.name).headings
        return tuple(f"{one.name} [{one.unit or 'no unit'}]" for one in headings)
    lines = plain_text(data, path.name).decode(errors="replace").rstrip("\n").split("\n")
    return tuple(_printable(line) for line in lines[:most])


def _printable(line: str) -> str:
    shown = "".join("→" if c == "\t" else c if c.isprintable() else "·" for c in line)
    return shown if len(shown) <= LONGEST_LINE else f"{shown[: LONGEST_LINE - 1]}…"
