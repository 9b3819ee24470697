"""Last part of a report: what was taken on trust, findings, provenance, signatures."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

from fieldmap.estimate.findings import ASSUMED
from fieldmap.estimate.map import map_lines, map_magnet, map_passes, map_title
from fieldmap.estimate.provenance import map_joint, map_unknowns
from fieldmap.magnet.budget import UNKNOWN_CAUSES
from fieldmap.show.numbers import plain, rounded
from fieldmap.show.report.parts import Column, Section, paragraph, table
from fieldmap.show.rows import line_title
from fieldmap.show.stated import in_handy_unit
from fieldmap.version import __version__

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.magnet.results import Results

__all__ = ["SIGNATURES", "provenance_section", "trust_section"]

NOT_CHECKED: Final = 0.95  # of the standard uncertainty before the scan
PARTLY: Final = 0.5
MOST_DRIFTS: Final = 12

SIGNATURES: Final = (
    '<section class="sign"><h2>Signatures</h2>'
    '<div class="lines">'
    + "".join(
        f"<p><span>{role}</span><span>Name</span><span>Date</span><span>Signature</span></p>"
        for role in ("Measured by", "Checked by")
    )
    + "</div></section>"
)


def trust_section(fmap: xr.Dataset, results: Results) -> Section:
    """What the results rest on besides the readings.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.
    results : Results
        From `evaluate`.

    Returns
    -------
    Section
    """
    component = map_magnet(fmap).component
    points = (
        (
            f"The probes sense the component {component} only, and the magnet did not change from "
            "pass to pass other than its recorded current tells."
        ),
        (
            "Stated values and standard uncertainties of probes, integrators, stage and references "
            "are taken as they stand; the table tells which of them the readings check."
        ),
        "Errors of different causes are independent of each other and normally distributed.",
        "Between the readings the field is as smooth as the readings show it to be.",
    )
    assumed = [one.text for one in results.findings if one.code == ASSUMED]
    listed = "".join(paragraph(one) for one in (*points, *assumed))
    tables = "".join(
        _unknowns(fmap, i, f": {line_title(line)}" if len(results.lines) > 1 else "")
        for i, line in enumerate(results.lines)
    )
    return Section("Taken on trust", listed + tables)


def _unknowns(fmap: xr.Dataset, line: int, which: str) -> str:
    """Each stated quantity before and after the scan."""
    unknowns = map_unknowns(fmap, line)
    if not unknowns:
        return paragraph(f"No error of the instruments is stated, and none was estimated{which}.")
    joint = map_joint(fmap, line)
    m = len(unknowns)
    found, left = joint.values[-m:], np.sqrt(np.diagonal(joint.covariance)[-m:])
    rows, drifts = [], 0
    for one, value, u in zip(unknowns, found.tolist(), left.tolist(), strict=True):
        drifts += one.kind == "drift"
        if one.kind != "drift" or drifts <= MOST_DRIFTS:
            rows.append(_unknown(one, value, u))
    columns = (
        Column("Unknown"),
        Column("Of"),
        Column("Stated u", "number"),
        Column("Found", "number"),
        Column("u after", "number"),
        Column("Unit"),
        Column("By the readings"),
    )
    more = drifts - MOST_DRIFTS
    note = paragraph(f"Drifts of {more} more passes are not listed.", "remark") if more > 0 else ""
    return (
        table(f"Errors of the instruments before and after the scan{which}", columns, rows) + note
    )


def _unknown(one: Nuisance, value: float, left: float) -> tuple[str, ...]:
    """A row; value and what is left of the uncertainty are in units of the stated one."""
    unit = "relative" if one.unit == "1" else one.unit
    scale = in_handy_unit(unit, one.sd)
    size = one.sd * scale.factor
    words = UNKNOWN_CAUSES.get(one.kind, f"relative {one.kind}")
    checked = "checked"
    if left > PARTLY:
        checked = "not checked" if left > NOT_CHECKED else "partly checked"
    found, after = rounded(value * size, left * size)
    return (
        words,
        one.where or "stage",
        plain(size, 3),
        found,
        after,
        scale.unit,
        checked,
    )


def provenance_section(fmap: xr.Dataset) -> Section:
    """Which files the map was made of, with what settings.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    Section
    """
    name, sha256 = map_title(fmap)
    rows = [("campaign", name, sha256 or "none: not from a file")]
    rows += [("pass", one["name"], one["sha256"] or "none: not from a file")
             for one in map_passes(fmap)]  # fmt: skip
    files = table(
        "SHA-256 of what was read",
        (Column("Kind"), Column("Name"), Column("SHA-256", "code")),
        rows,
        css="files",
    )
    made = str(fmap.attrs.get("fieldmap_version", "not known"))
    words = (
        f"Map of format {fmap.attrs.get('format', 'not known')}, made by fieldmap {made}; report "
        f"by fieldmap {__version__}. "
    )
    settings = " ".join(
        f"Line {i}: cubic B-spline of {line.spline.size} coefficients, knots "
        f"{plain(line.spline.spacing * 1e3, 6)} mm apart, "
        f"{plain(line.low * 1e3, 9)} to {plain(line.high * 1e3, 9)} mm."
        for i, line in enumerate(map_lines(fmap), start=1)
    )
    return Section("Provenance", paragraph(words + settings) + files)
