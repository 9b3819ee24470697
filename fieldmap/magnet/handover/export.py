"""Hand-over: a plain table of the field along one line, for whoever tracks particles through it."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.atomic import replacing
from fieldmap.errors import InputError
from fieldmap.estimate.map import map_axis, map_magnet, map_title
from fieldmap.magnet.handover.expansion import expansion_range, off_axis
from fieldmap.magnet.handover.exported import ExportedTable, TableIntegral
from fieldmap.magnet.handover.write_table import csv_decimals, write_csv, write_netcdf
from fieldmap.magnet.sampling import chosen_line, sample

if TYPE_CHECKING:
    import os

    import xarray as xr

    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.magnet.handover.expansion import OffAxis

__all__ = ["export_table"]

Floats = npt.NDArray[np.float64]

MOST_ROWS: Final = 5_000_000
SUFFIXES: Final = (".csv", ".nc")
DIGITS: Final = 12  # of a position after the point, m: beyond that decimals are rounding errors
SAME: Final = 1e-6  # of a step: two points this near are one


@dataclass(frozen=True)
class _Grid:
    """Positions of a table and how many decimals they have (m)."""

    s: Floats
    step: float
    decimals: int


def export_table(
    fmap: xr.Dataset,
    path: str | os.PathLike[str],
    *,
    step: float | None = None,
    limits: tuple[float | None, float | None] = (None, None),
    line: int = 0,
    off_axis: float | None = None,
) -> ExportedTable:
    """Write the field along one line of a map as a plain table.

    Parameters
    ----------
    fmap : xarray.Dataset
        From `stitch`, `reconstruct` or `load_map`.
    path : path
        The file. Its suffix decides: ``.csv`` for a text table with units in the header,
        ``.nc`` for NetCDF-4 with CF-1.11 attributes. Written whole or not at all.
    step : float, optional
        Distance of the points, m; that of the map's own grid if left out. Points stand at
        whole multiples of it.
    limits : tuple of float or None
        First and last point, m; what is given is in the table even if it is no multiple of
        the step. None for the last multiple within the mapped range.
    line : int
        Index of the line.
    off_axis : float, optional
        Distance from the axis of a solenoid, or from the median plane of a dipole, m: adds
        columns with the field there, see `fieldmap.magnet.handover.expansion`.

    Returns
    -------
    ExportedTable
        What was written, and how well its integral agrees with the map's.

    Raises
    ------
    InputError
        An unknown suffix, a step or limits that do not fit the map, no such line, or a file
        that cannot be written.
    RefusedError
        The field off the axis cannot be told from this line.

    Examples
    --------
    >>> import tempfile
    >>> import fieldmap
    >>> from fieldmap.shipped import demo_folder
    >>> fmap = fieldmap.stitch(fieldmap.load(demo_folder() / "slot" / "campaign.toml"))
    >>> table = Path(tempfile.mkdtemp()) / "slot.csv"
    >>> written = export_table(fmap, table, step=1e-4, limits=(-0.01, 0.01))
    >>> written.rows
    201
    >>> abs(written.integral.difference) < written.integral.u
    True
    """
    target = Path(path)
    if target.suffix.lower() not in SUFFIXES:
        raise InputError(
            str(target),
            f"the suffix {target.suffix!r}",
            "one of " + " and ".join(SUFFIXES),
            "give the file a name such as field.csv",
        )
    mapped = chosen_line(fmap, line)
    grid = _grid(fmap, mapped, step, limits, off_axis)
    table = _table(fmap, mapped, grid, off_axis, text=target.suffix.lower() == ".csv")
    with replacing(target) as aside:
        if target.suffix.lower() == ".csv":
            write_csv(table, aside)
        else:
            write_netcdf(table, aside)
    return table


def _table(
    fmap: xr.Dataset,
    line: FieldLine,
    grid: _Grid,
    distance: float | None,
    *,
    text: bool,
) -> ExportedTable:
    """Sample the line and compare the integral of what will be written with the map's."""
    field, u = sample(line, grid.s)
    beside: OffAxis | None = None
    magnet, axis = map_magnet(fmap), map_axis(fmap)
    if distance is not None:
        beside = off_axis(line, magnet, axis, grid.s, distance)
    decimals = csv_decimals(u) if text else None
    written = field if decimals is None else np.round(field, decimals)
    return ExportedTable(
        title=map_title(fmap)[0],
        component=magnet.component,
        travel=axis.travel,
        x=line.x,
        y=line.y,
        step=grid.step,
        s=grid.s,
        field=field,
        u=u,
        off_axis=beside,
        position_decimals=grid.decimals,
        field_decimals=decimals,
        integral=_integral(line, grid.s, written, decimals),
    )


def _integral(line: FieldLine, s: Floats, written: Floats, decimals: int | None) -> TableIntegral:
    """Trapezoids over the table beside the exact integral of the spline."""
    width = np.diff(s)
    exact, u = line.integral(float(s[0]), float(s[-1]))
    ends, _ = sample(line, s)
    between, _ = sample(line, 0.5 * (s[1:] + s[:-1]))
    rounding = 0.0 if decimals is None else 0.5 * 10.0**-decimals * float(s[-1] - s[0])
    return TableIntegral(
        table=float(np.sum(0.5 * width * (written[1:] + written[:-1]))),
        exact=exact,
        u=u,
        expected=float(2 / 3 * np.sum(width * (0.5 * (ends[1:] + ends[:-1]) - between))),
        rounding=rounding,
    )


def _grid(
    fmap: xr.Dataset,
    line: FieldLine,
    step: float | None,
    limits: tuple[float | None, float | None],
    distance: float | None,
) -> _Grid:
    """Points of the table: whole multiples of the step, and the limits that are given."""
    own = np.asarray(fmap["z"].values, dtype=np.float64)
    step = float(np.median(np.diff(own))) if step is None else float(step)
    step = round(step, DIGITS) or step
    low, high = line.low, line.high
    if distance is not None:
        low, high = expansion_range(line, map_magnet(fmap), map_axis(fmap), distance)
    start, stop = limits
    if start is not None:
        low = float(start)
    if stop is not None:
        high = float(stop)
    _check_limits(low, high, line)
    _check_step(step, low, high)
    # a given limit stands for the multiple that is the same point
    first = np.ceil(low / step + (-SAME if start is None else SAME))
    last = np.floor(high / step - (-SAME if stop is None else SAME))
    inner = np.round(np.arange(first, last + 1) * step, _decimals(step))
    inner += 0.0  # no minus zero
    before, after = ([] if one is None else [float(one)] for one in limits)
    s = np.concatenate([np.array(before), inner, np.array(after)])
    return _Grid(s, step, max(_decimals(one) for one in (step, *before, *after)))


def _decimals(value: float) -> int:
    """Digits after the point that give a length exactly, or as far as they mean anything."""
    exponent = Decimal(repr(value)).normalize().as_tuple().exponent
    return min(max(-int(exponent), 0), DIGITS + 3)


def _check_limits(start: float, stop: float, line: FieldLine) -> None:
    where, found = "limits of the table", f"{start * 1e3:.9g} to {stop * 1e3:.9g} mm"
    if not (np.isfinite(start) and np.isfinite(stop) and start < stop):
        raise InputError(where, found, "the lower end first", "turn the two round")
    if not line.covers(start, stop):
        raise InputError(
            where,
            found,
            f"limits within the mapped range {line.low * 1e3:.9g} to {line.high * 1e3:.9g} mm",
            "choose narrower limits",
        )


def _check_step(step: float, low: float, high: float) -> None:
    length = high - low
    if not np.isfinite(step) or not 0 < step <= length:
        raise InputError(
            "step of the table",
            f"{step * 1e3:.9g} mm",
            f"a step above zero and up to the length of the table, {length * 1e3:.9g} mm",
        )
    if length / step > MOST_ROWS - 2:
        raise InputError(
            "step of the table",
            f"{step * 1e3:.9g} mm, which makes {length / step:.3g} rows",
            f"at most {MOST_ROWS} rows",
            f"choose a step of {length / MOST_ROWS * 1e3 * 1.01:.2g} mm or more",
        )
