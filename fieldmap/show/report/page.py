"""The report: one file to print, sign and keep, made from a map alone.

It holds everything it shows: no script, no link, nothing to load. The same map gives the same
bytes.
"""

from __future__ import annotations

import functools
import itertools
from pathlib import Path
from typing import TYPE_CHECKING, Final

from fieldmap.atomic import is_folder, new_folder, replacing
from fieldmap.estimate.map import map_axis, map_limits, map_title
from fieldmap.magnet.evaluate import evaluate
from fieldmap.show.cautions import caution_html
from fieldmap.show.markup import findings_html
from fieldmap.show.report.evidence import SIGNATURES, provenance_section, trust_section
from fieldmap.show.report.lines import line_parts, residuals_part
from fieldmap.show.report.measured import (
    corrections_sections,
    measured_section,
    passes_section,
)
from fieldmap.show.report.parts import Section, safe
from fieldmap.show.report.results import head, verdicts_section
from fieldmap.show.rows import line_title
from fieldmap.version import __version__

if TYPE_CHECKING:
    import os
    from collections.abc import Iterator, Sequence

    import xarray as xr

    from fieldmap.magnet.results import Results
    from fieldmap.readings.passes import Axis

__all__ = ["FILE_NAME", "report_html", "report_of", "save_report", "write_report"]

FILE_NAME: Final = "report.html"
NOTHING_FROM_OUTSIDE: Final = "default-src 'none'; style-src 'unsafe-inline'; img-src data:"


def report_html(
    fmap: xr.Dataset,
    *,
    axis: Axis | None = None,
    k: float = 2.0,
    extra: Sequence[Section | str] = (),
) -> str:
    """Report on a map: what was measured, results, verdicts, budgets, findings, provenance.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`; the raw passes are not needed.
    axis : Axis, optional
        Limits and flat window; those kept in the map if not given.
    k : float
        Coverage factor of everything that is shown with ±.
    extra : sequence of Section or str
        Further sections, from `fieldmap.show.report.besides` or as HTML that is safe already;
        they come before the findings.

    Returns
    -------
    str
        A whole page of HTML. It depends on the map and on the version of the kit only: no date,
        no name of a machine.

    Raises
    ------
    RefusedError
        Limits or flat window outside the mapped range.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> page = report_html(fmap)
    >>> page.startswith("<!doctype html>"), "<script" in page
    (True, False)
    """
    axis = axis or map_axis(fmap)
    return report_of(fmap, evaluate(fmap, axis=axis, k=k), axis, k, extra)


def report_of(
    fmap: xr.Dataset, results: Results, axis: Axis, k: float, extra: Sequence[Section | str] = ()
) -> str:
    """The same where the map has been evaluated already, with this axis and this k."""
    names = (f"figure-{i}" for i in itertools.count(1))
    passes = passes_section(fmap)
    pieces: list[Section | str] = [
        measured_section(fmap, axis),
        Section(passes.title, passes.html + residuals_part(fmap, axis, next(names))),
        *corrections_sections(fmap),
        *_results_sections(fmap, results, axis, k, names),
        *extra,
        Section("Findings", findings_html(results.findings)),
        trust_section(fmap, results),
        provenance_section(fmap),
        Section("Safety", caution_html().replace("h4>", "h3>")),
        SIGNATURES,
    ]
    return _page(*map_title(fmap), head(results, k) + _numbered(pieces))


def _results_sections(
    fmap: xr.Dataset, results: Results, axis: Axis, k: float, names: Iterator[str]
) -> list[Section]:
    """Sections of the only line; or the verdicts, and then one section a line."""
    lines = [line_parts(fmap, results, axis, i, k, names) for i in range(len(results.lines))]
    verdicts = verdicts_section(results, map_limits(fmap), k)
    if len(lines) == 1:
        profile, table, *others = lines[0]
        return [profile, table, verdicts, *others]
    blocks = [
        Section(line_title(line), "".join(f"<h3>{safe(one.title)}</h3>{one.html}" for one in parts))
        for line, parts in zip(results.lines, lines, strict=True)
    ]
    return [verdicts, *blocks]


def _numbered(pieces: Sequence[Section | str]) -> str:
    """Sections with numbered headings; what is HTML already stands between them as it is."""
    numbers = itertools.count(1)
    return "".join(
        one
        if isinstance(one, str)
        else f"<section><h2>{next(numbers)} {safe(one.title)}</h2>{one.html}</section>"
        for one in pieces
    )


def _page(title: str, sha256: str, body: str) -> str:
    name = safe(title) or "Field map"
    foot = f"@page {{ @bottom-left {{ content: {_css_string(title, sha256)}; }} }}"
    return (
        '<!doctype html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{NOTHING_FROM_OUTSIDE}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f'<meta name="generator" content="fieldmap {__version__}">\n'
        f"<title>{name}: report</title>\n<style>{_stylesheet()}{foot}</style>\n</head>\n"
        '<body>\n<main><header><p class="what">Report of a magnetic measurement</p>'
        f"<h1>{name}</h1></header>"
        f"{body}</main>\n</body>\n</html>\n"
    )


def _css_string(title: str, sha256: str) -> str:
    """Name and hash of the campaign for the foot of each page: plain letters only."""
    text = f"{title}, campaign {sha256[:12]}" if sha256 else title
    return '"' + "".join(c for c in text if c.isalnum() or c in " .,-_()") + '"'


@functools.cache
def _stylesheet() -> str:
    return Path(__file__).with_name("report.css").read_text(encoding="utf-8")


def save_report(
    fmap: xr.Dataset,
    path: str | os.PathLike[str],
    *,
    axis: Axis | None = None,
    k: float = 2.0,
    extra: Sequence[Section | str] = (),
) -> Path:
    """Write the report on a map.

    Parameters
    ----------
    fmap : xarray.Dataset
        As for `report_html`.
    path : path
        A file whose name ends in .html, or a folder (made if it is not there) for report.html;
        an older report is replaced only when the new one is complete.
    axis, k, extra
        As for `report_html`.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    InputError
        It cannot be written.
    """
    text = report_html(fmap, axis=axis, k=k, extra=extra)
    place = Path(path)
    named = place.suffix.lower() in {".html", ".htm"} and not is_folder(place)
    file = place if named else place / FILE_NAME
    with new_folder(file.parent), replacing(file) as aside:
        write_report(text, aside)
    return file


def write_report(text: str, path: Path) -> None:
    """Write to a path straight away: for callers that take care of replacing."""
    path.write_text(text, encoding="utf-8", newline="\n")
