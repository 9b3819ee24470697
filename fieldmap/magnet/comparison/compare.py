"""Comparison of a map with another map or with a design."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError
from fieldmap.estimate.map import FORMAT, map_axis, map_magnet, map_title
from fieldmap.estimate.provenance import map_joint, map_unknowns
from fieldmap.estimate.store import load_map
from fieldmap.magnet.comparison.alignment import (
    Alignment,
    CommonErrors,
    Pair,
    align,
    band_factor,
    first_shift,
)
from fieldmap.magnet.comparison.design_profile import design_profile, read_design
from fieldmap.magnet.comparison.outcome import ComparedResult, Comparison, DifferenceProfile
from fieldmap.magnet.comparison.position_errors import POSITIONS, position_errors
from fieldmap.magnet.length import length_results
from fieldmap.magnet.quantity import Quantity
from fieldmap.magnet.sampling import chosen_line
from fieldmap.readings.netcdf_table import is_netcdf
from fieldmap.readings.tables import read_bytes

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.estimate.parameters import Nuisance
    from fieldmap.magnet.comparison.design_profile import DesignProfile
    from fieldmap.magnet.comparison.position_errors import PositionErrors

__all__ = ["compare"]

Floats = npt.NDArray[np.float64]

FEWEST: Final = 8  # points of a comparison
MOST: Final = 800
SMALLEST_U: Final = 1e-4  # of the largest: an uncertainty that is nothing but rounding
RESULTS: Final = ("integrated_field", "central_field", "magnetic_length")
COMMON: Final = ("gain", "window", "scale")  # errors that a second scan with the same bench repeats


@dataclass(frozen=True, eq=False)
class _Other:
    """What the map is compared with."""

    name: str
    line: FieldLine
    spacing: float
    loose: float = 0.0
    fmap: xr.Dataset | None = None
    has_u: bool = True

    def moves(self, line: int) -> PositionErrors | None:
        """What moves it as a whole."""
        return None if self.fmap is None else position_errors(self.fmap, line)


def compare(
    fmap: xr.Dataset,
    other: xr.Dataset | str | os.PathLike[str] | tuple[npt.ArrayLike, ...],
    *,
    line: int = 0,
    same_bench: bool = False,
    span: tuple[float, float] | None = None,
    align: bool = True,
) -> Comparison:
    """Compare a map with another map or a design: shift, scale, and where they differ.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    other : xarray.Dataset, path or tuple of arrays
        Another map, its file, a table (see `read_design`), or arrays of position (m), field
        (T) and, if there is one, its standard uncertainty (T, independent from point to
        point). Without an uncertainty the profile is taken as exact.
    line : int
        Index of the line, in both maps.
    same_bench : bool
        Whether both maps were taken with the same probes on the same stage. Then the errors
        of the gain and the window of a probe that both used and of the scale of the stage are
        the same in both, so most of them cancels in the difference. Only those: what the
        calibration of a probe got wrong stays wrong, whereas a drift belongs to a pass, a
        tilt and a temperature to the day, and the offset between magnet and stage is made
        anew each time a magnet is put up.
    span : tuple of float, optional
        Part of the line to compare, m; all that both cover if left out.
    align : bool
        Whether to move and enlarge the second profile until it fits the first best before
        judging the difference.

    Returns
    -------
    Comparison

    Raises
    ------
    InputError
        The other profile cannot be read, has too few points or another component, or has no
        part in common with the map.
    RefusedError
        ``not-aligned``: shift and scale are not determined.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> s = np.linspace(-0.02, 0.02, 401)
    >>> found = compare(fmap, (s, chosen_line(fmap, 0).field(s - 1e-5)))
    >>> round(found.shift.value * 1e6, 1), found.stretches
    (-10.0, ())
    """
    first = chosen_line(fmap, line)
    second = _other(other, line)
    _check_same_kind(fmap, second)
    common, shared = _common_errors(fmap, second.fmap if same_bench else None, line)
    moves = position_errors(fmap, line), second.moves(line)
    pair = Pair(first, second.line, common, second.loose, moves)
    spacing = max(first.spline.spacing, second.spacing)
    low, high = _common(first, second.line, span)
    before = _difference(pair, _points(low, high, spacing))
    fit, after = (None, None) if not align else _aligned(pair, low, high, span, spacing)
    covariance = np.zeros((2, 2)) if fit is None else fit.covariance
    u = np.sqrt(np.maximum(np.diagonal(covariance), 0.0))
    results, missing = _results(fmap, pair)
    return Comparison(
        names=(map_title(fmap)[0], second.name),
        component=map_magnet(fmap).component,
        travel=map_axis(fmap).travel,
        same_bench=same_bench,
        first=first.field(before.s),
        second=second.line.field(before.s),
        shift=None if fit is None else Quantity(fit.shift, float(u[0]), "m"),
        scale=None if fit is None else Quantity(fit.scale, float(u[1]), "1"),
        correlation=float(covariance[0, 1] / (u[0] * u[1])) if u.all() else 0.0,
        before=before,
        after=after,
        results=results,
        remarks=_remarks(second, before, fit, shared, missing, same_bench=same_bench),
    )


def _other(other: object, line: int) -> _Other:
    """The second profile, from whatever it was given as."""
    if isinstance(other, str | os.PathLike):
        path = Path(other)
        if _is_map_file(path):
            return _map_as_other(load_map(path), line)
        return _design_as_other(path.name, read_design(path))
    if isinstance(other, tuple | list):
        if len(other) not in {2, 3}:
            raise InputError(
                "profile", f"{len(other)} arrays", "position, field and, at most, its uncertainty"
            )
        return _design_as_other("profile", design_profile(*other))
    if getattr(other, "attrs", {}).get("format") == FORMAT:
        fmap: Any = other
        return _map_as_other(fmap, line)
    raise InputError(
        "profile to compare with",
        f"an object of type {type(other).__name__}",
        "a map, a path, or a tuple of arrays",
    )


def _is_map_file(path: Path) -> bool:
    """Whether a file is NetCDF and says that it is a map."""
    import h5py

    data = read_bytes(path, path.name)
    if not is_netcdf(data):
        return False
    try:
        with h5py.File(path, "r") as root:
            stated = root.attrs.get("format", "")
    except Exception:  # noqa: BLE001 - what is damaged is told by the reader of tables
        return False
    return str(stated).startswith("fieldmap-map/")


def _map_as_other(fmap: xr.Dataset, line: int) -> _Other:
    one = chosen_line(fmap, line)
    return _Other(map_title(fmap)[0], one, one.spline.spacing, fmap=fmap)


def _design_as_other(name: str, design: DesignProfile) -> _Other:
    return _Other(
        name,
        design.line,
        design.spacing,
        loose=design.between_points,
        has_u=bool(design.line.covariance.any()),
    )


def _check_same_kind(fmap: xr.Dataset, other: _Other) -> None:
    if other.fmap is None:
        return
    mine, theirs = ((map_magnet(one).component, map_axis(one).travel) for one in (fmap, other.fmap))
    if mine != theirs:
        raise InputError(
            "maps to compare",
            f"component {theirs[0]} along {theirs[1]} in the second",
            f"{mine[0]} along {mine[1]} as in the first",
            "compare maps of the same component along the same direction",
        )


def _common_errors(
    fmap: xr.Dataset, other: xr.Dataset | None, line: int
) -> tuple[CommonErrors | None, list[str]]:
    """Errors common to two maps of one bench, and their names.

    An error of a prior that both used moves either solution by its covariance with the nuisance,
    over the variance of the prior; nuisances are kept in units of their prior's uncertainty.
    """
    if other is None:
        return None, []
    own, others = ([_known(one) for one in map_unknowns(each, line)] for each in (fmap, other))
    both = [one for one in own if one in others and one[0] in COMMON]
    if not both:
        return None, []
    mine, theirs = (
        _sensitivities(each, line, [names.index(one) for one in both])
        for each, names in ((fmap, own), (other, others))
    )
    names = [f"{kind} {where}".strip() for kind, where, _ in both]
    return CommonErrors(mine[0], theirs[0], mine[1], theirs[1]), names


def _known(unknown: Nuisance) -> tuple[str, str, float]:
    return unknown.kind, unknown.where, unknown.sd


def _sensitivities(fmap: xr.Dataset, line: int, kept: list[int]) -> tuple[Floats, Floats]:
    """Covariance of some nuisances with the coefficients and with the position errors."""
    joint, unknowns = map_joint(fmap, line), map_unknowns(fmap, line)
    size = len(joint.values) - len(unknowns)
    columns = joint.covariance[:, [size + i for i in kept]]
    positions = [size + i for i, one in enumerate(unknowns) if one.kind in POSITIONS]
    return columns[:size], columns[positions]


def _common(
    first: FieldLine, second: FieldLine, span: tuple[float, float] | None, shift: float = 0.0
) -> tuple[float, float]:
    """The part of the line that both cover, with the second moved by a shift (m)."""
    low, high = max(first.low, second.low + shift), min(first.high, second.high + shift)
    if span is not None:
        if not span[0] < span[1]:
            found = f"{span[0] * 1e3:.6g} to {span[1] * 1e3:.6g} mm"
            raise InputError("part of the line to compare", found, "the lower end first")
        low, high = max(low, span[0]), min(high, span[1])
    if not low < high:
        ranges = [f"{a * 1e3:.6g} to {b * 1e3:.6g} mm" for a, b in _ranges(first, second)]
        raise InputError(
            "profiles to compare",
            f"nothing in common: {ranges[0]} and {ranges[1]}",
            "profiles that overlap" + ("" if span is None else " within the part asked for"),
            "check units and origin of the positions",
        )
    return low, high


def _ranges(*lines: FieldLine) -> list[tuple[float, float]]:
    return [(one.low, one.high) for one in lines]


def _points(low: float, high: float, spacing: float) -> Floats:
    count = min(max(round((high - low) / spacing) + 1, FEWEST), MOST)
    return np.linspace(low, high, count)


def _difference(pair: Pair, s: Floats) -> DifferenceProfile:
    spread = pair.covariance(s)
    return _banded(s, pair.difference(s), spread)


def _banded(s: Floats, difference: Floats, spread: Floats) -> DifferenceProfile:
    largest = float(np.sqrt(max(np.diagonal(spread).max(), 0.0)))
    u, k = band_factor(spread, SMALLEST_U * largest)
    return DifferenceProfile(s, difference, u, k)


def _aligned(
    pair: Pair, low: float, high: float, span: tuple[float, float] | None, spacing: float
) -> tuple[Alignment, DifferenceProfile]:
    """Shift and scale, and the difference they leave."""
    start = first_shift(pair, low, high)
    s = _points(*_common(pair.first, pair.second, span, start), spacing)
    fit = align(pair, s, start)
    low, high = _common(pair.first, pair.second, span, fit.shift)
    inside = (s >= low) & (s <= high)
    if not inside.all():  # no point beyond the end of the second as it is moved
        s = s[inside]
        fit = align(pair, s, fit.shift)
    return fit, _banded(s, fit.difference, fit.spread)


def _results(fmap: xr.Dataset, pair: Pair) -> tuple[dict[str, ComparedResult], str]:
    """Differences of the results, or why there are none."""
    axis = map_axis(fmap)
    try:
        one, two = length_results(pair.first, axis), length_results(pair.second, axis)
    except RefusedError:
        return {}, (
            "results are not compared, as the limits of the integral or the flat window lie "
            "outside one of the profiles"
        )
    found: dict[str, ComparedResult] = {}
    for key in RESULTS:
        if key in one and key in two:
            variance = pair.variance(one[key].gradient, two[key].gradient)
            difference = one[key].value - two[key].value
            u = float(np.sqrt(max(variance, 0.0)))
            first, second = (Quantity(x.value, x.u, x.unit) for x in (one[key], two[key]))
            found[key] = ComparedResult(first, second, Quantity(difference, u, first.unit))
    return found, ""


def _remarks(
    other: _Other,
    before: DifferenceProfile,
    fit: Alignment | None,
    shared: list[str],
    missing: str,
    *,
    same_bench: bool,
) -> tuple[str, ...]:
    told = []
    if fit is not None and fit.scale < -1:
        told.append(
            "The profiles have opposite signs; check the polarity of probe and supply before "
            "reading the scale."
        )
    if same_bench and other.fmap is not None:
        told.append(
            "Errors common to both maps: " + ", ".join(shared) + "."
            if shared
            else "The maps name no probe or stage with the same stated uncertainty, so nothing was "
            "taken as common."
        )
    if other.fmap is None and other.has_u:
        told.append(
            "The uncertainties of the table were taken as independent from point to point; if it "
            "comes from a map, compare with that map itself."
        )
    if other.loose > float(np.median(before.u)):
        told.append(
            f"The points of the table are coarse: between them it may be off by about "
            f"{other.loose:.1e} T, more than the uncertainty of the difference."
        )
    if missing:
        told.append(f"{missing[0].upper()}{missing[1:]}.")
    return tuple(told)
