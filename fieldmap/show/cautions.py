"""The notice on magnets at work that notebooks, reports and the command line carry."""

from __future__ import annotations

import textwrap
from html import escape
from typing import Final

from fieldmap.show.display import Shown

__all__ = ["caution_html", "caution_text", "cautions"]

TITLE: Final = "Before you go near the magnet"
CAUTIONS: Final = (
    (
        "Keep people with pacemakers or other implants outside the 0.5 mT line; some editions of "
        "IEC 60601-2-33 say 0.9 mT, local rules decide."
    ),
    "Bring no loose ferromagnetic objects near: strong magnets pull iron with great force.",
    "A current that is interrupted releases the stored energy, ½·L·I², as a high voltage.",
    "Moving stages pinch: keep hands away while a scan runs.",
    "Lock out supplies and drives before reaching in.",
)
LAST_WORD: Final = (
    "Local codes, the site's safety officer and licensed practice come first; "
    "this kit gives no permission."
)
WIDTH: Final = 88


def caution_text() -> str:
    """The notice as plain text.

    Returns
    -------
    str

    Examples
    --------
    >>> caution_text().splitlines()[0]
    'Before you go near the magnet'
    """
    items = [
        textwrap.fill(f"- {one}", WIDTH, subsequent_indent="  ", break_on_hyphens=False)
        for one in CAUTIONS
    ]
    return "\n".join([TITLE, *items, textwrap.fill(LAST_WORD, WIDTH)])


def caution_html() -> str:
    """The notice as HTML.

    Returns
    -------
    str

    Examples
    --------
    >>> "0.5 mT line" in caution_html()
    True
    """
    items = "".join(f"<li>{escape(one)}</li>" for one in CAUTIONS)
    return (
        f'<section class="fm-cautions" role="note"><h4>{escape(TITLE)}</h4>'
        f"<ul>{items}</ul><p>{escape(LAST_WORD)}</p></section>"
    )


def cautions() -> Shown:
    """The notice for a notebook cell."""
    return Shown(caution_text(), caution_html())
