"""The kit's look in HTML: one style sheet for tables, notices, pictures and panels."""

from __future__ import annotations

import functools
from pathlib import Path

__all__ = ["stylesheet", "with_style"]


@functools.cache
def stylesheet() -> str:
    """The style sheet.

    Returns
    -------
    str
        CSS. Every selector begins with a class of the kit's own, ``fm-…``, so that nothing else
        on the page changes. Colours follow the theme of JupyterLab where there is one.

    Examples
    --------
    >>> ".fm-table" in stylesheet()
    True
    """
    return Path(__file__).with_name("style.css").read_text(encoding="utf-8")


def with_style(html: str) -> str:
    """A piece of HTML that brings its style along, for a notebook cell."""
    return f'<style>{stylesheet()}</style><div class="fm">{html}</div>'
