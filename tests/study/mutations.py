"""Ways to spoil a file: bits, bytes, lines, numbers, words, encodings, and trees of values."""

from __future__ import annotations

import json
import re

import numpy as np

NUMBERS = (
    "1e308", "-1e308", "1e400", "-1e400", "1e-400", "nan", "-nan", "inf", "-inf", "Infinity", "0",
    "-0", "0.0", "-1", "1e999999999999", "1e4294967297", "1e18446744073709551617", "0x10", "1_000",
    "1,5", "1.5.2", "1e", "1e+", "+-1", "--1", "1d3", "10**5000", "9" * 400, "9" * 5000,
    "0." + "0" * 400 + "1e401", "1" + "0" * 320 + "e-320", "4.9e-324", "1e-310", "true", "false",
    "True", "None", "", " ", "1 2", "1e5 ", "1e 5", "１２", "١", "1\u00a0", "½", "1e1000000",
    "2147483648", "9007199254740993", "18446744073709551616", "1000000000000", "1e18",
)  # fmt: skip
WORDS = (
    "=cmd()", "=1+1", "@SUM(A1)", "+1|cmd", "<script>alert(1)</script>", "<img src=x onerror=a>",
    '"><b>', "&lt;", "$\\frac{", "$x^{2", "$$", "\\input{/etc/passwd}", "\\\\", "${HOME}", "%s%n",
    "{0}", "`id`", "$(id)", "; rm -rf .", "__import__('os').system('touch FUZZED')",
    "open('FUZZED','w')", "![a](b)", "[a](javascript:b)", "\x1b[31m", "\x1b]0;t\x07", "\x00", "\r",
    "\n", "\u2028", "\u202e", "\ufeff", "\ud7ff", "é", "𝔘", "../", "../../etc/passwd",
    "/etc/passwd", "/dev/zero", "C:\\x", "\\\\host\\x", "~", ".", "..", "CON", "a" * 300,
    "x" * 5000, "campaign.toml", "map.nc", "link.csv", "pipe.csv", "folder", "loop.csv", "mm", "m",
    "T", "uV s", "V s", "m^9", "furlong", "degC", "dB", "1", "[", "]", "[[", "]]", "{", "}", "'",
    '"', '"""', "'''", "#", "=", ".", ",", ";", "\t", "file", "passes", "kind", "nan", "inf",
    "1979-05-27T07:32:00", "true", "[[[[[[[[", "{a={a={a={", "a.a.a.a.a.a.a", "skip_lines",
)  # fmt: skip
VALUES = (
    None, True, False, 0, -1, 1, 2, 10**6, 10**18, 10**400, 1e308, -1e308, 1e-320, float("nan"),
    float("inf"), -float("inf"), "", "0", "nan", "x" * 5000, "<script>alert(1)</script>",
    "=cmd()", "$\\frac{", "\x1b[31m", "a\nb", "\ud800", "\x00", "../x", [], {}, [[]], [0, 1],
    [1, 0], [None, None], {"a": 1}, [[[[[[1]]]]]], "wire", "coil", "By", "z", "refuse", "note",
)  # fmt: skip
_NUMBER = re.compile(rb"[+-]?[0-9]+(?:\.[0-9]*)?(?:[eE][+-]?[0-9]+)?")
_WORD = re.compile(rb"[A-Za-z_]{2,}")
_QUANTITY = re.compile(rb'"[^"\n]*"')


def spoilt_text(data: bytes, rng: np.random.Generator) -> bytes:
    """A text with one to three mutations."""
    for _ in range(int(rng.choice([1, 1, 1, 1, 1, 2, 3]))):
        data = _TEXT[rng.integers(len(_TEXT))](data, rng)
    return data


def spoilt_binary(data: bytes, rng: np.random.Generator) -> bytes:
    """A binary file with one to a few mutations."""
    for _ in range(int(rng.choice([1, 1, 1, 1, 2, 3, 8]))):
        data = _BINARY[rng.integers(len(_BINARY))](data, rng)
    return data


def spoilt_json(text: str, rng: np.random.Generator) -> str:
    """JSON with one value, key or byte changed."""
    if rng.random() < 0.15:
        return spoilt_text(text.encode(errors="surrogatepass"), rng).decode(errors="replace")
    tree = json.loads(text)
    holder = [tree]
    nodes = list(_nodes(holder))
    parent, key = nodes[rng.integers(len(nodes))]
    kind = rng.random()
    if kind < 0.7:
        parent[key] = VALUES[rng.integers(len(VALUES))]
    elif kind < 0.85 and isinstance(parent, dict):
        del parent[key]
    elif isinstance(parent, dict):
        parent[str(rng.choice(WORDS))] = parent[key]
    else:
        parent.append(parent[key])
    return json.dumps(holder[0]) if holder else "[]"


def _nodes(tree):
    """Every place of a tree: what holds it, and its key."""
    pairs = tree.items() if isinstance(tree, dict) else enumerate(tree)
    for key, value in list(pairs):
        yield tree, key
        if isinstance(value, (dict, list)):
            yield from _nodes(value)


def _place(data: bytes, rng) -> int:
    return int(rng.integers(len(data) + 1))


def _flip(data: bytes, rng) -> bytes:
    if not data:
        return data
    torn = bytearray(data)
    for _ in range(int(rng.choice([1, 1, 2, 16]))):
        torn[rng.integers(len(torn))] ^= 1 << int(rng.integers(8))
    return bytes(torn)


def _byte(data: bytes, rng) -> bytes:
    torn = bytearray(data or b"0")
    torn[rng.integers(len(torn))] = int(rng.choice([0, 1, 0x7F, 0x80, 0xFF, 0x0A, 0x22, 0x2C]))
    return bytes(torn)


def _insert(data: bytes, rng) -> bytes:
    at = _place(data, rng)
    return data[:at] + rng.bytes(int(rng.choice([1, 1, 2, 9]))) + data[at:]


def _delete(data: bytes, rng) -> bytes:
    at = _place(data, rng)
    return data[:at] + data[at + int(rng.choice([1, 1, 2, 7, 60])) :]


def _truncate(data: bytes, rng) -> bytes:
    return data[: _place(data, rng)]


def _double(data: bytes, rng) -> bytes:
    one, other = sorted((_place(data, rng), _place(data, rng)))
    part = data[one : min(other, one + 4000)]
    at = _place(data, rng)
    return data[:at] + part + data[at:]


def _word_of(rng) -> bytes:
    return str(WORDS[rng.integers(len(WORDS))]).encode()


def _number_of(rng) -> bytes:
    return str(NUMBERS[rng.integers(len(NUMBERS))]).encode()


def _exchange(pattern, new):
    def change(data: bytes, rng) -> bytes:
        spots = list(pattern.finditer(data))
        if not spots:
            return new(rng)
        spot = spots[rng.integers(len(spots))]
        return data[: spot.start()] + new(rng) + data[spot.end() :]

    return change


def _quantity_of(rng) -> bytes:
    unit = str(rng.choice(["mm", "m", "T", "uV s", "V s", "s", "A", "T m", "Hz", "", "m^2"]))
    return b'"' + _number_of(rng) + b" " + unit.encode() + b'"'


def _text_of(rng) -> bytes:
    return b'"' + _word_of(rng) + b'"'


def _add_word(data: bytes, rng) -> bytes:
    at = _place(data, rng)
    return data[:at] + _word_of(rng) + data[at:]


def _digit(data: bytes, rng) -> bytes:
    """One digit exchanged for another, or a digit more."""
    spots = [i for i, sign in enumerate(data) if 48 <= sign < 58]
    if not spots:
        return data
    at = spots[rng.integers(len(spots))]
    return data[:at] + b"%d" % rng.integers(10) + data[at + int(rng.integers(2)) :]


def _lines(data: bytes, rng) -> bytes:
    """Lines swapped, doubled or left out."""
    lines = data.split(b"\n")
    one, other = rng.integers(len(lines), size=2)
    kind = rng.integers(4)
    if kind == 0:
        lines[one], lines[other] = lines[other], lines[one]
    elif kind == 1:
        lines.insert(other, lines[one])
    elif kind == 2:
        del lines[one]
    else:
        lines[min(one, other) : max(one, other)] = []
    return b"\n".join(lines)


def _encoding(data: bytes, rng) -> bytes:
    text = data.decode("utf-8", errors="replace")
    kind = rng.integers(7)
    if kind < 4:
        name = ("utf-16", "utf-16-le", "utf-32", "latin-1")[kind]
        return (text + "µ").encode(name, errors="replace")
    if kind == 4:
        return b"\xef\xbb\xbf" + data
    if kind == 5:
        return data.replace(b"\n", b"\r\n")
    half = len(data) // 2
    return data[:half] + data[half:].decode(errors="replace").encode("utf-16-le")


def _deep(data: bytes, rng) -> bytes:
    """Nesting, a long line, or many columns."""
    count = int(rng.choice([30, 300, 3000]))
    kind = rng.integers(6)
    part = (
        b"\na = " + b"[" * count,
        b"\na = " + b"{a = " * count,
        b"\n" + b"a." * count + b"a = 1\n",
        b"\n[" + b"a." * count + b"a]\n",
        b"," * count,
        b" " * count,
    )[kind]
    at = _place(data, rng)
    return data[:at] + part + data[at:]


def _cell(data: bytes, rng) -> bytes:
    """One cell or one line exchanged for that of another place."""
    spots = list(_NUMBER.finditer(data))
    if len(spots) < 2:
        return data
    one, other = sorted(rng.choice(len(spots), size=2, replace=False))
    a, b = spots[one], spots[other]
    return data[: a.start()] + b[0] + data[a.end() : b.start()] + a[0] + data[b.end() :]


def _claim(data: bytes, rng) -> bytes:
    """A whole number of four or eight bytes that claims a lot, as counts and sizes in headers."""
    width = int(rng.choice([2, 4, 8]))
    value = int(rng.choice([2**15, 2**16 - 1, 2**31 - 1, 2**31, 2**32 - 1, 10**10, 2**63 - 1]))
    order = "little" if rng.random() < 0.7 else "big"
    at = _place(data[: max(len(data) - 8, 0)], rng)
    raw = (value % 2 ** (8 * width)).to_bytes(width, order)
    return data[:at] + raw + data[at + width :]


_TEXT = (
    _flip, _byte, _insert, _delete, _truncate, _double, _add_word, _add_word, _lines, _lines,
    _digit, _digit, _digit, _digit, _digit, _cell, _cell,
    _encoding, _deep, _cell, _exchange(_NUMBER, _number_of), _exchange(_NUMBER, _number_of),
    _exchange(_WORD, _word_of), _exchange(_QUANTITY, _quantity_of),
    _exchange(_QUANTITY, _quantity_of), _exchange(_QUANTITY, _text_of),
)  # fmt: skip
_BINARY = (_flip, _flip, _flip, _byte, _claim, _claim, _insert, _delete, _truncate, _double)
