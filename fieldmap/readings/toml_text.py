"""TOML text to a tree, in a time that grows with the text and not with its square."""

from __future__ import annotations

import re
import tomllib
from typing import Any, Final

__all__ = ["parse_toml"]

# The parser copies a dotted key for each of its parts.
_MOST_DOTS: Final = 500
_COMMENT: Final = re.compile(r"[ \t]*#")


def parse_toml(text: str) -> dict[str, Any]:
    """Parse TOML.

    Parameters
    ----------
    text : str
        The whole file.

    Returns
    -------
    dict

    Raises
    ------
    ValueError
        Text that is no TOML, or a line with hundreds of dots.
    RecursionError
        Values nested too deeply.

    Examples
    --------
    >>> parse_toml('gap = "30 mm"')
    {'gap': '30 mm'}
    """
    for number, line in enumerate(text.split("\n"), 1):
        if line.count(".") > _MOST_DOTS and not _COMMENT.match(line):
            raise ValueError(f"More than {_MOST_DOTS} dots (at line {number}, column 1)")
    return tomllib.loads(text)
