"""What a reduction leaves behind: map.nc and results.json, both or neither."""

from __future__ import annotations

from typing import TYPE_CHECKING

from fieldmap.atomic import output_folder, replacing
from fieldmap.estimate.store import write_map
from fieldmap.magnet.results_file import write_results

if TYPE_CHECKING:
    import os
    from pathlib import Path

    import xarray as xr

    from fieldmap.magnet.results import Results

__all__ = ["save_reduction"]


def save_reduction(
    fmap: xr.Dataset, results: Results, folder: str | os.PathLike[str]
) -> tuple[Path, Path]:
    """Write map.nc and results.json into a folder.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`.
    results : Results
        From `evaluate`.
    folder : path
        Made if it is not there. Earlier files are replaced only when both new ones are
        complete.

    Returns
    -------
    tuple of Path
        The two files.

    Raises
    ------
    InputError
        The folder cannot be made or written.
    """
    place = output_folder(folder)
    map_file, results_file = place / "map.nc", place / "results.json"
    with replacing(results_file) as results_aside, replacing(map_file) as map_aside:
        write_map(fmap, map_aside)
        write_results(results, results_aside)
    return map_file, results_file
