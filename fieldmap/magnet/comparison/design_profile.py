"""A profile that is no map: a design or another table of the field against position."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt
from scipy import sparse
from scipy.interpolate import CubicSpline
from scipy.sparse.linalg import splu

from fieldmap.errors import InputError
from fieldmap.estimate.fieldline import FieldLine
from fieldmap.estimate.spline import DEGREE, UniformSpline
from fieldmap.readings.checks import LARGEST
from fieldmap.readings.layout import TableLayout
from fieldmap.readings.netcdf_table import is_netcdf, open_netcdf
from fieldmap.readings.tables import read_bytes
from fieldmap.readings.text_table import open_text
from fieldmap.units import column_to_si, quoted

if TYPE_CHECKING:
    import os
    from collections.abc import Callable, Sequence

    from fieldmap.readings.columns import Source

__all__ = ["DesignProfile", "design_profile", "read_design"]

Floats = npt.NDArray[np.float64]

FEWEST: Final = 4  # points that a cubic goes through
MOST_PIECES: Final = 1500  # between knots; a finer table is sampled
UNEVEN: Final = 1e-6  # of the step
SAME: Final = 1e-9  # of the length: positions this near differ by rounding only
# What a column may be called, and its unit.
COLUMNS: Final = (
    (("position", "z", "s"), "m", True),
    (("field", "B"), "T", True),
    (("u_field", "B_se"), "T", False),
)


@dataclass(frozen=True, eq=False)
class DesignProfile:
    """A profile given by points, as a spline through them.

    Parameters
    ----------
    line : FieldLine
        The spline with the covariance that follows from the uncertainties of the points; all
        zero where none were given.
    spacing : float
        Widest distance between two neighbouring points, m.
    between_points : float
        About how far the spline may be off between the points, T: judged by leaving out
        every other point.
    """

    line: FieldLine
    spacing: float
    between_points: float


def read_design(path: str | os.PathLike[str]) -> DesignProfile:
    r"""Read a profile from a table: CSV with units in its header, or NetCDF.

    Parameters
    ----------
    path : path
        Columns ``position [unit]``, ``field [unit]`` and optionally ``u_field [unit]``; in
        NetCDF variables with a `units` attribute, which may be called z, B and B_se, too.

    Returns
    -------
    DesignProfile

    Raises
    ------
    InputError
        If the file cannot be read or does not hold such a profile.

    Examples
    --------
    >>> import tempfile
    >>> path = Path(tempfile.mkdtemp()) / "design.csv"
    >>> rows = "".join(f"{z},{100 - z * z}\n" for z in range(-3, 4))
    >>> _ = path.write_text("position [mm],field [mT]\n" + rows)
    >>> round(float(read_design(path).line.field(np.array([0.0005]))[0]), 9)
    0.09975
    """
    source_path = Path(path)
    name = source_path.name
    data = read_bytes(source_path, name)
    source: Source
    source = open_netcdf(data, name) if is_netcdf(data) else open_text(data, name, TableLayout())
    columns = [_column(source, *wanted) for wanted in COLUMNS]
    raw = source.read([one.index for one in columns if one is not None])
    position, field, u = (
        None
        if one is None
        else column_to_si(raw[one.index], one.unit, one.si, f"{name}, column {one.label!r}")
        for one in columns
    )
    assert position is not None
    assert field is not None
    return design_profile(position, field, u, name, source.place)


def design_profile(
    position: npt.ArrayLike,
    field: npt.ArrayLike,
    u: npt.ArrayLike | None = None,
    name: str = "profile",
    place: Callable[[int], str] | None = None,
) -> DesignProfile:
    """Take a profile from arrays.

    Parameters
    ----------
    position : (n,) array_like
        m; in any order, no position twice, at least four.
    field : (n,) array_like
        Flux density, T.
    u : (n,) array_like, optional
        Its standard uncertainty, T, independent from point to point; exact if left out.
    name : str
        How errors name the profile.
    place : callable, optional
        Names the place of a point that is counted from 0, for errors.

    Returns
    -------
    DesignProfile

    Raises
    ------
    InputError
        Too few points, a position twice, or values that are not finite numbers.
    """
    place = place or (lambda i: f"{name}, point {i + 1}")
    s, b = _numbers(position, "positions", name), _numbers(field, "field values", name)
    spread = np.zeros_like(b) if u is None else _numbers(u, "uncertainties", name)
    _check(s, b, spread, name, place)
    order = np.argsort(s, kind="stable")
    s, b, spread = s[order], b[order], spread[order]
    _check_distinct(s, order, place)
    spacing = float(np.diff(s).max())
    return DesignProfile(_spline_line(s, b, spread), spacing, _between_points(s, b))


@dataclass(frozen=True)
class _Chosen:
    index: int
    label: str
    unit: str
    si: str


def _column(source: Source, names: Sequence[str], unit: str, needed: bool) -> _Chosen | None:  # noqa: FBT001 - from COLUMNS only
    """Find a column by its name and check that it has a unit."""
    hits = [i for i, heading in enumerate(source.headings) if heading.name in names]
    if not hits and not needed:
        return None
    if len(hits) != 1:
        present = ", ".join(quoted(heading.text) for heading in source.headings[:12])
        found = f"{len(hits)} columns" if hits else "no column"
        raise InputError(
            source.file,
            f"{found} for the {names[0]} among {present or 'none'}",
            f"one column {names[0]!r}",
            f"head it '{names[0]} [{unit}]'",
        )
    heading = source.headings[hits[0]]
    if heading.unit is None:
        raise InputError(
            f"{source.file}, column {heading.name!r}",
            "no unit",
            f"a unit such as {unit!r}",
            source.unit_remedy(heading.name, unit),
        )
    return _Chosen(hits[0], heading.name, heading.unit, unit)


def _numbers(values: npt.ArrayLike, what: str, name: str) -> Floats:
    try:
        found = np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError):
        raise InputError(name, f"{what} that are no numbers", "an array of numbers") from None
    if found.ndim != 1:
        raise InputError(name, f"{what} in {found.ndim} dimensions", "one dimension")
    return found


def _check(s: Floats, b: Floats, u: Floats, name: str, place: Callable[[int], str]) -> None:
    if not len(s) == len(b) == len(u):
        found = f"{len(s)} positions, {len(b)} field values and {len(u)} uncertainties"
        raise InputError(name, found, "as many of each")
    if len(s) < FEWEST:
        found = f"{len(s)} point{'' if len(s) == 1 else 's'}"
        raise InputError(name, found, f"at least {FEWEST}", "give the profile with more points")
    bad = ~((np.abs(s) <= LARGEST) & (np.abs(b) <= LARGEST) & (np.abs(u) <= LARGEST))
    if bad.any():
        found = "a value that is not a finite number, or far too large"
        expected = f"finite numbers up to {LARGEST:g} in SI units"
        raise InputError(place(int(bad.argmax())), found, expected, "mend or delete the point")
    if (u < 0).any():
        found = "a negative uncertainty"
        raise InputError(place(int((u < 0).argmax())), found, "zero or more", "mend the value")


def _check_distinct(s: Floats, order: npt.NDArray[np.intp], place: Callable[[int], str]) -> None:
    twice = np.flatnonzero(np.diff(s) <= SAME * (s[-1] - s[0]))
    if len(twice):
        i = int(twice[0])
        raise InputError(
            place(int(order[i + 1])),
            f"the position {s[i] * 1e3:.9g} mm a second time",
            "each position once",
            "delete one of the two points",
        )


def _spline_line(s: Floats, b: Floats, u: Floats) -> FieldLine:
    """The cubic spline through points on uniform knots, with its covariance."""
    steps = np.diff(s)
    even = bool(np.ptp(steps) <= UNEVEN * steps.mean())
    pieces = len(s) - 1 if even else int(np.ceil((s[-1] - s[0]) / steps.min()))
    if pieces > MOST_PIECES:
        pieces = MOST_PIECES
        if len(s) > pieces + 1:  # thinned without averaging: the uncertainty stays too large
            knots = np.linspace(s[0], s[-1], pieces + 1)
            b, u, s = CubicSpline(s, b)(knots), np.interp(knots, s, u), knots
    spline = UniformSpline(float(s[0]), float(s[-1] - s[0]) / pieces, pieces + DEGREE)
    knots = np.linspace(s[0], s[-1], pieces + 1)
    ends = knots[[0, -1]]
    system = splu(
        sparse.csc_array(np.vstack([spline.field_rows(knots), spline.field_rows(ends, 1)]))
    )

    def coefficients(values: Floats) -> Floats:
        through = CubicSpline(s, values)
        return np.asarray(system.solve(np.concatenate([through(knots), through(ends, 1)])))

    covariance = np.zeros((spline.size, spline.size))
    if u.any():
        root = coefficients(np.diag(u))
        covariance = root @ root.T
    return FieldLine(0.0, 0.0, float(s[0]), float(s[-1]), spline, coefficients(b), covariance)


def _between_points(s: Floats, b: Floats) -> float:
    """Error of a cubic spline between the points: a sixteenth of that at twice the distance."""
    kept, left = np.arange(0, len(s), 2), np.arange(1, len(s) - 1, 2)
    if len(kept) < FEWEST:
        return 0.0
    return float(np.abs(CubicSpline(s[kept], b[kept])(s[left]) - b[left]).max()) / 16
