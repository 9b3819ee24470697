"""What is open, what is being done, what is wrong: always in words; and a way to stop it."""

from __future__ import annotations

import re
from html import escape
from typing import TYPE_CHECKING, Any, Final

from fieldmap.show.numbers import plain
from fieldmap.show.panels.parts import button, hooked, row
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.readings.passes import Campaign
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["StatusPanel", "title_html"]

COUNTED: Final = re.compile(r"\b(\d{1,6}) of (\d{1,6})\b")


class StatusPanel:
    """One line: an error, or what is being done, or that all is well.

    Parameters
    ----------
    state : Reduction
        What is listened to. Make this panel after the others, so that it also tells of their
        failures.

    Attributes
    ----------
    widget : ipywidgets.HTML
        The line.
    bar : ipywidgets.HTML
        How far the work in the background has come.
    stop, solve : ipywidgets.Button
        Give that work up; make the map of what is in use after all.
    controls : ipywidgets.Box
        Bar and buttons; there while there is something to stop or to solve.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        self.state = state
        self.widget = hooked(ipywidgets.HTML(_status(state)), "fm-status")
        self.bar = hooked(ipywidgets.HTML(), "fm-progress-box")
        self.stop = button("Stop", "Give up solving; the last good map stays", "fm-stop")
        self.solve = button("Solve", "Make the map of what is in use", "fm-solve")
        self.controls = row((self.bar, self.stop, self.solve), "fm-controls")
        self.stop.on_click(self._on_stop)
        self.solve.on_click(self._on_solve)
        self._show()
        state.listen(self._on_change)

    def _on_stop(self, _: Any) -> None:
        self.state.stop()

    def _on_solve(self, _: Any) -> None:
        self.state.solve()

    def _on_change(self, topic: Topic) -> None:
        del topic  # any change may be an error
        self._show()

    def _show(self) -> None:
        state = self.state
        self.widget.value = _status(state)
        self.bar.value = _progress(state) if state.working else ""
        self.stop.layout.display = "" if state.stoppable else "none"
        self.solve.layout.display = "" if not state.working and _unsolved(state) else "none"
        there = state.working or _unsolved(state)
        self.controls.layout.display = "" if there else "none"


def _unsolved(state: Reduction) -> bool:
    """Whether there is a campaign without a map of what is in use, and no reason for that."""
    return state.campaign is not None and not state.error and (state.stale or state.fmap is None)


def _progress(state: Reduction) -> str:
    """A bar with its words: as far as it is counted, or only that it goes on."""
    counted = COUNTED.search(state.busy)
    share = f' max="{counted[2]}" value="{counted[1]}"' if counted else ""
    words = escape(one_line(state.busy))
    return f'<progress class="fm-progress" aria-label="{words}"{share}></progress>'


def _status(state: Reduction) -> str:
    if state.busy:
        took = f", {state.elapsed:.0f} s" if state.elapsed >= 1 else ""
        words = escape(one_line(state.busy))
        return f'<div role="status" class="fm-busy">… {words}<span>{took}</span></div>'
    if state.error:
        return f'<div role="alert" class="fm-alert">{escape(one_line(state.error))}</div>'
    notice = f" {escape(one_line(state.notice))}" if state.notice else ""
    if state.campaign is None:
        return f'<div role="status" class="fm-ready">Choose a campaign.{notice}</div>'
    if _unsolved(state):
        words = (
            "Out of date: map and results are those of an earlier choice. Press Solve."
            if state.stale
            else "Not solved. Press Solve."
        )
        return f'<div role="alert" class="fm-alert">{words}{notice}</div>'
    used, there = sum(state.active), len(state.active)
    words = f"Solved: {used} of {there} passes in use."
    if not all(state.trusted):
        words += f" {sum(state.trusted)} of {len(state.trusted)} references in use."
    if made := len(state.offers.ticked):
        words += f" {made} offered correction{'' if made == 1 else 's'} switched on."
    return f'<div role="status" class="fm-ready">{words}{notice}</div>'


def title_html(title: str, campaign: Campaign | None) -> str:
    """Title of a panel with the main facts of what is open."""
    head = f'<h3 class="fm-title">{escape(title)}'
    if campaign is None:
        return f"{head}</h3>"
    magnet = campaign.magnet
    facts = [magnet.kind, f"component {one_line(magnet.component)}", f"gap {_mm(magnet.gap)}"]
    if magnet.iron_length is not None:
        facts.append(f"iron {_mm(magnet.iron_length)}")
    if magnet.current is not None:
        facts.append(f"{plain(magnet.current, 6)} A")
    return (
        f"{head} <span>{escape(one_line(campaign.name))}</span>"
        f"<small>{escape(', '.join(facts))}</small></h3>"
    )


def _mm(value: float) -> str:
    return f"{plain(value * 1e3, 6)} mm"
