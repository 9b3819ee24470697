"""What a reduction leaves behind: map.nc, results.json and report.html, all of them or none."""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import TYPE_CHECKING

from fieldmap.atomic import new_folder, replacing_set
from fieldmap.errors import InputError
from fieldmap.estimate.map import map_axis, map_passes
from fieldmap.estimate.store import write_map
from fieldmap.magnet.evaluate import evaluate
from fieldmap.magnet.results_file import write_results

if TYPE_CHECKING:
    import os
    from collections.abc import Sequence

    import xarray as xr

    from fieldmap.magnet.results import Results
    from fieldmap.show.report.parts import Section

__all__ = ["save_reduction", "write_reduction"]


def save_reduction(
    fmap: xr.Dataset,
    results: Results,
    folder: str | os.PathLike[str],
    *,
    k: float = 2.0,
    extra: Sequence[Section | str] = (),
) -> tuple[Path, Path, Path]:
    """Write map.nc, results.json and report.html into a folder.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`.
    results : Results
        From `evaluate`, with the limits that the map keeps: the three files tell the same.
    folder : path
        Made if it is not there. Earlier files are replaced only when all new ones are complete.
    k : float
        Coverage factor that the results were evaluated with, and that the report shows.
    extra : sequence of Section or str
        Further sections of the report; as for `fieldmap.show.report.report_html`.

    Returns
    -------
    tuple of Path
        The three files.

    Raises
    ------
    InputError
        The folder cannot be made or written, or the results are not those of the map.

    Examples
    --------
    >>> import tempfile
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     files = save_reduction(fmap, fieldmap.evaluate(fmap), folder)
    >>> [file.name for file in files]
    ['map.nc', 'results.json', 'report.html']
    """
    from fieldmap.show.report.page import report_of

    if not _agree(evaluate(fmap, k=k, fringe=False), results):
        raise InputError(
            "results",
            "others than the map gives with the limits it keeps",
            "results of this map, so that map.nc, results.json and report.html agree",
            "give evaluate(fmap); set limits and tolerances in the campaign before it is stitched",
        )
    report = report_of(fmap, results, map_axis(fmap), k, extra)
    return write_reduction(fmap, results, report, folder)


def write_reduction(
    fmap: xr.Dataset, results: Results, report: str, folder: str | os.PathLike[str]
) -> tuple[Path, Path, Path]:
    """Write the three files, which take their places together; the results are not checked."""
    from fieldmap.show.report.page import FILE_NAME, write_report

    names = "map.nc", "results.json", FILE_NAME
    _spare_readings(fmap, Path(folder), names)
    with new_folder(folder) as place, replacing_set(place, names) as asides:
        write_map(fmap, asides[0])
        write_results(results, asides[1])
        write_report(report, asides[2])
    return place / names[0], place / names[1], place / names[2]


def _spare_readings(fmap: xr.Dataset, folder: Path, names: Sequence[str]) -> None:
    """Refuse to replace what the map was made from, if a table should bear one of the names."""
    read = {facts["sha256"] for facts in map_passes(fmap)} - {""}
    for name in names:
        place = folder / name
        if _digest(place) in read:
            raise InputError(
                str(place),
                "one of the pass tables that the map was made from",
                "a folder in which results take the place of earlier results only",
                "name another folder",
            )


def _digest(place: Path) -> str:
    """Hash of a file as passes keep it; of what cannot be read, none: replacing it is refused."""
    try:
        return hashlib.sha256(place.read_bytes()).hexdigest() if place.is_file() else ""
    except OSError:
        return ""


def _agree(own: Results, given: Results) -> bool:
    """Whether numbers and verdicts are the map's own; curves of the fringe are taken as given."""

    def told(results: Results) -> tuple[object, ...]:
        lines = [(line.x, line.y, line.results) for line in results.lines]
        return results.campaign, results.sha256, lines, results.verdicts

    return told(own) == told(given)
