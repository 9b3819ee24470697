"""The rows of a text table in blocks: quick, with the C reader of pandas.

The reader is told that every cell is a number, and each block is made such that it cannot
take anything else for one. A block that it does not take is looked at line by line.
"""

from __future__ import annotations

import io
import itertools
import os
import re
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.errors import InputError
from fieldmap.readings.text_lines import LONGEST_LINE, Body, check_cells, line_end

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.readings.passes import Floats

__all__ = ["parse_rows"]

_BLOCK: Final = 4_000_000  # bytes: small enough to share among cores, large enough to be quick
_COMMENTS: Final = re.compile(rb"(?m)^(?:[ \t]*+#[^\n]*+(?:\n|\Z))++")
_BLANKS: Final = re.compile(rb"[ \t]+")
_EDGES: Final = re.compile(rb"(?m)^ | $")
# pandas takes true and false for 1 and 0 even where told that a column holds numbers; spoilt,
# they are as unreadable as any other text.
_TRUTH: Final = ((b"rue", b"r?e"), (b"RUE", b"R?E"), (b"alse", b"al?e"), (b"ALSE", b"AL?E"))


def parse_rows(body: Body, labels: Mapping[int, str]) -> dict[int, Floats]:
    """Parse columns of all rows, blocks at a time on a few cores.

    Parameters
    ----------
    body : Body
        The rows.
    labels : mapping of int to str
        The columns wanted: their index from 0 and their name in errors.

    Returns
    -------
    dict of int to (n,) array
        The numbers as they stand in the file.

    Raises
    ------
    InputError
        For the first row that is ragged or has a cell that is not a number.
    """
    parse = partial(_parse, body, labels)
    with ThreadPoolExecutor(min(4, os.cpu_count() or 1)) as pool:
        parts = list(pool.map(parse, _blocks(body)))
    # Pieces are let go as soon as they are joined: memory stays near that of the file.
    return {column: np.concatenate([part.pop(column) for part in parts]) for column in labels}


def _blocks(body: Body) -> list[tuple[int, int]]:
    """Cut the rows at newlines into blocks."""
    cuts, size = [body.start], len(body.data)
    while cuts[-1] < size:
        cuts.append(line_end(body.data, min(cuts[-1] + _BLOCK, size)))
    return list(itertools.pairwise(cuts))


def _parse(body: Body, labels: Mapping[int, str], block: tuple[int, int]) -> dict[int, Floats]:
    """Parse one block; what the reader does not take is an error that names the line."""
    try:
        return _read(body, labels, block)
    except (ValueError, TypeError) as error:  # what the reader raises for any bad cell
        check_cells(body, labels, *block)
        found = f"a table that cannot be parsed ({' '.join(str(error).split())})"
        raise InputError(body.file, found, "rows of numbers", "write the file again") from None


def _read(body: Body, labels: Mapping[int, str], block: tuple[int, int]) -> dict[int, Floats]:
    """Read one block with the C reader of pandas, or raise ValueError or TypeError."""
    import pandas as pd

    if block[1] - block[0] > _BLOCK + LONGEST_LINE:
        raise ValueError("a very long line")
    data = _tidy(body.data[block[0] : block[1]], body)
    if not data:
        return {column: np.empty(0) for column in labels}
    if b'"' in data and body.delimiter != " ":
        data = _unquoted(data, body.delimiter)
    quoted = b'"' in data and body.delimiter != " "
    if quoted:
        # Quotes may hide delimiters, and the reader would let them hide newlines too.
        check_cells(body, labels, *block)
    elif data.count(body.delimiter.encode(), 0, line_end(data, 0)) != body.width - 1:
        raise ValueError("a ragged row")  # the reader would drop what a first row has too much
    whole = len(labels) == body.width
    frame = pd.read_csv(
        io.BytesIO(data),
        sep=body.delimiter,
        decimal=body.decimal,
        header=None,
        names=list(range(body.width)),
        usecols=None if whole else list(labels),
        index_col=False,
        dtype=np.float64,
        na_filter=False,
        quoting=0 if quoted else 3,
        low_memory=False,
        encoding="utf-8",
    )
    # Where all columns are read, rows that are long or short have been errors above.
    if not (quoted or whole or _is_even(data, body, len(frame))):
        raise ValueError("a ragged row")
    return {column: frame[column].to_numpy() for column in labels}


def _tidy(data: bytes, body: Body) -> bytes:
    """Drop comment lines, make runs of blanks single, spoil words that are no numbers."""
    if b"#" in data:
        data = _COMMENTS.sub(b"", data)
    if body.delimiter == " ":
        data = _EDGES.sub(b"", _BLANKS.sub(b" ", data))
    if any(letter in data for letter in (b"u", b"U", b"l", b"L")):  # quick to look for
        for word, spoilt in _TRUTH:
            data = data.replace(word, spoilt)
    return data.lstrip(body.blanks)


def _unquoted(data: bytes, delimiter: str) -> bytes:
    """Take the quotes off cells that hide nothing; where others are left, nothing is changed."""
    sign = re.escape(delimiter.encode())
    cell = rb"(?m)(?:^|(?<=%(sign)s))\"([^\"\n%(sign)s]*+)\"(?=%(sign)s|$)" % {b"sign": sign}
    plain = re.sub(cell, rb"\1", data)
    return data if b'"' in plain else plain


def _is_even(data: bytes, body: Body, rows: int) -> bool:
    """Tell whether each of the rows has the same number of delimiters."""
    text = np.frombuffer(data, dtype=np.uint8)
    ends = np.append(np.flatnonzero(text == ord("\n")), text.size)
    delimiters = np.flatnonzero(text == ord(body.delimiter))
    per_line = np.diff(np.searchsorted(delimiters, ends), prepend=0)
    filled = per_line[per_line > 0]
    return filled.size == rows and bool(np.all(filled == body.width - 1))
