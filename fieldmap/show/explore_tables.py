"""Numbers of a dwell, of two passes and of the corrections as text and HTML: pure functions."""

from __future__ import annotations

import math
from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.errors import InputError
from fieldmap.estimate.agreement import pass_agreement
from fieldmap.estimate.spectrum import voltage_spectrum
from fieldmap.magnet.corrections import corrections
from fieldmap.show.align import aligned_html, aligned_text
from fieldmap.show.display import Shown
from fieldmap.show.explore import WITH_JITTER, hear
from fieldmap.show.explore_words import dwell_words, line_words, verdict_of, with_u
from fieldmap.show.numbers import plain, rounded, scale_for
from fieldmap.show.rows import label, one_line
from fieldmap.show.stated import in_handy_unit

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.estimate.agreement import Agreement
    from fieldmap.magnet.corrections import Correction, Corrections
    from fieldmap.readings.passes import Axis, Campaign, Pass
    from fieldmap.show.explore import Heard

__all__ = [
    "agreement_shown",
    "agreement_table",
    "corrections_shown",
    "corrections_table",
    "dwell_shown",
    "dwell_table",
]

K: Final = 2.0
NOT_GIVEN: Final = "–"
SLIGHT: Final = 1e-4  # of u: a correction below this has no digits worth a row
_SHIFTS: Final = (
    "Shift: by how much the result would move were the correction not made; ± is k = 2. A shift "
    "of zero with a ± is an effect that the readings do not tell."
)


def dwell_shown(heard: Heard) -> Shown:
    """Drift and noise of a dwell beside what is stated or was used.

    Parameters
    ----------
    heard : Heard
        From `hear`.

    Returns
    -------
    Shown
    """
    noise, others = heard.noise, heard.levels[1:]
    head = ["quantity", "this dwell (k = 2)", *(level.name for level in others)]
    told = {"stated": _stated_drift(heard), "found by the map": _mapped_drift(heard)}
    rows = [
        [
            "drift",
            with_u(noise.drift, noise.u_drift, "V s/s"),
            *(told[level.name.removesuffix(WITH_JITTER)] for level in others),
        ],
        [
            "walk noise",
            with_u(noise.walk, noise.u_walk, "V s s^-0.5"),
            *(_number(level.walk, "V s s^-0.5") for level in others),
        ],
    ]
    if noise.read is not None and noise.u_read is not None:
        read = with_u(noise.read, noise.u_read, "V s")
        rows.append(["read noise", read, *(_number(level.read, "V s") for level in others)])
    remarks = [_lines_told(heard)]
    if heard.drift is not None:
        remarks.append(f"The map found a drift of {_mapped_drift(heard)} for the whole pass.")
    if heard.jitter > 0:
        jitter = _number(heard.jitter, "V s")
        remarks.append(f"The stated jitter of the position makes {jitter} of read noise here.")
    return _table(dwell_words(heard), head, rows, remarks, "dwell")


def dwell_table(one: Pass, dwell: int = 1, fmap: xr.Dataset | None = None) -> Shown:
    """Drift and noise of a dwell of a pass, for a notebook cell; parameters as for `hear`.

    Examples
    --------
    >>> from fieldmap.readings import load
    >>> from fieldmap.shipped import demo_folder
    >>> one = load(demo_folder() / "slot").passes[0]
    >>> print(dwell_table(one).text.splitlines()[1])
    quantity    this dwell (k = 2)     stated
    """
    return dwell_shown(hear(one, dwell, fmap))


def agreement_shown(found: Agreement) -> Shown:
    """The test of two passes, and what was set before they were compared.

    Parameters
    ----------
    found : Agreement
        From `pass_agreement`.

    Returns
    -------
    Shown
    """
    rows = []
    for unknown, value in found.removed:
        scale = in_handy_unit(unknown.unit, unknown.sd)
        shown, half = rounded(value * scale.factor, K * unknown.sd * scale.factor)
        expected = plain(unknown.mean * scale.factor, 6)
        rows.append([one_line(unknown.name), shown, f"{expected} ± {half}", scale.unit])
    title = f"{one_line(found.first)} against {one_line(found.second)}"
    head = ["set before comparing", "value", "expected (k = 2)", "unit"]
    remarks = [verdict_of(found)]
    resolution = plain(found.resolution * 1e3, 3)
    remarks.append(f"Compared over {resolution} mm: what is shorter is averaged over.")
    return _table(title, head, rows, remarks, "agreement")


def agreement_table(fmap: xr.Dataset, first: int, second: int) -> Shown:
    """Two passes of a map against each other, for a notebook cell.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "foreign_tables"))
    >>> agreement_table(fmap, 0, 2).text.splitlines()[0]
    'pass_01.csv against pass_03.csv'
    """
    return agreement_shown(pass_agreement(fmap, first, second))


def corrections_shown(found: Corrections, result: str) -> Shown:
    """What each correction does to one result, largest first.

    Parameters
    ----------
    found : Corrections
        From `corrections`.
    result : str
        Key of the result.

    Returns
    -------
    Shown

    Raises
    ------
    InputError
        No such result.
    """
    if result not in found.results:
        there = ", ".join(found.results)
        raise InputError("result", f"{result!r}", f"one of {there}", "choose one of these")
    one = found.results[result]
    scale, fine = scale_for(one.unit, [one.value]), in_handy_unit(one.unit, K * one.u)
    head = ["correction", "where", "found (k = 2)", f"shift / {fine.unit}", "± U", "shift / u"]
    rows = [
        _correction(item, result, one.u, fine.factor)
        for item in found.largest_first(result)
        if _counts(item, result, one.u)
    ]
    value, half = rounded(one.value * scale.factor, K * one.u * scale.factor)
    title = f"{label(result)}: {value} ± {half} {scale.unit} (k = 2)"
    if not rows:
        return _table(title, head, rows, ["No correction moves it."], "corrections")
    return _table(title, head, rows, [_SHIFTS], "corrections", numbers=3)


def corrections_table(
    fmap: xr.Dataset,
    result: str = "magnetic_length",
    campaign: Campaign | None = None,
    *,
    axis: Axis | None = None,
    line: int = 0,
) -> Shown:
    """What each correction does to one result, for a notebook cell.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    result : str
        Key of the result.
    campaign, axis, line : optional
        As for `fieldmap.magnet.corrections.corrections`.

    Returns
    -------
    Shown

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "foreign_tables"))
    >>> corrections_table(fmap, "boundary_in").text.splitlines()[3].split()[:2]
    ['trigger', 'lag']
    """
    return corrections_shown(corrections(fmap, campaign, axis=axis, line=line), result)


def _stated_drift(heard: Heard) -> str:
    """The drift as the campaign expects it."""
    integrator = heard.one.integrator
    if integrator.u_drift is None:
        return "not stated"
    return with_u(integrator.drift, integrator.u_drift, "V s/s")


def _mapped_drift(heard: Heard) -> str:
    """The drift of the whole pass as the map found it."""
    return NOT_GIVEN if heard.drift is None else with_u(*heard.drift, "V s/s")


def _lines_told(heard: Heard) -> str:
    lines = heard.noise.lines
    if not lines:
        return "No line stands out of the spectrum."
    width = voltage_spectrum(heard.dwell).width
    told = "; ".join(line_words(one, 1 / heard.dwell.step, width) for one in lines[:6])
    return f"Lines, left out of the noise: {told}."


def _number(value: float, unit: str) -> str:
    scale = scale_for(unit, [value])
    return f"{plain(value * scale.factor, 3)} {scale.unit}"


def _counts(item: Correction, result: str, u: float) -> bool:
    """Whether a correction does anything to a result worth a row."""
    sizes = [abs(item.shift[result]), item.u[result]]
    return any(math.isfinite(size) and size > SLIGHT * u for size in sizes)


def _correction(item: Correction, result: str, u: float, factor: float) -> list[str]:
    shift, own = item.shift[result], item.u[result]
    if math.isfinite(own) and own > 0:
        shown, half = rounded(shift * factor, K * own * factor)
    else:
        shown, half = plain(shift * factor, 3), NOT_GIVEN
    found = NOT_GIVEN
    if math.isfinite(item.value):
        scale = in_handy_unit(item.unit, max(abs(item.value), item.u_value))
        value, spread = rounded(item.value * scale.factor, K * item.u_value * scale.factor)
        found = f"{value} ± {spread} {scale.unit}"
    share = f"{shift / u:+.2f}" if u > 0 else NOT_GIVEN
    return [item.cause, one_line(item.where), found, shown, half, share]


def _table(
    title: str,
    head: Sequence[str],
    rows: Sequence[Sequence[str]],
    remarks: Sequence[str],
    kind: str,
    numbers: int = 0,
) -> Shown:
    """A titled table with remarks below it; the last columns are numbers, aligned."""
    told = "\n".join(remarks)
    notes = "".join(f'<p class="fm-remark">{escape(one)}</p>' for one in remarks)
    if not rows:
        return Shown(f"{title}\n{told}", f'<p class="fm-remark"><b>{escape(title)}</b></p>{notes}')
    columns = [list(column) for column in zip(*rows, strict=True)]
    first = len(columns) - numbers
    text = [c if i < first else aligned_text(c) for i, c in enumerate(columns)]
    cells = [
        [escape(cell) for cell in c] if i < first else aligned_html(c)
        for i, c in enumerate(columns)
    ]
    lines = "\n".join(_text_lines(head, text, first))
    html = _html(title, head, list(zip(*cells, strict=True)), kind, first)
    return Shown(f"{title}\n{lines}\n{told}", html + notes)


def _text_lines(head: Sequence[str], columns: Sequence[Sequence[str]], first: int) -> list[str]:
    padded = []
    for i, (word, column) in enumerate(zip(head, columns, strict=True)):
        width = max(len(word), *(len(cell) for cell in column))
        cells = (word, "-" * width, *column)
        padded.append([cell.ljust(width) if i < first else cell.rjust(width) for cell in cells])
    return ["  ".join(row).rstrip() for row in zip(*padded, strict=True)]


def _html(
    title: str, head: Sequence[str], rows: Sequence[Sequence[str]], kind: str, first: int
) -> str:
    names = "".join(
        f'<th scope="col"{" class=fm-right" if i >= first else ""}>{escape(word)}</th>'
        for i, word in enumerate(head)
    )
    body = "".join(
        f'<tr><th scope="row">{row[0]}</th>'
        + "".join(
            f'<td class="{"fm-number" if i >= first else "fm-words"}">{cell}</td>'
            for i, cell in enumerate(row[1:], start=1)
        )
        + "</tr>"
        for row in rows
    )
    return (
        f'<table class="fm-table fm-explore" data-kind="{kind}"><caption>{escape(title)}</caption>'
        f"<thead><tr>{names}</tr></thead><tbody>{body}</tbody></table>"
    )
