"""Corrections that findings offer, and those of them that are switched on by hand."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from fieldmap.errors import InputError
from fieldmap.estimate.map import map_findings
from fieldmap.readings.entries import read_correction
from fieldmap.show.corrections import offered

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.readings.corrections import Correction
    from fieldmap.readings.passes import Campaign

__all__ = ["Offers"]


class Offers:
    """Corrections that are offered, and those of them that are switched on by hand.

    Attributes
    ----------
    listed : tuple of Correction
        What can be ticked. One that is ticked stays, although its finding goes with the fault.
    ticked : tuple of Correction
        What is switched on.
    """

    def __init__(self) -> None:
        self.listed: tuple[Correction, ...] = ()
        self.ticked: tuple[Correction, ...] = ()

    def tick(self, index: int, *, to: bool) -> bool:
        """Switch one on or off; whether that changed anything."""
        if not 0 <= index < len(self.listed) or (self.listed[index] in self.ticked) == to:
            return False
        one = self.listed[index]
        ticked = {*self.ticked, one} if to else {*self.ticked} - {one}
        self.ticked = tuple(each for each in self.listed if each in ticked)
        return True

    def see(self, fmap: xr.Dataset, campaign: Campaign) -> None:
        """Take up what a map offers; what the campaign file has already is no offer."""
        had = {one.place for one in campaign.corrections} | {one.place for one in self.ticked}
        fresh = [one for one in offered(map_findings(fmap)) if one.place not in had]
        stays = [one for one in self.listed if one in self.ticked or one in fresh]
        self.listed = tuple(dict.fromkeys([*stays, *self.ticked, *fresh]))

    def put(self, value: Any, campaign: Campaign | None) -> None:
        """Switch on what was kept; passes that are gone and what the file has are passed over.

        Raises
        ------
        InputError
            No list of corrections.
        """
        if not isinstance(value, list):
            raise InputError("corrections", repr(value)[:60], "a list of corrections")
        read = [read_correction(one, f"corrections, {i}") for i, one in enumerate(value, 1)]
        names = {one.name for one in campaign.passes} if campaign else set()
        had = {one.place for one in campaign.corrections} if campaign else set()
        kept = [one for one in read if one.where in names and one.place not in had]
        self.ticked = tuple({one.place: one for one in kept}.values())
        self.listed = tuple(dict.fromkeys([*self.listed, *self.ticked]))
