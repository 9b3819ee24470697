"""Trials of the whole chain as text and as HTML: pure functions of what they came to."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.show.display import Shown
from fieldmap.show.numbers import rounded, scale_for
from fieldmap.show.plain_text import ruled_table, wrapped
from fieldmap.show.rows import label, one_line

if TYPE_CHECKING:
    from fieldmap.bench.confirmation import Confirmation, Confirmed

__all__ = ["confirmation_html", "confirmation_shown", "confirmation_text"]

_HEAD: Final = ("result", "value", "u", "unit", "spread", "mean off", "95 % within", "inside 2 u")
_LEFT: Final = (0, 3)  # columns of words; numbers stand to the right
_NOTE: Final = "Spread, mean and 95 % interval of the trials' errors are in units of u."
_ALL_HOLD: Final = "The linear uncertainties hold for all results."


def confirmation_text(confirmation: Confirmation) -> str:
    """Linear figures and trials side by side, in plain text.

    Parameters
    ----------
    confirmation : Confirmation
        From `confirm`.

    Returns
    -------
    str
        A table, then a sentence for each result whose linear figure does not hold.

    Examples
    --------
    >>> import numpy as np
    >>> from fieldmap.bench.confirmation import Confirmation, confirmed
    >>> from fieldmap.magnet.quantity import Quantity
    >>> errors = 8.4e-6 * np.sin(np.arange(60))
    >>> one = confirmed("magnetic_length", 0, Quantity(0.4000049, 8.4e-6, "m"), errors)
    >>> print(confirmation_text(Confirmation("Magnet 3", 60, (), (one,))).splitlines()[-3])
    Magnetic length  400.0049  0.0084  mm      0.71     +0.03  -1.0 to +1.0       100 %
    """
    cells = [_HEAD, *(_cells(one, _several(confirmation)) for one in confirmation.results)]
    head = [_title(confirmation), wrapped(one_line(confirmation.refused)), _NOTE]
    said = [wrapped(one_line(sentence)) for sentence in _sentences(confirmation)]
    return "\n".join([*head, "", *ruled_table(cells, _LEFT), "", *said])


def confirmation_html(confirmation: Confirmation) -> str:
    """Linear figures and trials side by side, as HTML.

    Parameters
    ----------
    confirmation : Confirmation
        From `confirm`.

    Returns
    -------
    str
        Rows carry ``data-key``; the classes are those of `fieldmap.show.stylesheet`.

    Examples
    --------
    >>> from fieldmap.bench.confirmation import Confirmation
    >>> "Magnet &lt;3&gt;" in confirmation_html(Confirmation("Magnet <3>", 60, (), ()))
    True
    """
    head = "".join(f'<th scope="col">{word.capitalize()}</th>' for word in _HEAD)
    body = "".join(_row(one, _several(confirmation)) for one in confirmation.results)
    said = "".join(f"<li>{escape(sentence)}</li>" for sentence in _sentences(confirmation))
    return (
        '<div class="fm-confirmation"><table class="fm-table">'
        f"<caption>{escape(_title(confirmation))}</caption>"
        f"<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
        f'<p class="fm-remark">{escape(one_line(confirmation.refused))} {escape(_NOTE)}</p>'
        f"<ul>{said}</ul></div>"
    )


def confirmation_shown(confirmation: Confirmation) -> Shown:
    """The same for a notebook cell.

    Parameters
    ----------
    confirmation : Confirmation
        From `confirm`.

    Returns
    -------
    Shown

    Examples
    --------
    >>> from fieldmap.bench.confirmation import Confirmation
    >>> confirmation_shown(Confirmation("Magnet 3", 60, (), ())).text.splitlines()[0]
    'Trials of the whole chain: Magnet 3'
    """
    return Shown(confirmation_text(confirmation), confirmation_html(confirmation))


def _title(confirmation: Confirmation) -> str:
    return f"Trials of the whole chain: {one_line(confirmation.campaign) or 'campaign'}"


def _several(confirmation: Confirmation) -> bool:
    return len({one.line for one in confirmation.results}) > 1


def _name(one: Confirmed, several: bool) -> str:  # noqa: FBT001 - of lines, named at its calls
    return f"{label(one.key)}, line {one.line + 1}" if several else label(one.key)


def _cells(one: Confirmed, several: bool) -> tuple[str, ...]:  # noqa: FBT001 - as above
    scale = scale_for(one.unit, [one.value])
    value, u = rounded(one.value * scale.factor, one.u * scale.factor)
    off, low, high = "", "", ""
    if one.u > 0:
        off = f"{one.bias / one.u:+.2f}"
        low, high = (f"{end / one.u:+.1f}" for end in one.interval)
    return (
        _name(one, several),
        value,
        u,
        one_line(scale.unit),
        f"{one.ratio:.2f}",
        off,
        f"{low} to {high}" if low else "",
        f"{100 * one.covered:.0f} %",
    )


def _sentences(confirmation: Confirmation) -> list[str]:
    """What does not hold: first what is not good enough, then what is on the safe side."""
    several = _several(confirmation)
    told = sorted(
        (one for one in confirmation.results if not one.linear_holds),
        key=lambda one: one.good_enough,
    )
    return [f"{_name(one, several)}: {one.sentence}" for one in told] or [_ALL_HOLD]


def _row(one: Confirmed, several: bool) -> str:  # noqa: FBT001 - as above
    name, *cells = _cells(one, several)
    return (
        f'<tr data-key="{escape(one_line(one.key))}"><th scope="row">{escape(name)}</th>'
        + "".join(f"<td>{escape(cell)}</td>" for cell in cells)
        + "</tr>"
    )
