"""The field of a map along one line, sampled for drawing and for words."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.estimate.map import map_lines

if TYPE_CHECKING:
    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine

__all__ = ["Profile", "field_at", "line_of", "profile_of"]

Floats = npt.NDArray[np.float64]

SAMPLES = 1200  # more than a figure has pixels across


@dataclass(frozen=True, eq=False)
class Profile:
    """Samples of the field along one line.

    Parameters
    ----------
    s : (n,) array
        Position, m, increasing.
    b : (n,) array
        Flux density, T.
    u : (n,) array
        Its standard uncertainty, T.
    """

    s: Floats
    b: Floats
    u: Floats


def line_of(fmap: xr.Dataset, line: int = 0) -> FieldLine:
    """One line of a map, by its index.

    Raises
    ------
    InputError
        No line of that index.
    """
    lines = map_lines(fmap)
    if not 0 <= line < len(lines):
        raise InputError("line", str(line), f"an index from 0 to {len(lines) - 1}")
    return lines[line]


def profile_of(fmap: xr.Dataset, line: int = 0, span: tuple[float, float] | None = None) -> Profile:
    """Sample the field of a map.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    line : int
        Index of the line.
    span : tuple of float, optional
        Part of the line, m; cut to the mapped range, which is also the default.

    Returns
    -------
    Profile
        The field from the spline itself; its uncertainty, which varies slowly, from the grid
        of the map.

    Raises
    ------
    InputError
        No such line, or a span outside the mapped range.

    Examples
    --------
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> profile = profile_of(fmap, span=(-0.002, 0.001))
    >>> float(profile.s[0]), float(profile.s[-1])
    (-0.002, 0.001)
    """
    one = line_of(fmap, line)
    low, high = (one.low, one.high) if span is None else span
    low, high = max(low, one.low), min(high, one.high)
    if not low < high:
        raise InputError(
            "part of the line to show",
            "nothing of it within the mapped range",
            f"a part of {one.low * 1e3:.6g} to {one.high * 1e3:.6g} mm",
        )
    s = np.linspace(low, high, SAMPLES)
    grid = fmap.sel(x=one.x, y=one.y)["B_se"]
    known = np.isfinite(grid.values)
    u = np.interp(s, grid["z"].values[known], grid.values[known])
    return Profile(s, one.field(s), u)


def field_at(fmap: xr.Dataset, at: float, line: int = 0) -> tuple[float, float]:
    """The field at one position, with its standard uncertainty.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    at : float
        Position, m.
    line : int
        Index of the line.

    Returns
    -------
    tuple of float
        T, T.

    Raises
    ------
    InputError
        No such line, or a position outside the mapped range.
    """
    one = line_of(fmap, line)
    if not one.low <= at <= one.high:
        raise InputError(
            "position of the cursor",
            f"{at * 1e3:.6g} mm",
            f"one within the mapped range {one.low * 1e3:.6g} to {one.high * 1e3:.6g} mm",
            "move it inside, or scan further",
        )
    place = np.array([at])
    return float(one.field(place)[0]), float(one.u_field(place)[0])
