"""The map: an xarray Dataset labelled after CF-1.11 that holds all later results need."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.estimate.evidence_labels import labelled_evidence
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.findings import Finding
from fieldmap.estimate.map_attributes import FORMAT, describe
from fieldmap.estimate.map_facts import check_arrays, check_facts
from fieldmap.estimate.mapped_line import MappedLine
from fieldmap.estimate.noise import total
from fieldmap.estimate.provenance import (
    map_corrections,
    map_evidence,
    map_integrators,
    map_probes,
    map_references,
    map_stage,
)
from fieldmap.estimate.spline import DEGREE, UniformSpline
from fieldmap.readings.entries import read_correction
from fieldmap.readings.passes import Axis, Campaign, Limit, Magnet

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    import xarray as xr

    from fieldmap.estimate.fit import LineFit

__all__ = [
    "FORMAT",
    "MappedLine",
    "build_map",
    "check_map",
    "map_axis",
    "map_findings",
    "map_limits",
    "map_lines",
    "map_magnet",
    "map_passes",
    "map_title",
    "with_axis",
]

Floats = npt.NDArray[np.float64]

_DAMAGE = (KeyError, TypeError, ValueError, IndexError, AttributeError, OverflowError)


def build_map(
    campaign: Campaign,
    lines: Sequence[MappedLine],
    findings: Sequence[Finding],
    step: float | None = None,
) -> xr.Dataset:
    """Label the fitted lines.

    Parameters
    ----------
    campaign : Campaign
        What was measured.
    lines : sequence of MappedLine
        At least one.
    findings : sequence of Finding
        Remarks on the whole campaign; those of the lines are added.
    step : float, optional
        Grid step along the travel, m.

    Returns
    -------
    xarray.Dataset
        Data variables on (y, x, z) and what later integrals need.
    """
    import xarray as xr

    z = _grid(lines, step)
    xs, ys = sorted({line.x for line in lines}), sorted({line.y for line in lines})
    shape = (len(ys), len(xs))
    most = max(line.fit.spline.size for line in lines)
    others = max(len(line.fit.unknowns) for line in lines)
    field, u_field = np.full((*shape, len(z)), np.nan), np.full((*shape, len(z)), np.nan)
    count = np.zeros((*shape, len(z)), dtype=np.int32)
    b, spread = np.full((*shape, most), np.nan), np.full((*shape, most, most), np.nan)
    eta, eta_spread = np.full((*shape, others), np.nan), np.full((*shape, others, others), np.nan)
    shared = np.full((*shape, most, others), np.nan)
    reach = np.full((*shape, 2), np.nan)
    knots = np.full((*shape, 3), np.nan)
    for line in lines:
        at = ys.index(line.y), xs.index(line.x)
        field[at], u_field[at] = _on_grid(line, z)
        count[at] = _readings_near(line, z)
        n, scale = line.fit.spline.size, _nuisance_units(line.fit)
        m = len(scale)
        b[at][:n], spread[at][:n, :n] = line.fit.values[:n], line.fit.covariance[:n, :n]
        eta[at][:m] = line.fit.values[n:] / scale
        eta_spread[at][:m, :m] = line.fit.covariance[n:, n:] / np.outer(scale, scale)
        shared[at][:n, :m] = line.fit.covariance[:n, n:] / scale
        reach[at] = line.low, line.high
        spline = line.fit.spline
        knots[at] = spline.start, spline.spacing, spline.size
    grid = ("y", "x", "z")
    residual = _residuals(lines)
    dataset = xr.Dataset(
        {
            "B": (grid, field),
            "B_se": (grid, u_field),
            "n_readings": (grid, count),
            "coefficient": (("y", "x", "basis"), b),
            "coefficient_covariance": (("y", "x", "basis", "basis_2"), spread),
            "nuisance": (("y", "x", "effect"), eta),
            "nuisance_covariance": (("y", "x", "effect", "effect_2"), eta_spread),
            "shared_covariance": (("y", "x", "basis", "effect"), shared),
            "mapped_range": (("y", "x", "end"), reach),
            "knots": (("y", "x", "knot_item"), knots),
            "residual": (("increment",), residual[0]),
            "residual_position": (("increment",), residual[1]),
            "residual_pass": (("increment",), residual[2]),
        },
        coords={"y": ("y", ys), "x": ("x", xs), "z": ("z", z)},
    )
    evidence = labelled_evidence([line.fit.evidence for line in lines], most, others)
    dataset = dataset.assign(evidence)
    describe(dataset, campaign, lines, findings)
    return dataset


def _nuisance_units(fit: LineFit) -> Floats:
    """Each nuisance is kept in units of its uncertainty before the scan."""
    return np.array([unknown.sd for unknown in fit.unknowns])


def _grid(lines: Sequence[MappedLine], step: float | None) -> Floats:
    """Grid points at plain multiples of a plain step, over all lines."""
    low, high = min(line.low for line in lines), max(line.high for line in lines)
    if step is None:
        wanted = min(line.fit.spline.spacing for line in lines) / 2
        decade = 10.0 ** np.floor(np.log10(wanted))
        step = float(decade * max(m for m in (1, 2, 5) if m * decade <= wanted * 1.000001))
    elif not 0 < step <= high - low:
        raise InputError("step", f"{step:g} m", f"a step above 0 and up to {high - low:g} m")
    first, last = np.ceil(low / step - 1e-9), np.floor(high / step + 1e-9)
    return np.asarray(np.arange(first, last + 1) * step)


def _on_grid(line: MappedLine, z: Floats) -> tuple[Floats, Floats]:
    one = line.fit.line(line.x, line.y, line.low, line.high)
    outside = (z < line.low - 1e-9) | (z > line.high + 1e-9)
    inside = np.where(outside, line.low, z)
    return np.where(outside, np.nan, one.field(inside)), np.where(
        outside, np.nan, one.u_field(inside)
    )


def _readings_near(line: MappedLine, z: Floats) -> npt.NDArray[np.int32]:
    """Number of readings that fall to each grid point."""
    middles = 0.5 * (z[1:] + z[:-1])
    total = np.zeros(len(z), dtype=np.int64)
    for one in line.fit.passes:
        total += np.bincount(np.searchsorted(middles, one.one.position), minlength=len(z))
    return total.astype(np.int32)


def _residuals(lines: Sequence[MappedLine]) -> tuple[Floats, Floats, npt.NDArray[np.int32]]:
    """Residuals of all passes end to end, their positions, and which pass each belongs to."""
    fits = [one for line in lines for one in line.fit.passes]
    owner = np.repeat(np.arange(len(fits)), [len(one.residual) for one in fits])
    return (
        np.concatenate([one.residual for one in fits]),
        np.concatenate([one.position for one in fits]),
        owner.astype(np.int32),
    )


def _facts(fmap: xr.Dataset, name: str) -> Any:
    """A JSON attribute of the map."""
    return json.loads(fmap.attrs[name])


def check_map(fmap: xr.Dataset, where: str) -> None:
    """Refuse a dataset that is not a whole map.

    Parameters
    ----------
    fmap : xarray.Dataset
        To be looked at.
    where : str
        Its file, for the error.

    Raises
    ------
    InputError
        Something that every map has is missing or of another shape.
    """
    try:
        check_facts(fmap)
        check_arrays(fmap)
        lines = map_lines(fmap)
        whole = bool(lines) and all(_is_whole(line) for line in lines)
        readers: tuple[Callable[[xr.Dataset], object], ...]
        readers = (map_title, map_axis, map_limits, map_magnet, map_findings, map_passes)
        readers += (map_probes, map_integrators, map_stage, map_references, map_corrections)
        for read in readers:
            read(fmap)
        for index in range(len(lines)):
            total(map_evidence(fmap, index).noise).factor()
    except InputError as error:
        raise _no_map(where, error.found) from error
    except (*_DAMAGE, RecursionError) as error:
        raise _no_map(where, f"a part that is missing or damaged ({error!s:.120})") from error
    if not whole:
        raise _no_map(where, "coefficients that are not all numbers")


def _is_whole(line: FieldLine) -> bool:
    """Whether a line's numbers are finite and fit together."""
    spline = line.spline
    numbers = (line.b, line.covariance, [line.low, line.high, spline.start, spline.spacing])
    return (
        all(bool(np.isfinite(one).all()) for one in numbers)
        and spline.spacing > 0
        and spline.size == len(line.b) > DEGREE
        and line.covariance.shape == (spline.size, spline.size)
    )


def _no_map(where: str, found: str) -> InputError:
    return InputError(
        where, found, "a whole map written by this package", "reduce the campaign again"
    )


def map_title(fmap: xr.Dataset) -> tuple[str, str]:
    """Name and hash of the campaign."""
    facts = _facts(fmap, "campaign")
    return str(facts["name"]), str(facts["sha256"])


def map_lines(fmap: xr.Dataset) -> list[FieldLine]:
    """The lines of a map, in the order of (y, x).

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`.

    Returns
    -------
    list of FieldLine
    """
    found = []
    for facts in _facts(fmap, "lines"):
        at = fmap.sel(x=facts["x"], y=facts["y"])
        start, spacing, size = at["knots"].values.tolist()
        n = int(size)
        found.append(
            FieldLine(
                x=float(facts["x"]),
                y=float(facts["y"]),
                low=float(at["mapped_range"].values[0]),
                high=float(at["mapped_range"].values[1]),
                spline=UniformSpline(start, spacing, n),
                b=at["coefficient"].values[:n],
                covariance=at["coefficient_covariance"].values[:n, :n],
            )
        )
    return found


def map_axis(fmap: xr.Dataset) -> Axis:
    """Integration limits and flat window that the campaign named."""
    axis = _facts(fmap, "campaign")["axis"]
    spans = {key: tuple(axis[key]) for key in ("integrate", "flat")}
    return Axis(**{**axis, **spans})


def with_axis(fmap: xr.Dataset, axis: Axis, notes: Sequence[Finding] = ()) -> xr.Dataset:
    """The same map with other limits and flat window to take results within.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch` or `load_map`; it stays as it is.
    axis : Axis
        What `map_axis` will give.
    notes : sequence of Finding, optional
        Remarks to add.

    Returns
    -------
    xarray.Dataset
        Shares its arrays with `fmap`.
    """
    facts = _facts(fmap, "campaign") | {"axis": asdict(axis)}
    findings = _facts(fmap, "findings") + [note.as_dict() for note in notes]
    return fmap.assign_attrs(campaign=json.dumps(facts), findings=json.dumps(findings))


def map_limits(fmap: xr.Dataset) -> tuple[Limit, ...]:
    """Tolerances that the campaign named."""
    return tuple(Limit(**limit) for limit in _facts(fmap, "campaign")["limits"])


def map_magnet(fmap: xr.Dataset) -> Magnet:
    """What the campaign said of the magnet."""
    return Magnet(**_facts(fmap, "campaign")["magnet"])


def map_findings(fmap: xr.Dataset) -> list[Finding]:
    """Remarks made while stitching."""
    return [_finding(facts) for facts in _facts(fmap, "findings")]


def _finding(facts: Mapping[str, Any]) -> Finding:
    """A remark with the correction that it offers, from the form used in results.json."""
    if "correction" not in facts:
        return Finding(**facts)
    offer = read_correction(facts["correction"], f"finding '{facts['code']}', correction")
    return Finding(**{**facts, "correction": offer})


def map_passes(fmap: xr.Dataset) -> list[dict[str, Any]]:
    """What is kept of each pass: name, hash, probe, noise, chi-square, freedom."""
    return [dict(one) for one in _facts(fmap, "passes")]
