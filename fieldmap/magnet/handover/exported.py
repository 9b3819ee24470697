"""What a hand-over table holds, and how well its integral agrees with the map's."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import numpy as np
    import numpy.typing as npt

    from fieldmap.magnet.handover.expansion import OffAxis

    Floats = npt.NDArray[np.float64]

__all__ = ["ExportedTable", "TableIntegral", "one_line"]


@dataclass(frozen=True)
class TableIntegral:
    """Integral of a table by trapezoids beside the exact one of the map, T m.

    Parameters
    ----------
    table : float
        Trapezoids over the points as they are written.
    exact : float
        Integral of the map's spline between the same limits.
    u : float
        Its standard uncertainty.
    expected : float
        What the trapezoids are expected to add: two thirds of what they differ by from the
        midpoint rule, whose error is half as large and of opposite sign.
    rounding : float
        The most that the decimals of the field can add or take away.

    Examples
    --------
    >>> one = TableIntegral(0.2000003, 0.2, 5e-5, 2.9e-7, 1e-9)
    >>> print(one.words())
    Integral by trapezoids over the table 0.200000 T m, of the map 0.200000 T m (u = 5.0e-05 T m): \
difference +3.0e-07 T m, expected from the step +2.9e-07 T m, rounding up to 1.0e-09 T m
    """

    table: float
    exact: float
    u: float
    expected: float
    rounding: float

    @property
    def difference(self) -> float:
        """Table less map, T m."""
        return self.table - self.exact

    def words(self) -> str:
        """The statement on the integral, on one line."""
        digits = 6
        smallest = min((abs(one) for one in (self.u, self.difference) if one), default=0.0)
        while digits < 15 and smallest < 10.0 ** (-digits - 1):
            digits += 1
        return (
            f"Integral by trapezoids over the table {self.table:z.{digits}f} T m, of the map "
            f"{self.exact:z.{digits}f} T m (u = {self.u:.1e} T m): difference "
            f"{self.difference:+.1e} T m, expected from the step {self.expected:+.1e} T m, "
            f"rounding up to {self.rounding:.1e} T m"
        )


@dataclass(frozen=True, eq=False)
class ExportedTable:
    """A table of the field along one line.

    Parameters
    ----------
    title : str
        Name of the campaign.
    component : str
        The component that was mapped.
    travel : str
        Name of the position axis.
    x, y : float
        Transverse position of the line, m.
    step : float
        Distance of the points, m; the first and the last interval may be shorter.
    s : (n,) array
        Positions, m.
    field, u : (n,) array
        Flux density and its standard uncertainty, T.
    off_axis : OffAxis or None
        The field beside the line, if it was asked for.
    position_decimals : int
        Digits of a position after the point, m.
    field_decimals : int or None
        Digits of the field after the point, T; None where nothing is rounded.
    integral : TableIntegral
        The check on the integral.
    """

    title: str
    component: str
    travel: str
    x: float
    y: float
    step: float
    s: Floats
    field: Floats
    u: Floats
    off_axis: OffAxis | None
    position_decimals: int
    field_decimals: int | None
    integral: TableIntegral

    @property
    def rows(self) -> int:
        """Number of points."""
        return len(self.s)

    def statements(self) -> list[str]:
        """What a reader has to know of the table, one sentence each."""
        place = f"x = {self.x * 1e3:.6g} mm, y = {self.y * 1e3:.6g} mm"
        ends = f"from {self.s[0] * 1e3:.9g} to {self.s[-1] * 1e3:.9g} mm"
        shared = (
            "u is the standard uncertainty of a single point; neighbouring points share most of "
            "their errors, so take the uncertainty of an integral from the map"
        )
        told = [
            f"Field map: {one_line(self.title)}",
            f"Component {one_line(self.component)} along {self.travel}, line at {place}",
            f"{self.rows} points every {self.step * 1e3:.9g} mm, {ends}",
            shared,
            self.integral.words(),
        ]
        if self.off_axis is not None:
            told.append(self._beside(self.off_axis))
        return told

    def _beside(self, beside: OffAxis) -> str:
        symmetry = (
            "round about the line"
            if beside.direction == "r"
            else "plane, which holds where the poles are wide"
        )
        return (
            f"Columns with off_axis: {one_line(beside.mapped.name)} and "
            f"{one_line(beside.other.name)} at {beside.direction} = "
            f"{beside.distance * 1e3:.6g} mm from the line, by expansion of the field on it; the "
            f"field is taken as {symmetry}; next_term is the size of the first term left out"
        )


def one_line(text: str) -> str:
    """Text from a file on one line: no breaks, no control characters, nothing unwritable."""
    return "".join(c if c.isprintable() else " " for c in text)
