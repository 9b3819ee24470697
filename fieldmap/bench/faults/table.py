"""The table of one pass, changed row by row and turned into a pass again.

A fault changes what stands in the table: positions, times, samples by their kind of record. The
flux is then made of the samples anew, by the same functions that read a file.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING, Final

import numpy as np
import numpy.typing as npt

from fieldmap.readings.checks import check_count, check_finite, check_time
from fieldmap.readings.passes import Floats, Pass
from fieldmap.readings.records import cumulative_flux

if TYPE_CHECKING:
    from fieldmap.readings.checks import RowPlace
    from fieldmap.readings.passes import Record
    from fieldmap.readings.probe import Integrator

__all__ = ["Ints", "Table", "table_of"]

_COLUMNS: Final = ("time", "position", "temperature", "current")

Ints = npt.NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Table:
    """What the table of a pass holds.

    Parameters
    ----------
    origin : Pass
        The pass as it was without a fault.
    time, position, samples : (n,) array
        s, m, and cumulative flux or increments, V s, or voltage, V.
    rest : (n,) array
        Flux of the origin less what its samples give, V s: zero where they are known exactly.
    rows : (n,) int array
        The row of the origin that each row was.
    temperature, current : (n,) array or None
        degC and A.
    """

    origin: Pass
    time: Floats
    position: Floats
    samples: Floats
    rest: Floats
    rows: Ints
    temperature: Floats | None = None
    current: Floats | None = None

    @property
    def record(self) -> Record:
        """What the samples are."""
        return self.origin.record

    def taken(self, rows: npt.ArrayLike) -> Table:
        """Only some rows, in the order given; a row may come twice."""
        chosen = np.asarray(rows, dtype=np.intp)
        return replace(
            self,
            time=self.time[chosen],
            position=self.position[chosen],
            samples=self.samples[chosen],
            rest=self.rest[chosen],
            rows=self.rows[chosen],
            temperature=None if self.temperature is None else self.temperature[chosen],
            current=None if self.current is None else self.current[chosen],
        )

    def with_flux(self, added: Floats) -> Table:
        """The table of a pass whose cumulative flux is larger by some amount, V s, row by row."""
        if self.record == "increments":
            return replace(self, samples=self.samples + np.diff(added, prepend=0.0))
        if self.record == "voltage":
            return replace(self, samples=self.samples + _rate(added, self.time))
        return replace(self, samples=self.samples + _drooped(added, self.time, self.integrator))

    def with_factor(self, factor: Floats | float) -> Table:
        """The table of a pass whose voltage was larger by a factor, row by row."""
        if self.record != "cumulative":
            return replace(self, samples=self.samples * factor, rest=self.rest * np.mean(factor))
        flux = self.as_pass().flux
        steps = np.diff(flux, prepend=flux[0])
        return self.with_flux(np.cumsum(steps * (np.asarray(factor) - 1.0)))

    @property
    def integrator(self) -> Integrator:
        """What recorded the pass."""
        return self.origin.integrator

    def as_pass(self) -> Pass:
        """The pass as it is read from this table.

        Raises
        ------
        InputError
            Where the reader of tables refuses: time that runs backwards, too few rows, numbers
            that are none.
        """
        place: RowPlace = lambda row: f"{self.origin.name}, row {row + 1}"  # noqa: E731 - its type
        check_count(len(self.time), self.origin.name)
        for name in ("time", "position", "samples"):
            check_finite(getattr(self, name), name, place)
        check_time(self.time, place)
        flux = cumulative_flux(self.samples, self.time, self.record, self.integrator, place)
        changed = {name: getattr(self, name) for name in _COLUMNS}
        kept = {each.name: getattr(self.origin, each.name) for each in fields(Pass)}
        return Pass(**{**kept, **changed, "flux": flux + self.rest})


def table_of(one: Pass) -> Table:
    """The table of a pass: as simulated where it is kept, else recovered from the flux.

    Parameters
    ----------
    one : Pass
        The pass.

    Returns
    -------
    Table
        Of it `as_pass` makes the same flux again.

    Examples
    --------
    >>> from fieldmap.readings.probe import Wire
    >>> from fieldmap.readings.records import make_pass
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> one = make_pass([0.0, 0.1, 0.2], [0.0, 1.0, 2.0], rate=1.0, probe=wire)
    >>> table_of(one).taken([0, 1, 1, 2]).as_pass().flux
    array([0., 1., 1., 2.])
    """
    samples = getattr(one, "samples", None)
    if samples is None:
        samples = _samples(one)
    made = cumulative_flux(samples, one.time, one.record, one.integrator)
    return Table(
        origin=one,
        time=one.time,
        position=one.position,
        samples=samples,
        rest=one.flux - made,
        rows=np.arange(len(one.time)),
        temperature=one.temperature,
        current=one.current,
    )


def _samples(one: Pass) -> Floats:
    """What was recorded, from the cumulative flux."""
    if one.record == "increments":
        return np.diff(one.flux, prepend=0.0)
    if one.record == "voltage":
        return _rate(one.flux, one.time)
    return _drooped(one.flux, one.time, one.integrator)


def _rate(flux: Floats, time: Floats) -> Floats:
    """Rate of change of a flux at its readings, V."""
    from scipy.interpolate import CubicSpline

    return np.asarray(CubicSpline(time, flux)(time, 1))


def _drooped(flux: Floats, time: Floats, integrator: Integrator) -> Floats:
    """What an analog integrator shows of a flux: the inverse of undoing the droop."""
    if integrator.kind != "analog" or integrator.leak_time is None:
        return flux
    half = np.diff(time, prepend=time[0]) / (2.0 * integrator.leak_time)
    shown = np.empty_like(flux)
    area = before = 0.0
    for row, (value, share) in enumerate(zip(flux.tolist(), half.tolist(), strict=True)):
        now = (value - area - share * before) / (1.0 + share)
        area += share * (now + before)
        shown[row] = before = now
    return shown
