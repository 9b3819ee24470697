"""Which passes are used, and how well each agrees with the rest."""

from __future__ import annotations

import math
from html import escape
from typing import TYPE_CHECKING, Final

from fieldmap.estimate.map import map_findings, map_passes
from fieldmap.readings.probe import Wire
from fieldmap.show.look import pass_style, short
from fieldmap.show.numbers import plain
from fieldmap.show.panels.ticks import TickList
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.readings.passes import Pass
    from fieldmap.show.panels.state import Reduction

__all__ = ["PassesPanel"]

STRAYS: Final = 2.0  # times what the noise gives: residuals that speak for themselves

# SVG shapes of the markers, in a box from -4 to 4
_SHAPES: Final = {
    "o": '<circle r="3.2"/>',
    "s": '<rect x="-3" y="-3" width="6" height="6"/>',
    "^": '<path d="M0-3.6 3.6 3H-3.6z"/>',
    "D": '<path d="M0-4 4 0 0 4-4 0z"/>',
    "v": '<path d="M0 3.6 3.6-3H-3.6z"/>',
    "P": '<path d="M-1.3-4h2.6v2.7H4v2.6H1.3V4h-2.6V1.3H-4v-2.6h2.7z"/>',
    "X": '<path transform="rotate(45)" d="M-1.3-4h2.6v2.7H4v2.6H1.3V4h-2.6V1.3H-4v-2.6h2.7z"/>',
    "<": '<path d="M-3.6 0 3-3.6V3.6z"/>',
}


class PassesPanel(TickList):
    """A box to tick for each pass, with its probe, its kind of record and its health.

    Parameters
    ----------
    state : Reduction
        What uses the passes.

    Attributes
    ----------
    boxes : tuple of ipywidgets.Checkbox
        One a pass, in the order of the campaign.
    notes : tuple of ipywidgets.HTML
        What is said of each pass.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        super().__init__(state, "fm-pass", "fm-passes")

    def _offered(self) -> list[tuple[str, bool]]:
        passes = self.state.campaign.passes if self.state.campaign else ()
        return [
            (short(one.name), used) for one, used in zip(passes, self.state.active, strict=True)
        ]

    def _switch(self, index: int, used: bool) -> None:  # noqa: FBT001 - the value of a checkbox
        self.state.use(index, used)

    def _refresh(self) -> None:
        """Show which passes are in use, and what the map says of them."""
        if self.state.campaign is None:
            return
        self._following = True
        health = self._health()
        for index, one in enumerate(self.state.campaign.passes):
            self.boxes[index].value = self.state.active[index]
            self.notes[index].value = _note(index, one, *health.get(index, ("○", "not used")))
        self._following = False

    def _health(self) -> dict[int, tuple[str, str]]:
        """Mark and words for each pass in use."""
        fmap = self.state.fmap
        if fmap is None:
            return dict.fromkeys(self.state.marks, ("–", "no map"))
        if self.state.stale:
            return dict.fromkeys(self.state.marks, ("…", "to be solved"))
        warned = {finding.where for finding in map_findings(fmap) if finding.severity == "warn"}
        found = {}
        for index, facts in zip(self.state.map_marks, map_passes(fmap), strict=True):
            size = math.sqrt(facts["chi_square"] / max(facts["freedom"], 1.0))
            word = "fits" if size < STRAYS else "does not fit"
            word = "look at it" if facts["name"] in warned else word
            mark = "●" if word == "fits" else "▲"
            made = ", corrected" if facts.get("corrections") else ""
            found[index] = (mark, f"{word}, residuals {size:.2f}{made}")
        return found


def _note(index: int, one: Pass, mark: str, words: str) -> str:
    state = {"▲": "fm-warn", "●": "fm-accept"}.get(mark, "fm-off")
    about = f"{one_line(one.probe.name)}, {one.record}"
    return (
        f'<span class="fm-pass-note">{_swatch(index)} <span>{escape(about)}</span> '
        f'<span class="{state}"><b aria-hidden="true">{mark}</b> {escape(words)}</span>'
        f"{_provenance(one)}</span>"
    )


def _provenance(one: Pass) -> str:
    """Where a pass comes from, folded away; the keyboard reaches and opens it."""
    facts = {
        "file": str(one.source) if one.source else one.name,
        "SHA-256": f"{one.sha256[:12]}…" if one.sha256 else "none: not from a file",
        "readings": str(len(one.time)),
        "duration": f"{plain(float(one.time[-1] - one.time[0]), 4)} s",
        "travel": f"{_mm(one.position[0])} to {_mm(one.position[-1])} mm",
        "line": f"x = {_mm(one.x)} mm, y = {_mm(one.y)} mm",
        "probe": _probe_words(one),
        "integrator": one.integrator.name,
    }
    rows = "".join(
        f"<dt>{escape(key)}</dt><dd>{escape(one_line(value))}</dd>" for key, value in facts.items()
    )
    label = escape(f"about {one_line(one.name)}", quote=True)
    return (
        f'<details class="fm-provenance"><summary aria-label="{label}">about</summary>'
        f"<dl>{rows}</dl></details>"
    )


def _probe_words(one: Pass) -> str:
    probe = one.probe
    if isinstance(probe, Wire):
        about = f"{plain(probe.turns)} turns, {_mm(probe.active_length)} mm long"
        return f"wire '{probe.name}', {about}"
    about = f"{plain(probe.effective_area, 6)} m², window {_mm(probe.window)} mm"
    return f"{probe.shape} coil '{probe.name}', {about}"


def _mm(length: float) -> str:
    return plain(float(length) * 1e3, 6)


def _swatch(index: int) -> str:
    """The line and marker that the figures draw this pass with."""
    style = pass_style(index)
    dash = (
        "" if isinstance(style.dash, str) else " ".join(str(1.4 * part) for part in style.dash[1])
    )
    return (
        '<svg class="fm-swatch" width="34" height="10" viewBox="-17 -5 34 10" aria-hidden="true" '
        f'fill="{style.colour}" stroke="none"><path d="M-17 0H17" stroke="{style.colour}" '
        f'stroke-width="2" stroke-dasharray="{dash}"/>{_SHAPES[style.marker]}</svg>'
    )
