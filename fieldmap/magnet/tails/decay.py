"""The law by which a field dies away beyond the end of a map, and the integral left out there.

Three adjacent stretches before the end, integrated over, say how fast the field falls. Two laws
stand for the magnets there are, in terms of the distance r from the magnet's centre:

* two equal and opposite poles (or a ring, where c² is negative), as of a coil, a solenoid or a
  magnet without iron: B = K r/(r² - c²)², whose tail is elementary; a dipole far away;
* an exponential, or what falls faster still, as of an iron gap.

They are told apart by how deep the field has sunk below the central one. Count the way from the
field boundary in decay lengths B/|dB/dr|: after n of them an exponential is down by n powers of
e, a pole by about 2n. Where both are in question the estimate is their mixture
and its uncertainty covers the two. A field that falls more slowly than any magnet of finite
size makes it fall has no tail.

Sources: the field of two poles, e.g. J. D. Jackson, *Classical Electrodynamics*, 3rd ed.,
5.9; variance of a mixture, JCGM 100:2008, 4.3 applied to each law.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

__all__ = ["Decay", "Stretches", "decay_of"]

Floats = npt.NDArray[np.float64]
Kind = Literal["law", "faint", "slow"]

SIGNIFICANT: Final = 4.0  # u of the field before the end: noise reaches it once in 16 000 ends
NEGLIGIBLE: Final = 1e-6  # of the central field: its law does not matter
INSIDE: Final = 1 / 3  # of the central field: the map ends within the magnet
LEAST_POWER: Final = 1.5  # of the distance from the boundary; an edge of wide plates has about 1
KNOWN_POWER: Final = 0.5  # u of an exponent that is known …
KNOWN_SHARE: Final = 0.15  # … or its share of it
POLES_UP_TO: Final = 0.62  # powers fallen with over powers of e sunk by: poles …
EXPONENTIAL_FROM: Final = 0.75  # … and an exponential
RECTANGLE: Final = 1 / math.sqrt(3)  # standard uncertainty of a rectangle of half width 1
LOOSE_EXPONENTIAL: Final = 0.3  # relative standard uncertainty of that law
HIDDEN_DIPOLE: Final = 0.1  # share of the field at the end that may be a dipole's …
BEND_TO_DIPOLE: Final = 4.0  # … and more where the logarithm of the field bends upwards
LEAST_DOUBT: Final = 0.01  # relative standard uncertainty of any law far away …
CLOSE_DOUBT: Final = 0.1  # … and more of it with the square of the boundary's share of the way
LOOSE_BEND: Final = 0.2  # u of a bend that is half believed
STRONGEST_BEND: Final = -3.0  # extrapolated
LAST: Final = np.array([0.0, 0.0, 1.0])
LAST_TWO: Final = np.array([0.0, 1.0, 1.0])
STEP: Final = 1e-4  # relative, of the numerical derivatives


@dataclass(frozen=True, eq=False)
class Stretches:
    """The field before one end of a map: three adjacent stretches of equal width.

    Parameters
    ----------
    distance : float
        Of the end from the magnet's centre, m.
    width : float
        Of a stretch, m.
    boundary : float
        Distance of the field boundary from the magnet's centre, m.
    level : float
        Central field, T.
    values : (3,) array
        Integrals over the stretches, outwards, T m.
    covariance : (3, 3) array
        Of the values, (T m)^2.
    """

    distance: float
    width: float
    boundary: float
    level: float
    values: Floats
    covariance: Floats

    def u(self, row: Floats) -> float:
        """Standard uncertainty of ``row @ values``."""
        return math.sqrt(max(float(row @ self.covariance @ row), 0.0))


@dataclass(frozen=True, eq=False)
class Decay:
    """What lies beyond the end, and what it rests on.

    Parameters
    ----------
    kind : {"law", "faint", "slow"}
        By its law; too faint for one; falling too slowly for an integral.
    tail : float
        Integral beyond the end, T m; nan if slow.
    slopes : (3,) array
        Derivative of the tail with respect to the three stretches.
    u_law : float
        Standard uncertainty from the choice of the law, T m.
    u_hidden : float
        Integral of a dipole field that noise would hide, T m.
    power : float
        Exponent of the distance from the magnet's centre by which the field falls.
    boundary_power : float
        Exponent of the distance from the field boundary.
    exponential : float
        Share of the exponential in the mixture, 0 to 1.
    field : float
        Mean of the last stretch in units of the central field.
    distance : float
        Of the end from the magnet's centre, m.
    """

    kind: Kind
    tail: float
    slopes: Floats
    u_law: float
    u_hidden: float
    power: float
    boundary_power: float
    exponential: float
    field: float
    distance: float

    def reach(self, required: float) -> float:
        """Distance from the centre at which the law leaves no more doubt than required (T m)."""
        excess = self.u_law / required
        if excess <= 1:
            return self.distance
        if self.exponential > 0.5:
            return self.distance * (1 + math.log(excess) / self.power)
        # The doubt falls with the tail, at least: far away poles are the surer a dipole.
        return float(self.distance * excess ** (1 / (self.power - 1)))


def decay_of(end: Stretches) -> Decay:
    """How the field dies away beyond the end, and the integral that this leaves out.

    Parameters
    ----------
    end : Stretches
        The field before the end.

    Returns
    -------
    Decay

    Examples
    --------
    A dipole's field 2e-3/r³ from 1 m on leaves out 1e-3:

    >>> edges = np.array([0.7, 0.8, 0.9, 1.0])
    >>> values = np.diff(-1e-3 / edges**2)
    >>> found = decay_of(Stretches(1.0, 0.1, 0.2, 1.0, values, np.zeros((3, 3))))
    >>> found.kind, round(found.tail, 6)
    ('law', 0.001)
    """
    _, inner, outer = end.values.tolist()
    u_sum = end.u(LAST_TWO)
    if abs(inner + outer) < SIGNIFICANT * u_sum:
        return _faint(end, LAST_TWO)
    if abs(outer) < NEGLIGIBLE * abs(end.level) * end.width:
        return _faint(end, LAST)
    if abs(outer) > INSIDE * abs(end.level) * end.width:
        return _slow(end, 0.0)
    if inner * outer <= 0:
        u_inner, u_outer = np.sqrt(np.diag(end.covariance))[1:]
        turns = abs(inner) > SIGNIFICANT * u_inner and abs(outer) > SIGNIFICANT * u_outer
        return _slow(end, 0.0) if turns else _faint(end, LAST)
    scale = (end.distance - end.width) / end.width
    power = _log_ratio(end.values) * scale
    u_power = end.u(np.array([0.0, 1 / inner, -1 / outer])) * scale
    outside = 1 - end.boundary / (end.distance - end.width)
    known = u_power <= max(KNOWN_POWER, KNOWN_SHARE * power)
    if (power + (0 if known else 2 * u_power)) * outside < LEAST_POWER:
        return _slow(end, power)
    return _lawful(end, u_sum) if known else _faint(end, LAST)


def _lawful(end: Stretches, u_sum: float) -> Decay:
    bend = _believed_bend(end)
    tail, doubt, share = _mixture(end, end.values, bend)
    power = _log_ratio(end.values) * (end.distance - end.width) / end.width
    slopes = np.zeros(3)
    for i, step in enumerate(STEP * end.values):
        if step != 0:
            up, down = (end.values + sign * step * np.eye(3)[i] for sign in (1, -1))
            slopes[i] = (_mixture(end, up, bend)[0] - _mixture(end, down, bend)[0]) / (2 * step)
    return Decay(
        kind="law",
        tail=tail,
        slopes=slopes,
        u_law=max(doubt, _least_doubt(end) * abs(tail)),
        u_hidden=share * _dipole_factor(end, LAST_TWO) * u_sum,
        power=power,
        boundary_power=_boundary_power(end, power),
        exponential=share,
        field=_end_field(end),
        distance=end.distance,
    )


def _mixture(end: Stretches, values: Floats, bend: float) -> tuple[float, float, float]:
    """Tail by both laws, the doubt about it, and the share of the exponential."""
    poles, u_poles = _poles(end, values)
    exponential, u_exponential = _exponential(end, values, bend)
    share = _exponential_share(end, values)
    tail = (1 - share) * poles + share * exponential
    variance = (1 - share) * u_poles**2 + share * u_exponential**2
    variance += share * (1 - share) * (poles - exponential) ** 2
    return tail, math.sqrt(variance), share


def _poles(end: Stretches, values: Floats) -> tuple[float, float]:
    """Tail of two poles, mixed with a magnet that is wide across the travel if that may be.

    With squares A < M < E of the borders' distances, ∫B ds = K/2 [1/(A - c²) - 1/(M - c²)], …;
    c² drops out of the tail K/2/(E - c²).
    """
    _, inner, outer = values.tolist()
    outermost = end.distance**2
    middle, innermost = (end.distance - end.width) ** 2, (end.distance - 2 * end.width) ** 2
    first, second = middle - innermost, outermost - middle
    tail = first * outer * (inner + outer) / (second * inner - first * outer)
    power = _log_ratio(values) * (end.distance - end.width) / end.width
    wide = outer / ((1 - end.width / end.distance) ** (1 - power) - 1)
    spread = abs(tail - wide) / 2
    if power < 3:  # a ring or a wide magnet: one or the other, and nothing between
        return (tail + wide) / 2, spread
    return tail, spread * _doubt_of_poles(end, power)


def _doubt_of_poles(end: Stretches, power: float) -> float:
    """Less where the magnet's own length explains the fall, more where its dipole is hidden.

    Poles that lie within the field boundaries explain it; beyond one and a half times their
    distance they do not, as with a magnet whose dipole is compensated.
    """
    poles = math.sqrt(1 - 4 / (power + 1)) * (end.distance - end.width)
    beyond = (poles / max(end.boundary, 1e-9) - 1) / 0.5
    return RECTANGLE + (1 - RECTANGLE) * min(max(beyond, 0.0), 1.0)


def _exponential(end: Stretches, values: Floats, bend: float) -> tuple[float, float]:
    """Tail of an exponential whose ratio of successive stretches goes on bending."""
    ratio, falls = float(values[2] / values[1]), math.exp(bend)
    term, series = float(values[2]), 0.0
    if bend >= 0:
        series = term * ratio / (1 - ratio)
    else:
        for _ in range(200):
            ratio *= falls
            term *= ratio
            series += term
            if abs(term) < 1e-12 * abs(series):
                break
    rate = _log_ratio(values)
    field = float(values[2]) * rate / (math.expm1(rate) * end.width)
    share = min(HIDDEN_DIPOLE + BEND_TO_DIPOLE * max(bend, 0.0) / rate**2, 1.0)
    hidden = share * field * end.distance / 2
    return series, math.hypot(LOOSE_EXPONENTIAL * series, hidden)


def _exponential_share(end: Stretches, values: Floats) -> float:
    """0 where the field has sunk as far as poles make it, 1 where as an exponential."""
    if values[2] * end.level < 0:  # the fringe of an iron gap does not change sign
        return 0.0
    power = _log_ratio(values) * (end.distance - end.width) / end.width
    field = math.sqrt(float(values[1] * values[2])) / end.width
    sunk = math.log(abs(end.level) / field)
    agreement = _boundary_power(end, power) / max(sunk, 1e-3)
    share = (agreement - POLES_UP_TO) / (EXPONENTIAL_FROM - POLES_UP_TO)
    return min(max(share, 0.0), 1.0)


def _believed_bend(end: Stretches) -> float:
    """Logarithm of how the ratio of stretches changes, as far as noise lets it be believed."""
    first, inner, outer = end.values.tolist()
    if first * inner <= 0:
        return 0.0
    bend = math.log(first * outer / inner**2)
    u = end.u(np.array([1 / first, -2 / inner, 1 / outer]))
    return min(max(bend / (1 + (u / LOOSE_BEND) ** 2), STRONGEST_BEND), -STRONGEST_BEND)


def _least_doubt(end: Stretches) -> float:
    """Where exponents of both laws happen to agree, the laws do not."""
    return LEAST_DOUBT + CLOSE_DOUBT * (end.boundary / end.distance) ** 2


def _faint(end: Stretches, row: Floats) -> Decay:
    """Whatever is there falls like a dipole's field: linear in the readings, noise and all.

    The last stretch alone stands for it where the one before holds some of a faster decay.
    """
    slopes = _dipole_factor(end, row) * row
    tail = float(slopes @ end.values)
    return Decay(
        kind="faint",
        tail=tail,
        slopes=slopes,
        u_law=abs(tail) / 2,
        u_hidden=0.0,
        power=3.0,
        boundary_power=_boundary_power(end, 3.0),
        exponential=0.0,
        field=_end_field(end),
        distance=end.distance,
    )


def _slow(end: Stretches, power: float) -> Decay:
    boundary_power, field = _boundary_power(end, power), _end_field(end)
    nothing, distance = math.nan, end.distance
    slopes = np.full(3, nothing)
    return Decay(
        "slow", nothing, slopes, nothing, nothing, power, boundary_power, 0.0, field, distance
    )


def _dipole_factor(end: Stretches, row: Floats) -> float:
    """Tail of a dipole's field over its integral in the stretches of a row."""
    inner, outer = (end.distance - float(row.sum()) * end.width) ** 2, end.distance**2
    return inner / (outer - inner)


def _log_ratio(values: Floats) -> float:
    return math.log(values[1] / values[2])


def _boundary_power(end: Stretches, power: float) -> float:
    return power * (1 - end.boundary / (end.distance - end.width))


def _end_field(end: Stretches) -> float:
    return float(end.values[2]) / (end.width * end.level)
