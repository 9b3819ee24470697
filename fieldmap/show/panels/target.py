"""Whether the uncertainty that is needed is reached."""

from __future__ import annotations

import math
from html import escape
from typing import TYPE_CHECKING, Any, Final

from fieldmap.errors import InputError
from fieldmap.readings.sections import RESULT_UNITS
from fieldmap.show.numbers import plain
from fieldmap.show.panels.parts import column, hooked, number_field, row
from fieldmap.show.rows import label

if TYPE_CHECKING:
    from collections.abc import Mapping

    from fieldmap.show.panels.state import Reduction, Topic

__all__ = ["TargetPanel", "target_words"]

K: Final = 2.0
FIRST: Final = "magnetic_length"
# the unit that is typed, and how many of it make one of the result's own
HANDY: Final[Mapping[str, tuple[str, float]]] = {
    "m": ("mm", 1e3),
    "T": ("mT", 1e3),
    "T m": ("mT m", 1e3),
}


class TargetPanel:
    """Choose a result and type the expanded uncertainty that is wanted.

    Parameters
    ----------
    state : Reduction
        Where the results come from.

    Attributes
    ----------
    result : ipywidgets.Dropdown
        Key of the result.
    wanted : ipywidgets.FloatText
        U (k = 2) in the unit beside it; nothing is judged at 0.
    told : ipywidgets.HTML
        Whether it is reached.
    widget : ipywidgets.VBox
        To show.
    """

    def __init__(self, state: Reduction) -> None:
        import ipywidgets

        self.state = state
        self._following = False
        self.result = hooked(
            ipywidgets.Dropdown(
                description="Target",
                options=[(label(key), key) for key in RESULT_UNITS],
                value=FIRST,
                style={"description_width": "46px"},
            ),
            "fm-target",
        )
        self.wanted = number_field("U", "fm-target-u")
        self.wanted.style.description_width = "20px"
        self.unit = hooked(ipywidgets.HTML(_unit(FIRST)[0]), "fm-unit")
        self.told = hooked(ipywidgets.HTML(), "fm-target-told")
        self.widget = column((row((self.result, self.wanted, self.unit)), self.told), "fm-targets")
        self.result.observe(self._on_choice, names="value")
        self.wanted.observe(self._on_choice, names="value")
        state.remember("target", self._get, self._put)
        state.listen(self._on_change)

    def _get(self) -> dict[str, Any] | None:
        if not self.wanted.value > 0:
            return None
        return {"result": self.result.value, "U": self.wanted.value / _unit(self.result.value)[1]}

    def _put(self, value: Any) -> None:
        if value is None:
            self.wanted.value = 0.0
            return
        known = isinstance(value, dict) and value.get("result") in RESULT_UNITS
        number = value.get("U") if known else None
        if not isinstance(number, int | float) or not math.isfinite(number) or number < 0:
            raise InputError("target", repr(value)[:60], "a result and its U in SI")
        self.result.value = value["result"]
        self.wanted.value = float(f"{number * _unit(value['result'])[1]:.9g}")

    def _on_choice(self, _: dict[str, Any]) -> None:
        with self.state.lock:
            self.unit.value = _unit(self.result.value)[0]
            self._show()
            self.state.keep()

    def _on_change(self, topic: Topic) -> None:
        if topic in {"campaign", "stale", "results"}:
            self._show()

    def _show(self) -> None:
        self.told.value = ""
        if self.wanted.value > 0:
            words, reached = target_words(self.state, self.result.value, self.wanted.value)
            style, mark = ("fm-accept", "●") if reached else ("fm-open", "○")
            self.told.value = (
                f'<p role="status" class="fm-told {style}"><b aria-hidden="true">{mark}</b> '
                f"{escape(words)}</p>"
            )


def target_words(state: Reduction, key: str, wanted: float) -> tuple[str, bool]:
    """Whether a result is known well enough, in words.

    Parameters
    ----------
    state : Reduction
        With its results.
    key : str
        Key of the result.
    wanted : float
        U in the handy unit of the result.

    Returns
    -------
    str, bool
        The sentence, and whether the target is reached on every line.
    """
    name, (unit, factor) = label(key).lower(), _unit(key)
    aim = f"target {plain(wanted)} {unit}".rstrip()
    reached = [
        line.results[key].expanded(K) * factor for line in state.lines if key in line.results
    ]
    if not reached or len(reached) < len(state.lines):
        return f"{name}: no result yet, {aim}.", False
    worst = max(reached)
    done = worst <= wanted and not state.stale
    verdict = "reached" if done else "not yet"
    old = " (out of date: still to be solved)" if state.stale else ""
    where = " on the worst line" if len(reached) > 1 else ""
    return f"{name}: U = {worst:#.3g} {unit}{where}, {aim}: {verdict}{old}.", done


def _unit(key: str) -> tuple[str, float]:
    unit = RESULT_UNITS[key]
    return HANDY.get(unit, ("" if unit == "1" else unit, 1.0))
