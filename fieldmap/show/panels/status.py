"""What is open, what is being done, what is wrong: always in words."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING

from fieldmap.show.numbers import plain
from fieldmap.show.panels.parts import hooked
from fieldmap.show.rows import one_line

if TYPE_CHECKING:
    from fieldmap.readings.passes import Campaign
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["StatusPanel", "title_html"]


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
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        self.state = state
        self.widget = hooked(ipywidgets.HTML(_status(state)), "fm-status")
        state.listen(self._on_change)

    def _on_change(self, topic: Topic) -> None:
        del topic  # any change may be an error
        self.widget.value = _status(self.state)


def _status(state: Reduction) -> str:
    if state.busy:
        return f'<div role="status" class="fm-busy">… {escape(one_line(state.busy))}</div>'
    if state.error:
        return f'<div role="alert" class="fm-alert">{escape(one_line(state.error))}</div>'
    if state.campaign is None:
        return '<div role="status" class="fm-ready">Choose a campaign.</div>'
    used, there = sum(state.active), len(state.active)
    return f'<div role="status" class="fm-ready">Solved: {used} of {there} passes in use.</div>'


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
