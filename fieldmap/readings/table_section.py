"""Write the ``[table]`` section of a campaign file, and leave all else as it stands.

The text is scanned for the lines that open a section, with strings, comments and brackets
told apart; only what belongs to the section is exchanged. What comes out is parsed and compared
with what went in: if anything but the section differs, nothing is written.
"""

from __future__ import annotations

import json
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from fieldmap.atomic import is_folder, replacing
from fieldmap.errors import InputError
from fieldmap.readings.layout import QUANTITIES, read_layout
from fieldmap.readings.tables import read_bytes
from fieldmap.readings.toml_text import parse_toml
from fieldmap.shipped import PACKAGE, demo_folder

if TYPE_CHECKING:
    from collections.abc import Mapping

__all__ = ["replace_section", "section_text", "write_table_section"]

NAME: Final = "table"
BEFORE: Final = "[[passes]]"  # a new section goes before the first of these
LARGEST: Final = 4_000_000  # bytes of a campaign file
_BOM: Final = "\ufeff"
_ORDER: Final = ("delimiter", "decimal", "skip_lines", "header", "rate", "per_count", *QUANTITIES)
_QUOTES: Final = ('"""', "'''", '"', "'")


def section_text(raw: Mapping[str, Any], name: str = NAME) -> str:
    """A ``[table]`` section as TOML.

    Parameters
    ----------
    raw : mapping
        Keys of the section, as they stand in a campaign file: texts, whole numbers, true or
        false, and ``{"column": …, "unit": …}`` for a quantity.
    name : str
        Name of the section.

    Returns
    -------
    str
        Lines that end with a newline.

    Raises
    ------
    InputError
        A key or value that a campaign file must not have.

    Examples
    --------
    >>> print(section_text({"delimiter": ";", "time": {"column": "T", "unit": "s"}}), end="")
    [table]
    delimiter = ";"
    time = {column = "T", unit = "s"}
    """
    read_layout(dict(raw), f"[{name}]")
    lines = [f"{key} = {_value(raw[key])}" for key in _ORDER if key in raw]
    return "\n".join([f"[{name}]", *lines, ""])


def replace_section(text: str, section: str, name: str = NAME) -> str:
    r"""Exchange one section of a TOML text, or add it.

    Parameters
    ----------
    text : str
        The whole file; its line ends are kept.
    section : str
        The section with its heading, from `section_text`.
    name : str
        Name of the section.

    Returns
    -------
    str
        The same text but for the section. Lines of comment within the old section are kept below
        its heading. A new section goes before the first pass, or to the end.

    Raises
    ------
    InputError
        Text that is no TOML, a section that is written in another form, or anything that would
        change besides.

    Examples
    --------
    >>> old = 'name = "a"\n\n[table]\nskip_lines = 3\n\n[[passes]]\nfile = "b"\n'
    >>> print(replace_section(old, '[table]\ndelimiter = ";"\n'), end="")
    name = "a"
    <BLANKLINE>
    [table]
    delimiter = ";"
    <BLANKLINE>
    [[passes]]
    file = "b"
    """
    before = _parsed(text, "the campaign file")
    wanted = _parsed(section, f"[{name}]")[name]
    end = "\r\n" if "\r\n" in text else "\n"
    spans = [span for span in _sections(text) if span.path[:1] == (name,)]
    if name in before and not spans:
        raise InputError(
            f"the campaign file, {name}",
            "the section in another form than under a heading of its own",
            f"a heading [{name}]",
            f"write it as a [{name}] section by hand once",
        )
    new = section.replace("\r\n", "\n").replace("\n", end)
    after = _added(text, new, end) if not spans else _exchanged(text, new, spans, end)
    _check_rest(before, _parsed(after, "the new text"), name, wanted)
    return after


def write_table_section(path: str | Path, raw: Mapping[str, Any]) -> str:
    """Write the ``[table]`` section into a campaign file; all else stays byte for byte.

    Parameters
    ----------
    path : str or Path
        A campaign.toml, or its folder; never one that came with the kit.
    raw : mapping
        As for `section_text`.

    Returns
    -------
    str
        What was written.

    Raises
    ------
    InputError
        A file that cannot be read or written, is no TOML or came with the kit.
    """
    path = Path(path).expanduser()
    if is_folder(path):
        path = path / "campaign.toml"
    _refuse_shipped(path)
    section = section_text(raw)
    try:
        text = read_bytes(path, path.name, LARGEST).decode()
    except UnicodeDecodeError:
        raise InputError(path.name, "text that is not UTF-8", "UTF-8", "save it so") from None
    bare = text.removeprefix(_BOM)
    new = replace_section(bare, section)
    # a link stays a link: what it points to is replaced
    with replacing(path.resolve()) as aside:
        aside.write_bytes((text[: len(text) - len(bare)] + new).encode())
    return section


def _value(value: Any) -> str:
    if isinstance(value, dict):
        return f"{{{', '.join(f'{key} = {_value(one)}' for key, one in value.items())}}}"
    if isinstance(value, str):
        # JSON escapes what TOML does, but for the delete character
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    return json.dumps(value)


@dataclass(frozen=True)
class _Span:
    """A section: its dotted name, where its heading begins, and where it ends."""

    path: tuple[str, ...]
    start: int
    stop: int


def _sections(text: str) -> list[_Span]:
    """All headings and the text up to the last line that belongs to each."""
    heads: list[tuple[int, tuple[str, ...]]] = []
    ends = [0]  # behind the last line with anything but blanks and comments, by section
    place, depth = 0, 0
    while place < len(text):
        line = place
        place = _behind_blanks(text, place)
        if depth == 0 and text.startswith("[", place):
            heads.append((line, _heading(text, place)))
            ends.append(line)
        place, depth, content = _to_line_end(text, place, depth)
        if content:
            ends[-1] = place
    return [_Span(path, start, stop) for (start, path), stop in zip(heads, ends[1:], strict=True)]


def _behind_blanks(text: str, place: int) -> int:
    while place < len(text) and text[place] in " \t":
        place += 1
    return place


def _heading(text: str, place: int) -> tuple[str, ...]:
    """Name in a heading, by the parser itself."""
    line = text[place : _line_end(text, place)]
    nested: Any = tomllib.loads(line)
    path = []
    while isinstance(nested, (dict, list)) and nested:
        if isinstance(nested, list):
            nested = nested[0]
            continue
        key = next(iter(nested))
        path.append(key)
        nested = nested[key]
    return tuple(path)


def _line_end(text: str, place: int) -> int:
    end = text.find("\n", place)
    return len(text) if end < 0 else end + 1


def _to_line_end(text: str, place: int, depth: int) -> tuple[int, int, bool]:
    """Behind the line at `place`: strings of several lines are passed over whole.

    Also the depth of open brackets, and whether there was anything but a comment.
    """
    content = False
    while place < len(text):
        sign = text[place]
        if sign == "\n":
            return place + 1, depth, content
        if sign == "#":
            return _line_end(text, place), depth, content
        content = content or not sign.isspace()
        if sign in "\"'":
            place = _behind_string(text, place)
            continue
        depth += (sign in "[{") - (sign in "]}")
        place += 1
    return place, depth, content


def _behind_string(text: str, place: int) -> int:
    """Behind a string that is known to be closed, since the whole text has been parsed."""
    quote = next(one for one in _QUOTES if text.startswith(one, place))
    place += len(quote)
    while not text.startswith(quote, place):
        place += 2 if text[place] == "\\" and quote[0] == '"' else 1
    place += len(quote)
    while len(quote) == 3 and text.startswith(quote[0], place):
        place += 1  # quotes before the closing ones belong to the string
    return place


def _exchanged(text: str, new: str, spans: list[_Span], end: str) -> str:
    """The new section in the place of the first of the old spans; the others go."""
    kept = [line for span in spans for line in _comments(text[span.start : span.stop], end)]
    heading, rest = new.split(end, 1)
    whole = end.join([heading, *kept, rest])
    out, place = [], 0
    for index, span in enumerate(spans):
        out.append(text[place : span.start])
        out.append(whole if index == 0 else "")
        place = span.stop
    return "".join([*out, text[place:]])


def _comments(section: str, end: str) -> list[str]:
    """Whole lines of comment within a section."""
    place, found = 0, []
    while place < len(section):
        first = _behind_blanks(section, place)
        if section.startswith("#", first):
            found.append(
                section[place : _line_end(section, first)].removesuffix(end).rstrip("\r\n")
            )
        place, _, _ = _to_line_end(section, first, 0)
    return found


def _added(text: str, new: str, end: str) -> str:
    """The new section before the first pass and the comments right above it, or at the end."""
    first = next((one.start for one in _sections(text) if one.path == (BEFORE.strip("[]"),)), None)
    if first is None:
        gap = "" if not text else end if text.endswith("\n") else 2 * end
        return f"{text}{gap}{new}"
    while first > 0:
        above = text.rfind("\n", 0, first - 1) + 1
        if not text[above:first].lstrip().startswith("#"):
            break
        first = above
    return f"{text[:first]}{new}{end}{text[first:]}"


def _parsed(text: str, where: str) -> dict[str, Any]:
    try:
        return parse_toml(text)
    except (ValueError, RecursionError) as error:
        found = f"text that is not TOML ({error})"
        raise InputError(where, found, "TOML", "mend it first; nothing was written") from None


def _check_rest(before: dict[str, Any], after: dict[str, Any], name: str, wanted: Any) -> None:
    """Refuse a change of anything but the section."""
    rest = [{k: v for k, v in one.items() if k != name} for one in (before, after)]
    # by text: not-a-number differs from itself, and true equals one
    if repr(rest[0]) != repr(rest[1]) or repr(after.get(name)) != repr(wanted):
        raise InputError(
            "the campaign file",
            f"a layout in which [{name}] cannot be exchanged alone",
            "sections under headings of their own",
            f"write [{name}] by hand; nothing was written",
        )


def _refuse_shipped(path: Path) -> None:
    """The demo stays as it came."""
    whole = path.resolve()
    for own in (demo_folder().resolve(), PACKAGE):
        if whole.is_relative_to(own):
            raise InputError(
                str(path),
                "a campaign that came with the kit",
                "a campaign of your own",
                "copy the folder first, as with 'fieldmap demo FOLDER'",
            )
