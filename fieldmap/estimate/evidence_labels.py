"""The evidence of all lines as labelled arrays of a map, and back."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt
from scipy import sparse

from fieldmap.estimate.evidence import NOISES, Evidence
from fieldmap.estimate.noise import Tridiagonal

if TYPE_CHECKING:
    from collections.abc import Sequence

    import xarray as xr

__all__ = ["labelled_evidence", "line_evidence"]

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.intp]
Variables = dict[str, tuple[tuple[str, ...], npt.NDArray[np.generic], dict[str, str]]]


def labelled_evidence(lines: Sequence[Evidence], basis: int, effects: int) -> Variables:
    """Arrays of the evidence of several lines, end to end.

    Parameters
    ----------
    lines : sequence of Evidence
        In the order of the map's lines.
    basis, effects : int
        Lengths of the map's dimensions of coefficients and nuisances; what a line has fewer of
        is filled up with nan.

    Returns
    -------
    dict
        Dimensions, values and attributes by the name of the variable.
    """
    prior = np.full((len(lines), effects), np.nan)
    frame = np.full((len(lines), basis, effects), np.nan)
    shift = np.full((len(lines), 2, effects), np.nan)
    for index, one in enumerate(lines):
        count = len(one.prior)
        prior[index, :count] = one.prior
        frame[index, : one.size, :count] = one.frame
        shift[index, :, :count] = one.shift
    return {
        **_increments(lines),
        **_references(lines, basis, effects),
        "prior": (
            ("line", "effect"),
            prior,
            _named("1", "expected values of nuisance before the scan"),
        ),
        "frame_shift": (
            ("line", "basis", "effect"),
            frame,
            _named("T", "coefficient at true positions less recorded, per nuisance"),
        ),
        "position_shift": (
            ("line", "power", "effect"),
            shift,
            _named("1", "true position less recorded at 0, m, and its growth, per nuisance"),
        ),
        **_smoothness(lines, basis, effects),
    }


def line_evidence(fmap: xr.Dataset, line: int, size: int, effects: int) -> Evidence:
    """The evidence of one line of a map.

    Parameters
    ----------
    fmap : xarray.Dataset
        With the variables of `labelled_evidence`.
    line : int
        Index of the line.
    size, effects : int
        Its numbers of coefficients and nuisances.

    Returns
    -------
    Evidence
    """
    own = np.flatnonzero(fmap["increment_line"].values == line)
    passes = fmap["residual_pass"].values[own]
    ours = fmap["reference_line"].values == line
    references = np.hstack(
        [
            fmap["reference_basis"].values[ours, :size],
            fmap["reference_effect"].values[ours, :effects],
        ]
    )
    return Evidence(
        design=_design(fmap, own, size + effects),
        target=fmap["flux_increment"].values[own],
        owner=passes - passes[0],
        noise={cause: _band(fmap[f"{cause}_covariance"].values[own]) for cause in NOISES},
        references=references,
        reference_target=fmap["reference_value"].values[ours],
        prior=fmap["prior"].values[line, :effects],
        frame=fmap["frame_shift"].values[line, :size, :effects],
        shift=fmap["position_shift"].values[line, :, :effects],
        roughness=fmap["roughness"].values[line, : size - 3],
        smooth_effect=fmap["smooth_effect"].values[line, : size - 3, :effects],
        smooth_origin=fmap["smooth_origin"].values[line, : size - 3],
    )


def _increments(lines: Sequence[Evidence]) -> Variables:
    each = ("increment",)
    found: Variables = {
        "flux_increment": (
            each,
            np.concatenate([one.target for one in lines]),
            _named("V s", "recorded increment of the flux from one bin mean to the next"),
        ),
        "increment_line": (
            each,
            np.repeat(np.arange(len(lines), dtype=np.int32), [len(one.target) for one in lines]),
            _named("1", "index of the line in the list of lines"),
        ),
        "design_count": (
            each,
            np.concatenate([np.diff(one.design.indptr) for one in lines]).astype(np.int32),
            _named("1", "number of design entries of the increment"),
        ),
        "design_column": (
            ("entry",),
            np.concatenate([one.design.indices for one in lines]).astype(np.int32),
            _named("1", "unknown of the entry: the coefficients of the line, then its nuisances"),
        ),
        "design": (
            ("entry",),
            np.concatenate([one.design.data for one in lines]),
            _named("V s", "change of the increment with the unknown, per T or per unit nuisance"),
        ),
    }
    for cause in NOISES:
        bands = [_columns(one.noise[cause]) for one in lines]
        found[f"{cause}_covariance"] = (
            (*each, "band"),
            np.concatenate(bands),
            _named("V2 s2", f"{cause} noise: variance of the increment, covariance with the next"),
        )
    return found


def _references(lines: Sequence[Evidence], basis: int, effects: int) -> Variables:
    each = ("reference",)
    counts = [len(one.references) for one in lines]
    rows, other = np.zeros((sum(counts), basis)), np.zeros((sum(counts), effects))
    owner = np.repeat(np.arange(len(lines), dtype=np.int32), counts)
    for index, one in enumerate(lines):
        rows[owner == index, : one.size] = one.references[:, : one.size]
        other[owner == index, : len(one.prior)] = one.references[:, one.size :]
    return {
        "reference_basis": (
            (*each, "basis"),
            rows,
            _named("T-1", "reference's change with coefficient over its standard uncertainty"),
        ),
        "reference_effect": (
            (*each, "effect"),
            other,
            _named("1", "reference's change with nuisance over its standard uncertainty"),
        ),
        "reference_value": (
            each,
            np.concatenate([one.reference_target for one in lines]),
            _named("1", "reference over its standard uncertainty"),
        ),
        "reference_line": (
            each,
            owner,
            _named("1", "index of the line in the list of lines"),
        ),
    }


def _smoothness(lines: Sequence[Evidence], basis: int, effects: int) -> Variables:
    each = ("line", "difference")
    roughness = np.full((len(lines), basis - 3), np.nan)
    origin, effect = roughness.copy(), np.full((*roughness.shape, effects), np.nan)
    for index, one in enumerate(lines):
        count = len(one.roughness)
        roughness[index, :count], origin[index, :count] = one.roughness, one.smooth_origin
        effect[index, :count, : len(one.prior)] = one.smooth_effect
    return {
        "roughness": (
            each,
            roughness,
            _named("T2", "variance of the third differences of coefficient before the readings"),
        ),
        "smooth_origin": (each, origin, _named("T", "expected value of the third differences")),
        "smooth_effect": (
            (*each, "effect"),
            effect,
            _named("T", "change of the third differences with nuisance in the smoothness prior"),
        ),
    }


def _named(units: str, long_name: str) -> dict[str, str]:
    return {"units": units, "long_name": long_name}


def _columns(band: Tridiagonal) -> Floats:
    """Diagonal and off-diagonal side by side; the last increment has no next."""
    return np.column_stack([band.diagonal, np.append(band.off, 0.0)])


def _band(columns: Floats) -> Tridiagonal:
    return Tridiagonal(columns[:, 0].copy(), columns[:-1, 1].copy())


def _design(fmap: xr.Dataset, own: Ints, width: int) -> sparse.csr_array:
    counts = fmap["design_count"].values
    ends = np.concatenate([[0], np.cumsum(counts)])
    chosen = slice(ends[own[0]], ends[own[-1] + 1])
    starts = np.concatenate([[0], np.cumsum(counts[own])])
    parts = (fmap["design"].values[chosen], fmap["design_column"].values[chosen], starts)
    return sparse.csr_array(parts, shape=(len(own), width))
