"""What can go wrong, said in the user's words.

Every error the kit raises on purpose is a :class:`FieldmapError`; its text is one sentence
that names the place, what was found, what is expected and what to do.
"""

from __future__ import annotations

__all__ = ["FieldmapError", "InputError", "RefusedError"]


class FieldmapError(Exception):
    """Base of all errors raised on purpose: the text is meant for the user."""


class InputError(FieldmapError):
    """A file, key, row or argument cannot be used as it is.

    Parameters
    ----------
    where : str
        The place: a file, and the row, column or key in it.
    found : str
        What stands there.
    expected : str
        What should stand there.
    remedy : str, optional
        What to do about it, as an imperative clause.

    Examples
    --------
    >>> print(InputError("pass_01.csv, row 7", "'abc'", "a number", "mend or delete the row"))
    pass_01.csv, row 7: found 'abc', expected a number; mend or delete the row.
    """

    def __init__(self, where: str, found: str, expected: str, remedy: str = "") -> None:
        self.where, self.found, self.expected, self.remedy = where, found, expected, remedy
        tail = f"; {remedy}" if remedy else ""
        super().__init__(_on_one_line(f"{where}: found {found}, expected {expected}{tail}."))


class RefusedError(FieldmapError):
    """The readings are sound one by one, yet a number made from them would mean nothing.

    Parameters
    ----------
    code : str
        Stable code of the finding that led to the refusal.
    where : str
        The pass, reference or key concerned.
    text : str
        The sentence for the user: what is missing and what would supply it.
    """

    def __init__(self, code: str, where: str, text: str) -> None:
        self.code, self.where, self.text = code, where, text
        super().__init__(_on_one_line(f"{where}: {text}"))


def _on_one_line(text: str) -> str:
    """Text with names from anywhere: what would move a terminal's cursor is written out."""
    return "".join(c if c.isprintable() else repr(c)[1:-1] for c in text)
