"""What was recorded to cumulative flux: increments are summed, voltage samples integrated.

The noise model of each record belongs to the estimator; here nothing is smoothed.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Final, cast

import numpy as np
import numpy.typing as npt

from fieldmap.errors import InputError
from fieldmap.readings.checks import check_count, check_finite, check_time
from fieldmap.readings.passes import Floats, Pass, Record
from fieldmap.readings.probe import Coil, Integrator, Wire
from fieldmap.readings.schema import one_of
from fieldmap.units import column_to_si

if TYPE_CHECKING:
    from fieldmap.readings.checks import RowPlace
    from fieldmap.readings.probe import Probe
    from fieldmap.readings.tables import Samples

__all__ = ["SAMPLES", "cumulative_flux", "integrate_voltage", "make_pass", "undo_droop"]

# The name of the recorded column and its unit, for each kind of record.
SAMPLES: Final[dict[Record, tuple[Samples, str]]] = {
    "cumulative": ("flux", "V s"),
    "increments": ("dflux", "V s"),
    "voltage": ("voltage", "V"),
}
# Time stamps closer than this part of the usual spacing would let the spline between them swing.
_LEAST_SPACING: Final = 1e-3


def cumulative_flux(
    samples: Floats,
    time: Floats,
    record: Record = "cumulative",
    integrator: Integrator | None = None,
    place: RowPlace | None = None,
) -> Floats:
    """Turn recorded samples into cumulative flux.

    Parameters
    ----------
    samples : (n,) array
        Cumulative flux or its increments, V s, or voltage, V. An increment belongs to the
        stretch that ends at its reading.
    time : (n,) array
        s.
    record : {"cumulative", "increments", "voltage"}
        What the samples are.
    integrator : Integrator, optional
        The droop of an analog one with a leak time is undone in cumulative records; a digital
        one does not droop, and samples of a voltage have not been through an integrator.
    place : callable, optional
        Names the place of a reading in errors.

    Returns
    -------
    (n,) array
        V s, up to a constant.

    Raises
    ------
    InputError
        If voltage samples share a time stamp, or increments come from an integrator that droops.

    Examples
    --------
    >>> cumulative_flux(np.array([0.0, 2.0, 3.0]), np.array([0.0, 1.0, 2.0]), "increments")
    array([0., 2., 5.])
    """
    place = place or _element
    leaks = integrator is not None and integrator.kind == "analog"
    leak_time = integrator.leak_time if integrator is not None and leaks else None
    if record == "voltage":
        return integrate_voltage(samples, time, place)
    if record == "increments":
        if leak_time is not None:
            found = "record 'increments' from an integrator with a leak_time"
            expected = "cumulative readings, since droop depends on the level that was shown"
            remedy = "record cumulative flux, or leave leak_time out and raise u_drift"
            raise InputError(place(0), found, expected, remedy)
        return cast("Floats", np.cumsum(samples))
    return samples if leak_time is None else undo_droop(samples, time, leak_time)


def integrate_voltage(voltage: Floats, time: Floats, place: RowPlace | None = None) -> Floats:
    """Integrate samples of a voltage by the cubic spline that passes through them.

    Parameters
    ----------
    voltage : (n,) array
        Instantaneous values, V.
    time : (n,) array
        s, growing; the spacing need not be even.
    place : callable, optional
        Names the place of a reading in errors.

    Returns
    -------
    (n,) array
        V s; zero at the first sample.

    Raises
    ------
    InputError
        If a time stamp repeats, or follows within a thousandth of the usual spacing.

    Notes
    -----
    The not-a-knot spline (C. de Boor, A Practical Guide to Splines, 1978) is exact for cubic
    polynomials.

    Examples
    --------
    >>> time = np.linspace(0.0, 1.0, 5)
    >>> float(integrate_voltage(4.0 * time**3, time)[-1])
    1.0
    """
    from scipy.interpolate import CubicSpline

    place = place or _element
    check_time(time, place, strictly=True)
    spacing = np.diff(time)
    close = np.flatnonzero(spacing < _LEAST_SPACING * np.median(spacing))
    if close.size:
        row = int(close[0]) + 1
        found = (
            f"{spacing[row - 1]:.3g} s to the reading before, {np.median(spacing):.3g} s usually"
        )
        remedy = "mend the time stamps, or give 'rate' instead"
        where = f"{place(row)}, column 'time'"
        raise InputError(where, found, "evenly spread samples of the voltage", remedy)
    c3, c2, c1, c0 = CubicSpline(time, voltage).c
    steps = spacing * (c0 + spacing * (c1 / 2 + spacing * (c2 / 3 + spacing * c3 / 4)))
    return np.concatenate([[0.0], np.cumsum(steps)])


def undo_droop(flux: Floats, time: Floats, leak_time: float) -> Floats:
    """Undo the droop of an analog integrator.

    Parameters
    ----------
    flux : (n,) array
        What it showed, V s.
    time : (n,) array
        s.
    leak_time : float
        Time constant with which the shown value falls, s.

    Returns
    -------
    (n,) array
        ``flux + (1/leak_time) * integral of flux over time``, V s.

    Notes
    -----
    The shown value obeys dy/dt = v - y/tau, hence the integral of v is y plus the integral of
    y/tau; the latter is taken by the trapezoidal rule.

    Examples
    --------
    >>> undo_droop(np.array([1.0, 1.0, 1.0]), np.array([0.0, 1.0, 2.0]), 10.0)
    array([1. , 1.1, 1.2])
    """
    area = np.concatenate([[0.0], np.cumsum(np.diff(time) * (flux[1:] + flux[:-1]) / 2)])
    return flux + area / leak_time


def make_pass(
    position: npt.ArrayLike,
    flux: npt.ArrayLike,
    time: npt.ArrayLike | None = None,
    *,
    probe: Probe,
    rate: float | None = None,
    integrator: Integrator | None = None,
    name: str = "pass",
    x: float = 0.0,
    y: float = 0.0,
    record: Record = "cumulative",
    temperature: npt.ArrayLike | None = None,
    current: npt.ArrayLike | None = None,
) -> Pass:
    """Make a pass from plain arrays, with the checks that a file goes through.

    Parameters
    ----------
    position : (n,) array_like
        Recorded position, m. A labelled array whose ``units`` attribute says otherwise is
        converted; this holds for every array here.
    flux : (n,) array_like
        What was recorded: cumulative flux or its increments, V s, or voltage, V.
    time : (n,) array_like, optional
        s, never decreasing.
    probe : Wire or Coil
        What moved.
    rate : float, optional
        Readings per second where no time was recorded, Hz.
    integrator : Integrator, optional
        What recorded it; a digital one of which nothing is known if left out.
    name : str
        How the pass is named in findings.
    x, y : float
        Transverse position of the line, m.
    record : {"cumulative", "increments", "voltage"}
        What `flux` holds.
    temperature, current : (n,) array_like, optional
        degC and A.

    Returns
    -------
    Pass
        With cumulative flux.

    Raises
    ------
    InputError
        If an array does not hold finite numbers along one dimension, lengths differ, there are
        fewer than three readings, time runs backwards, or neither `time` nor `rate` is given.

    Examples
    --------
    >>> wire = Wire("wire", turns=20, active_length=0.05)
    >>> make_pass([0.0, 0.1, 0.2], [0.0, 1e-3, 3e-3], rate=10.0, probe=wire).time
    array([0. , 0.1, 0.2])
    """
    _check_setting(probe, record, name)
    columns = {"position": _array(position, "position", "m", name)}
    columns["flux"] = _array(flux, "flux", SAMPLES[record][1], name)
    columns["time"] = _times(time, rate, columns["position"].size, name)
    for label, values, unit in (("temperature", temperature, "degC"), ("current", current, "A")):
        if values is not None:
            columns[label] = _array(values, label, unit, name)
    place: RowPlace = lambda row: f"{name}, {_element(row)}"  # noqa: E731 - a name for the type
    _check_columns(columns, name, place)
    integrator = integrator or Integrator("main")
    cumulated = cumulative_flux(columns["flux"], columns["time"], record, integrator, place)
    return Pass(
        name=name,
        probe=probe,
        integrator=integrator,
        time=columns["time"],
        position=columns["position"],
        flux=cumulated,
        x=float(x),
        y=float(y),
        record=record,
        temperature=columns.get("temperature"),
        current=columns.get("current"),
    )


def _element(row: int) -> str:
    """Name an element of an array."""
    return f"element {row} (counted from 0)"


def _check_setting(probe: object, record: str, name: str) -> None:
    """Refuse what is no probe and no kind of record."""
    if not isinstance(probe, Wire | Coil):
        where = f"{name}, argument 'probe'"
        raise InputError(where, f"a {type(probe).__name__}", "a Wire or a Coil")
    one_of(record, list(SAMPLES), f"{name}, argument 'record'")


def _array(values: npt.ArrayLike, label: str, unit: str, name: str) -> Floats:
    """Copy an argument into a one-dimensional array of numbers in SI."""
    where = f"{name}, argument {label!r}"
    if isinstance(values, np.ma.MaskedArray):
        values = np.ma.filled(values.astype(np.float64), np.nan)
    if np.iscomplexobj(values):
        raise InputError(where, "complex numbers", "real numbers", "take the real part")
    try:
        array = np.array(values, dtype=np.float64)
    except (TypeError, ValueError) as error:
        reason = " ".join(str(error).split())
        raise InputError(where, f"no array of numbers ({reason})", "an array of numbers") from None
    if array.ndim != 1:
        found = f"an array of {array.ndim} dimensions"
        raise InputError(where, found, "one dimension", "give one number per reading")
    given = getattr(values, "attrs", {}).get("units")
    return array if given is None else column_to_si(array, str(given), unit, where)


def _times(time: npt.ArrayLike | None, rate: float | None, count: int, name: str) -> Floats:
    """Take times as given, or make them from the rate."""
    where = f"{name}, arguments 'time' and 'rate'"
    if time is not None:
        if rate is not None:
            raise InputError(where, "both", "one of the two", "leave one out")
        return _array(time, "time", "s", name)
    if rate is None:
        raise InputError(where, "neither", "one of the two", "give rate in Hz if no time is known")
    if not 0.0 < rate < np.inf:
        raise InputError(f"{name}, argument 'rate'", repr(rate), "a finite rate above zero in Hz")
    return np.arange(count) / rate


def _check_columns(columns: dict[str, Floats], name: str, place: RowPlace) -> None:
    """Check arrays as a whole: lengths, count, numbers, order of time."""
    count = columns["position"].size
    for label, values in columns.items():
        if values.size != count:
            where = f"{name}, argument {label!r}"
            raise InputError(where, f"{values.size} values", f"{count} as in 'position'")
    check_count(count, name)
    for label, values in columns.items():
        check_finite(values, label, place)
    check_time(columns["time"], place)
