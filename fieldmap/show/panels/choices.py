"""What is chosen by hand in a reduction, and the words in which it is kept."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TYPE_CHECKING, Any, Final, Literal, NamedTuple

from fieldmap.errors import InputError
from fieldmap.readings.corrections import corrected
from fieldmap.show.corrections import by_hand
from fieldmap.show.panels.departures import departures, reference_words, same_spans

if TYPE_CHECKING:
    from collections.abc import Callable

    import xarray as xr

    from fieldmap.estimate.findings import Finding
    from fieldmap.readings.corrections import Correction
    from fieldmap.readings.passes import Axis, Campaign
    from fieldmap.show.panels.state import Reduction

__all__ = ["NOTHING", "Choice", "KeptMaps", "changed", "remember_choices"]

MAPS_KEPT: Final = 8


class Choice(NamedTuple):
    """What a map is made from: the campaign, which of its parts, and corrections by hand."""

    campaign: Campaign | None
    active: tuple[bool, ...]
    trusted: tuple[bool, ...]
    corrections: tuple[Correction, ...] = ()

    @property
    def marks(self) -> tuple[int, ...]:
        """Index of each pass in use."""
        return tuple(i for i, used in enumerate(self.active) if used)

    def reduced(self) -> Campaign:
        """The campaign with what is in use alone."""
        assert self.campaign is not None
        references = zip(self.campaign.references, self.trusted, strict=True)
        passes = tuple(self.campaign.passes[i] for i in self.marks)
        names = {one.name for one in passes}
        made = corrected(self.campaign, self.corrections).corrections
        return replace(
            self.campaign,
            passes=passes,
            references=tuple(one for one, used in references if used),
            corrections=tuple(one for one in made if one.where in names),
        )

    def notes(self, axis: Axis, added: tuple[str, ...]) -> tuple[Finding, ...]:
        """Every departure from the campaign file, with these limits and passes taken in."""
        if self.campaign is None:
            return ()
        found = departures(self.campaign, self.active, self.trusted, axis, added)
        used = {self.campaign.passes[i].name for i in self.marks}
        return *found, *by_hand([one for one in self.corrections if one.where in used])

    @property
    def whole(self) -> bool:
        """Whether nothing is left out."""
        return all(self.active) and all(self.trusted)


NOTHING: Final = Choice(None, (), ())


class KeptMaps(dict[Choice, "xr.Dataset"]):
    """The maps of the last choices of one campaign."""

    def __init__(self) -> None:
        super().__init__()
        self._spacing: float | None = None

    def of(
        self, wanted: Choice, solved: Callable[[Campaign, float | None], xr.Dataset]
    ) -> xr.Dataset:
        """The map of a choice, solved unless it was made before.

        Once a knot spacing has been found good, what is left out does not change it.
        """
        if wanted not in self:
            spacing = None if wanted.whole else self._spacing
            self[wanted] = fmap = solved(wanted.reduced(), spacing)
            if spacing is None:
                self._spacing = float(fmap["knots"].values[..., 1].min())
            if len(self) > MAPS_KEPT:
                del self[next(iter(self))]
        return self[wanted]


def changed(flags: tuple[bool, ...], index: int, *, to: bool) -> tuple[bool, ...]:
    """Flags with one of them changed."""
    return (*flags[:index], to, *flags[index + 1 :])


def remember_choices(state: Reduction) -> None:
    """Name what is left out, corrections switched on, limits and flat window, to be kept.

    They are set without solving: that is done once all are set.
    """
    state.remember(
        "passes_off", lambda: _passes_off(state), lambda value: _put_passes_off(state, value)
    )
    state.remember(
        "references_off",
        lambda: _references_off(state),
        lambda value: _put_references_off(state, value),
    )
    state.remember(
        "corrections",
        lambda: [one.as_entry() for one in state.offers.ticked],
        lambda value: state.offers.put(value, state.campaign),
    )
    keys: tuple[Literal["integrate", "flat"], ...] = ("integrate", "flat")
    for key in keys:
        _remember_span(state, key)


def _remember_span(state: Reduction, key: Literal["integrate", "flat"]) -> None:
    def get() -> list[float] | None:
        campaign, axis = state.campaign, state.axis
        if campaign is None or axis is None or same_spans(axis, campaign.axis):
            return None
        own = getattr(axis, key)
        return None if own == getattr(campaign.axis, key) else list(own)

    def put(value: Any) -> None:
        if value is not None and state.axis is not None:
            ends = _ends(value)
            state.axis = state.axis.moved(**{key: ends})

    state.remember(key, get, put)


def _ends(value: Any) -> tuple[float, float]:
    """Two positions, m."""
    number = isinstance(value, list) and len(value) == 2
    if not number or not all(
        isinstance(end, int | float) and not isinstance(end, bool) and math.isfinite(end)
        for end in value
    ):
        raise InputError("limits", repr(value)[:60], "two positions in m")
    if not value[0] < value[1]:
        raise InputError("limits", repr(value)[:60], "a first limit below the second")
    return float(value[0]), float(value[1])


def _passes_off(state: Reduction) -> list[str]:
    passes = state.campaign.passes if state.campaign else ()
    return [one.name for one, used in zip(passes, state.active, strict=False) if not used]


def _put_passes_off(state: Reduction, value: Any) -> None:
    names = _texts(value, "names of passes")
    passes = state.campaign.passes if state.campaign else ()
    state.active = tuple(one.name not in names for one in passes)


def _references_off(state: Reduction) -> list[str]:
    references = state.campaign.references if state.campaign else ()
    pairs = zip(references, state.trusted, strict=False)
    return [reference_words(one) for one, used in pairs if not used]


def _put_references_off(state: Reduction, value: Any) -> None:
    words = _texts(value, "references in words")
    references = state.campaign.references if state.campaign else ()
    state.trusted = tuple(reference_words(one) not in words for one in references)


def _texts(value: Any, expected: str) -> set[str]:
    if not isinstance(value, list) or not all(isinstance(one, str) for one in value):
        raise InputError("list", repr(value)[:60], expected)
    return set(value)
