"""Whether the last number of a text that breaks off without a line end was cut short itself."""

from __future__ import annotations

import csv
import itertools
import re
from typing import TYPE_CHECKING, Final, NamedTuple

from fieldmap.errors import InputError
from fieldmap.readings.text_lines import line_number, split_cells
from fieldmap.units import quoted

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from fieldmap.readings.text_lines import Body

__all__ = ["check_last_line"]

_TAIL: Final = 20_000  # bytes that are looked at
_FEW: Final = 5  # rows of one form that tell how numbers are written
_MANY: Final = 20  # rows of several forms that do
_NUMBER: Final = re.compile(r"[+-]?([0-9]*)(?:[.,]([0-9]*))?(?:[eE][+-]?([0-9]+))?")


class _Written(NamedTuple):
    """How a number is written: digits after the point, of the exponent, and in all."""

    decimals: int
    exponent: int
    digits: int
    value: float


def check_last_line(body: Body, labels: Mapping[int, str]) -> None:
    """Refuse a last number that is shorter than those above it where the file ends with it.

    Parameters
    ----------
    body : Body
        The rows; those of a hand-made file may well end without a line break.
    labels : mapping of int to str
        The columns that are read: their index from 0 and their name.

    Raises
    ------
    InputError
        "0.12" below rows of "0.1234": the number would be wrong, and nothing would tell.
    """
    column = body.width - 1
    if column not in labels or body.data.endswith(b"\n"):
        return
    start = max(body.start, body.data.rfind(b"\n", 0, max(len(body.data) - _TAIL, 0)) + 1)
    lines = body.data[start:].split(b"\n")
    if not lines[-1].strip() or lines[-1].lstrip().startswith(b"#"):
        return
    cell = _last_cell(lines[-1], body)
    last = _written(cell, body.decimal)
    rows = (line for line in lines[:-1] if line.strip() and not line.lstrip().startswith(b"#"))
    above = [one for row in rows if (one := _written(_last_cell(row, body), body.decimal))]
    if last is not None and _is_cut(last, above):
        line = line_number(body.data, len(body.data) - len(lines[-1]))
        raise InputError(
            f"{body.file}, line {line}, column {labels[column]!r}",
            f"{quoted(cell)}, shorter than the numbers above, where the file ends",
            "a whole number and a line break",
            "copy or record the file again if it was cut off; if the number is whole, end the line "
            "with a line break",
        )


def _is_cut(last: _Written, above: Sequence[_Written]) -> bool:
    """Whether the last number is likely the beginning of a longer one."""
    forms = {(one.decimals, one.exponent) for one in above}
    if len(above) < (_FEW if len(forms) == 1 else _MANY):
        return False
    if last.decimals < min(one.decimals for one in above):
        return True
    if last.exponent < min(one.exponent for one in above):
        return True
    lengths = sorted(one.digits for one in above)
    if not any(one.decimals for one in above):
        return last.digits < lengths[0] and _jumps(last, above)
    uneven = last.decimals < max(one.decimals for one in above)
    return uneven and last.digits <= lengths[len(lengths) // 5] - 2


def _jumps(last: _Written, above: Sequence[_Written]) -> bool:
    """Whether whole numbers, which get shorter near zero, get there all at once."""
    steps = [abs(b.value - a.value) for a, b in itertools.pairwise(above)]
    return abs(last.value - above[-1].value) > 5 * max(steps)


def _last_cell(line: bytes, body: Body) -> str:
    try:
        return split_cells(line.decode(errors="replace"), body.delimiter)[-1]
    except (csv.Error, IndexError):
        return ""


def _written(cell: str, decimal: str) -> _Written | None:
    match = _NUMBER.fullmatch(cell)
    if match is None or not cell:
        return None
    whole, part, exponent = (group or "" for group in match.groups())
    try:
        value = float(cell.replace(decimal, "."))
    except ValueError:
        return None
    return _Written(len(part), len(exponent), len((whole + part).lstrip("0")), value)
