"""What faults put into a campaign came to, as text and as HTML: pure functions of the trials."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.bench.fault_outcome import OUTCOMES
from fieldmap.bench.faults import FAULTS
from fieldmap.show.display import Shown
from fieldmap.show.plain_text import ruled_table, wrapped
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.bench.fault_trials import FaultTrials
    from fieldmap.bench.faults import FaultKind

__all__ = ["faults_html", "faults_shown", "faults_text"]

_HEAD: Final = ("fault", *OUTCOMES, "unseen from severity")
_NOTE: Final = (
    "Harmless: integrated field, central field and magnetic length within 2U. Found: a warning "
    "that the same readings without the fault do not have. Off: beyond 2U with nothing said. "
    "Silent: beyond 3U with nothing said. Severities run from 1, mildest, to 5, gross."
)
_ALL_SEEN: Final = "No fault made a result wrong beyond 3U without a word."
_OTHER_PROBE: Final = "a pass over the same stretch with another probe would reveal it"
_EXTRA: Final = {
    "smoothness": "a pass back over the same stretch would reveal it",
    "redundancy of probes": "a pass with a second probe, or a reading of another magnetometer "
    "where the field is flat, would reveal it",
    "reference": "a reading of another magnetometer, or a flip, would reveal it",
    "file": "only the list of passes shows it: name each file once, and keep it whole",
}


def faults_text(faults: FaultTrials) -> str:
    """Outcomes of each kind of fault, then what would go unseen, in plain text.

    Parameters
    ----------
    faults : FaultTrials
        From `fault_trials`.

    Returns
    -------
    str

    Examples
    --------
    >>> from fieldmap.bench.fault_trials import FaultTrial, FaultTrials
    >>> one = FaultTrial("polarity", 5, 0, "found", 4e3)
    >>> print(faults_text(FaultTrials("Magnet 3", 1, (one,))).splitlines()[-3])
    polarity         0      1        0    0       0
    """
    rows = [_HEAD, *(_cells(faults, kind) for kind in faults.kinds)]
    said = [wrapped(one_line(sentence)) for sentence in _sentences(faults)]
    return "\n".join([_title(faults), wrapped(_NOTE), "", *ruled_table(rows), "", *said])


def faults_html(faults: FaultTrials) -> str:
    """Outcomes of each kind of fault, then what would go unseen, as HTML.

    Parameters
    ----------
    faults : FaultTrials
        From `fault_trials`.

    Returns
    -------
    str
        Rows carry ``data-key``; the classes are those of `fieldmap.show.stylesheet`.

    Examples
    --------
    >>> from fieldmap.bench.fault_trials import FaultTrials
    >>> "Magnet &lt;3&gt;" in faults_html(FaultTrials("Magnet <3>", 1, ()))
    True
    """
    head = "".join(f'<th scope="col">{word.capitalize()}</th>' for word in _HEAD)
    body = "".join(_row(faults, kind) for kind in faults.kinds)
    said = "".join(f"<li>{escape(sentence)}</li>" for sentence in _sentences(faults))
    return (
        '<div class="fm-faults"><table class="fm-table">'
        f"<caption>{escape(_title(faults))}</caption>"
        f"<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"
        f'<p class="fm-remark">{escape(_NOTE)}</p><ul>{said}</ul></div>'
    )


def faults_shown(faults: FaultTrials) -> Shown:
    """The same for a notebook cell.

    Parameters
    ----------
    faults : FaultTrials
        From `fault_trials`.

    Returns
    -------
    Shown

    Examples
    --------
    >>> from fieldmap.bench.fault_trials import FaultTrials
    >>> faults_shown(FaultTrials("Magnet 3", 1, ())).text.splitlines()[0]
    'Faults put into the campaign: Magnet 3'
    """
    return Shown(faults_text(faults), faults_html(faults))


def _title(faults: FaultTrials) -> str:
    return f"Faults put into the campaign: {one_line(faults.campaign) or 'campaign'}"


def _cells(faults: FaultTrials, kind: FaultKind) -> tuple[str, ...]:
    count = faults.count(kind.key)
    silent = kind in faults.unseen
    first = str(faults.worst(kind.key).severity) if silent else ""
    return (kind.key, *(str(count[name]) for name in OUTCOMES), first)


def _sentences(faults: FaultTrials) -> list[str]:
    """What would go unseen: what more measuring would show first, then what is taken on trust."""
    told = [_sentence(faults, kind) for kind in faults.unseen]
    said = [text for text, on_trust in told if not on_trust]
    said += [text for text, on_trust in told if on_trust]
    return said or [_ALL_SEEN]


def _sentence(faults: FaultTrials, kind: FaultKind) -> tuple[str, bool]:
    """One kind that went unseen, and whether no pass at all would show it."""
    one = faults.worst(kind.key)
    text = (
        f"{kind.key}: if {kind.words} ({kind.size(one.severity):g} {kind.of}), a result is off by "
        f"{one.worst:.3g} u and nothing is said; "
    )
    if kind.revealed_by == "nothing":
        return f"Taken on trust, {text}{kind.reason}.", True
    weak = "" if one.told else "these readings do not hold it, "
    return f"Unseen, {text}{weak}{_extra(faults, kind)}.", False


def _extra(faults: FaultTrials, kind: FaultKind) -> str:
    """Which pass more would show a kind of fault."""
    if kind.revealed_by != "overlap":
        return _EXTRA[kind.revealed_by]
    if not faults.lonely:
        return _OTHER_PROBE
    stretches = " and ".join(
        f"{1e3 * start:.4g} to {1e3 * stop:.4g} mm" for start, stop in faults.lonely
    )
    return f"a second pass over {stretches}, which one pass alone covers, would reveal it"


def _row(faults: FaultTrials, kind: FaultKind) -> str:
    name, *cells = _cells(faults, kind)
    return (
        f'<tr data-key="{escape(name)}"><th scope="row" title="{escape(FAULTS[name].words)}">'
        f"{escape(name)}</th>" + "".join(f"<td>{escape(cell)}</td>" for cell in cells) + "</tr>"
    )
