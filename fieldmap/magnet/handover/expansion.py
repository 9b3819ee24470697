"""The field beside the axis of a magnet, expanded from the field on it.

Where the symmetry of a magnet says how its field continues off the mapped line, the profile
on the line holds all of it. On the axis of a solenoid, with b the axial component there:

    B_par(r) = b - r²/4 b″ + r⁴/64 b⁗ - …,    B_r = -r/2 b′ + r³/16 b‴ - r⁵/384 b⁽⁵⁾ + …

In the median plane of a magnet whose poles are wide across the line, with b the component
that crosses the gap and y the distance from the plane:

    B_y(y) = b - y²/2 b″ + y⁴/24 b⁗ - …,      B_par = y b′ - y³/6 b‴ + y⁵/120 b⁽⁵⁾ - …

B is a cubic spline: its second derivative is continuous, those beyond are taken as
differences of it. So the sums end with b″ and b‴, and the next term, from differences over
the distance from the axis or a knot, whichever is larger, tells how much was left out.

Source: the power series of Laplace's equation; for solenoids W. Glaser, *Grundlagen der
Elektronenoptik*, Springer 1952 (memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final, Literal

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError, RefusedError
from fieldmap.magnet.sampling import Term, sample

if TYPE_CHECKING:
    from fieldmap.estimate.fieldline import FieldLine
    from fieldmap.readings.passes import Axis, Magnet

__all__ = ["Component", "OffAxis", "expansion_range", "off_axis"]

Floats = npt.NDArray[np.float64]
Symmetry = Literal["round", "plane"]

FARTHEST: Final = 0.25  # of the full gap or bore: half way to the pole
ON_AXIS: Final = 0.01  # of the gap: a line this near to the axis lies on it
# Factors of x² b″, x⁴ b⁗ and of x b′, x³ b‴, x⁵ b⁽⁵⁾ in the two series.
MAPPED: Final[dict[Symmetry, tuple[float, float]]] = {
    "round": (-1 / 4, 1 / 64),
    "plane": (-1 / 2, 1 / 24),
}
OTHER: Final[dict[Symmetry, tuple[float, float, float]]] = {
    "round": (-1 / 2, 1 / 16, -1 / 384),
    "plane": (1.0, -1 / 6, 1 / 120),
}


@dataclass(frozen=True, eq=False)
class Component:
    """One component of the field off the axis.

    Parameters
    ----------
    name : str
        Such as ``"Br"``.
    value, u : (n,) array
        T, and standard uncertainty.
    next_term : (n,) array
        Size of the first term of the series that was left out, T: an estimate of the error
        of ending it there, no part of `u`.
    """

    name: str
    value: Floats
    u: Floats
    next_term: Floats


@dataclass(frozen=True, eq=False)
class OffAxis:
    """The field at some distance from a mapped line.

    Parameters
    ----------
    s : (n,) array
        Positions along the line, m.
    distance : float
        From the axis or the median plane, m.
    direction : str
        Along which it is counted: ``"r"``, or the axis across the gap.
    mapped : Component
        The component that was mapped.
    other : Component
        The one that vanishes on the line.
    """

    s: Floats
    distance: float
    direction: str
    mapped: Component
    other: Component


def off_axis(line: FieldLine, magnet: Magnet, axis: Axis, s: Floats, distance: float) -> OffAxis:
    """Expand the field off the axis of a solenoid or the median plane of a dipole.

    Parameters
    ----------
    line : FieldLine
        The line on the axis.
    magnet : Magnet
        Its kind, component and gap decide whether there is an expansion.
    axis : Axis
        Names the direction of travel.
    s : (n,) array
        Positions, m, within `expansion_range`.
    distance : float
        m; up to a quarter of the gap or bore. From the plane it may be negative.

    Returns
    -------
    OffAxis

    Raises
    ------
    RefusedError
        ``expansion-not-known``: another kind of magnet, another component or a line beside
        the axis; ``expansion-too-far``: a distance beyond a quarter of the gap;
        ``expansion-near-end``: a position too near to an end of the map.
    InputError
        A distance that is no such number.

    Examples
    --------
    >>> from fieldmap.estimate.fieldline import FieldLine
    >>> from fieldmap.estimate.spline import UniformSpline
    >>> from fieldmap.readings.passes import Axis, Magnet
    >>> spline = UniformSpline.covering(-0.1, 0.1, 0.02)
    >>> line = FieldLine(0, 0, -0.1, 0.1, spline, spline.middles(), np.zeros((13, 13)))
    >>> coil, axis = Magnet("solenoid", "Bz", 0.08), Axis("z", (-0.1, 0.1), (-0.01, 0.01))
    >>> beside = off_axis(line, coil, axis, np.array([0.03]), 0.01)
    >>> round(float(beside.mapped.value[0]), 9), round(float(beside.other.value[0]), 9)
    (0.03, -0.005)
    """
    low, high = expansion_range(line, magnet, axis, distance)
    if len(s) and (s[0] < low - 1e-9 or s[-1] > high + 1e-9):
        raise RefusedError(
            "expansion-near-end",
            "off-axis distance",
            f"found positions from {s[0] * 1e3:.6g} to {s[-1] * 1e3:.6g} mm, expected them within "
            f"{low * 1e3:.6g} to {high * 1e3:.6g} mm, where the map reaches far enough to both "
            "sides to expand from; choose narrower limits.",
        )
    symmetry = _symmetry(magnet, axis)
    knot, x = line.spline.spacing, distance
    reach = _reach(line, distance)
    second, fourth = (f * x**n for f, n in zip(MAPPED[symmetry], (2, 4), strict=True))
    first, third, fifth = (f * x**n for f, n in zip(OTHER[symmetry], (1, 3, 5), strict=True))
    mapped = [Term(), Term(2, second)]
    other = [Term(1, first), *_differences(1, third, knot)]
    return OffAxis(
        s,
        distance,
        "r" if symmetry == "round" else magnet.component[-1].lower(),
        _component(line, s, magnet.component, mapped, _differences(2, fourth, reach)),
        _component(line, s, _other_name(symmetry, axis), other, _differences(3, fifth, reach)),
    )


def expansion_range(
    line: FieldLine, magnet: Magnet, axis: Axis, distance: float
) -> tuple[float, float]:
    """Part of the line from which the field can be expanded to a distance (m).

    Raises
    ------
    RefusedError, InputError
        As for `off_axis`.
    """
    symmetry = _symmetry(magnet, axis)
    _check_line(line, magnet, symmetry)
    _check_distance(distance, magnet, symmetry)
    margin = 1.5 * _reach(line, distance)
    low, high = line.low + margin, line.high - margin
    if not low < high:
        raise RefusedError(
            "expansion-near-end",
            "off-axis distance",
            f"found {distance * 1e3:.6g} mm for a map of {(line.high - line.low) * 1e3:.6g} mm, "
            "which has no point far enough from its ends; choose a smaller distance.",
        )
    return low, high


def _reach(line: FieldLine, distance: float) -> float:
    """Step of the differences that stand for higher derivatives, m."""
    return max(abs(distance), line.spline.spacing)


def _differences(order: int, factor: float, step: float) -> list[Term]:
    """Terms of a derivative of the second derivative, by central differences."""
    weights = {1: (-1.0, 1.0), 2: (1.0, -2.0, 1.0), 3: (-1.0, 3.0, -3.0, 1.0)}[order]
    return [
        Term(2, factor * weight / step**order, (i - order / 2) * step)
        for i, weight in enumerate(weights)
    ]


def _component(
    line: FieldLine, s: Floats, name: str, terms: list[Term], left_out: list[Term]
) -> Component:
    value, u = sample(line, s, terms)
    return Component(name, value, u, np.abs(sample(line, s, left_out)[0]))


def _other_name(symmetry: Symmetry, axis: Axis) -> str:
    return "Br" if symmetry == "round" else f"B{axis.travel}"


def _symmetry(magnet: Magnet, axis: Axis) -> Symmetry:
    """Which series holds, or a refusal."""
    letters = magnet.component.strip().lower()
    direction = letters[1:] if letters.startswith("b") else ""
    travel = axis.travel.lower()
    if magnet.kind == "solenoid" and direction == travel:
        return "round"
    if magnet.kind == "dipole" and direction in {"x", "y", "z"} and direction != travel:
        return "plane"
    raise RefusedError(
        "expansion-not-known",
        "off-axis distance",
        f"found a magnet of kind '{magnet.kind}' mapped with component {magnet.component!r} along "
        f"{axis.travel}, expected a solenoid with the component along the travel or a dipole with "
        "the component across it; only these tell from the line what lies beside it, so map "
        "another line instead.",
    )


def _check_line(line: FieldLine, magnet: Magnet, symmetry: Symmetry) -> None:
    """The line must lie on the axis, or in the median plane."""
    across = {"x": line.x, "y": line.y}
    if symmetry == "round":
        away = float(np.hypot(line.x, line.y))
    else:
        away = abs(across.get(magnet.component.strip()[-1].lower(), 0.0))
    if away > ON_AXIS * magnet.gap:
        place = "axis" if symmetry == "round" else "median plane"
        raise RefusedError(
            "expansion-not-known",
            "off-axis distance",
            f"found a line {away * 1e3:.6g} mm off the {place}, expected one on it; "
            "choose another line, or map that one.",
        )


def _check_distance(distance: float, magnet: Magnet, symmetry: Symmetry) -> None:
    if not np.isfinite(distance) or distance == 0 or (symmetry == "round" and distance < 0):
        kind = "a radius above zero" if symmetry == "round" else "a distance other than zero"
        raise InputError("off-axis distance", f"{distance * 1e3:.6g} mm", kind)
    farthest = FARTHEST * magnet.gap
    if abs(distance) > farthest * (1 + 1e-9):
        raise RefusedError(
            "expansion-too-far",
            "off-axis distance",
            f"found {distance * 1e3:.6g} mm, expected at most {farthest * 1e3:.6g} mm, a quarter "
            "of the gap; beyond that the series tells too little, so map a line there.",
        )
