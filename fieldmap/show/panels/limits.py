"""Limits of integration and flat window: numbers to type, or ends of a bar to move."""

from __future__ import annotations

import functools
import math
from typing import TYPE_CHECKING, Any, Final, Literal

from fieldmap.show.panels.parts import button, column, hooked, number_field, row

if TYPE_CHECKING:
    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["LimitsPanel", "RangeField", "plain_step"]

Key = Literal["integrate", "flat"]
MM: Final = 1e3
STEPS_ACROSS: Final = 2000


def plain_step(length: float) -> float:
    """A plain number, 1, 2 or 5 times a power of ten, for about 2000 steps across a length.

    Examples
    --------
    >>> plain_step(900.0), plain_step(0.7)
    (0.2, 0.0002)
    """
    wanted = length / STEPS_ACROSS
    decade = 10.0 ** math.floor(math.log10(wanted))
    return float(f"{decade * max(m for m in (1, 2, 5) if m * decade <= wanted * 1.000001):.3g}")


class RangeField:
    """Two ends in mm: two numbers to type and a bar, which follow each other.

    Parameters
    ----------
    label : str
        What they are, for people and screen readers.
    hook : str
        Class name, as ``fm-…``.

    Attributes
    ----------
    low, high : ipywidgets.FloatText
        The ends.
    bar : ipywidgets.FloatRangeSlider
        The same ends; held within the mapped range, which the typed numbers are not.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, label: str, hook: str) -> None:
        import ipywidgets

        self.low = number_field(f"{label} from", f"{hook}-low")
        self.high = number_field("to", f"{hook}-high")
        self.high.style.description_width = "20px"
        self.bar = ipywidgets.FloatRangeSlider(
            min=-1, max=1, continuous_update=False, readout=False
        )
        hooked(self.bar, "fm-bar", f"{hook}-bar")
        unit = hooked(ipywidgets.HTML("mm"), "fm-unit")
        self.widget = column((row((self.low, self.high, unit), "fm-range"), self.bar), hook)

    def show(self, ends: tuple[float, float], within: tuple[float, float] | None) -> None:
        """Show ends (mm), the bar within a range (mm)."""
        self.low.value, self.high.value = (round(end, 6) for end in ends)
        if within is not None:
            step = plain_step(within[1] - within[0])
            self.low.step = self.high.step = self.bar.step = step
            # widened first: a bar refuses a smallest value above its largest
            self.bar.min = min(self.bar.min, within[0])
            self.bar.max = max(self.bar.max, within[1])
            self.bar.min, self.bar.max = within
        shown = sorted(min(max(end, self.bar.min), self.bar.max) for end in ends)
        self.bar.value = (shown[0], shown[1])


class LimitsPanel:
    """Move the limits of integration and the flat window.

    Parameters
    ----------
    state : Reduction
        What is evaluated again.

    Attributes
    ----------
    integrate, flat : RangeField
        The limits and the window.
    back : ipywidgets.Button
        Back to what the campaign file says.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        self.state = state
        self.integrate = RangeField("Integral", "fm-integrate")
        self.flat = RangeField("Flat", "fm-flat")
        self.back = button("As in the file", "Limits and window of the campaign file", "fm-back")
        self._following = False
        self.widget = column((self.integrate.widget, self.flat.widget, self.back), "fm-limits")
        fields: tuple[tuple[Key, RangeField], ...] = (
            ("integrate", self.integrate),
            ("flat", self.flat),
        )
        for key, field in fields:
            field.bar.observe(functools.partial(self._on_bar, key), names="value")
            for end, box in enumerate((field.low, field.high)):
                box.observe(functools.partial(self._on_number, key, end), names="value")
        self.back.on_click(self._on_back)
        state.listen(self._on_change)

    def _on_number(self, key: Key, end: int, change: dict[str, Any]) -> None:
        self._move(key, {end: change["new"]})

    def _on_bar(self, key: Key, change: dict[str, Any]) -> None:
        # a bar sends both ends, and rounds the one that was left alone to its own steps
        least = 0.51 * change["owner"].step
        pairs = zip(change["old"], change["new"], strict=True)
        self._move(key, {i: new for i, (old, new) in enumerate(pairs) if abs(new - old) > least})

    def _move(self, key: Key, moved: dict[int, float]) -> None:
        """Move some ends (mm) of the limits or of the window; the others keep all their digits."""
        with self.state.lock:
            axis = self.state.axis
            if self._following or axis is None or not moved:
                return
            before = axis.integrate if key == "integrate" else axis.flat
            low, high = (
                round(moved[i], 6) / MM if i in moved else end for i, end in enumerate(before)
            )
            if key == "integrate":
                self.state.move(integrate=(low, high))
            else:
                self.state.move(flat=(low, high))

    def _on_back(self, _: Any) -> None:
        campaign = self.state.campaign
        if campaign is not None:
            self.state.move(integrate=campaign.axis.integrate, flat=campaign.axis.flat)

    def _on_change(self, topic: Topic) -> None:
        axis, lines = self.state.axis, self.state.profiles
        if topic not in {"campaign", "passes", "map", "results"} or axis is None:
            return
        within = None
        if lines:
            within = (
                round(min(line.low for line in lines) * MM, 6),
                round(max(line.high for line in lines) * MM, 6),
            )
        self._following = True
        self.integrate.show((axis.integrate[0] * MM, axis.integrate[1] * MM), within)
        self.flat.show((axis.flat[0] * MM, axis.flat[1] * MM), within)
        self._following = False
