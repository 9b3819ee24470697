"""What is shown at one moment, to be written while more is changed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from fieldmap.errors import InputError
from fieldmap.estimate.map import with_axis
from fieldmap.magnet.evaluate import evaluate
from fieldmap.show.handover import save_reduction
from fieldmap.show.panels.places import writable_folder

if TYPE_CHECKING:
    import os
    from pathlib import Path

    import xarray as xr

    from fieldmap.estimate.findings import Finding
    from fieldmap.magnet.results import Results
    from fieldmap.readings.passes import Axis, Campaign

__all__ = ["Shown"]


@dataclass(frozen=True, eq=False)
class Shown:
    """A map, its results, and what they rest on.

    Parameters
    ----------
    campaign, axis, fmap, results, stale, notes
        As in `Reduction`.
    """

    campaign: Campaign | None
    axis: Axis | None
    fmap: xr.Dataset | None
    results: Results | None
    stale: bool
    notes: tuple[Finding, ...]

    def write(self, folder: str | os.PathLike[str]) -> tuple[Path, ...]:
        """Write map.nc, results.json and report.html; give the files.

        Raises
        ------
        InputError
            There are no results, or others than those of what is in use; or one may not write
            there.
        """
        place = writable_folder(folder)
        if self.stale:
            raise InputError(
                "save", "a map that is out of date", "one of what is in use", "solve it first"
            )
        if self.fmap is None or self.results is None or self.axis is None:
            raise InputError("save", "no results", "a map with results", "mend the campaign first")
        marked = with_axis(self.fmap, self.axis, self.notes)
        # what the panels show goes without the fringes, which take their time
        results = evaluate(marked, self.campaign, axis=self.axis)
        return save_reduction(marked, results, place)
