"""How a foreign table may be written: a first offer for its ``[table]`` section.

The guess rests on the head of the file alone. The delimiter and the decimal mark are those that
turn the longest run of lines into rows of numbers; the line above the run is the header if it
has as many cells; a column is what its unit or its name says, or what its numbers look like.
Nothing is taken for granted: a guess is shown, and a person decides.
"""

from __future__ import annotations

import csv
import itertools
import re
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.errors import InputError
from fieldmap.readings.layout import QUANTITIES
from fieldmap.readings.netcdf_table import is_netcdf, open_netcdf
from fieldmap.readings.tables import read_bytes
from fieldmap.readings.text_lines import split_cells
from fieldmap.readings.text_table import plain_text
from fieldmap.units import UnitError, line_to_si

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.readings.passes import Floats

__all__ = ["GuessedColumn", "TableGuess", "guess_table", "read_head"]

HEAD_BYTES: Final = 65_536
MOST_LINES: Final = 400
FEWEST_ROWS: Final = 2
LONGEST_NAME: Final = 200
LARGEST_NETCDF: Final = 100_000_000  # bytes: only whole files of this kind can be opened

_DELIMITERS: Final = (";", "\t", "|", ",", " ")  # of two that do as well, the first
_MARKS: Final = (".", ",")
_NUMBERS: Final = {
    mark: re.compile(rf"[+-]?(?:[0-9]+{dot}?[0-9]*|{dot}[0-9]+)(?:[eE][+-]?[0-9]+)?")
    for mark, dot in ((".", r"\."), (",", ","))
}
_BRACKETED: Final = re.compile(r"(?P<name>.*?)\s*(?:\[(?P<a>[^\]]*)\]|\((?P<b>[^)]*)\))\s*")
_DIVIDED: Final = re.compile(r"(?P<name>[^/]+?)\s*(?:/|_in_|\bin\b)\s*(?P<unit>\S.*?)\s*")
_LOW_LINE: Final = re.compile(r"(?P<name>.+)_(?P<unit>[A-Za-zµμ°]+)")
# words in names, by quantity; the first match wins, so that "dflux" is no flux
_WORDS: Final[Mapping[str, tuple[str, ...]]] = {
    "temperature": ("temp", "degc", "kelvin"),
    "current": ("curr", "amp", "strom"),
    "time": ("time", "elapsed", "stamp", "zeit", "temps"),
    "dflux": ("dflux", "dphi", "dint", "delta", "incr", "partial"),
    "flux": ("flux", "phi", "integ", "int", "psi", "fluss"),
    "voltage": ("volt", "emf", "signal"),
    "position": ("pos", "stage", "travel", "encod", "count", "place", "weg"),
}
_LETTERS: Final = {
    "t": "time", "z": "position", "x": "position", "y": "position", "s": "position",
    "u": "voltage", "v": "voltage", "i": "current",
}  # fmt: skip
_COUNTS: Final = ("count", "enc", "pulse", "step")
_EVEN: Final = 0.05  # of a step: how far time stamps stray


@dataclass(frozen=True)
class GuessedColumn:
    """Where a quantity may stand.

    Parameters
    ----------
    column : str or int
        Name, or number from 1 where names do not tell.
    unit : str
        As written in the file; empty where nothing says so, or where the reader finds it itself.
    counts : bool
        Whether it looks like counts of an encoder.
    """

    column: str | int
    unit: str = ""
    counts: bool = False


@dataclass(frozen=True)
class TableGuess:
    """A first offer.

    Parameters
    ----------
    delimiter, decimal, skip_lines, header
        As for `fieldmap.readings.layout.TableLayout`.
    names : tuple of str
        Columns as they are named; empty texts where there is no header.
    columns : mapping of str to GuessedColumn
        By the names of `fieldmap.readings.layout.QUANTITIES`; what is not known is not there.
    """

    delimiter: str = ","
    decimal: str = "."
    skip_lines: int = 0
    header: bool = True
    names: tuple[str, ...] = ()
    columns: Mapping[str, GuessedColumn] = field(default_factory=dict)


def read_head(path: str | Path) -> tuple[bytes, bool]:
    r"""The head of a text file, cut at a line, or a NetCDF file as a whole.

    Parameters
    ----------
    path : str or Path
        The file.

    Returns
    -------
    tuple of (bytes, bool)
        Its first 64 kB at most, and whether that is all of it.

    Raises
    ------
    InputError
        The file is missing, empty or no regular file.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "bench.txt"
    >>> _ = path.write_text("1;2\n" * 50_000)
    >>> data, whole = read_head(path)
    >>> len(data), whole
    (65536, False)
    """
    path = Path(path)
    try:
        regular = path.is_file()
        size = path.stat().st_size if regular else 0
    except (OSError, ValueError):  # a name that is none
        regular, size = False, 0
    if not regular or size <= HEAD_BYTES:
        return read_bytes(path, path.name), True  # with its errors
    try:
        with path.open("rb") as stream:
            data = stream.read(HEAD_BYTES)
    except OSError as error:
        found = f"a file that cannot be read ({error.strerror or error})"
        raise InputError(path.name, found, "a readable file") from None
    if is_netcdf(data):
        return read_bytes(path, path.name, LARGEST_NETCDF), True
    cut = max(data.rfind(b"\n"), data.rfind(b"\r")) + 1
    return data[: cut or HEAD_BYTES], False


def guess_table(path: str | Path) -> TableGuess:
    r"""Guess how a table is written.

    Parameters
    ----------
    path : str or Path
        The file; of a text only the head is read, and nothing in it is ever executed.

    Returns
    -------
    TableGuess
        The kit's own layout where no rows of numbers are found.

    Raises
    ------
    InputError
        The file is missing, empty, or neither text nor NetCDF.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> path = pathlib.Path(tempfile.mkdtemp()) / "bench.txt"
    >>> _ = path.write_text("bench 2\nT (s);Pos;Int\n0,1;5;2,5\n0,2;9;3,5\n0,3;9;3,5\n")
    >>> found = guess_table(path)
    >>> found.delimiter, found.decimal, found.skip_lines
    (';', ',', 1)
    >>> found.columns["time"], found.columns["flux"].column
    (GuessedColumn(column='T (s)', unit='s', counts=False), 'Int')
    """
    path = Path(path)
    data, _ = read_head(path)
    if is_netcdf(data):
        headings = open_netcdf(data, path.name).headings
        names = tuple(heading.name for heading in headings)
        return TableGuess(names=names, columns=_by_name(names, names, [h.unit for h in headings]))
    lines = plain_text(data, path.name).decode(errors="replace").split("\n")[:MOST_LINES]
    run = _best_run(lines)
    return TableGuess() if run is None else _described(lines, run)


@dataclass(frozen=True)
class _Run:
    """Lines that split into rows of numbers."""

    delimiter: str
    decimal: str
    rows: tuple[int, ...]  # lines, counted from 0
    cells: tuple[tuple[str, ...], ...]
    numeric: tuple[bool, ...]

    @property
    def rank(self) -> tuple[int, float, int]:
        """Longer is better, then a larger share of numbers, then more of them."""
        count = sum(self.numeric)
        return len(self.rows), count / len(self.numeric), count


def _best_run(lines: Sequence[str]) -> _Run | None:
    best: _Run | None = None
    for delimiter, decimal in itertools.product(_DELIMITERS, _MARKS):
        run = None if delimiter == decimal else _longest_run(lines, delimiter, decimal)
        if run is not None and (best is None or run.rank > best.rank):
            best = run
    return best


def _longest_run(lines: Sequence[str], delimiter: str, decimal: str) -> _Run | None:
    """The longest stretch of lines with the same cells being numbers, two of them at least."""
    rows: list[tuple[int, tuple[str, ...], tuple[bool, ...]]] = []
    for index, line in enumerate(lines):
        if not line.strip() or line.lstrip().startswith("#"):
            continue
        cells = _cells(line, delimiter)
        rows.append((index, cells, tuple(_is_number(cell, decimal) for cell in cells)))
    stretches = [list(group) for _, group in itertools.groupby(rows, key=lambda row: row[2])]
    sound = [one for one in stretches if len(one) >= FEWEST_ROWS and sum(one[0][2]) >= 2]
    if not sound:
        return None
    longest = max(sound, key=len)
    return _Run(
        delimiter,
        decimal,
        tuple(row[0] for row in longest),
        tuple(row[1] for row in longest),
        longest[0][2],
    )


def _cells(line: str, delimiter: str, *, header: bool = False) -> tuple[str, ...]:
    try:
        cells = split_cells(line, delimiter, header=header)
    except csv.Error:
        return (line,)
    return tuple(cells[:-1] if cells and not cells[-1] and delimiter != " " else cells)


def _is_number(cell: str, decimal: str) -> bool:
    return _NUMBERS[decimal].fullmatch(cell) is not None


def _described(lines: Sequence[str], run: _Run) -> TableGuess:
    """Header and columns of a table whose rows are known."""
    width, first = len(run.numeric), run.rows[0]
    above = [i for i in range(first) if lines[i].strip() and not lines[i].lstrip().startswith("#")]
    texts = [_cells(lines[i], run.delimiter, header=True) for i in above[-2:]]
    names: tuple[str, ...] = ("",) * width
    units: list[str | None] = [None] * width
    header, skip = False, first if above else 0
    if texts and len(texts[-1]) == width and not all(_is_number(c, run.decimal) for c in texts[-1]):
        names, header = texts[-1], True
        skip = above[-1] if len(above) > 1 else 0
        if len(texts) > 1 and len(texts[0]) == width and all(map(_known_unit, names)):
            # names, then a row of units, which the reader takes for neither: columns by number
            units, names, header, skip = [*names], texts[0], False, first
    keys = names if header and len(set(names)) == width else tuple(range(1, width + 1))
    columns = _by_name(names, keys, units)
    columns = _by_numbers(run, keys, columns)
    return TableGuess(run.delimiter, run.decimal, skip, header, names, columns)


def _by_name(
    names: Sequence[str], keys: Sequence[str | int], units: Sequence[str | None]
) -> dict[str, GuessedColumn]:
    """Columns that a unit or a name tells."""
    found: dict[str, GuessedColumn] = {}
    parts = [_name_and_unit(name) for name in names]
    for exact in (True, False):  # the kit's own names first, then what is like them
        for key, (name, own), stated in zip(keys, parts, units, strict=True):
            unit = stated or own
            if any(key == one.column for one in found.values()):
                continue
            quantity = name if exact and name in QUANTITIES else ""
            quantity = quantity if exact else _quantity(name, unit)
            if quantity and quantity not in found:
                counts = quantity == "position" and not unit and _counted(name)
                # the reader takes a unit in square brackets from the header itself
                found[quantity] = GuessedColumn(key, unit, counts)
    return found


def _name_and_unit(text: str) -> tuple[str, str]:
    """Parts of ``"pos [mm]"``, ``"pos (mm)"``, ``"pos / mm"``, ``"pos_mm"``."""
    if len(text) > LONGEST_NAME:  # no name, and patterns take long over it
        return text, ""
    match = _BRACKETED.fullmatch(text)
    if match:
        return match["name"], (match["a"] or match["b"] or "").strip()
    for pattern in (_DIVIDED, _LOW_LINE):
        match = pattern.fullmatch(text)
        if match and _known_unit(match["unit"]):
            return match["name"], match["unit"]
    return text, ""


def _known_unit(text: str) -> bool:
    return bool(_quantities_of(text))


def _quantities_of(unit: str) -> tuple[str, ...]:
    """Quantities that a unit fits."""
    return tuple(name for name, si in QUANTITIES.items() if unit and _fits(unit, si))


def _fits(unit: str, si: str) -> bool:
    try:
        line_to_si(unit, si, "unit")
    except (InputError, UnitError):
        return False
    return True


def _quantity(name: str, unit: str) -> str:
    """What a column is by its unit, by its name where the unit leaves a choice."""
    word = name.strip().casefold()
    named = next((q for q, parts in _WORDS.items() if any(p in word for p in parts)), "")
    named = _LETTERS.get(word, named)
    fitting = _quantities_of(unit)
    if not unit:
        return named
    if not fitting:
        return ""
    return named if named in fitting else fitting[0]


def _counted(name: str) -> bool:
    return any(part in name.casefold() for part in _COUNTS)


def _by_numbers(
    run: _Run, keys: Sequence[str | int], known: dict[str, GuessedColumn]
) -> dict[str, GuessedColumn]:
    """What no name tells, by the looks of the numbers: time, then position, then flux."""
    taken = {one.column for one in known.values()}
    free = [i for i, sound in enumerate(run.numeric) if sound and keys[i] not in taken]
    values = {i: _column(run, i) for i in free}
    found = dict(known)
    if "time" not in found:
        clocks = [i for i in free if _is_clock(values[i])]
        # whole steps of one may be the number of the reading
        clocks.sort(key=lambda i: _is_number_of_reading(values[i]))
        if clocks:
            found["time"] = GuessedColumn(keys[clocks[0]])
            free.remove(clocks[0])
    free = [i for i in free if not _is_number_of_reading(values[i])]
    if "position" not in found and free:
        calm = min(free, key=lambda i: _roughness(values[i]))
        found["position"] = GuessedColumn(keys[calm])
        free.remove(calm)
    if not {"flux", "dflux", "voltage"} & set(found) and free:
        found["flux"] = GuessedColumn(keys[free[0]])
    return found


def _column(run: _Run, index: int) -> Floats:
    texts = (cells[index].replace(",", ".") for cells in run.cells)
    return np.array([float(text) for text in texts])


def _is_clock(values: Floats) -> bool:
    """Whether numbers grow evenly."""
    steps = np.diff(values)
    typical = float(np.median(steps))
    return typical > 0 and bool(np.all(np.abs(steps - typical) <= _EVEN * typical + 1e-12))


def _is_number_of_reading(values: Floats) -> bool:
    return bool(np.all(np.diff(values) == 1.0))


def _roughness(values: Floats) -> float:
    """Second differences over first: little where a stage stands or moves, much in noise."""
    steps = np.abs(np.diff(values)).sum()
    bends = np.abs(np.diff(values, 2)).sum()
    return float(bends / steps) if steps > 0 else 0.0
